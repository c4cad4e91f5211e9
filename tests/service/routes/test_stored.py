"""Products and analyses of stored sets by GET."""

from __future__ import annotations

import asyncio
import gzip
import json
import threading

import httpx
import numpy as np
import psutil
import pytest
import zstandard

from service.encoders.negotiation import formats_of
from service.routes.stored import BY_GET
from tests.service import bodies
from tests.service.analyses import asked
from tests.service.problem_shape import assert_problem

ASKED = {
    "profile": bodies.PROFILE,
    "slice": {"set": bodies.CRYSTAL, "plane": [1, 1, 0], "width": 9.0, "height": 7.0, "spacing": 0.5},
    "grid": {"set": bodies.CRYSTAL, "shape": [8, 7, 6], "window": {"kind": "gaussian", "b": 2.0}},
    "points": {"set": asked.FILM, "positions": [[0.1], [0.7]], "uncertainty": True},
    **{name: body for name, body in asked.GOOD.items() if name != "compare"},
}


def test_everything_is_asked_here():
    assert set(ASKED) == set(BY_GET)


@pytest.fixture(scope="module")
def identities(client):
    """Ids of the sets that are asked about, by product."""
    found = {}
    for product, body in ASKED.items():
        answer = client.post("/v1/sets", json={"set": body["set"]})
        assert answer.status_code in (200, 201)
        found[product] = answer.json()["id"]
    return found


def query_of(body):
    """The members of a body as a query."""
    found = {}

    def walk(prefix, value):
        if isinstance(value, dict):
            for name, inner in value.items():
                walk(f"{prefix}{name}" if not prefix.endswith(".") else prefix + name, inner) if not isinstance(
                    inner, dict
                ) else walk(f"{prefix}{name}.", inner)
        else:
            found[prefix] = value if isinstance(value, str) else json.dumps(value)

    walk("", {name: value for name, value in body.items() if name != "set"})
    return found


def address(identities, product):
    return f"/v1/sets/{identities[product]}/{product}"


def get(client, identities, product, *, headers=None, **more):
    """By GET, without the coding that the client would ask for by itself."""
    headers = {"Accept-Encoding": "identity", **(headers or {})}
    return client.get(address(identities, product), params={**query_of(ASKED[product]), **more}, headers=headers)


@pytest.mark.parametrize("product", BY_GET)
def test_the_answer_is_that_of_the_body(client, identities, product):
    for form in formats_of(product):
        if form in ("png", "svg", "glb") or (form in ("npy", "f32", "u16", "u8") and product == "points"):
            continue
        if ASKED[product].get("uncertainty") and form not in ("json", "npz", "csv"):
            continue
        by_get = get(client, identities, product, format=form)
        by_post = client.post(f"/v1/{product}", json=ASKED[product], params={"format": form})
        assert by_get.status_code == by_post.status_code == 200, by_get.text
        assert by_get.headers["content-type"] == by_post.headers["content-type"]
        assert by_get.headers.get("samples-description") == by_post.headers.get("samples-description")
        if form != "npz":
            assert by_get.content == by_post.content
        else:
            assert len(by_get.content) == len(by_post.content)


@pytest.mark.parametrize("product", ["profile", "slice", "grid"])
def test_pictures_are_had_by_get(client, identities, product):
    answer = get(client, identities, product, format="png", **{"picture.theme": "dark", "picture.title": "12"})
    assert answer.content[:4] == b"\x89PNG"
    answer = get(client, identities, product, format="svg")
    assert b"<svg" in answer.content


def test_an_answer_may_be_kept_by_clients(client, identities):
    answer = get(client, identities, "slice")
    assert "immutable" in answer.headers["cache-control"]
    assert "private" in answer.headers["cache-control"]
    assert {"accept", "accept-encoding"} <= {one.strip().lower() for one in answer.headers["vary"].split(",")}
    tag = answer.headers["etag"]
    assert tag.startswith('"')
    again = get(client, identities, "slice", headers={"If-None-Match": f'"x", {tag}'})
    assert (again.status_code, again.content, again.headers["etag"]) == (304, b"", tag)
    other = get(client, identities, "slice", headers={"If-None-Match": '"x"'})
    assert other.status_code == 200


def test_the_tag_tells_answers_apart(client, identities):
    tags = [
        get(client, identities, "slice").headers["etag"],
        get(client, identities, "slice", format="npy").headers["etag"],
        get(client, identities, "slice", offset="0.5").headers["etag"],
        get(client, identities, "slice", headers={"Accept-Encoding": "gzip"}).headers["etag"],
        get(client, identities, "slice", headers={"Accept-Encoding": "zstd"}).headers["etag"],
        get(client, identities, "profile").headers["etag"],
    ]
    assert len(set(tags)) == len(tags)
    assert get(client, identities, "slice").headers["etag"] == tags[0]


@pytest.mark.parametrize(("coding", "decode"), [("gzip", gzip.decompress), ("zstd", zstandard.decompress)])
def test_answers_are_coded_where_it_pays(client, identities, coding, decode):
    url = httpx.URL(address(identities, "slice")).copy_merge_params(query_of(ASKED["slice"]))
    plain = client.get(url, headers={"Accept-Encoding": "identity"})
    assert "content-encoding" not in plain.headers
    with client.stream("GET", url, headers={"Accept-Encoding": coding}) as answer:
        raw = b"".join(answer.iter_raw())
        assert answer.headers["content-encoding"] == coding
        assert int(answer.headers["content-length"]) == len(raw) < len(plain.content)
        tag = answer.headers["etag"]
    assert decode(raw) == plain.content
    again = client.get(url, headers={"Accept-Encoding": coding, "If-None-Match": tag})
    assert (again.status_code, again.headers["etag"]) == (304, tag)
    array = client.get(url.copy_merge_params({"format": "npy"}), headers={"Accept-Encoding": coding})
    assert "content-encoding" not in array.headers


def test_head_tells_what_get_would(client, identities):
    url = httpx.URL(address(identities, "grid")).copy_merge_params({**query_of(ASKED["grid"]), "format": "f32"})
    head = client.head(url)
    whole = client.get(url)
    assert head.content == b""
    for name in ("content-length", "content-type", "etag", "samples-description", "cache-control"):
        assert head.headers[name] == whole.headers[name]
    assert_problem_status(client.head(address(identities, "grid")), 422)


def assert_problem_status(answer, status):
    assert (answer.status_code, answer.content) == (status, b"")


@pytest.mark.parametrize(
    ("query", "status", "pointer"),
    [
        ({"samples": "x"}, 422, "/samples"),
        ({"samples": "1"}, 422, "/samples"),
        ({"colour": "red"}, 422, "/colour"),
        ({"set": "{}"}, 422, "/set"),
        ({"format": "tiff"}, 406, None),
        ({"window.kind": "round"}, 422, "/window/kind"),
        ({"from": "0,0,0"}, 422, "/from"),
        ({"along": "1"}, 422, "/along"),
    ],
)
def test_what_is_wrong_is_named(client, identities, query, status, pointer):
    answer = get(client, identities, "profile", **query)
    assert_problem(answer, status, pointer)


@pytest.mark.parametrize("identity", ["0" * 64, "xyz", "..%2f..%2fetc", "%00", "A" * 64])
def test_an_unknown_set(client, identity):
    assert_problem(client.get(f"/v1/sets/{identity}/profile", params=query_of(bodies.PROFILE)), 404)


def test_a_hundred_clients_cost_one_computation(client, service):
    """All ask before the first answer is there; the figures of the cache tell how often it was computed."""
    body = {**bodies.CRYSTAL, "mean": 60.0}
    identity = client.post("/v1/sets", json={"set": body}).json()["id"]
    before = computed(client)

    async def scenario():
        limits = httpx.Limits(max_connections=100)
        async with httpx.AsyncClient(base_url=service.address, timeout=60, limits=limits) as many:
            url = f"/v1/sets/{identity}/grid?shape=90,90,90&precision=double&format=f32"
            return await asyncio.gather(*(many.get(url) for _ in range(100)))

    answers = asyncio.run(scenario())
    assert {one.status_code for one in answers} == {200}
    assert len({one.content for one in answers}) == 1
    assert len({one.headers["server-timing"] for one in answers}) == 1
    assert computed(client) == before + 1


def computed(client):
    """Jobs that the service has computed so far."""
    for line in client.get("/metrics").text.splitlines():
        if line.startswith("densityloom_computations_total "):
            return float(line.split()[1])
    raise AssertionError("the service does not count its computations")


def test_a_stored_set_stands_in_a_body(client, identities):
    body = {name: value for name, value in ASKED["extrema"].items() if name != "set"}
    found = client.post("/v1/extrema", json={**body, "set_id": identities["extrema"]})
    assert found.json() == client.post("/v1/extrema", json=ASKED["extrema"]).json()


def test_stored_sets_are_combined_and_compared(client):
    first, second = (client.post("/v1/sets", json={"set": one}).json()["id"] for one in (asked.FILM, asked.LATER))
    compared = client.post("/v1/compare", json={"set_id": first, "with": {"set_id": second}})
    assert compared.json() == client.post("/v1/compare", json=asked.GOOD["compare"]).json()
    where = {"from": [0], "to": [1], "samples": 9}
    way = {"kind": "difference", "scale": {"kind": "as_given"}}
    by_id = client.post(
        "/v1/profile", json={"set_id": first, "combination": {**way, "with": {"set_id": second}}, **where}
    )
    whole = client.post("/v1/profile", json={"set": asked.FILM, "combination": {**way, "with": asked.LATER}, **where})
    assert by_id.json() == whole.json()
    np.testing.assert_array_less(0, np.abs(by_id.json()["values"]).max())


def test_a_series_starts_from_a_stored_set(client):
    film = {**bodies.FILM, "sigma": [1, 1, 1, 1]}
    rest = {
        "members": [{"value": 1, "set": {}}, {"value": 2, "set": {"amplitude": [1, 2, 3, 4]}}],
        "profile": {"from": [0], "to": [1], "samples": 9},
        "scale": {"kind": "as_given"},
    }
    identity = client.post("/v1/sets", json={"set": film}).json()["id"]
    by_id = client.post("/v1/series", json={"set_id": identity, **rest})
    assert by_id.status_code == 200, by_id.text
    assert by_id.json() == client.post("/v1/series", json={"set": film, **rest}).json()


@pytest.mark.parametrize(
    ("body", "status", "pointer"),
    [
        ({"set_id": "0" * 64}, 404, None),
        ({"set_id": 7}, 422, "/set_id"),
        ({"set_id": "0" * 64, "set": bodies.FILM}, 422, "/set_id"),
        (
            {"set": bodies.FILM, "combination": {"kind": "average", "with": {"set_id": 7}}},
            422,
            "/combination/with/set_id",
        ),
        ({}, 422, "/set"),
    ],
)
def test_ids_that_name_no_set(client, body, status, pointer):
    answer = client.post("/v1/profile", json={**body, "from": [0], "to": [1], "samples": 5})
    assert_problem(answer, status, pointer)


def test_only_trusted_phases_are_summed(client):
    body = {**bodies.FILM, "merit": [0.9, 0.2, 0.8, 0.99]}
    identity = client.post("/v1/sets", json={"set": body}).json()["id"]
    where = {"from": "0", "to": "1", "samples": "7"}
    answer = client.get(f"/v1/sets/{identity}/profile", params={**where, "trust.least_merit": "0.5"})
    without = {**body, "phase_deg": [0, None, 0, 0]}
    assert answer.json()["values"] == pytest.approx(
        client.post("/v1/profile", json={"set": without, "from": [0], "to": [1], "samples": 7}).json()["values"]
    )
    assert answer.json()["summary"]["coefficients"]["without_phase"] == 1
    assert any("merit below 0.5" in line for line in answer.json()["applied"])
    refused = client.get(f"/v1/sets/{identity}/profile", params={**where, "trust.largest_sigma_deg": "10"})
    assert_problem(refused, 422, "/trust/largest_sigma_deg")


def test_clients_of_one_set_do_not_disturb_each_other(client, service, identities):
    """Many slices at once, each the one that was asked for."""
    offsets = [round(0.1 * step, 1) for step in range(20)]
    with httpx.Client(base_url=service.address, timeout=60) as other:
        expected = {
            offset: other.post("/v1/slice", json={**ASKED["slice"], "offset": offset}, params={"format": "npy"}).content
            for offset in offsets
        }
    wrong = []

    def ask(offset):
        with httpx.Client(base_url=service.address, timeout=60) as own:
            if get(own, identities, "slice", offset=str(offset), format="npy").content != expected[offset]:
                wrong.append(offset)

    threads = [threading.Thread(target=ask, args=(offset,)) for offset in offsets for _ in range(3)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join(60)
    assert not wrong


def test_answers_in_memory_hold_no_descriptors(client, service, identities):
    process = psutil.Process(service.process.pid)
    get(client, identities, "profile", format="f32")
    before = process.num_fds()
    for number in range(60):
        positions = {"positions": f"[[{number / 100}]]"}
        assert client.get(address(identities, "points"), params=positions).status_code == 200
    assert process.num_fds() < before + 20


def test_what_is_refused_without_a_phase_is_refused_with_one_that_is_not_trusted(client):
    body = {**bodies.FILM, "merit": [0.9, 0.2, 0.8, 0.99]}
    where = {"from": [0], "to": [1], "samples": 7, "missing_phase": "refuse"}
    assert client.post("/v1/profile", json={"set": body, **where}).status_code == 200
    answer = client.post("/v1/profile", json={"set": body, **where, "trust": {"least_merit": 0.5}})
    assert_problem(answer, 422, "/missing_phase")


def test_a_long_query_is_answered_too(client, identities):
    positions = json.dumps([[round(0.0001 * number, 4)] for number in range(1000)])
    answer = client.get(address(identities, "points"), params={"positions": positions})
    assert answer.json()["shape"] == [1000]
