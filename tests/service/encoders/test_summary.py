from __future__ import annotations

import json
import math

import numpy as np
import pytest

from engine.preparation import summarize_set
from service.encoders.summary import summary_document
from service.intake import check
from service.interpret_file import prepared
from service.interpret_set import lattice_of
from service.parts import Part
from tests.service import bodies


def document(given, file, name):
    request = check("inspect", {"set": given}, {"reflections": Part("", file, name)}, max_body_bytes=2**22)[1]
    lattice = None if request.set.cell is None else lattice_of(request.set.cell)
    (table, left), made = prepared(request.set, lattice, max_rows=100_000)
    return made, summary_document(table, left, summarize_set(made))


def numbers(value):
    if isinstance(value, dict):
        for inner in value.values():
            yield from numbers(inner)
    elif isinstance(value, list | tuple):
        for inner in value:
            yield from numbers(inner)
    elif isinstance(value, float):
        yield value


def test_crystal():
    made, told = document({"preparation": bodies.SCALED}, bodies.CRYSTAL_FILE, "crystal.cif")
    assert told["file"]["kind"] == "cif"
    assert told["file"]["cell"] == pytest.approx([7.12, 8.95, 10.43, 90, 90, 90])
    assert told["file"]["cell_sigma"][:3] == pytest.approx([0.002, 0.002, 0.003])
    assert told["file"]["wavelengths"] == [0.7107]
    assert told["file"]["columns"]["intensity"] == "_refln_intensity_meas"
    lines = [line for line in bodies.CRYSTAL_FILE.splitlines() if line[:1] in b"-0123456789"]
    assert told["file"]["rows_read"] == told["rows"] == len(lines)
    assert told["unique"] == made.unique.count
    assert told["cell_volume"] == pytest.approx(7.12 * 8.95 * 10.43)
    assert told["d_min"] >= 0.9
    assert told["wilson_b"] == pytest.approx(2.4, abs=0.5)
    for shell in told["completeness_shells"]:
        assert shell["completeness"] == shell["observed"] / shell["possible"]
        assert shell["d_max"] > shell["d_min"]
    assert sum(shell["observed"] for shell in told["completeness_shells"]) == told["unique"]
    assert list(told["applied"]) == list(made.applied)


@pytest.mark.parametrize(
    ("given", "file", "name"),
    [
        ({}, bodies.CRYSTAL_FILE, "crystal.cif"),
        ({"cell": bodies.ORTHORHOMBIC}, bodies.AMPLITUDES_FILE, "rows.csv"),
        ({"cell": {"period": 52.0}}, bodies.SCAN_FILE, "scan.csv"),
        ({"cell": {"period": 52.0}}, bodies.SCAN_FILE + b"0,9,1,0\n", "scan.csv"),
    ],
)
def test_numbers_are_numbers_of_json(given, file, name):
    _, told = document(given, file, name)
    assert all(map(math.isfinite, numbers(told)))
    text = json.dumps(told, allow_nan=False)
    assert np.isfinite(json.loads(text)["completeness"])


def test_rows_left_out_are_told():
    file = bodies.AMPLITUDES_FILE.replace(b"20,0.2", b"20,")
    _, told = document({"cell": bodies.ORTHORHOMBIC, "preparation": {"missing_sigma": "omit_rows"}}, file, "r.csv")
    assert told["rows"] == 3
    assert [
        (one["rows"], "sigma" in one["reason"].lower() or "uncertaint" in one["reason"])
        for one in told["file"]["left_out"]
    ] == [(1, True)]
