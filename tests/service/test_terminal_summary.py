from __future__ import annotations

import copy

import pytest

from service import pipeline
from service.intake import check
from service.parts import Part
from service.settings import Settings
from service.terminal_summary import render_summary
from tests.service import bodies


def summary(given, file, name):
    request = check("inspect", {"set": given}, {"reflections": Part("", file, name)}, max_body_bytes=2**22)[1]
    return pipeline.inspect(request, Settings())


CRYSTAL = summary({"preparation": bodies.SCALED}, bodies.CRYSTAL_FILE, "crystal.cif")


def test_crystal():
    text = render_summary(CRYSTAL)
    assert f"cif, block or4: {CRYSTAL['file']['rows_read']} rows" in text
    assert "intensity (_refln_intensity_meas)" in text
    assert "cell 7.12 8.95 10.43 90 90 90" in text
    assert "wavelength 0.7107 Å" in text
    assert f"{CRYSTAL['rows']} reflections, {CRYSTAL['unique']} unique in {CRYSTAL['group']}" in text
    assert f"completeness {100 * CRYSTAL['completeness']:.1f} %" in text
    assert f"R_merge {CRYSTAL['agreement']['r_merge']:.3g}" in text
    assert f"B {CRYSTAL['wilson_b']:.3g} ±" in text
    assert f"{CRYSTAL['absences']} systematically absent" in text
    for shell in (*CRYSTAL["completeness_shells"], *CRYSTAL["agreement_shells"]):
        assert f"{shell['d_min']:9.3f}" in text
    for words in (*CRYSTAL["applied"], *CRYSTAL["warnings"]):
        assert words in text


@pytest.mark.parametrize(
    ("given", "file"),
    [({"cell": bodies.ORTHORHOMBIC}, bodies.AMPLITUDES_FILE), ({"cell": {"period": 52.0}}, bodies.SCAN_FILE)],
)
def test_what_is_not_known_is_a_dash(given, file):
    text = render_summary(summary(given, file, "rows.csv"))
    assert "R_merge –" in text
    assert "nan" not in text
    assert "None" not in text
    assert "Wilson's plot" not in text


def test_shell_without_an_upper_limit():
    made = copy.deepcopy(CRYSTAL)
    made["agreement_shells"][0]["d_max"] = None
    assert "∞" in render_summary(made)


def test_model_and_rows_left_out():
    made = {**CRYSTAL, "model_r": 0.25, "model_weighted_r": 0.3}
    made["file"] = {**CRYSTAL["file"], "left_out": [{"reason": "no number", "rows": 7}]}
    text = render_summary(made)
    assert "trial model: R 0.250, weighted 0.300" in text
    assert "left out: 7 rows, no number" in text
