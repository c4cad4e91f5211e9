"""Scans: what is refused at the border, and positions in the units of both kinds."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine.errors import InputError
from engine.films.scans import Scan

CU = 1.5405929


def angles(*values, **more):
    return Scan.of(two_theta_deg=list(values), wavelength=CU, **more)


@pytest.mark.parametrize(
    ("arguments", "path", "reason"),
    [
        ({}, "position", "once"),
        ({"q": [0.1, 0.2], "two_theta_deg": [1.0, 2.0], "wavelength": CU}, "position", "once"),
        ({"q": []}, "q", "no line"),
        ({"two_theta_deg": [], "wavelength": CU}, "two_theta_deg", "no line"),
        ({"two_theta_deg": [2.0, 180.0], "wavelength": CU}, "two_theta_deg", "below 180"),
        ({"two_theta_deg": [0.0, 18.0], "wavelength": CU}, "two_theta_deg", "above zero"),
        ({"two_theta_deg": [2.0, -3.0], "wavelength": CU}, "two_theta_deg", "above zero"),
        ({"two_theta_deg": [2.0, 3.0]}, "wavelength", "absent"),
        ({"q": [0.1, 0.2], "wavelength": -1.0}, "wavelength", "above zero"),
        ({"q": [0.1, 8.16], "wavelength": CU}, "q", "sin θ"),
        ({"q": [0.1, float("nan")]}, "q", "finite"),
        ({"q": [0.1, "a"]}, "q", "numeric"),
        ({"q": [0.1, [0.2, 0.3]]}, "q", "unequal"),
        ({"q": [0.1, 0.2, 0.1]}, "q", "same in two rows"),
        ({"q": [0.1, 0.2], "position_sigma": [0.01, 0.0]}, "position_sigma", "above zero"),
        ({"q": [0.1, 0.2], "position_sigma": [0.01]}, "position_sigma", "shape"),
        ({"q": [0.1, 0.2], "width": [0.01, -0.01]}, "width", "above zero"),
        ({"q": [0.1, 0.2], "width": [0.01, 0.01], "width_sigma": [0.1, -0.1]}, "width_sigma", "negative"),
        ({"q": [0.1, 0.2], "width_sigma": [0.1, 0.1]}, "width_sigma", "no width"),
        ({"q": [0.1, 0.2], "intensity": [1.0, float("inf")]}, "intensity", "finite"),
        ({"q": [0.1, 0.2], "intensity": [1.0, 2.0], "intensity_sigma": [1.0, -1.0]}, "intensity_sigma", "negative"),
        ({"q": [0.1, 0.2], "intensity_sigma": [1.0, 1.0]}, "intensity_sigma", "no intensity"),
        ({"q": [0.1, 0.2], "order": [1, 1.5]}, "order", "whole"),
        ({"q": [0.1, 0.2], "order": [-1, 2]}, "order", "whole"),
        ({"q": [0.1, 0.2], "order": [1]}, "order", "2 orders"),
        ({"q": [0.1, 0.2], "order": ["a", "b"]}, "order", "numeric"),
        ({"q": [0.1, 0.2], "saturated": [0, 1]}, "saturated", "truth"),
        ({"q": [0.1, 0.2], "radiation": "light"}, "radiation", "known"),
        ({"q": [0.1]}, "q", "one line"),
        ({"q": [0.1, 0.2], "period": 0.0}, "period", "above zero"),
    ],
)
def test_bad_tables_are_refused_with_their_place(arguments, path, reason):
    with pytest.raises(InputError) as caught:
        Scan.of(**arguments)
    assert caught.value.path[0] == path
    assert reason in caught.value.reason
    assert caught.value.cure


def test_rows_on_one_position_are_both_named():
    with pytest.raises(InputError) as caught:
        Scan.of(q=[0.3, 0.1, 0.2, 0.1])
    assert caught.value.rows == (1, 3)


@pytest.mark.parametrize("more", [{"order": [3]}, {"period": 60.0}])
def test_one_line_will_do_where_its_order_or_the_period_is_known(more):
    assert Scan.of(q=[0.3], **more).count == 1


def test_negative_intensities_are_kept_and_told():
    scan = Scan.of(q=[0.1, 0.2], intensity=[5.0, -1.0])
    assert scan.intensity.tolist() == [5.0, -1.0]
    assert "1 of 2 intensities are negative" in scan.notes[0]
    assert Scan.of(q=[0.1, 0.2], intensity=[5.0, 1.0]).notes == ()


def test_unknown_orders_are_zero_and_rows_keep_their_sequence():
    scan = Scan.of(q=[0.3, 0.1, 0.2], order=[np.nan, 1, 0])
    assert scan.order.tolist() == [0, 1, 0]
    assert scan.q.tolist() == [0.3, 0.1, 0.2]
    assert not scan.saturated.any()


def test_the_table_owes_nothing_to_the_callers_arrays():
    q = np.array([0.1, 0.2])
    flags = np.array([True, False])
    scan = Scan.of(q=q, intensity=q, position_sigma=q, saturated=flags)
    q[:] = 9.0
    flags[:] = False
    for column in (scan.position, scan.intensity, scan.position_sigma):
        assert column.tolist() == [0.1, 0.2]
    assert scan.saturated.tolist() == [True, False]


@given(
    two_theta=st.floats(0.2, 175.0),
    sigma=st.floats(1e-4, 1e-2),
    wavelength=st.floats(0.3, 6.0),
)
def test_q_and_its_uncertainty_follow_from_braggs_law(two_theta, sigma, wavelength):
    scan = Scan.of(
        two_theta_deg=[two_theta], position_sigma=[sigma], width=[2 * sigma], wavelength=wavelength, order=[1]
    )

    def q(angle):
        return 4 * np.pi * np.sin(np.radians(angle / 2)) / wavelength

    assert scan.q[0] == pytest.approx(q(two_theta), rel=1e-12)
    difference = q(two_theta + sigma / 2) - q(two_theta - sigma / 2)
    assert scan.q_sigma[0] == pytest.approx(difference, rel=1e-6)
    assert scan.q_width[0] == pytest.approx(2 * difference, rel=1e-6)
    back = Scan.of(q=scan.q, wavelength=wavelength, order=[1])
    assert np.degrees(2 * back.theta()[0]) == pytest.approx(two_theta, rel=1e-9)


def test_q_tables_keep_their_units_and_tell_no_angle_without_a_wavelength():
    scan = Scan.of(q=[0.1, 0.2], position_sigma=[1e-3, 2e-3], width=[0.01, 0.02])
    assert scan.q_sigma.tolist() == [1e-3, 2e-3]
    assert scan.q_width.tolist() == [0.01, 0.02]
    assert scan.unit == "Å⁻¹"
    assert angles(2.0, 4.0).unit == "° 2θ"
    with pytest.raises(InputError, match="no angle"):
        scan.theta()


def test_backscattering_survives_rounding():
    for wavelength in np.linspace(0.5, 3, 101):
        limit = 4 * np.pi / wavelength
        if limit * wavelength <= 4 * np.pi:
            assert Scan.of(q=[limit], wavelength=float(wavelength), order=[1]).theta()[0] == pytest.approx(np.pi / 2)


def test_select_takes_every_column():
    scan = angles(
        2.0,
        4.0,
        6.0,
        position_sigma=[0.1, 0.2, 0.3],
        intensity=[1.0, 2.0, 3.0],
        intensity_sigma=[0.4, 0.5, 0.6],
        width=[0.1, 0.2, 0.3],
        width_sigma=[0.01, 0.02, 0.03],
        order=[1, 2, 3],
        saturated=np.array([True, False, True]),
    )
    part = scan.select(np.array([2, 0]))
    assert part.position.tolist() == [6.0, 2.0]
    assert part.position_sigma.tolist() == [0.3, 0.1]
    assert part.intensity.tolist() == [3.0, 1.0]
    assert part.intensity_sigma.tolist() == [0.6, 0.4]
    assert part.width.tolist() == [0.3, 0.1]
    assert part.width_sigma.tolist() == [0.03, 0.01]
    assert part.order.tolist() == [3, 1]
    assert part.saturated.tolist() == [True, True]
