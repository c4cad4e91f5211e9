"""Sets that are kept, over HTTP."""

from __future__ import annotations

import io
import json

import httpx
import numpy as np
import pytest

from service.openapi import EXAMPLES
from service.schemas.store import KeptOut, ListOut
from tests.service import bodies
from tests.service.conftest import alone
from tests.service.problem_shape import assert_problem
from tests.service.test_keep import TABLE

LABELLED = {"set": bodies.CRYSTAL, "name": "crystal OR-4 <b>", "tags": ["invented", "crystal"]}


@pytest.fixture
def kept(client):
    """Keeps sets, and deletes them afterwards."""
    sent = []

    def keep(body=LABELLED, **query):
        answer = client.post("/v1/sets", json=body, params=query)
        assert answer.status_code in (200, 201), answer.text
        sent.append(answer.json()["id"])
        return answer

    yield keep
    for identity in sent:
        client.delete(f"/v1/sets/{identity}")


def test_a_set_is_kept_and_shown(client, kept):
    answer = kept({**LABELLED, "set": {**bodies.CRYSTAL, "mean": 77.0}})
    assert answer.status_code == 201
    document = answer.json()
    assert answer.headers["location"] == f"/v1/sets/{document['id']}"
    assert (document["name"], document["tags"]) == (LABELLED["name"], ["crystal", "invented"])
    KeptOut.model_validate(document)
    shown = client.get(answer.headers["location"])
    assert shown.json() == document
    assert client.get(f"{answer.headers['location']}/summary").json() == document


def test_the_same_set_is_the_same_wherever_it_comes_from(client, kept):
    first = kept()
    again = kept({"set": dict(reversed(bodies.CRYSTAL.items())), "name": "another name"})
    assert again.status_code == 200
    assert again.json() == first.json()
    columns = {name: np.array(value) for name, value in bodies.CRYSTAL.items() if isinstance(value, list)}
    buffer = io.BytesIO()
    np.savez(buffer, **columns)
    rest = {name: value for name, value in bodies.CRYSTAL.items() if name not in columns}
    form = {
        "request": ("", json.dumps({"set": rest}), "application/json"),
        "columns": ("", buffer.getvalue(), "application/x-npz"),
    }
    third = client.post("/v1/sets", files=form)
    assert third.status_code == 200
    assert third.json()["id"] == first.json()["id"]


def test_columns_come_back_bit_for_bit(client, kept):
    rng = np.random.default_rng(0)
    amplitude = rng.uniform(1e-300, 1e3, 4)
    phase = [None, 0.1, -0.0, 180.0]
    body = {**bodies.FILM, "amplitude": amplitude.tolist(), "phase_deg": phase}
    location = kept({"set": body}).headers["location"]
    answer = client.get(f"{location}/columns")
    assert answer.headers["content-type"] == "application/x-npz"
    with np.load(io.BytesIO(answer.content), allow_pickle=False) as archive:
        assert archive["amplitude"].tobytes() == amplitude.tobytes()
        assert archive["phase_deg"].tobytes() == np.array([np.nan, *phase[1:]]).tobytes()


@pytest.mark.parametrize("whole", [True, False])
def test_a_file_comes_back_byte_by_byte(client, whole):
    if whole:
        sent = {
            "content": TABLE,
            "headers": {"Content-Type": "text/csv"},
            "params": {"name": "run 7", "tag": ["a", "b"]},
        }
    else:
        labels = {"set": {"values": "structure_factor", "cell": bodies.TRICLINIC}, "name": "run 7", "tags": ["a", "b"]}
        sent = {
            "files": {
                "request": ("", json.dumps(labels), "application/json"),
                "reflections": ("run_7.csv", TABLE, "text/csv"),
            }
        }
    answer = client.post("/v1/sets", **sent)
    if whole:
        # A table has no cell: the service says where it is missed.
        assert_problem(answer, 422, "/set/cell")
        return
    document = answer.json()
    assert (document["name"], document["tags"], document["kind"]) == ("run 7", ["a", "b"], "reflections")
    back = client.get(f"/v1/sets/{document['id']}/columns")
    assert back.content == TABLE
    assert back.headers["content-type"].startswith("text/csv")
    client.delete(f"/v1/sets/{document['id']}")


def test_a_crystallographic_file_is_a_set_by_itself(client):
    with open("sample_requests/crystal_OR4.cif", "rb") as file:
        data = file.read()
    answer = client.post(
        "/v1/sets", content=data, headers={"Content-Type": "chemical/x-cif"}, params={"name": "OR-4", "tag": "invented"}
    )
    assert answer.status_code == 201, answer.text
    document = answer.json()
    assert document["name"] == "OR-4"
    assert document["summary"]["inspection"]["rows"] > 0
    KeptOut.model_validate(document)
    client.delete(f"/v1/sets/{document['id']}")


def test_sets_are_listed_and_found(client, kept):
    films = [
        kept({"set": {**bodies.FILM, "mean": float(mean)}, "name": f"film {mean}", "tags": ["run"]})
        for mean in range(5)
    ]
    kept()
    seen, after = [], None
    while True:
        page = client.get("/v1/sets", params={"limit": 2, "tag": "run", **({} if after is None else {"after": after})})
        document = page.json()
        ListOut.model_validate(document)
        assert document["total"] == 5
        seen += [one["id"] for one in document["sets"]]
        after = document["next"]
        if after is None:
            break
    assert seen == [film.json()["id"] for film in films[::-1]]
    found = client.get("/v1/sets", params={"search": "OR-4 <B>"}).json()["sets"]
    assert [one["name"] for one in found] == [LABELLED["name"]]


@pytest.mark.parametrize(
    "query", [{"limit": 0}, {"limit": 501}, {"limit": "x"}, {"after": -1}, {"search": "x" * 201}, {"after": 2**70}]
)
def test_a_list_that_cannot_be_given(client, query):
    answer = client.get("/v1/sets", params=query)
    assert_problem(answer, 422, f"/{next(iter(query))}")


def test_a_deleted_set_is_gone(client, kept):
    location = kept().headers["location"]
    assert client.delete(location).status_code == 204
    for address in ("", "/summary", "/columns", "/profile?from=0,0,0&to=1,0,0&samples=5"):
        assert_problem(client.get(location + address), 404)
    assert_problem(client.delete(location), 404)


def test_a_client_that_has_the_set_is_told_so(client, kept):
    location = kept().headers["location"]
    for address in ("", "/columns"):
        tag = client.get(location + address).headers["etag"]
        answer = client.get(location + address, headers={"If-None-Match": tag})
        assert (answer.status_code, answer.content, answer.headers["etag"]) == (304, b"", tag)
        head = client.head(location + address)
        whole = client.get(location + address)
        assert head.content == b""
        for name in ("content-length", "content-type", "etag"):
            assert head.headers[name] == whole.headers[name]


@pytest.mark.parametrize(
    ("sent", "status", "pointer"),
    [
        ({"json": {"set": bodies.FILM, "title": "x"}}, 422, "/title"),
        ({"json": {"name": "x"}}, 422, "/set"),
        ({"json": {"set": {**bodies.FILM, "amplitude": [1, 2]}}}, 422, "/set/amplitude"),
        ({"json": {"set": bodies.FILM}, "params": {"colour": "x"}}, 422, "/colour"),
        ({"json": {"set": bodies.FILM, "name": "a"}, "params": {"name": "b"}}, 422, "/name"),
        ({"content": b"{", "headers": bodies.JSON}, 400, None),
        ({"content": b"x", "headers": {"Content-Type": "image/png"}}, 415, None),
        ({"content": b"", "headers": {"Content-Type": "text/csv"}}, 422, "/set/reflections"),
    ],
)
def test_what_cannot_be_kept_is_refused(client, sent, status, pointer):
    answer = client.post("/v1/sets", **sent)
    assert_problem(answer, status, pointer)


def test_the_example_is_kept(client, kept):
    KeptOut.model_validate(kept(EXAMPLES["keep"]).json())


@pytest.mark.parametrize(
    ("address", "pointer"),
    [
        ("/v1/sets?tags=film", "/tags"),
        ("/v1/sets?limit=3&limit=4", "/limit"),
        ("/v1/sets/{id}?columns=true", "/columns"),
        ("/v1/sets/{id}/columns?format=csv", "/format"),
    ],
)
def test_parameters_that_an_address_does_not_have_are_named(client, kept, address, pointer):
    identity = kept().json()["id"]
    assert_problem(client.get(address.format(id=identity)), 422, pointer)
    twice = client.post("/v1/sets?name=a&name=b", json={"set": bodies.FILM})
    assert_problem(twice, 422, "/name")


@pytest.mark.parametrize(
    ("file", "media_type"), [("a\x00b.csv", "text/csv"), ("a.csv", "text/\xff"), ("a.csv", "a\x00b"), ("a.csv", "text")]
)
def test_a_file_that_could_not_be_handed_back_is_not_kept(client, file, media_type):
    told = f'name="reflections"; filename="{file}"\r\nContent-Type: {media_type}'
    head = f"--frontier\r\nContent-Disposition: form-data; {told}\r\n\r\n"
    body = head.encode("latin-1") + TABLE + b"\r\n--frontier--\r\n"
    headers = {"Content-Type": "multipart/form-data; boundary=frontier"}
    assert_problem(client.post("/v1/sets", content=body, headers=headers), 400)


def test_a_unit_that_does_not_print_is_refused(client):
    answer = client.post("/v1/sets", json={"set": {**bodies.FILM, "unit": "e\x00"}})
    assert_problem(answer, 422, "/set/unit")


def test_a_file_is_the_same_whatever_it_is_called(client):
    labels = json.dumps({"set": {"values": "structure_factor", "cell": bodies.TRICLINIC}})
    ids = set()
    for name, media_type in (("a.csv", "text/csv"), ("b.txt", "text/plain")):
        files = {"request": ("", labels, "application/json"), "reflections": (name, TABLE, media_type)}
        ids.add(client.post("/v1/sets", files=files).json()["id"])
    assert len(ids) == 1
    client.delete(f"/v1/sets/{ids.pop()}")


def test_quotas_are_told(client):
    with alone(compute_workers=1, max_sets=1) as served, httpx.Client(base_url=served.address, timeout=60) as small:
        assert small.post("/v1/sets", json={"set": bodies.FILM}).status_code == 201
        assert small.post("/v1/sets", json={"set": bodies.FILM}).status_code == 200
        answer = small.post("/v1/sets", json={"set": bodies.CRYSTAL})
        assert_problem(answer, 507)
        assert "Delete some" in answer.json()["detail"]
        assert small.get("/v1/sets").json()["total"] == 1


def test_without_a_store_the_rest_works(tmp_path):
    (tmp_path / "file").write_text("")
    settings = {"compute_workers": 1, "data_dir": tmp_path / "file" / "x"}
    with alone(**settings) as served, httpx.Client(base_url=served.address, timeout=60) as small:
        for answer in (small.get("/v1/sets"), small.post("/v1/sets", json={"set": bodies.FILM})):
            assert_problem(answer, 503)
            assert "DENSITYLOOM_DATA_DIR" in answer.json()["detail"]
        assert small.post("/v1/profile", json=bodies.PROFILE).status_code == 200
        assert small.get("/health/ready").json()["store"].startswith("not available")
