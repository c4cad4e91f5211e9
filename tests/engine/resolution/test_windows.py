"""Windows on one set: peaks are sums, widths those of the continuous window, steps those of Gibbs and Lanczos."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import special

from engine import CoefficientSet, Lattice, Treatment, Window, averages
from engine.fields import summands
from engine.resolution import compare_windows, point_response, usual_windows
from engine.resolution.windows import step_normal, step_overshoot
from engine.windows import point_width
from tests.engine.resolution.sets import ball_indices, coefficient_set, equal_series
from tests.strategies import refusal_of

STACK = Lattice.from_period(400.2)
ORDERS = np.arange(401)[:, None]
CELL = Lattice.from_parameters(14.1, 17.3, 36.2, 90, 98, 90)


def complex_kind(given: CoefficientSet) -> CoefficientSet:
    others = given.indices.any(axis=1)
    both = np.concatenate([given.indices, -given.indices[others]])
    return coefficient_set(given.lattice, both, real=False)


def test_a_stack_with_the_usual_windows():
    given = coefficient_set(STACK, ORDERS)
    found = compare_windows(given)
    assert [one.window.kind for one in found] == ["none", "lanczos", "raised_cosine", "gaussian"]
    g_max = 2 * np.pi * 400 / 400.2
    u = ORDERS[:, 0] / 400
    factors = {
        "none": np.ones(401),
        "lanczos": np.sinc(u),
        "raised_cosine": 0.5 * (1 + np.cos(np.pi * u)),
        "gaussian": np.exp(-2 * u**2),
    }
    for one in found:
        w = factors[one.window.kind]
        assert one.peak == pytest.approx((2 * w.sum() - 1) / 801, rel=1e-12)
        assert one.widths[0] == pytest.approx(point_width(one.window, 1, g_max), rel=2e-3)
        assert one.step_normal == (1,)
        assert one.step_orders == 400
    assert found[0].overshoot == pytest.approx(special.sici(np.pi)[0] / np.pi - 0.5, abs=1e-6)
    assert found[1].overshoot == pytest.approx(0.01187, abs=1e-5)
    # What is lost in height and width is gained in ripple.
    assert found[0].ripple < found[1].ripple < found[2].ripple < 0
    assert found[3].window.b == pytest.approx(2 / (g_max / (4 * np.pi)) ** 2)


def test_a_step_written_out():
    """A few orders with factors of their own, one missing: the staircase on a fine grid."""
    orders = np.array([1, 2, 3, 5, 6])
    factors = np.array([1.0, 0.9, 0.8, 0.5, 0.3])
    given = coefficient_set(STACK, orders[:, None])
    found, number = step_overshoot(given, factors, np.array([1]))
    t = np.linspace(0, 0.5, 200_001)
    staircase = t + (factors / (np.pi * orders)) @ np.sin(2 * np.pi * orders[:, None] * t)
    assert number == 5
    assert found == pytest.approx(staircase.max() - 0.5, abs=1e-9)
    # Only every third order: the step returns after a third of the period, and is the same.
    thrice = coefficient_set(STACK, 3 * orders[:, None])
    assert step_overshoot(thrice, factors, np.array([1])) == (pytest.approx(found, abs=1e-12), 5)
    both = complex_kind(given)
    assert step_overshoot(both, np.tile(factors, 2)[np.argsort(np.r_[orders, -orders])], np.array([1]))[0] == (
        pytest.approx(found, abs=1e-12)
    )


def test_the_step_takes_the_row_along_the_sharpest_direction():
    """A film: 00l reaches farthest; the planes are (001), whatever other rows there are."""
    indices = ball_indices(CELL, 3.0)
    far = np.array([[0, 0, l] for l in range(12, 41)])
    given = coefficient_set(CELL, np.unique(np.concatenate([indices, far]), axis=0))
    found = compare_windows(given, windows=[Window()])[0]
    assert found.step_normal == (0, 0, 1)
    assert found.step_orders == 40
    assert found.overshoot == pytest.approx(0.0895, abs=1e-3)
    # A row across it with more orders, but coarser ones, is not taken.
    flat = Lattice.from_parameters(90, 10, 10, 90, 90, 90)
    h, l = np.arange(1, 31), np.arange(1, 11)
    rows = np.concatenate([np.column_stack([h, 0 * h, 0 * h]), np.column_stack([0 * l, 0 * l, l])])
    assert step_normal(coefficient_set(flat, rows), np.array([0, 0.1, 1.0])).tolist() == [0, 0, 1]
    # No row within 10°: the longest of all.
    few = coefficient_set(Lattice.from_parameters(5, 5, 5, 90, 90, 90), np.array([[4, 3, 0], [3, 4, 0], [3, -4, 0]]))
    assert np.gcd.reduce(step_normal(few, np.array([0, 0, 1.0]))) == 1


def test_effects_are_those_of_the_field_response():
    given = coefficient_set(CELL, ball_indices(CELL, 2.0))
    window = Window("lanczos")
    treatment = Treatment(sharpen=1.5, average=averages.slab(CELL, [0, 0, 1], 1.1), apply_merit=False)
    one = compare_windows(given, treatment, [window])[0]
    series = summands(given, replace(treatment, field="response", window=window)).series[0]
    wanted = point_response(series)
    assert one.widths == pytest.approx(wanted.widths, rel=1e-9)
    assert one.ripple == pytest.approx(wanted.ripple, abs=1e-6)
    # Relative to the same, sharpened and averaged, without a window.
    plain = given.lattice.magnitudes(given.indices)
    base = np.exp(1.5 * (plain / 4 / np.pi) ** 2) * treatment.average.factors(CELL, given.indices)
    double = np.where(given.indices.any(axis=1), 2, 1)
    assert one.peak == pytest.approx((double * base * np.sinc(plain / plain.max())).sum() / (double * base).sum())


def test_a_real_set_and_all_its_mates_agree():
    given = coefficient_set(CELL, ball_indices(CELL, 3.5))
    for a, b in zip(compare_windows(given), compare_windows(complex_kind(given)), strict=True):
        assert a.peak == pytest.approx(b.peak, rel=1e-12)
        assert a.widths == pytest.approx(b.widths, rel=1e-9)
        assert (a.overshoot, a.step_orders) == (pytest.approx(b.overshoot, abs=1e-9), b.step_orders)


def test_terms_without_phase_are_not_summed():
    known = np.ones(401, dtype=bool)
    known[300:] = False
    some = compare_windows(coefficient_set(STACK, ORDERS, known=known), windows=[Window()])[0]
    fewer = compare_windows(coefficient_set(STACK, ORDERS[:300]), windows=[Window()])[0]
    assert some.widths == pytest.approx(fewer.widths, rel=1e-12)
    assert some.step_orders == 299


def test_the_response_of_no_window_is_the_series():
    given = coefficient_set(CELL, ball_indices(CELL, 3.0))
    assert compare_windows(given)[0].widths == pytest.approx(
        point_response(equal_series(CELL, given.indices)).widths, rel=1e-9
    )


def test_what_cannot_be_compared_is_refused():
    zero = coefficient_set(STACK, np.zeros((1, 1), dtype=np.int64))
    assert refusal_of(lambda: compare_windows(zero)).path == ("phase_deg",)
    assert refusal_of(lambda: usual_windows(zero)).path == ("phase_deg",)
    given = coefficient_set(STACK, ORDERS)
    assert refusal_of(lambda: compare_windows(given, windows=[])).path == ("windows",)
    # The only term lies where the raised cosine is zero.
    alone = coefficient_set(STACK, np.array([[3]]))
    assert refusal_of(lambda: compare_windows(alone, windows=[Window(), Window("raised_cosine")])).path == (
        "windows",
        1,
    )
