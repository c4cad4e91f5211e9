"""Malformed requests: each is answered as a problem that names the place, and none harms the service."""

from __future__ import annotations

import io
import json
import struct
import zipfile
from typing import Any, NamedTuple

import numpy as np
import pytest

from tests.service import bodies
from tests.service.bodies import FORM, changed, film_form, without
from tests.service.conftest import SMALL, worker_processes
from tests.service.problem_shape import assert_problem

JSON = "application/json"
FILM, CRYSTAL = bodies.FILM, bodies.CRYSTAL
PROFILE, SLICE, PLANE, GRID, BOX, POINTS = (
    bodies.PROFILE,
    bodies.SLICE,
    bodies.PLANE,
    bodies.GRID,
    bodies.BOX,
    bodies.POINTS,
)
CSV_GOOD = bodies.as_csv(bodies.table_of(FILM))
NPZ_GOOD = bodies.as_npz(bodies.table_of(FILM))
LONG = "x" * 100_000


class Row(NamedTuple):
    name: str
    product: str
    body: Any
    status: int
    pointer: str | None
    media_type: str | None = JSON


def text(body: Any) -> str:
    return json.dumps(body, ensure_ascii=False)


def merged(body: dict, **members: Any) -> dict:
    return {**body, **members}


def film(**members: Any) -> dict:
    """The film's profile with members of its set replaced."""
    return merged(PROFILE, set={**FILM, **members})


def cell(**parameters: Any) -> dict:
    """A grid of the crystal with parameters of its cell replaced."""
    return changed(GRID, "set/cell", {**bodies.TRICLINIC, **parameters})


def archive(**members: bytes) -> bytes:
    packed = io.BytesIO()
    with zipfile.ZipFile(packed, "w", zipfile.ZIP_DEFLATED) as made:
        for name, content in members.items():
            made.writestr(f"{name}.npy", content)
    return packed.getvalue()


def npy(header: str, data: bytes = b"") -> bytes:
    return b"\x93NUMPY\x01\x00" + struct.pack("<H", len(header)) + header.encode() + data


def pickled() -> bytes:
    packed = io.BytesIO()
    np.savez(packed, l=np.array([{"a": 1}], dtype=object))
    return packed.getvalue()


def declared(size: int, real: int) -> bytes:
    """An archive of zeros whose directory declares another size than the real one."""
    header = f"{{'descr': '<f8', 'fortran_order': False, 'shape': ({real // 8},)}}"
    made = bytearray(archive(l=npy(header, bytes(real))))
    place = made.index(b"PK\x01\x02") + 24
    made[place : place + 4] = struct.pack("<I", size)
    return bytes(made)


NPY_LIES = npy("{'descr': '<f8', 'fortran_order': False, 'shape': (100000000000,)}", b"12345678")

UNREADABLE = [
    Row("not JSON", "profile", b"cell=1", 400, None),
    Row("empty body", "profile", b"", 400, None),
    Row("NaN literal", "profile", text(PROFILE).replace("41.3", "NaN"), 400, None),
    Row("Infinity literal", "profile", text(PROFILE).replace("41.3", "-Infinity"), 400, None),
    Row("NaN position", "points", text(POINTS).replace("0.1", "NaN"), 400, None),
    Row("number beyond a double", "profile", text(PROFILE).replace("41.3", "1e999"), 400, None),
    Row("index beyond a double", "profile", text(PROFILE).replace("[1, 2", f"[{10**400}, 2"), 400, None),
    Row("truncated", "profile", text(PROFILE)[:-9], 400, None),
    Row("array on top", "profile", [PROFILE], 400, None),
    Row("null on top", "profile", b"null", 400, None),
    Row("deep nesting", "profile", b"[" * 10_000, 400, None),
    Row("not UTF-8", "profile", b'{"remark": "\xff"}', 400, None),
    Row("other media type", "profile", PROFILE, 415, None, "text/plain"),
    Row("nearly the media type", "profile", PROFILE, 415, None, "application/jsonx"),
    Row("no media type", "profile", PROFILE, 415, None, None),
    Row("media type without end", "profile", PROFILE, 415, None, "x" * 5000),
]
MEMBERS = [
    Row("nothing in it", "profile", {}, 422, "/set"),
    Row("deep but readable", "profile", '{"set": ' * 900 + "1" + "}" * 900, 422, "/set/values"),
    Row("unknown key", "profile", merged(PROFILE, widow=1), 422, "/widow"),
    Row("unknown key of any length", "profile", merged(PROFILE, **{LONG: 1}), 422, "/" + LONG[:80]),
    Row("unknown key in the set", "profile", film(widow=1), 422, "/set/widow"),
    Row("unknown key in the cell", "profile", film(cell={"period": 17.4, "d": 1}), 422, "/set/cell/d"),
    Row("unknown key in the window", "profile", merged(PROFILE, window={"kinds": 1}), 422, "/window/kinds"),
    Row("key with a slash", "profile", merged(PROFILE, **{"a/b~c": 1}), 422, "/a~1b~0c"),
    Row("set is missing", "profile", without(PROFILE, "set"), 422, "/set"),
    Row("set is a list", "profile", merged(PROFILE, set=[1]), 422, "/set"),
    Row("cell is missing", "profile", without(PROFILE, "set/cell"), 422, "/set/cell"),
    Row("values is missing", "profile", without(PROFILE, "set/values"), 422, "/set/values"),
    Row("values unknown", "profile", film(values="intensity"), 422, "/set/values"),
    Row("product of another address", "profile", merged(PROFILE, product="grid"), 422, "/product"),
    Row("product is no word", "profile", merged(PROFILE, product=[1]), 422, "/product"),
    Row("boolean as number", "profile", film(mean=True), 422, "/set/mean"),
    Row("string as number", "profile", merged(PROFILE, sharpen="2"), 422, "/sharpen"),
    Row("number as boolean", "profile", merged(PROFILE, include_end=1), 422, "/include_end"),
    Row("null as number", "profile", merged(PROFILE, tolerance=None), 422, "/tolerance"),
    Row("object as a column", "profile", film(amplitude={"1": 2}), 422, "/set/amplitude"),
    Row("boolean in a column", "profile", film(amplitude=[1, True, 1, 1]), 422, "/set/amplitude/1"),
    Row("string in a column", "profile", film(amplitude=[1, 1, "1", 1]), 422, "/set/amplitude/2"),
    Row("null in a column", "profile", film(amplitude=[1, 1, 1, None]), 422, "/set/amplitude/3"),
    Row("list in a column", "profile", film(phase_deg=[0, [0], 0, 0]), 422, "/set/phase_deg/1"),
    Row("null index", "profile", film(l=[None, 2, 3, 4]), 422, "/set/l/0"),
    Row("unit without end", "profile", film(unit=LONG), 422, "/set/unit"),
    Row("field unknown", "profile", merged(PROFILE, field=LONG), 422, "/field"),
]
CELLS = [
    Row("no cell in it", "grid", changed(GRID, "set/cell", {}), 422, "/set/cell"),
    Row("contradictory cell", "profile", film(cell={"period": 17.4, "a": 3.0}), 422, "/set/cell"),
    Row("half a cell", "grid", changed(GRID, "set/cell", {"a": 3.0, "b": 4.0}), 422, "/set/cell"),
    Row(
        "left-handed",
        "grid",
        changed(GRID, "set/cell", {"vectors": [[0, 5, 0], [6, 0, 0], [0, 0, 7]]}),
        422,
        "/set/cell/vectors",
    ),
    Row(
        "degenerate vectors",
        "grid",
        changed(GRID, "set/cell", {"vectors": [[5, 0, 0], [0, 6, 0], [5, 6, 0]]}),
        422,
        "/set/cell/vectors",
    ),
    Row(
        "ragged vectors",
        "grid",
        changed(GRID, "set/cell", {"vectors": [[5, 0, 0], [0, 6], [0, 0, 7]]}),
        422,
        "/set/cell/vectors",
    ),
    Row("angles that cannot meet", "grid", cell(alpha=20, beta=30, gamma=80), 422, "/set/cell/alpha"),
    Row("flat angle", "grid", cell(gamma=180), 422, "/set/cell/gamma"),
    Row("no length", "grid", cell(b=0), 422, "/set/cell/b"),
    Row("length in nanometres", "grid", cell(b=0.05), 422, "/set/cell/b"),
    Row("astronomical length", "grid", cell(c=1e300), 422, "/set/cell/c"),
    Row("columns of another dimension", "grid", changed(GRID, "set/cell", {"period": 9.0}), 422, "/set/h"),
    Row("index column is missing", "grid", without(GRID, "set/k"), 422, "/set/k"),
]
COLUMNS = [
    Row("unequal columns", "profile", film(amplitude=[1, 2, 3]), 422, "/set/amplitude"),
    Row("unequal index columns", "grid", changed(GRID, "set/k", [1, 2]), 422, "/set/k"),
    Row("empty columns", "profile", film(l=[], amplitude=[], phase_deg=[]), 422, "/set/l"),
    Row("index that is not whole", "profile", film(l=[1, 2.5, 3, 4]), 422, "/set/l/1"),
    Row("huge index", "profile", film(l=[1, 2, 3, 10**18]), 422, "/set/l/3"),
    Row("negative amplitude", "profile", film(amplitude=[1, -2, 3, 4]), 422, "/set/amplitude/1"),
    Row("negative sigma", "profile", film(sigma=[0.1, 0.1, -0.1, 0.1]), 422, "/set/sigma/2"),
    Row("negative phase sigma", "profile", film(phase_sigma_deg=[-1, 1, 1, 1]), 422, "/set/phase_sigma_deg/0"),
    Row("merit beyond one", "profile", film(merit=[1, 1, 1, 1.5]), 422, "/set/merit/3"),
    Row("rows that differ", "profile", film(l=[1, 2, 2, 4]), 422, "/set"),
    Row("mates that conflict", "profile", film(l=[1, -1, 3, 4]), 422, "/set"),
    Row("zero term twice", "profile", film(l=[0, 2, 3, 4], mean=3.0), 422, "/set/mean"),
    Row("zero term not real", "profile", film(l=[1, 0, 3, 4], phase_deg=[0, 90, 0, 0]), 422, "/set/phase_deg/1"),
    Row("mean not real", "profile", film(mean=1.0, mean_imag=1.0), 422, "/set/mean"),
    Row("half a mean", "profile", film(mean_imag=1.0), 422, "/set/mean"),
    Row("both kinds of strength", "profile", film(real=[1, 2, 3, 4]), 422, "/set/amplitude"),
    Row("no strengths", "profile", without(without(PROFILE, "set/amplitude"), "set/phase_deg"), 422, "/set/amplitude"),
    Row(
        "half of a complex number",
        "profile",
        merged(PROFILE, set={**{k: FILM[k] for k in ("cell", "values", "l")}, "real": [1, 2, 3, 4]}),
        422,
        "/set/imag",
    ),
    Row("no phases at all", "profile", film(phase_deg=[None] * 4), 422, "/set/phase_deg"),
    Row("no column of phases", "profile", without(PROFILE, "set/phase_deg"), 422, "/set/phase_deg"),
    Row(
        "missing phase refused",
        "profile",
        merged(film(phase_deg=[0, None, 0, 0]), missing_phase="refuse"),
        422,
        "/set/phase_deg/1",
    ),
    Row("values that overflow", "profile", film(amplitude=[1e308] * 4), 422, "/set"),
    Row(
        "values that overflow in single", "profile", merged(film(amplitude=[1e50] * 4), precision="single"), 422, "/set"
    ),
]
PLACES = [
    Row("one sample", "profile", merged(PROFILE, samples=1), 422, "/samples"),
    Row("no samples", "profile", merged(PROFILE, samples=0), 422, "/samples"),
    Row("samples below zero", "profile", merged(PROFILE, samples=-5), 422, "/samples"),
    Row("samples without end", "profile", merged(PROFILE, samples=10**15), 422, "/samples"),
    Row("more samples than an integer holds", "profile", merged(PROFILE, samples=10**30), 422, "/samples"),
    Row("samples not whole", "profile", merged(PROFILE, samples=16.5), 422, "/samples"),
    Row("cell without end", "grid", merged(GRID, shape=[10**18] * 3), 422, "/shape"),
    Row("spacing of nothing", "grid", {"set": CRYSTAL, "spacing": 1e-300}, 422, "/spacing"),
    Row("empty positions", "points", merged(POINTS, positions=[]), 422, "/positions"),
    Row("positions of nothing", "points", merged(POINTS, positions=[[]]), 422, "/positions/0"),
    Row("ragged positions", "points", merged(POINTS, positions=[[0, 0, 0], [0, 0]]), 422, "/positions/1"),
    Row("flat positions", "points", merged(POINTS, positions=[0, 0, 0]), 422, "/positions/0"),
    Row("positions of another dimension", "points", merged(POINTS, positions=[[0, 0]]), 422, "/positions"),
    Row("null in a position", "points", merged(POINTS, positions=[[0, 0, 0], [0, None, 0]]), 422, "/positions/1"),
    Row(
        "position out of this world",
        "points",
        merged(POINTS, positions=[[0, 0, 0], [0, 1e300, 0]]),
        422,
        "/positions/1",
    ),
    Row("edge out of this world", "grid", changed(BOX, "edges/1/0", 1e300), 422, "/edges/1/0"),
    Row("parallel edges", "slice", merged(SLICE, edge_2=[2, 0, 0]), 422, "/edge_2"),
    Row("edge of no length", "slice", merged(SLICE, edge_1=[0, 0, 0]), 422, "/edge_1"),
    Row("edges in one plane", "grid", changed(BOX, "edges/2", [0.31, 0.27, 0.05]), 422, "/edges/2"),
    Row("two edges of a box", "grid", merged(BOX, edges=[[1, 0, 0], [0, 1, 0]]), 422, "/edges"),
    Row("edge of another dimension", "slice", merged(SLICE, edge_2=[0, 1]), 422, "/edge_2"),
    Row("shape of another dimension", "slice", merged(SLICE, shape=[4, 5, 6]), 422, "/shape"),
    Row("start of another dimension", "profile", merged(PROFILE, **{"from": [0, 0, 0]}), 422, "/from"),
    Row("line of no length", "profile", merged(PROFILE, to=[0]), 422, "/to"),
    Row("plane [0, 0, 0]", "slice", merged(PLANE, plane=[0, 0, 0]), 422, "/plane"),
    Row("indices of a plane not whole", "slice", merged(PLANE, plane=[1, 0.5, 0]), 422, "/plane/1"),
    Row("from and normal_to", "profile", merged(PROFILE, normal_to=[1]), 422, "/normal_to"),
    Row("shape and spacing", "grid", merged(GRID, spacing=1.0), 422, "/spacing"),
    Row("plane and edges", "slice", merged(SLICE, plane=[0, 0, 1]), 422, "/plane"),
    Row("no place at all", "slice", {"set": CRYSTAL}, 422, "/edge_1"),
    Row("from without to", "profile", without(PROFILE, "to"), 422, "/to"),
    Row("plane without width", "slice", without(PLANE, "width"), 422, "/width"),
    Row("length along a line", "profile", merged(PROFILE, length=3.0), 422, "/length"),
    Row("slice of a stack", "slice", merged(SLICE, set=FILM), 422, "/edge_1"),
    Row("lattice plane of a stack", "slice", merged(PLANE, set=FILM), 422, "/plane"),
]
TREATMENTS = [
    Row("gaussian without b", "profile", merged(PROFILE, window={"kind": "gaussian"}), 422, "/window/b"),
    Row("lanczos with b", "profile", merged(PROFILE, window={"kind": "lanczos", "b": 1.0}), 422, "/window/b"),
    Row("slab without thickness", "profile", merged(PROFILE, average={"kind": "slab"}), 422, "/average/thickness"),
    Row(
        "ball with a normal",
        "profile",
        merged(PROFILE, average={"kind": "ball", "radius": 1, "normal": [1]}),
        422,
        "/average/normal",
    ),
    Row("lateral of no plane", "grid", merged(GRID, average="lateral"), 422, "/average/normal"),
    Row("unknown short form", "grid", merged(GRID, average="slab"), 422, "/average"),
    Row(
        "box of another dimension",
        "grid",
        merged(GRID, average={"kind": "box", "edges": [[1, 0]]}),
        422,
        "/average/edges",
    ),
    Row(
        "d_min beyond d_max", "profile", merged(PROFILE, resolution={"d_min": 9, "d_max": 3}), 422, "/resolution/d_min"
    ),
    Row("d_min below zero", "profile", merged(PROFILE, resolution={"d_min": -1}), 422, "/resolution/d_min"),
    Row("self term of a density", "profile", merged(PROFILE, self_term=3.0), 422, "/self_term"),
    Row("merit that was not given", "profile", merged(PROFILE, apply_merit=True), 422, "/apply_merit"),
    Row("sharpening without end", "profile", merged(PROFILE, sharpen=1e300), 422, "/sharpen"),
    Row("tolerance below rounding", "profile", merged(PROFILE, tolerance=1e-20), 422, "/tolerance"),
]
FORMS = [
    Row("no boundary", "profile", film_form(("text/csv", CSV_GOOD)), 400, None, "multipart/form-data"),
    Row(
        "another boundary",
        "profile",
        film_form(("text/csv", CSV_GOOD)),
        400,
        None,
        "multipart/form-data; boundary=border",
    ),
    Row("no part request", "profile", bodies.form(("columns", "text/csv", CSV_GOOD)), 400, None, FORM),
    Row(
        "unknown part", "profile", bodies.form(("request", JSON, b"{}"), ("picture", "image/png", b"")), 400, None, FORM
    ),
    Row("part twice", "profile", film_form(("text/csv", CSV_GOOD), ("text/csv", CSV_GOOD)), 400, None, FORM),
    Row("cut short", "profile", film_form(("text/csv", CSV_GOOD))[:-16], 400, None, FORM),
    Row("cut in a header", "profile", film_form(("text/csv", CSV_GOOD))[:40], 400, None, FORM),
    Row("empty form", "profile", b"", 400, None, FORM),
    Row("request is not JSON", "profile", bodies.form(("request", JSON, b"{")), 400, None, FORM),
    Row("columns of another type", "profile", film_form(("image/png", CSV_GOOD)), 415, None, FORM),
    Row(
        "no set beside columns", "profile", film_form(("text/csv", CSV_GOOD), request={"samples": 3}), 422, "/set", FORM
    ),
    Row("column in both", "profile", film_form(("text/csv", CSV_GOOD), request=PROFILE), 422, "/set/amplitude", FORM),
    Row(
        "field that is no number",
        "profile",
        film_form(("text/csv", CSV_GOOD.replace(b"41.3", b"4l.3"))),
        422,
        "/set",
        FORM,
    ),
    Row(
        "unknown header", "profile", film_form(("text/csv", CSV_GOOD.replace(b"amplitude", b"fobs"))), 422, "/set", FORM
    ),
    Row("header without end", "profile", film_form(("text/csv", LONG.encode())), 422, "/set", FORM),
    Row("empty table", "profile", film_form(("text/csv", b"")), 422, "/set", FORM),
    Row(
        "infinite field",
        "profile",
        film_form(("text/csv", CSV_GOOD.replace(b"41.3", b"inf"))),
        422,
        "/set/amplitude/1",
        FORM,
    ),
    Row("not an archive", "profile", film_form(("application/x-npz", CSV_GOOD)), 422, "/set", FORM),
    Row("archive cut short", "profile", film_form(("application/x-npz", NPZ_GOOD[:-30])), 422, "/set", FORM),
    Row("pickled objects", "profile", film_form(("application/x-npz", pickled())), 422, "/set", FORM),
    Row("header that lies", "profile", film_form(("application/x-npz", archive(l=NPY_LIES))), 422, "/set", FORM),
    Row(
        "header that is code",
        "profile",
        film_form(("application/x-npz", archive(l=npy("{'descr': (")))),
        422,
        "/set",
        FORM,
    ),
    Row(
        "bomb that declares little",
        "profile",
        film_form(("application/x-npz", declared(1000, 30_000_000))),
        422,
        "/set",
        FORM,
    ),
    Row(
        "NaN in an archive",
        "profile",
        film_form(("application/x-npz", bodies.as_npz({**bodies.table_of(FILM), "amplitude": [1, 2, None, 4]}))),
        422,
        "/set/amplitude/2",
        FORM,
    ),
]
TABLE = [*UNREADABLE, *MEMBERS, *CELLS, *COLUMNS, *PLACES, *TREATMENTS, *FORMS]

OVER_LIMIT = [
    Row("body too long", "profile", merged(PROFILE, remark="x" * SMALL["max_body_bytes"]), 413, None),
    Row(
        "coefficients over the limit",
        "profile",
        film(l=list(range(1, 52)), amplitude=[1] * 51, phase_deg=[0] * 51),
        422,
        "/set/l",
    ),
    Row("samples over the limit", "profile", merged(PROFILE, samples=SMALL["max_samples"] + 1), 422, "/samples"),
    Row("values over the memory", "profile", merged(PROFILE, samples=290_000), 422, "/samples"),
    Row("vectors over the memory", "grid", merged(GRID, shape=[40, 50, 60], field="gradient"), 422, "/shape"),
    Row("work over the memory", "slice", merged(PLANE, width=290, height=290, spacing=0.9), 422, "/spacing"),
    Row("JSON too long", "profile", merged(PROFILE, samples=1001), 422, None),
    Row(
        "bomb that declares much",
        "profile",
        film_form(("application/x-npz", declared(10**7, 10**7))),
        422,
        "/set",
        FORM,
    ),
]


def posted(client, row):
    content = row.body if isinstance(row.body, bytes) else None
    if content is None:
        content = (row.body if isinstance(row.body, str) else text(row.body)).encode()
    headers = {} if row.media_type is None else {"Content-Type": row.media_type}
    return client.post(f"/v1/{row.product}", content=content, headers=headers)


def test_table_is_long_and_its_names_differ():
    names = [row.name for row in (*TABLE, *OVER_LIMIT)]
    assert len(set(names)) == len(names) >= 45


@pytest.mark.parametrize("row", TABLE, ids=lambda row: row.name)
def test_malformed(service, client, workers, row):
    assert_problem(posted(client, row), row.status, row.pointer)


@pytest.mark.parametrize("row", OVER_LIMIT, ids=lambda row: row.name)
def test_over_a_limit(small_service, small_client, row):
    kind = "body-too-large" if row.status == 413 else "too-costly"
    assert_problem(posted(small_client, row), row.status, row.pointer, kind)


def test_long_body_of_unknown_length_is_refused(small_service, small_client):
    piece = b"x" * 1000
    answer = small_client.post("/v1/profile", content=(piece for _ in range(100)), headers=bodies.JSON)
    assert_problem(answer, 413)


def test_body_as_long_as_the_limit_is_taken(small_service, small_client):
    body = text(PROFILE)
    body += " " * (SMALL["max_body_bytes"] - len(body.encode()))
    assert small_client.post("/v1/profile", content=body.encode(), headers=bodies.JSON).status_code == 200


def test_binary_answer_goes_beyond_the_limit_of_json(small_service, small_client):
    body = merged(PROFILE, samples=1001)
    assert small_client.post("/v1/profile?format=npy", json=body).status_code == 200
    assert_problem(small_client.post("/v1/profile?format=csv", json=body), 422, kind="too-costly")


def test_field_at_fault_is_named_by_line_and_column(client):
    spoilt = film_form(("text/csv", CSV_GOOD.replace(b"41.3", b"4l.3")))
    document = assert_problem(client.post("/v1/profile", content=spoilt, headers={"Content-Type": FORM}), 422, "/set")
    assert "line 3, field 2 (amplitude)" in document["detail"]


def test_several_places_are_all_named(client):
    body = merged(film(values="x", mean="y"), samples=0)
    document = assert_problem(client.post("/v1/profile", json=body), 422, "/set/values")
    assert [place["pointer"] for place in document["errors"]] == ["/set/values", "/set/mean", "/samples"]


def test_places_named_are_counted(client):
    body = merged(PROFILE, **{f"member_{number}": 0 for number in range(10_000)})
    assert len(assert_problem(client.post("/v1/profile", json=body), 422, "/member_0")["errors"]) == 20


def test_service_has_come_through_unharmed(service, client, workers):
    """After the whole table: the same workers, and a right answer."""
    assert worker_processes(service) == workers
    answer = client.post("/v1/profile", json=PROFILE)
    np.testing.assert_allclose(answer.json()["values"], bodies.film_profile(np.linspace(0, 1, 17)), rtol=0, atol=1e-12)
