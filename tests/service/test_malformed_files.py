"""Malformed requests with files, preparations and symmetry; the rest of them is in test_malformed.py."""

from __future__ import annotations

import math
import random

import pytest

from tests.service import bodies
from tests.service.bodies import FORM, changed
from tests.service.conftest import SMALL, worker_processes
from tests.service.problem_shape import assert_problem
from tests.service.raw_files import AMPLITUDES, CELL, CIF, GRID, TABLE, WITHOUT_CELL, archive, sent, with_set
from tests.service.test_malformed import JSON, LONG, Row, declared, posted, text

ORTHORHOMBIC = {
    "set": {
        "cell": CELL,
        "values": "structure_factor",
        "h": [1, 1],
        "k": [1, 1],
        "l": [1, 2],
        "amplitude": [3.0, 4.0],
        "phase_deg": [30.0, 40.0],
    },
    "shape": [4, 4, 4],
}
ATOM = {"element": "O", "position": [0.1, 0.2, 0.3], "b_iso": 1.0}


def crystal(**members):
    """A grid of two reflections with members of its set replaced or added."""
    return with_set(ORTHORHOMBIC, **members)


def of(base, **symmetry):
    return changed(base, "set/symmetry", symmetry)


def related(*, l_of_second=1, **symmetry):
    return crystal(h=[1, -1], k=[1, -1], l=[1, l_of_second], phase_deg=[30.0, 30.0], symmetry=symmetry)


def inspection(name, pointer, file=CIF, status=422, **members):
    return Row(name, "sets/inspect", sent({"set": members}, file), status, pointer, FORM)


def prepared(name, pointer, file=CIF, **preparation):
    """An inspection that asks for a preparation; a table gets the cell that it lacks."""
    cell = {} if "_cell" in str(file) else {"cell": CELL}
    return inspection(name, pointer, file, preparation=preparation, **cell)


def density(name, pointer, file=CIF, *, columns=b"", **members):
    """A grid from a file; members of the set and of the request."""
    outside = {name: members.pop(name) for name in ("missing_phase",) if name in members}
    body = sent({**with_set(GRID, **members), **outside}, file)
    if columns:
        extra = bodies.form(("columns", "text/csv", columns), closed=False)
        body = extra + body
    return Row(name, "grid", body, 422, pointer, FORM)


SYMMETRY = [
    Row("unknown space group", "grid", of(ORTHORHOMBIC, space_group="P 9"), 422, "/set/symmetry/space_group"),
    Row("space group beyond 230", "grid", of(ORTHORHOMBIC, space_group=231), 422, "/set/symmetry/space_group"),
    Row("space group of any length", "grid", of(ORTHORHOMBIC, space_group=LONG), 422, "/set/symmetry/space_group"),
    Row("space group is no name", "grid", of(ORTHORHOMBIC, space_group=True), 422, "/set/symmetry/space_group"),
    Row("symbol that reads both ways", "grid", of(ORTHORHOMBIC, space_group="P 2"), 422, "/set/symmetry/space_group"),
    Row("unknown Hall symbol", "grid", of(ORTHORHOMBIC, hall="Q 2"), 422, "/set/symmetry/hall"),
    Row("plane group on a crystal", "grid", of(ORTHORHOMBIC, plane_group="p2"), 422, "/set/symmetry/plane_group"),
    Row("space group on a stack", "profile", of(bodies.PROFILE, space_group=2), 422, "/set/symmetry/space_group"),
    Row("unknown group of a stack", "profile", of(bodies.PROFILE, stack_group="2"), 422, "/set/symmetry/stack_group"),
    Row(
        "unknown plane group",
        "grid",
        {"set": {**bodies.SHEET, "symmetry": {"plane_group": LONG}}, "shape": [4, 4]},
        422,
        "/set/symmetry/plane_group",
    ),
    Row("two symmetries", "grid", of(ORTHORHOMBIC, space_group="P -1", hall="-P 1"), 422, "/set/symmetry"),
    Row("symmetry that names nothing", "grid", of(ORTHORHOMBIC), 422, "/set/symmetry"),
    Row(
        "operations that do not close",
        "grid",
        of(ORTHORHOMBIC, operations=["-x,-y,z", "x+y,y,z"]),
        422,
        "/set/symmetry/operations/1",
    ),
    Row("no operations", "grid", of(ORTHORHOMBIC, operations=[]), 422, "/set/symmetry/operations"),
    Row("operation of a plane", "grid", of(ORTHORHOMBIC, operations=["-x,-y"]), 422, "/set/symmetry/operations/0"),
    Row("operation that is none", "grid", of(ORTHORHOMBIC, operations=["x,y,2u"]), 422, "/set/symmetry/operations/0"),
    Row("division by zero", "grid", of(ORTHORHOMBIC, operations=["x+1/0,y,z"]), 422, "/set/symmetry/operations/0"),
    Row("cell that lacks the symmetry", "grid", of(ORTHORHOMBIC, space_group="P 4"), 422, "/set/cell"),
    Row("rows related by symmetry", "grid", related(space_group=19), 422, "/set/h/0"),
    Row("misplaced centric phase", "grid", of(ORTHORHOMBIC, space_group="P -1"), 422, "/set/phase_deg/1"),
    Row(
        "misplaced centric coefficient",
        "grid",
        of(crystal(values="density_coefficient"), space_group="P -1"),
        422,
        "/set/phase_deg/1",
    ),
    Row(
        "all systematically absent",
        "grid",
        of(crystal(h=[0, 0], k=[0, 0], l=[1, 3]), space_group=19),
        422,
        "/set/h",
    ),
]
BESIDE = [
    Row("preparation without a file", "grid", crystal(preparation={}), 422, "/set/preparation"),
    Row("reflections as JSON", "grid", crystal(reflections="data_x"), 422, "/set/reflections"),
    Row("reflections as an object", "sets/inspect", {"set": {"reflections": {"h": [1]}}}, 422, "/set/reflections"),
    Row("inspection of nothing", "sets/inspect", {}, 422, "/set/reflections"),
    Row("inspection of a form without a file", "sets/inspect", sent({"set": {}}, None), 422, "/set/reflections", FORM),
    Row("inspection of a picture", "sets/inspect", b"\x89PNG", 415, None, "image/png"),
    Row("inspection of no stated type", "sets/inspect", CIF.encode(), 415, None, None),
    Row("inspection of columns", "sets/inspect", crystal(), 422, "/set/values"),
    Row("request of a file is not JSON", "grid", sent(None, CIF), 400, None, FORM),
    density("file with columns in the request", "/set/amplitude", amplitude=[1.0]),
    density("file with a part of columns", "/set/h", columns=b"h,k,l,amplitude\n1,1,1,3\n"),
    density("mean beside a file", "/set/mean", mean=3.0, preparation={"amplitudes": "root_exclude"}),
    density("density coefficients of a file", "/set/values", values="density_coefficient"),
    density(
        "missing phases of a file refused",
        "/missing_phase",
        preparation={"phase": "none", "amplitudes": "root_exclude"},
        missing_phase="refuse",
    ),
    density(
        "density of a file without phases",
        "/set/phase_deg",
        preparation={"phase": "none", "amplitudes": "root_exclude"},
    ),
]
FILES = [
    inspection("loop that is cut", "/set/reflections/reflections/line 9", CIF.replace("1 1 2 50.0", "1 1 2 50.0 7")),
    inspection("quotation left open", "/set/reflections/reflections/line 8", CIF.replace("21'", "21")),
    inspection(
        "word for a number",
        "/set/reflections/reflections/_refln_f_squared_meas/1",
        CIF.replace("50.0", LONG),
    ),
    inspection("file without a cell", "/set/cell", WITHOUT_CELL),
    inspection("cell of another dimension", "/set/reflections/reflections", cell={"period": 5.0}),
    inspection("two data blocks", "/set/reflections/reflections", CIF + CIF.replace("data_x", "data_y")),
    inspection("several measured quantities", "/set/reflections/reflections", CIF.replace("phase_calc", "F_meas")),
    inspection("unknown group of a file", "/set/reflections/symbol", CIF.replace("P 21 21 21", LONG)),
    inspection("group against the cell", "/set/reflections/lattice", CIF.replace("P 21 21 21", "P 4")),
    inspection("plane group beside a crystal's file", "/set/symmetry/plane_group", symmetry={"plane_group": "p2"}),
    inspection("empty file", "/set/reflections/reflections", ""),
    inspection("file of zeros", "/set/reflections/reflections/line 1", "\0" * 100),
    inspection("not an archive", "/set/reflections/reflections", "PK nothing"),
    inspection("unknown column", "/set/reflections/reflections/line 1", "h,k,l,fobs\n1,1,1,3\n", cell=CELL),
    inspection(
        "negative amplitude", "/set/reflections/reflections/amplitude/1", AMPLITUDES.replace(",7,", ",-7,"), cell=CELL
    ),
    inspection(
        "index out of this world", "/set/reflections/reflections/l/1", AMPLITUDES.replace("1,2,7", "1,9999999,7"),
        cell=CELL,
    ),
    inspection("zero term alone", "/set/reflections/indices", "h,k,l,amplitude\n0,0,0,3\n", cell=CELL),
    inspection("too many possible ones to count", "/set/reflections/d_min", AMPLITUDES.replace("1,2,7", "1,200000,7"),
               cell=CELL),
    inspection(
        "some without uncertainty",
        "/set/reflections/reflections/intensity_sigma/1",
        TABLE.replace("50,2", "50,"),
        cell=CELL,
    ),
    inspection("all absent by symmetry", "/set/reflections/indices", "h,k,l,amplitude\n0,0,1,3\n", cell=CELL,
               symmetry={"space_group": 19}),
]  # fmt: skip
PREPARATIONS = [
    prepared("data block that is not there", "/set/reflections/reflections", block="z"),
    prepared("data block of a table", "/set/preparation/block", TABLE, block="z"),
    prepared("quantity that is not there", "/set/reflections/reflections", observed="amplitude"),
    prepared("phases that are not there", "/set/preparation/phase", phase="phase_deg"),
    prepared("distributions that are not there", "/set/preparation/phase", phase="hendrickson_lattman"),
    prepared("phases of two kinds", "/set/preparation/phase", TABLE.replace("intensity_sigma", "phase_calc_deg")),
    prepared("unknown mapping", "/set/reflections/reflections/line 1", TABLE, mapping={"h": "index"}),
    prepared("mapping of no column", "/set/reflections/reflections/line 1", TABLE, mapping={LONG: "h"}),
    prepared("mapping of a CIF", "/set/preparation/mapping", mapping={"h": "h"}),
    prepared("mapping to a number", "/set/preparation/mapping/h", TABLE, mapping={"h": 1}),
    prepared("status without statuses", "/set/preparation/omit", TABLE, omit=["set_aside"]),
    prepared("unknown status", "/set/preparation/omit/0", TABLE, omit=["free"]),
    prepared("correction without wavelength", "/set/preparation/wavelength", corrections=[{"kind": "polarisation"}]),
    prepared(
        "correction with another's member",
        "/set/preparation/corrections/1/degree",
        wavelength=1.5,
        corrections=[{"kind": "polarisation"}, {"kind": "lorentz", "geometry": "rotation", "degree": 0.5}],
    ),
    prepared(
        "correction without its member",
        "/set/preparation/corrections/0/geometry",
        wavelength=1.5,
        corrections=[{"kind": "lorentz"}],
    ),
    prepared("unknown correction", "/set/preparation/corrections/0/kind", corrections=[{"kind": "absorption"}]),
    prepared(
        "correction twice", "/set/preparation/corrections/1", wavelength=1.5, corrections=[{"kind": "polarisation"}] * 2
    ),
    prepared(
        "correction of amplitudes",
        "/set/preparation/corrections",
        AMPLITUDES,
        wavelength=1.5,
        corrections=[{"kind": "polarisation"}],
    ),
    prepared("wavelength too long", "/set/preparation/wavelength", wavelength=15.0,
             corrections=[{"kind": "polarisation"}]),
    prepared("negative wavelength", "/set/preparation/wavelength", wavelength=-1.5),
    prepared("Wilson's plot of nothing", "/set/preparation/scale/formula", scale={"kind": "wilson"}),
    prepared("bad formula", "/set/preparation/scale/formula", scale={"kind": "wilson", "formula": "SiO2Qq"}),
    prepared(
        "formula without scattering lengths",
        "/set/preparation/scale/formula",
        scale={"kind": "wilson", "formula": "SiO2Po", "probe": "neutron"},
    ),
    prepared("formula of any length", "/set/preparation/scale/formula", scale={"kind": "wilson", "formula": LONG}),
    prepared("factor of nothing", "/set/preparation/scale/factor", scale={"kind": "factor"}),
    prepared("factor of another scale", "/set/preparation/scale/factor", scale={"kind": "none", "factor": 2.0}),
    prepared("negative intensity has no root", "/set/reflections/observed/3", amplitudes="root"),
    prepared("Bayesian estimate without uncertainties", "/set/reflections/sigma", "h,k,l,intensity\n1,1,1,3\n"),
    prepared("model beside phases", "/set/preparation/phase", phase="phase_calc_deg", model={"atoms": [ATOM]}),
    prepared("model without atoms", "/set/preparation/model/atoms", model={"atoms": []}),
    prepared(
        "atom of another dimension",
        "/set/preparation/model/atoms/1/position",
        model={"atoms": [ATOM, {**ATOM, "position": [0.1, 0.2]}]},
    ),
    prepared("unknown atom", "/set/preparation/model/atoms", model={"atoms": [ATOM, {**ATOM, "element": "Qq"}]}),
    prepared("widow in the preparation", "/set/preparation/widow", widow=1),
]  # fmt: skip


def compared(name, pointer, file, reference, **scale):
    """An inspection of a table that is scaled to a second file."""
    members = {"cell": CELL, "preparation": {"scale": {"kind": "reference", **scale}}}
    parts = [("request", JSON, text({"set": members}).encode()), ("reflections", "text/csv", file.encode())]
    if reference is not None:
        parts.append(("reference", "text/csv", reference.encode()))
    return Row(name, "sets/inspect", bodies.form(*parts), 422, pointer, FORM)


REFERENCES = [
    compared("reference that is not there", "/set/reference", AMPLITUDES, None),
    compared("reference that cannot be read", "/set/reference/reference/line 1", AMPLITUDES, "h,k,l,fobs\n1,1,1,3\n"),
    compared("reference with a word", "/set/reference/reference/line 3/column 4 (amplitude)", AMPLITUDES,
             AMPLITUDES.replace(",7,", ",seven,")),
    compared("reference that nothing asks for", "/set/reference", AMPLITUDES, AMPLITUDES, kind="none"),
]  # fmt: skip
TABLES = [*SYMMETRY, *BESIDE, *FILES, *PREPARATIONS, *REFERENCES]

OVER_LIMIT = [
    Row(
        "rows of a file over the limit",
        "sets/inspect",
        sent({"set": {"cell": CELL}}, "h,k,l,amplitude\n" + "".join(f"1,2,{l},3\n" for l in range(51))),
        422,
        "/set/reflections",
        FORM,
    ),
    Row(
        "archive of reflections that declares much",
        "sets/inspect",
        sent({"set": {"cell": CELL}}, declared(10**7, 10**7), "application/x-npz"),
        422,
        "/set/reflections/reflections",
        FORM,
    ),
]


def test_names_differ():
    names = [row.name for row in (*TABLES, *OVER_LIMIT)]
    assert len(set(names)) == len(names) >= 80


@pytest.mark.parametrize("row", TABLES, ids=lambda row: row.name)
def test_malformed(service, client, workers, row):
    assert_problem(posted(client, row), row.status, row.pointer)


@pytest.mark.parametrize("row", OVER_LIMIT, ids=lambda row: row.name)
def test_over_a_limit(small_service, small_client, row):
    assert_problem(posted(small_client, row), row.status, row.pointer, "too-costly")


@pytest.mark.parametrize(
    ("row", "words"),
    [
        (inspection("loop", "/set/reflections/reflections/line 9", CIF.replace("1 1 2 50.0", "1 1 2 50.0 7")),
         ["the loop of _refln_index_h", "25 values", "6 items"]),
        (inspection("blocks", "/set/reflections/reflections", CIF + CIF.replace("data_x", "data_y")),
         ["2 data blocks", "one of x, y"]),
        (inspection("several", "/set/reflections/reflections", CIF.replace("phase_calc", "F_meas")),
         ["amplitude, f_squared"]),
        (Row("near", "grid", of(ORTHORHOMBIC, space_group="P 21 21 22"), 422, "/set/symmetry/space_group"),
         ["'P 21 21 22'", "the nearest are P"]),
        (Row("both", "grid", of(ORTHORHOMBIC, space_group="P 2"), 422, "/set/symmetry/space_group"), ["P 1 2 1"]),
        (Row("metric", "grid", of(ORTHORHOMBIC, space_group="P 4"), 422, "/set/cell"), ["P 4", "'-y,x,z'"]),
        (Row("centric", "grid", of(ORTHORHOMBIC, space_group="P -1"), 422, "/set/phase_deg/1"),
         ["up to 40°", "rows 1, 0"]),
        (inspection("below", "/set/reflections/reflections/amplitude/1", AMPLITUDES.replace(",7,", ",-7,"), cell=CELL),
         ["line 3", "add 180"]),
        (Row("picture", "sets/inspect", b"\x89PNG", 415, None, "image/png"),
         ["image/png", "chemical/x-cif", "text/csv"]),
    ],
    ids=lambda value: value.name if isinstance(value, Row) else "",
)  # fmt: skip
def test_words_say_what_is_wrong_and_how_to_mend_it(client, row, words):
    detail = assert_problem(posted(client, row), row.status, row.pointer)["detail"]
    assert [one for one in words if one not in detail] == []


@pytest.mark.parametrize(
    "row",
    [
        Row("cif", "sets/inspect", CIF.encode(), 200, None, "chemical/x-cif"),
        Row("table", "sets/inspect", sent({"set": {"cell": CELL}}, TABLE), 200, None, FORM),
        Row("archive", "sets/inspect", sent({"set": {"cell": CELL}}, archive(TABLE)), 200, None, FORM),
        Row("symmetry", "grid", of(ORTHORHOMBIC, space_group=19), 200, None),
        Row("null", "grid", crystal(reflections=None, symmetry=None, preparation=None), 200, None),
    ],
    ids=lambda row: row.name,
)
def test_what_the_tables_spoil_is_answered(client, row):
    """Each of the malformed requests differs from one of these in what it is named for."""
    answer = posted(client, row)
    assert answer.status_code == row.status, answer.text


ODDITIES = [
    b"", b"\n", b"'", b'"', b";\n", b"#", b",", b"loop_\n", b"data_\n", b"?", b".", b"-", b"1e999", b"nan", b"9" * 30,
    b"\xff\xfe", b"(3)", b"_refln_index_h",
]  # fmt: skip


def spoilt(file: bytes, chance: random.Random) -> bytes:
    """A file with a few of its bytes replaced, removed, repeated or swapped for words that mean something."""
    made = bytearray(file)
    for _ in range(chance.randint(1, 4)):
        place = chance.randrange(len(made))
        length = chance.choice([0, 1, 1, 3, 20])
        copied = bytes(made[place : place + 40])
        new = chance.choice([*ODDITIES, copied, bytes([chance.randrange(256)])])
        made[place : place + length] = new
    return bytes(made) or b"x"


@pytest.mark.parametrize("seed", range(4))
def test_spoilt_files(small_service, small_client, seed):
    """Any answer will do but a 500, or a summary with a number that is none."""
    chance = random.Random(seed)
    worker = worker_processes(small_service)
    statuses = set()
    for _ in range(60):
        file = chance.choice([CIF.encode(), TABLE.encode(), AMPLITUDES.encode(), archive(TABLE)])
        body = sent({"set": {"cell": CELL}}, spoilt(file, chance))
        answer = small_client.post("/v1/sets/inspect", content=body, headers={"Content-Type": FORM})
        statuses.add(answer.status_code)
        if answer.status_code == 200:
            summary = answer.json()
            assert math.isfinite(summary["completeness"])
            assert 0 < summary["d_min"] <= summary["d_max"]
        else:
            assert answer.status_code in (400, 422), (body, answer.text)
            assert len(answer.content) < SMALL["max_body_bytes"] // 2
    assert statuses >= {200, 422}
    assert worker_processes(small_service) == worker


def test_service_has_come_through_unharmed(service, client, workers):
    assert worker_processes(service) == workers
    answer = client.post("/v1/sets/inspect", content=CIF.encode(), headers={"Content-Type": "chemical/x-cif"})
    assert answer.json()["group"] == "P 21 21 21"
    assert client.post("/v1/profile", json=bodies.PROFILE, headers={"Accept": JSON}).status_code == 200
