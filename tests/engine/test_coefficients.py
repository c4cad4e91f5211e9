"""Sets of coefficients: selection, resolution limits, what is summed."""

from __future__ import annotations

import math

import numpy as np
import pytest

from engine import Columns, Lattice, assemble
from tests.strategies import CRYSTAL, STACK, listing, refusal_of


def orders(highest, **columns):
    """A stack with the orders 0 … highest."""
    l = np.arange(highest + 1)
    columns.setdefault("amplitude", l + 1.0)
    columns.setdefault("phase_deg", np.zeros(l.size))
    return assemble(STACK, Columns(indices=(l,), **columns), values="density_coefficient")


def held(coefficients):
    return coefficients.indices[:, 0].tolist()


def test_select_takes_every_column():
    full = orders(3, sigma=[0.1, 0.2, 0.3, 0.4], phase_sigma_deg=[1.0, 2.0, 3.0, 4.0], merit=[0.1, 0.2, 0.3, 0.4])
    part = full.select(np.array([False, True, False, True]))
    assert held(part) == [1, 3]
    np.testing.assert_array_equal(part.values, [2, 4])
    np.testing.assert_array_equal(part.sigma, [0.2, 0.4])
    np.testing.assert_allclose(part.phase_sigma, np.deg2rad([2, 4]))
    np.testing.assert_array_equal(part.merit, [0.2, 0.4])
    assert held(full) == [0, 1, 2, 3]
    assert part.unit == full.unit
    assert part.lattice is full.lattice


def test_select_of_a_set_without_extras():
    part = orders(3).select(np.array([True, True, False, False]))
    assert part.sigma is None
    assert part.phase_sigma is None
    assert part.merit is None


@pytest.mark.parametrize(
    ("limits", "expected"),
    [
        ({}, [0, 1, 2, 3, 4, 5]),
        ({"d_min": 58.4 / 3}, [0, 1, 2, 3]),
        ({"d_max": 58.4 / 3}, [0, 3, 4, 5]),
        ({"d_min": 58.4 / 4, "d_max": 58.4 / 2}, [0, 2, 3, 4]),
        ({"d_min": 16.0}, [0, 1, 2, 3]),
        ({"d_min": 100.0}, [0]),
        ({"d_max": 1.0}, [0]),
        ({"d_min": 29.2, "d_max": 29.2}, [0, 2]),
    ],
    ids=str,
)
def test_within_limits(limits, expected):
    assert held(orders(5).within(**limits)) == expected


def test_a_limit_read_off_with_rounding_keeps_its_reflection():
    spacing = 58.4 / 3
    assert held(orders(5).within(d_min=spacing * (1 + 1e-10))) == [0, 1, 2, 3]
    assert held(orders(5).within(d_min=spacing * (1 + 1e-8))) == [0, 1, 2]
    assert held(orders(5).within(d_max=spacing * (1 - 1e-10))) == [0, 3, 4, 5]
    assert held(orders(5).within(d_max=spacing * (1 - 1e-8))) == [0, 4, 5]


def test_what_lies_beyond_is_counted():
    once = orders(5).within(d_min=58.4 / 4)
    assert once.tally.beyond_resolution == 1
    assert once.within(d_max=58.4 / 2).tally.beyond_resolution == 2
    assert once.tally.rows == 6
    assert orders(5).within(d_min=1.0).tally.beyond_resolution == 0


def test_within_limits_in_three_dimensions():
    full = listing(CRYSTAL, seed=1).coefficients()
    cut = full.within(d_min=2.5)
    g = full.indices @ (2 * np.pi * np.linalg.inv(CRYSTAL.vectors).T)
    inside = np.linalg.norm(g, axis=1) <= 2 * np.pi / 2.5
    assert 0 < inside.sum() < full.count
    np.testing.assert_array_equal(cut.indices, full.indices[inside])
    np.testing.assert_array_equal(cut.values, full.values[inside])


@pytest.mark.parametrize(
    ("limits", "path"),
    [
        ({"d_min": 0.0}, ("d_min",)),
        ({"d_min": -1.0}, ("d_min",)),
        ({"d_max": math.nan}, ("d_max",)),
        ({"d_max": math.inf}, ("d_max",)),
        ({"d_min": 3.0, "d_max": 2.0}, ("d_min",)),
    ],
    ids=str,
)
def test_limits_that_are_refused(limits, path):
    assert refusal_of(lambda: orders(2).within(**limits)).path == path


def test_resolution_leaves_the_zero_term_aside():
    assert orders(5).resolution() == pytest.approx((58.4 / 5, 58.4), rel=1e-14)
    assert orders(0).resolution() is None
    g = 2 * np.pi * np.linalg.inv(CRYSTAL.vectors).T
    full = listing(CRYSTAL, seed=1).coefficients()
    lengths = np.linalg.norm(full.indices @ g, axis=1)
    lengths = lengths[lengths > 0]
    expected = (2 * np.pi / lengths.max(), 2 * np.pi / lengths.min())
    assert full.resolution() == pytest.approx(expected, rel=1e-13)


def test_the_series_holds_what_has_a_phase():
    full = orders(3, phase_deg=[0.0, np.nan, 90.0, np.nan])
    assert full.unphased == 2
    assert held(full.phased()) == [0, 2]
    series = full.series()
    np.testing.assert_array_equal(series.indices[:, 0], [0, 2])
    np.testing.assert_array_equal(series.values, [1, 3j])
    assert series.real
    assert series.lattice is STACK


def test_the_series_of_a_complex_set_is_complex():
    made = assemble(
        Lattice.from_period(10.0),
        Columns(indices=((1, -1),), real=[1.0, 2.0], imag=[3.0, 4.0]),
        values="density_coefficient",
        density="complex",
    )
    assert not made.series().real
    assert made.series().count == made.count == 2
