"""Every product in every form gives the numbers of the engine called directly."""

from __future__ import annotations

import asyncio
import csv
import io
import json

import httpx
import numpy as np
import pytest
from starlette.requests import Request

from engine import Demand, Treatment, Window, averages, evaluate, sampling
from service.encoders.negotiation import MEDIA_TYPES, formats_of
from service.problems import Problem
from service.routes.exchange import unless_gone
from tests.service import bodies
from tests.service.bodies import changed
from tests.service.problem_shape import assert_problem

CRYSTAL = bodies.coefficients(bodies.CRYSTAL)
FILM = bodies.coefficients(bodies.FILM)
SHEET = bodies.coefficients(bodies.SHEET)
ABSORBING = bodies.coefficients(bodies.ABSORBING)
LATTICE = CRYSTAL.lattice
BOX = sampling.box(LATTICE, bodies.BOX["origin"], bodies.BOX["edges"], (3, 4, 5))
CELL = sampling.full_cell(LATTICE, (5, 6, 8))
LINE = sampling.line(FILM.lattice, [0], [1], 17)
POINTS = sampling.points(LATTICE, bodies.POINTS["positions"])
NORMAL = [bodies.CRYSTAL[name][0] for name in "hkl"]
MERIT = np.linspace(0, 1, len(bodies.CRYSTAL["h"])).tolist()


def case(name, product, body, coefficients, where, treatment=None, demand=None):
    return pytest.param(product, body, coefficients, where, treatment or Treatment(), demand or Demand(), id=name)


CASES = [
    case("film profile", "profile", bodies.PROFILE, FILM, LINE),
    case(
        "end left out",
        "profile",
        {**bodies.PROFILE, "include_end": False},
        FILM,
        sampling.line(FILM.lattice, [0], [1], 17, include_end=False),
    ),
    case(
        "along a direction",
        "profile",
        {"set": bodies.CRYSTAL, "along": [1, -1, 2], "samples": 9, "origin": [1, 2, 3], "coordinates": "cartesian"},
        CRYSTAL,
        sampling.lattice_line(LATTICE, [1, -1, 2], 9, origin=[1, 2, 3], coordinates="cartesian"),
    ),
    case(
        "lateral average along a normal",
        "profile",
        {"set": bodies.CRYSTAL, "normal_to": NORMAL, "samples": 10, "average": "lateral"},
        CRYSTAL,
        sampling.normal_line(LATTICE, NORMAL, 10),
        Treatment(average=averages.lateral(LATTICE, NORMAL)),
    ),
    case(
        "length along a normal, slab",
        "profile",
        {
            "set": bodies.CRYSTAL,
            "normal_to": [1, 0, 0],
            "samples": 10,
            "length": 3.5,
            "average": {"kind": "slab", "thickness": 0.8},
        },
        CRYSTAL,
        sampling.normal_line(LATTICE, [1, 0, 0], 10, length=3.5),
        Treatment(average=averages.slab(LATTICE, [1, 0, 0], 0.8)),
    ),
    case(
        "gradient of a film",
        "profile",
        {**bodies.PROFILE, "field": "gradient"},
        FILM,
        LINE,
        Treatment(field="gradient"),
    ),
    case(
        "slice by edges",
        "slice",
        bodies.SLICE,
        CRYSTAL,
        sampling.plane(LATTICE, [0, 0, 0.25], [1, 0, 0], [0, 1, 0], (6, 7)),
    ),
    case(
        "slice of a planar lattice",
        "slice",
        {"set": bodies.SHEET, "origin": [0, 0], "edge_1": [1, 0], "edge_2": [0, 2], "shape": [4, 9]},
        SHEET,
        sampling.plane(SHEET.lattice, [0, 0], [1, 0], [0, 2], (4, 9)),
    ),
    case(
        "lattice plane",
        "slice",
        {**bodies.PLANE, "offset": 0.7, "centre": [0.1, 0.2, 0.3]},
        CRYSTAL,
        sampling.lattice_plane(LATTICE, [1, 1, 0], offset=0.7, width=6, height=4, spacing=0.9, centre=[0.1, 0.2, 0.3]),
    ),
    case("cell by shape", "grid", bodies.GRID, CRYSTAL, CELL),
    case(
        "cell by spacing",
        "grid",
        {"set": bodies.CRYSTAL, "spacing": 0.9},
        CRYSTAL,
        sampling.full_cell_by_spacing(LATTICE, 0.9),
    ),
    case("box", "grid", bodies.BOX, CRYSTAL, BOX),
    case(
        "complex box",
        "grid",
        {**bodies.BOX, "set": bodies.ABSORBING, "include_end": True},
        ABSORBING,
        sampling.box(LATTICE, bodies.BOX["origin"], bodies.BOX["edges"], (3, 4, 5), include_end=True),
    ),
    case("vector field", "grid", {**bodies.GRID, "field": "gradient"}, CRYSTAL, CELL, Treatment(field="gradient")),
    case(
        "complex vector field",
        "points",
        {**bodies.POINTS, "set": bodies.ABSORBING, "field": "gradient"},
        ABSORBING,
        POINTS,
        Treatment(field="gradient"),
    ),
    case(
        "length of the gradient",
        "grid",
        {**bodies.GRID, "field": "gradient_magnitude"},
        CRYSTAL,
        CELL,
        Treatment(field="gradient_magnitude"),
    ),
    case("laplacian", "points", {**bodies.POINTS, "field": "laplacian"}, CRYSTAL, POINTS, Treatment(field="laplacian")),
    case(
        "autocorrelation without its origin",
        "grid",
        {**bodies.GRID, "field": "autocorrelation", "self_term": 90.0},
        CRYSTAL,
        CELL,
        Treatment(field="autocorrelation", self_term=90.0 / LATTICE.volume**2),
    ),
    case("response", "points", {**bodies.POINTS, "field": "response"}, CRYSTAL, POINTS, Treatment(field="response")),
    case("free points", "points", bodies.POINTS, CRYSTAL, POINTS),
    case(
        "Cartesian points",
        "points",
        {**bodies.POINTS, "coordinates": "cartesian"},
        CRYSTAL,
        sampling.points(LATTICE, bodies.POINTS["positions"], coordinates="cartesian"),
    ),
    case(
        "window, sharpening and merit",
        "points",
        {
            **changed(bodies.POINTS, "set/merit", MERIT),
            "window": {"kind": "gaussian", "b": 3.0},
            "sharpen": 1.5,
            "apply_merit": True,
        },
        bodies.coefficients({**bodies.CRYSTAL, "merit": MERIT}),
        POINTS,
        Treatment(window=Window("gaussian", 3.0), sharpen=1.5, apply_merit=True),
    ),
    case(
        "ball, lanczos, cut",
        "points",
        {
            **bodies.POINTS,
            "window": {"kind": "lanczos"},
            "average": {"kind": "ball", "radius": 0.6},
            "resolution": {"d_min": 1.4, "d_max": 4.0},
        },
        CRYSTAL.within(d_min=1.4, d_max=4.0),
        POINTS,
        Treatment(window=Window("lanczos"), average=averages.ball(0.6)),
    ),
    case(
        "averaged over a box",
        "points",
        {**bodies.POINTS, "average": {"kind": "box", "edges": [[0.2, 0, 0], [0, 0.1, 0.1]]}},
        CRYSTAL,
        POINTS,
        Treatment(average=averages.box(LATTICE, [[0.2, 0, 0], [0, 0.1, 0.1]])),
    ),
    case(
        "single precision",
        "grid",
        {**bodies.GRID, "precision": "single"},
        CRYSTAL,
        CELL,
        demand=Demand(precision="single"),
    ),
    case(
        "complex, single precision",
        "points",
        {**bodies.POINTS, "set": bodies.ABSORBING, "precision": "single"},
        ABSORBING,
        POINTS,
        demand=Demand(precision="single"),
    ),
]
each_case = pytest.mark.parametrize(("product", "body", "coefficients", "where", "treatment", "demand"), CASES)


def asked(client, product, body, form):
    answer = client.post(f"/v1/{product}", params={"format": form}, json=body)
    assert answer.status_code == 200, answer.text
    assert answer.headers["content-type"] == MEDIA_TYPES[form]
    assert answer.headers["vary"] == "Accept"
    assert int(answer.headers["content-length"]) == len(answer.content)
    assert float(answer.headers["server-timing"].removeprefix("compute;dur=")) > 0
    if form != "json":
        assert answer.headers["content-disposition"] == f'attachment; filename="{product}.{form}"'
    return answer.content


@each_case
def test_all_forms_give_the_numbers_of_the_engine(client, product, body, coefficients, where, treatment, demand):
    field = evaluate(coefficients, where, treatment, demand)
    expected = field.values

    bare = np.load(io.BytesIO(asked(client, product, body, "npy")), allow_pickle=False)
    assert bare.dtype == expected.dtype
    np.testing.assert_array_equal(bare, expected)

    told = json.loads(asked(client, product, body, "json"))
    check_metadata(told, product, body, coefficients, where, field)
    values = told.pop("values")
    assert told.pop("uncertainty") is None
    assert told.pop("unmeasured") is None
    if expected.dtype.kind == "c":
        assert set(values) == {"real", "imag"}
        values = np.array(values["real"]) + 1j * np.array(values["imag"])
    np.testing.assert_array_equal(np.array(values).astype(expected.dtype), expected)

    with np.load(io.BytesIO(asked(client, product, body, "npz")), allow_pickle=False) as archive:
        assert archive["values"].dtype == expected.dtype
        np.testing.assert_array_equal(archive["values"], expected)
        assert json.loads(str(archive["metadata"])) == told
        names = {"values", "metadata"}
        if product == "points":
            names.add("positions")
            np.testing.assert_array_equal(archive["positions"], where.positions())
        for number, axis in enumerate(field.axes, start=1):
            names.add(f"axis_{number}")
            np.testing.assert_array_equal(archive[f"axis_{number}"], axis.coordinates())
        assert set(archive.files) == names

    if "csv" in formats_of(product):
        check_csv(asked(client, product, body, "csv"), where, field)


def check_metadata(told, product, body, coefficients, where, field):
    """Everything a reader needs, complete and true."""
    assert told["product"] == product
    assert told["field"] == body.get("field", "density")
    assert told["shape"] == list(field.values.shape)
    assert told["components"] == list(field.components)
    assert told["unit"] == field.unit
    assert told["applied"] == list(field.applied)
    # What follows is advice on how request and data fit each other.
    assert told["notes"][: len(field.notes)] == list(field.notes)
    summary = told["summary"]
    size = np.abs(field.values) if field.values.dtype.kind == "c" else field.values
    assert summary["minimum"] == pytest.approx(float(size.min()), rel=1e-6)
    assert summary["maximum"] == pytest.approx(float(size.max()), rel=1e-6)
    mean = summary["mean"]
    mean = complex(mean["real"], mean["imag"]) if isinstance(mean, dict) else mean
    assert mean == pytest.approx(complex(field.values.mean(dtype=np.complex128)), rel=1e-5, abs=1e-6)
    assert summary["rms"] == pytest.approx(float(np.sqrt((np.abs(field.values) ** 2).mean())), rel=1e-5)
    counted = summary["coefficients"]
    assert counted["rows"] == len(body["set"]["l"] if "l" in body["set"] else body["set"]["h"])
    assert counted["summed"] == field.summed
    assert counted["zero_term"] == coefficients.tally.zero_term
    assert counted["beyond_resolution"] == coefficients.tally.beyond_resolution
    assert summary["resolution"]["d_min"] == field.resolution[0]
    assert summary["resolution"]["d_max"] == field.resolution[1]
    assert summary["resolution"]["unit"] == "Å"
    assert summary["method"] == "+".join(field.methods)
    assert 0 < summary["accuracy"] < 1e-2
    assert "exp(+" in summary["sign_convention"]
    assert len(told["axes"]) == (0 if product == "points" else len(where.shape))
    for axis, expected in zip(told["axes"], field.axes, strict=True):
        assert axis["label"] == expected.label
        assert axis["unit"] == "Å"
        assert (axis["start"], axis["step"], axis["count"]) == (expected.start, expected.step, expected.count)
        np.testing.assert_array_equal(axis["direction"], expected.direction)
    if product == "points":
        assert told["origin"] is None
    else:
        np.testing.assert_array_equal(told["origin"]["fractional"], where.origin)
        np.testing.assert_allclose(told["origin"]["cartesian"], where.origin @ coefficients.lattice.vectors)


def check_csv(text, where, field):
    lines = text.decode().splitlines()
    comments = [line for line in lines if line.startswith("#")]
    assert any(field.unit in line for line in comments)
    assert all(any(note in line for line in comments) for note in field.notes)
    rows = list(csv.reader(line for line in lines if not line.startswith("#")))
    columns = dict(zip(rows[0], np.array(rows[1:], dtype=float).T, strict=True))
    parts = {"": field.values}
    if field.components:
        parts = {f"_{name}": field.values[:, place] for place, name in enumerate(field.components)}
    for suffix, values in parts.items():
        if values.dtype.kind == "c":
            np.testing.assert_array_equal(columns[f"value{suffix}_real"], values.real)
            np.testing.assert_array_equal(columns[f"value{suffix}_imag"], values.imag)
        else:
            np.testing.assert_array_equal(columns[f"value{suffix}"], values)
    if field.axes:
        np.testing.assert_array_equal(columns["distance_angstrom"], field.axes[0].coordinates())
    else:
        np.testing.assert_array_equal(np.stack([columns[f"x_{j}"] for j in (1, 2, 3)], axis=1), where.positions())


def test_film_agrees_with_its_closed_form(client):
    answer = client.post("/v1/profile", json=bodies.PROFILE).json()
    np.testing.assert_allclose(answer["values"], bodies.film_profile(np.linspace(0, 1, 17)), rtol=0, atol=1e-12)
    assert answer["unit"] == "e/Å³"
    assert answer["axes"][0]["step"] == pytest.approx(bodies.PERIOD / 16)


@pytest.mark.parametrize(
    ("accept", "form"),
    [
        (None, "json"),
        ("*/*", "json"),
        ("application/x-npy", "npy"),
        ("application/x-npz;q=0.9, application/json;q=0.5", "npz"),
        ("text/*", "csv"),
        ("application/json;q=0, */*;q=0.1", "npy"),
        ("image/gif, application/*;q=0.2", "json"),
    ],
)
def test_accept_chooses_the_form(client, accept, form):
    headers = {} if accept is None else {"Accept": accept}
    answer = client.post("/v1/profile", json=bodies.PROFILE, headers=headers)
    assert answer.headers["content-type"] == MEDIA_TYPES[form]


def test_several_accept_headers_are_one_list(client):
    headers = [("Accept", "image/gif"), ("Accept", "application/x-npy")]
    with httpx.Client(base_url=client.base_url) as plain:
        del plain.headers["accept"]
        answer = plain.post("/v1/profile", json=bodies.PROFILE, headers=headers)
    assert answer.headers["content-type"] == MEDIA_TYPES["npy"]


def test_format_goes_before_accept(client):
    answer = client.post("/v1/points?format=npy", json=bodies.POINTS, headers={"Accept": "text/csv"})
    assert answer.headers["content-type"] == MEDIA_TYPES["npy"]


@pytest.mark.parametrize(
    ("address", "accept"),
    [
        ("/v1/profile", "image/gif"),
        ("/v1/points", "image/png"),
        ("/v1/profile", "application/json;q=0"),
        ("/v1/profile", "nonsense"),
        ("/v1/points?format=png", "*/*"),
        ("/v1/profile?format=", "*/*"),
        ("/v1/grid?format=csv", "*/*"),
        ("/v1/slice", "text/csv"),
    ],
)
def test_forms_that_are_not_made_are_406(client, address, accept):
    product = address.split("/")[2].split("?")[0]
    answer = client.post(address, json=bodies.GOOD[product], headers={"Accept": accept})
    document = assert_problem(answer, 406)
    assert "application/x-npz" in document["detail"]


@pytest.mark.parametrize("given", [bodies.CRYSTAL, bodies.ABSORBING], ids=["phases", "real and imag"])
@pytest.mark.parametrize(("media_type", "packed"), [("text/csv", bodies.as_csv), ("application/x-npz", bodies.as_npz)])
def test_columns_beside_a_request_are_as_good_as_in_it(client, given, media_type, packed):
    if "phase_deg" in given:
        given = {**given, "phase_deg": [None, *given["phase_deg"][1:]]}
    body = {**bodies.GRID, "set": given}
    sent = bodies.form(
        ("request", "application/json", json.dumps(bodies.bare(body)).encode()),
        ("columns", media_type, packed(bodies.table_of(given))),
    )
    direct = client.post("/v1/grid", json=body).json()
    beside = client.post("/v1/grid", content=sent, headers={"Content-Type": bodies.FORM})
    assert beside.status_code == 200, beside.text
    assert beside.json() == direct
    assert direct["summary"]["coefficients"]["without_phase"] == (1 if "phase_deg" in given else 0)


def test_form_of_the_usual_clients_is_understood(client):
    """What a library or a browser sends, in place of our own spelling."""
    files = {
        "request": ("request.json", json.dumps(bodies.bare(bodies.PROFILE)).encode(), "application/json"),
        "columns": ("film.csv", bodies.as_csv(bodies.table_of(bodies.FILM)), "text/csv; charset=utf-8"),
    }
    answer = client.post("/v1/profile", files=files)
    assert answer.json() == client.post("/v1/profile", json=bodies.PROFILE).json()


def test_unknown_phases_are_left_out_and_counted(client):
    given = {**bodies.FILM, "phase_deg": [0, None, 0, 0]}
    answer = client.post("/v1/profile", json={**bodies.PROFILE, "set": given}).json()
    rest = {**bodies.FILM, **{name: bodies.FILM[name][:1] + bodies.FILM[name][2:] for name in ("l", "amplitude")}}
    rest["phase_deg"] = [0, 0, 0]
    expected = client.post("/v1/profile", json={**bodies.PROFILE, "set": rest}).json()
    np.testing.assert_allclose(answer["values"], expected["values"], atol=1e-12)
    assert answer["summary"]["coefficients"]["without_phase"] == 1
    assert any("no phase" in note for note in answer["notes"])


def test_server_that_stops_tells_who_still_waits():
    """Its task is cancelled; the client gets a problem, and the computation ends."""

    async def scenario():
        ended = asyncio.Event()

        async def computing():
            try:
                await asyncio.Event().wait()
            finally:
                ended.set()

        async def receive():
            await asyncio.Event().wait()

        request = Request({"type": "http"}, receive)
        waiting = asyncio.create_task(unless_gone(request, computing()))
        await asyncio.sleep(0.01)
        waiting.cancel()
        with pytest.raises(Problem) as caught:
            await waiting
        assert caught.value.status == 503
        assert "Retry-After" in caught.value.headers
        await asyncio.wait_for(ended.wait(), 5)

    asyncio.run(scenario())
