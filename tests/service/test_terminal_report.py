from __future__ import annotations

import numpy as np
import pytest

from service import terminal_report
from service.analyses.report import Report
from service.terminal_report import LINE, LISTED, WIDEST, render_report
from tests.service.analyses import asked


def shown(table=(), told=(), **members):
    return render_report(Report(document={}, table=tuple(table), told=tuple(told), **members)).splitlines()


@pytest.mark.parametrize("product", asked.GOOD)
def test_lines_are_short_enough_to_be_read(product):
    text = render_report(asked.report(product, asked.GOOD[product]))
    assert max(map(len, text.splitlines())) <= LINE + 2
    assert "None" not in text
    assert "nan" not in text.lower()


def test_numbers_stand_beside_their_uncertainty():
    text = render_report(asked.report("integrals", asked.GOOD["integrals"]))
    made = asked.report("integrals", asked.GOOD["integrals"]).document["integrals"][0]
    assert f"{made['integral']:.5g} ± {made['sigma']:.2g}" in text
    assert f"{made['mean']:.5g} ± {made['mean_sigma']:.2g}" in text
    assert "sigma" not in text.splitlines()[0]
    text = render_report(asked.report("extrema", asked.GOOD["extrema"]))
    (first, *_) = asked.report("extrema", asked.GOOD["extrema"]).document["extrema"]
    assert f"{first['cartesian'][1]:.5g} ± {first['position_sigma'][1]:.2g}" in text
    text = render_report(asked.report("layers", asked.GOOD["layers"]))
    layer = asked.report("layers", asked.GOOD["layers"]).document["layers"][1]
    assert f"{layer['width']:.5g} ± {layer['width_sigma']:.2g}" in text


def test_distances_and_angles_are_shown():
    made = asked.report("extrema", asked.GOOD["extrema"])
    text = render_report(made)
    distance, angle = made.document["distances"][0], made.document["angles"][0]
    assert f"{distance['distance']:.5g} ± {distance['sigma']:.2g}" in text
    assert f"{angle['angle_deg']:.5g} ± {angle['sigma_deg']:.2g}" in text
    assert "angles, °" in text


def test_wide_tables_are_broken_and_keep_their_first_column():
    table = [("layer", [1, 2]), *((f"column_{number:03}", [0.5, 1.5]) for number in range(30))]
    lines = shown(table)
    heads = [line for line in lines if line.startswith("  layer")]
    assert len(heads) == 3
    assert max(map(len, lines)) <= LINE + 2
    assert [name for line in heads for name in line.split() if name != "layer"] == [name for name, _ in table[1:]]
    assert sum(line.split()[:1] == ["2"] for line in lines) == 3


def test_a_column_wider_than_a_line_stands_alone(monkeypatch):
    monkeypatch.setattr(terminal_report, "LINE", 10)
    lines = shown([("n", [1]), ("a_rather_long_name", [1.0]), ("b", [2.0])])
    assert [line.split() for line in lines[:4]] == [["n", "a_rather_long_name"], ["1", "1"], [], ["n", "b"]]


def test_columns_are_aligned():
    lines = shown([("n", [1, 10]), ("kind", ["maximum", "saddle"]), ("value", np.array([1.0, -0.25]))])
    assert lines[:3] == ["   n  kind     value", "   1  maximum      1", "  10  saddle   -0.25"]


def test_what_does_not_exist_is_a_dash():
    lines = shown([("width", [None, np.nan, 2.0]), ("width_sigma", [None, None, 0.125]), ("open", [True, False, True])])
    assert [line.split() for line in lines[1:4]] == [["–", "yes"], ["–", "no"], ["2", "±", "0.12", "yes"]]


def test_figures():
    lines = shown(figures={"scale": 1.0416666, "scale_sigma": 0.0123, "rms_residual": None, "shape": (4, 5)})
    assert [line.split() for line in lines if line.strip()][1:] == [
        ["scale", "1.0417", "±", "0.012"],
        ["rms", "residual", "–"],
        ["shape", "4", "×", "5"],
    ]
    assert shown(figures={"scale": 2.0, "scale_sigma": None})[2].split() == ["scale", "2"]


def test_nothing_found():
    assert shown()[0] == "  nothing was found"
    empty = asked.report("extrema", {"set": asked.FEW, "least_value": 1e9})
    assert render_report(empty).startswith("  nothing was found")


def test_long_tables_are_cut():
    lines = shown([("n", list(range(LISTED + 3)))])
    assert sum(line.strip().isdigit() for line in lines) == LISTED
    assert "  … and 3 more rows" in lines


def test_remarks_are_wrapped_and_labels_cut():
    lines = shown([("label", ["x" * 500]), ("n", [1])], ["word " * 100, "a\nb"])
    assert max(map(len, lines)) <= LINE
    assert "x" * (WIDEST - 1) + "…" in lines[1]
    assert lines[-1] == "  · a b"
    assert sum(line.startswith("  · ") for line in lines) == 2


def test_labels_draw_no_lines_of_their_own():
    assert len(shown([("label", ["a\nb"]), ("n", [1])])) == 2
