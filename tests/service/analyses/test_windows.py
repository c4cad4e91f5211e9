from __future__ import annotations

import numpy as np
import pytest

from engine.resolution.windows import compare_windows
from engine.windows import Window
from tests.service import bodies
from tests.service.analyses.asked import CRYSTAL, FILM, GOOD, numbers, pointer, report, table

SET = bodies.coefficients(CRYSTAL)


def test_json_and_csv_hold_the_numbers_of_the_engine(client):
    made = compare_windows(SET)
    answer = client.post("/v1/windows", json=GOOD["windows"]).json()["windows"]
    assert [one["kind"] for one in answer] == ["none", "lanczos", "raised_cosine", "gaussian"]
    for told, one in zip(answer, made, strict=True):
        assert told["b"] == one.window.b
        for name in ("peak", "ripple", "ripple_at", "overshoot", "step_orders"):
            assert told[name] == getattr(one, name)
        np.testing.assert_array_equal(told["widths"], one.widths)
        np.testing.assert_array_equal(told["directions"], one.directions)
        np.testing.assert_array_equal(told["step_normal"], one.step_normal)
    _, columns = table(client.post("/v1/windows?format=csv", json=GOOD["windows"]).content)
    assert columns["b"][:3] == ["", "", ""]
    assert numbers(columns["width_3_angstrom"]) == [one.widths[2] for one in made]
    assert numbers(columns["overshoot"]) == [one.overshoot for one in made]


def test_chosen_windows_stay_in_their_order():
    body = {"set": FILM, "windows": [{"kind": "gaussian", "b": 40.0}, {"kind": "none"}, {"kind": "gaussian", "b": 9.0}]}
    told = report("windows", body).document["windows"]
    direct = compare_windows(
        bodies.coefficients(FILM), windows=[Window("gaussian", 40.0), Window("none"), Window("gaussian", 9.0)]
    )
    assert [one["b"] for one in told] == [40.0, None, 9.0]
    assert [one["peak"] for one in told] == [one.peak for one in direct]
    assert told[1]["peak"] == pytest.approx(1)


def test_resolution_limits_come_first():
    whole = report("windows", {"set": FILM}).document["windows"][0]["widths"][0]
    cut = report("windows", {"set": FILM, "resolution": {"d_min": 6.0}}).document["windows"][0]["widths"][0]
    assert cut > 1.5 * whole


def test_directions_without_an_end_have_no_width():
    """All coefficients in one row of reciprocal space: a point is drawn out along the planes."""
    row = {**CRYSTAL, "h": [0, 0, 0], "k": [0, 0, 0], "l": [1, 2, 3]}
    row |= {name: CRYSTAL[name][:3] for name in ("amplitude", "phase_deg", "sigma")}
    made = report("windows", {"set": row})
    assert np.isfinite(made.document["windows"][0]["widths"]).sum() == 1


@pytest.mark.parametrize(
    ("members", "place"),
    [
        ({"windows": []}, "/windows"),
        ({"windows": [{"kind": "lanczos"}] * 21}, "/windows"),
        ({"windows": [{"kind": "lanczos"}, {"kind": "triangular"}]}, "/windows/1/kind"),
        ({"windows": [{"kind": "lanczos"}, {"kind": "gaussian"}]}, "/windows/1/b"),
        ({"windows": [{"kind": "lanczos", "b": 2.0}]}, "/windows/0/b"),
        ({"windows": "lanczos"}, "/windows"),
        ({"window": {"kind": "lanczos"}}, "/window"),
        ({"set": {**FILM, "phase_deg": [None] * 4}}, "/set/phase_deg"),
    ],
)
def test_refusals(members, place):
    assert pointer("windows", {"set": FILM, **members}) == place
