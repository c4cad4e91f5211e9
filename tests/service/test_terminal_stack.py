from __future__ import annotations

import pytest

from service import stacks
from service.settings import Settings
from service.terminal_stack import LISTED, render_stack
from tests.service import bodies
from tests.service.analyses.asked import request
from tests.service.series_bodies import SERIES, SLICES


def shown(body):
    made = stacks.stack(request("series", body), Settings(), threads=1)
    return made, render_stack(made).splitlines()


def test_profiles_are_shades_on_one_scale():
    made, lines = shown(SERIES)
    assert [line.split()[:2] for line in lines[:3]] == [["290", "K"], ["310", "K"], ["330", "K"]]
    assert lines[0].endswith(f"{made.values[0].min():.4g} … {made.values[0].max():.4g}")
    assert "temperature; 3 × 17 values in e/Å³" in lines[4]
    assert "█" in lines[int(made.values.max(axis=1).argmax())]
    assert max(map(len, lines)) < 200


def test_a_weak_row_is_pale():
    weak = {"amplitude": [0.1 * one for one in SERIES["set"]["amplitude"]]}
    _, lines = shown({**SERIES, "members": [{"value": 1.0, "set": {}}, {"value": 2.0, "set": weak}]})
    assert "█" in lines[0]
    assert not set("▓█") & set(lines[1])


def test_flat_rows_are_blank():
    lines = shown({**SERIES, "difference": True})[1]
    assert lines[0].endswith("  0 … 0")


def test_slices_are_told_by_their_extremes():
    made, lines = shown(SLICES)
    assert lines[1].endswith(f"{made.values[1].min():.4g} … {made.values[1].max():.4g}")
    assert not set("░▒▓█") & set(lines[0])
    assert f"2 × {made.values.shape[1]} × {made.values.shape[2]} values" in "\n".join(lines)


@pytest.mark.parametrize(
    "options", [{"field": "gradient"}, {"set": {**bodies.ABSORBING}, "scale": {"kind": "as_given"}}]
)
def test_vectors_and_complex_values(options):
    body = {**SLICES, "members": [{"value": 1.0, "set": {}}, {"value": 2.0, "set": {}}], **options}
    assert "…" in shown(body)[1][0]


def test_long_series_are_cut_and_remarks_told_once():
    members = [{"value": float(number), "set": {}} for number in range(LISTED + 2)]
    _, lines = shown({**SERIES, "members": members})
    assert f"  … and {2} more" in lines
    remarks = [line for line in lines if line.startswith("  · ")]
    assert len(remarks) == len(set(remarks))
    assert "  · no termination window" in remarks
