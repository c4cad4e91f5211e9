"""A laboratory's file over HTTP: inspected, and made into a density."""

from __future__ import annotations

import json

import numpy as np
import pytest

from engine import evaluate, sampling
from service.intake import FILE_TYPES
from tests.service import bodies
from tests.service.problem_shape import assert_problem

HEADERS = {"Content-Type": bodies.FORM}
FILE_SET = {name: bodies.AMPLITUDES_SET[name] for name in ("cell", "values")}
POSITIONS = [[0.1, 0.2, 0.3], [0, 0, 0], [0.7, 0.1, 0.9]]


def inspected(client, request, file, **options):
    return client.post("/v1/sets/inspect", content=bodies.reflections_form(request, file), headers=HEADERS, **options)


def test_file_gives_the_density_of_its_columns(client):
    body = {"positions": POSITIONS}
    sent = bodies.reflections_form({**body, "set": FILE_SET}, bodies.AMPLITUDES_FILE)
    answer = client.post("/v1/points", content=sent, headers=HEADERS)
    assert answer.status_code == 200, answer.text
    made = bodies.coefficients(bodies.AMPLITUDES_SET)
    expected = evaluate(made, sampling.points(made.lattice, POSITIONS)).values
    np.testing.assert_allclose(answer.json()["values"], expected, rtol=1e-12)
    direct = client.post("/v1/points", json={**body, "set": bodies.AMPLITUDES_SET}).json()
    np.testing.assert_allclose(direct["values"], expected, rtol=1e-12)
    assert answer.json()["summary"]["coefficients"]["without_phase"] == 1


# Where the atoms of the sample are; heavier ones are higher, and the inverted structure is another.
ATOMS = {
    "Cl": [0.402, 0.518, 0.247],
    "S": [0.112, 0.205, 0.331],
    "O": [0.655, 0.281, 0.103],
    "N": [0.253, 0.877, 0.152],
    "C": [0.871, 0.634, 0.418],
}


def test_density_of_raw_intensities_has_its_atoms(client):
    given = {"values": "structure_factor", "preparation": bodies.SCALED, "unit": "e/Å³"}
    places = [*ATOMS.values(), *(-np.array(position) for position in ATOMS.values())]
    request = {"set": given, "positions": [list(map(float, place)) for place in places]}
    sent = bodies.reflections_form(request, bodies.CRYSTAL_FILE, "chemical/x-cif")
    answer = client.post("/v1/points", content=sent, headers=HEADERS)
    assert answer.status_code == 200, answer.text
    values = np.array(answer.json()["values"])
    atoms, inverted = values[: len(ATOMS)], values[len(ATOMS) :]
    assert (np.diff(atoms) < 0).all()
    assert atoms.min() > 5 > inverted.max()
    assert answer.json()["unit"] == "e/Å³"


def test_inspection(client):
    answer = inspected(client, {"set": {"preparation": bodies.SCALED}}, bodies.CRYSTAL_FILE)
    assert answer.status_code == 200, answer.text
    assert answer.headers["content-type"] == "application/json"
    told = answer.json()
    assert told["file"]["kind"] == "cif"
    assert told["wilson_b"] == pytest.approx(2.4, abs=0.5)


@pytest.mark.parametrize("media_type", FILE_TYPES)
def test_file_may_be_the_whole_body_of_an_inspection(client, media_type):
    whole = client.post("/v1/sets/inspect", content=bodies.CRYSTAL_FILE, headers={"Content-Type": media_type})
    assert whole.status_code == 200, whole.text
    assert whole.json() == inspected(client, {"set": {}}, bodies.CRYSTAL_FILE).json()


def test_form_of_an_inspection_may_lack_a_request(client):
    sent = bodies.form(("reflections", "chemical/x-cif", bodies.CRYSTAL_FILE))
    answer = client.post("/v1/sets/inspect", content=sent, headers=HEADERS)
    assert answer.json() == inspected(client, {"set": {}}, bodies.CRYSTAL_FILE).json()


def test_inspection_is_answered_as_json_alone(client):
    for form in ("npy", "npz", "csv"):
        assert_problem(inspected(client, {"set": {}}, bodies.CRYSTAL_FILE, params={"format": form}), 406)


ORTHORHOMBIC = {"set": {"cell": bodies.ORTHORHOMBIC}}
BAD = [
    ("no file", "inspect", {"set": {}}, None, "/set/reflections"),
    ("no cell", "inspect", {"set": {}}, bodies.AMPLITUDES_FILE, "/set/cell"),
    ("no set for a file", "inspect", {}, bodies.AMPLITUDES_FILE, "/set"),
    ("columns in an inspection", "inspect", {"set": {"l": [1]}}, bodies.AMPLITUDES_FILE, "/set/l"),
    ("file in JSON", "inspect", {"set": {"reflections": "h,k,l"}}, None, "/set/reflections"),
    ("file twice", "inspect", {"set": {"reflections": "h"}}, bodies.AMPLITUDES_FILE, "/set/reflections"),
    ("group of both types", "inspect", {"set": {"symmetry": {"space_group": 1.5}}}, bodies.CRYSTAL_FILE,
     "/set/symmetry/space_group"),
    ("unknown group", "inspect", {"set": {"symmetry": {"space_group": 231}}}, bodies.CRYSTAL_FILE,
     "/set/symmetry/space_group"),
    ("unknown correction", "inspect", {"set": {"preparation": {"corrections": [{"kind": "x"}]}}}, bodies.CRYSTAL_FILE,
     "/set/preparation/corrections/0/kind"),
    ("column beside a file", "points", {"set": {**FILE_SET, "h": [1]}, "positions": POSITIONS},
     bodies.AMPLITUDES_FILE, "/set/h"),
    ("no values", "points", {"set": {"cell": bodies.ORTHORHOMBIC}, "positions": POSITIONS}, bodies.AMPLITUDES_FILE,
     "/set/values"),
    ("preparation of no file", "profile", {**bodies.PROFILE, "set": {**bodies.FILM, "preparation": {}}}, None,
     "/set/preparation"),
]  # fmt: skip


@pytest.mark.parametrize(
    ("product", "request_body", "file", "pointer"), [row[1:] for row in BAD], ids=[r[0] for r in BAD]
)
def test_faults_are_named(client, product, request_body, file, pointer):
    address = "/v1/sets/inspect" if product == "inspect" else f"/v1/{product}"
    parts = [("request", "application/json", json.dumps(request_body).encode())]
    if file is not None:
        parts.append(("reflections", "text/csv", file))
    assert_problem(client.post(address, content=bodies.form(*parts), headers=HEADERS), 422, pointer)


SPOILT = [
    b"",
    b"\x00",
    b"h,k,l\n",
    b"h,k,l,amplitude\n1,2,3,x\n",
    b"data_",
    b"data_x\nloop_\n_refln_index_h\n",
    b"data_x\n_cell_length_a '",
    bodies.CRYSTAL_FILE[:500] + b"\nloop_ ; ' \" data_",
    bodies.CRYSTAL_FILE.replace(b"7.120(2)", b"?"),
    bodies.CRYSTAL_FILE.replace(b"P 21 21 21", b"P 99"),
    b"PK\x03\x04" + bytes(100),
    b"x" * 1_000_000,
    b"\xff\xfe" + "h,k,l\n".encode("utf-16-le"),
]


@pytest.mark.parametrize("file", SPOILT, ids=range(len(SPOILT)))
def test_files_that_cannot_be_read(client, file):
    answer = inspected(client, {"set": {}}, file)
    assert answer.status_code == 422, answer.text[:500]
    pointer = answer.json()["errors"][0]["pointer"]
    assert_problem(answer, 422, pointer)
    assert pointer.startswith(("/set/reflections", "/set/cell"))


def test_rows_of_a_file_are_limited(small_client):
    rows = b"h,k,l,amplitude\n" + b"".join(b"%d,1,1,1\n" % number for number in range(51))
    document = inspected(small_client, ORTHORHOMBIC, rows).json()
    assert document["status"] == 422
    assert "51 rows" in document["detail"]


def test_what_a_library_prints_is_no_output_of_ours(service, client):
    """Text that a file's scanner cannot place is echoed by it."""
    spoilt = bodies.CRYSTAL_FILE[:700] + b"'-7 unmistakable 0.254\n\x0b 3 ;\n" + bodies.CRYSTAL_FILE[700:900]
    inspected(client, {"set": {}}, spoilt)
    assert "unmistakable" not in service.log.read_text()
