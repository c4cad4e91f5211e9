"""Numbering of lines: seeded simulations, and what is refused. Decidability is judged by brute force."""

from __future__ import annotations

import numpy as np
import pytest

from engine.errors import InputError
from engine.films.assignment import assign, check_orders
from engine.films.scans import Scan

CU = 1.5405929


def random_film(rng):
    """A film of 3 to 14 orders, some without a line, with 0 to 2 stray lines; rows shuffled."""
    while True:
        period = rng.uniform(14, 80)
        highest = rng.integers(3, 15)
        seen = rng.random(highest) >= rng.uniform(0, 0.35)
        seen[-1] = True
        if seen.sum() >= 3:
            break
    orders = np.flatnonzero(seen) + 1
    sigma = rng.uniform(2e-4, 1e-3, orders.size)
    q = 2 * np.pi * orders / period
    strays = rng.uniform(0.03, 1.1 * q.max(), rng.integers(0, 3))
    positions = np.concatenate([q + sigma * rng.normal(size=q.size), strays])
    shuffled = rng.permutation(positions.size)
    return (
        period,
        positions[shuffled],
        np.concatenate([sigma, np.full(strays.size, 5e-4)])[shuffled],
        np.concatenate([orders, np.zeros(strays.size, dtype=int)])[shuffled],
    )


def decidable(period, q, sigma, orders):
    """Whether no other period numbers as many lines within 3σ with as few orders missing."""
    if np.gcd.reduce(orders) > 1:
        return False
    count = np.count_nonzero(orders)
    absent = orders.max() - count
    line, order = (each.ravel() for each in np.meshgrid(np.arange(q.size), np.arange(1, 31)))
    other = 2 * np.pi * order / q[line]
    nearest = np.rint(q * other[:, None] / (2 * np.pi))
    reach = 3 * np.hypot(sigma, nearest / order[:, None] * sigma[line][:, None])
    met = (nearest > 0) & (np.abs(q - nearest * 2 * np.pi / other[:, None]) < reach)
    for rival in np.flatnonzero((np.abs(other / period - 1) >= 0.01) & (met.sum(axis=1) >= count)):
        found = np.unique(nearest[rival][met[rival]])
        if found.size >= count and found.max() - found.size <= absent:
            return False
    return True


def test_the_right_period_comes_first_in_random_films():
    right, whole, tried = 0, 0, 0
    for seed in range(300):
        period, q, sigma, orders = random_film(np.random.default_rng(seed))
        if not decidable(period, q, sigma, orders):
            continue
        first = assign(Scan.of(q=q, position_sigma=sigma), tolerance=0, most=1)[0]
        tried += 1
        right += abs(first.period / period - 1) < 0.01
        whole += np.array_equal(first.order, orders)
    assert tried > 250
    assert right >= 0.97 * tried
    assert whole >= 0.94 * tried


def test_shift_and_refraction_do_not_mislead_the_defaults():
    """Angles with a zero shift of 0.04° and q_c of 0.03 Å⁻¹, many times their σ's; 60 films."""
    right, tried = 0, 0
    for seed in range(60):
        rng = np.random.default_rng(1000 + seed)
        period = rng.uniform(14, 80)
        orders = np.flatnonzero(rng.random(rng.integers(4, 13)) > 0.15) + 1
        if orders.size < 4 or np.gcd.reduce(orders) > 1:
            continue
        outside = np.sqrt((2 * np.pi * orders / period) ** 2 + 0.03**2)
        sine = outside * CU / (4 * np.pi)
        angle = np.degrees(2 * np.arcsin(sine)) + 0.04 * rng.choice([-1, 1]) + 0.003 * rng.normal(size=orders.size)
        scan = Scan.of(two_theta_deg=angle, position_sigma=np.full(orders.size, 0.003), wavelength=CU)
        tried += 1
        right += np.array_equal(assign(scan)[0].order, orders)
    assert tried > 40
    assert right >= 0.97 * tried


def test_figures_of_the_first_are_those_of_a_weighted_line_through_the_origin():
    rng = np.random.default_rng(5)
    orders = np.array([1, 2, 4, 5, 7])
    sigma = rng.uniform(2e-4, 8e-4, 5)
    q = 2 * np.pi * orders / 52.0 + sigma * rng.normal(size=5)
    found = assign(Scan.of(q=[*q, 0.3011], position_sigma=[*sigma, 5e-4]), tolerance=0)
    first = found[0]
    slope = np.sum(orders * q / sigma**2) / np.sum(orders**2 / sigma**2)
    slope_sigma = 1 / np.sqrt(np.sum(orders**2 / sigma**2))
    assert first.order.tolist() == [1, 2, 4, 5, 7, 0]
    assert first.period == pytest.approx(2 * np.pi / slope, rel=1e-12)
    assert first.period_sigma == pytest.approx(2 * np.pi / slope * slope_sigma / slope, rel=1e-12)
    assert first.chi_squared == pytest.approx(np.sum(((q - slope * orders) / sigma) ** 2), rel=1e-9)
    assert (first.indexed, first.stray, first.missing, first.degrees) == (5, 1, (3, 6), 4)
    assert first.relation == "the first"


def test_half_and_double_stand_among_the_alternatives():
    orders = np.arange(1, 7)
    found = assign(Scan.of(q=2 * np.pi * orders / 52, position_sigma=np.full(6, 4e-4)), tolerance=0)
    relations = [each.relation for each in found]
    assert relations[0] == "the first"
    assert "half the first period" in relations
    assert "twice the first period" in relations
    double = found[relations.index("twice the first period")]
    half = found[relations.index("half the first period")]
    assert double.order.tolist() == (2 * orders).tolist()
    assert double.missing == (1, 3, 5, 7, 9, 11)
    assert double.chi_squared == pytest.approx(found[0].chi_squared, abs=1e-9)
    assert half.order.tolist() == [0, 1, 0, 2, 0, 3]
    assert half.stray == 3
    assert all(found[0].score > other.score + 3 for other in found[1:])
    assert found[0].weight > 0.95
    assert sum(each.weight for each in found) <= 1 + 1e-12
    assert len(assign(Scan.of(q=2 * np.pi * orders / 52), most=3)) == 3
    assert len(assign(Scan.of(q=2 * np.pi * orders / 52), most=1)) == 1


def test_only_odd_orders_are_not_taken_for_strays_of_a_shorter_period():
    q = 2 * np.pi * np.array([1, 3, 5, 7]) / 40
    assert assign(Scan.of(q=q, position_sigma=np.full(4, 3e-4)))[0].order.tolist() == [1, 3, 5, 7]


def test_a_better_period_outside_the_range_does_not_come_first():
    """With the right period outside the range the first lies inside it all the same."""
    orders = np.arange(1, 7)
    scan = Scan.of(q=2 * np.pi * orders / 52, position_sigma=np.full(6, 4e-4))
    found = assign(scan, tolerance=0, period_range=(95, 110))
    assert found[0].period == pytest.approx(104, rel=1e-3)
    assert found[0].order.tolist() == (2 * orders).tolist()
    half = next(each for each in found if each.relation == "half the first period")
    assert half.score > found[0].score
    assert half.weight == 0


def test_orders_of_the_scan_are_kept():
    q = 2 * np.pi * np.array([2, 4, 6]) / 52
    free = assign(Scan.of(q=q, position_sigma=np.full(3, 4e-4)))
    assert free[0].order.tolist() == [1, 2, 3]
    told = assign(Scan.of(q=q, position_sigma=np.full(3, 4e-4), order=[0, 4, 0]))
    assert told[0].order.tolist() == [2, 4, 6]
    assert told[0].period == pytest.approx(52, rel=1e-3)


def test_a_known_period_numbers_one_line():
    found = assign(Scan.of(q=[2 * np.pi * 3 / 52.3], period=52.0))
    assert found[0].order.tolist() == [3]
    assert found[0].period == pytest.approx(52.3, rel=1e-9)


def test_absent_errors_are_assumed_and_told():
    found = assign(Scan.of(q=2 * np.pi * np.arange(1, 6) / 52))
    assert found[0].order.tolist() == [1, 2, 3, 4, 5]
    assert "no σ" in found[0].notes[0]


@pytest.mark.parametrize(
    ("orders", "reason"),
    [
        ([1, 2, 2], "two lines"),
        ([1, 3, 2], "does not rise"),
        ([1, 2], "shape"),
        ([1, 2, 2.5], "no order"),
        ([1, 2, -3], "no order"),
    ],
)
def test_orders_that_cannot_be_are_refused(orders, reason):
    with pytest.raises(InputError, match=reason):
        check_orders(Scan.of(q=[0.1, 0.2, 0.3]), orders)


def test_a_repeated_order_names_its_rows_and_strays_may_repeat():
    with pytest.raises(InputError) as caught:
        check_orders(Scan.of(q=[0.3, 0.1, 0.2, 0.5, 0.6]), [2, 1, 2, 0, 0])
    assert caught.value.rows == (0, 2)
    assert check_orders(Scan.of(q=[0.3, 0.1, 0.2, 0.5, 0.6]), [3, 1, 2, 0, 0]).tolist() == [3, 1, 2, 0, 0]
    with pytest.raises(InputError, match="two lines"):
        assign(Scan.of(q=[0.1, 0.2, 0.3], order=[1, 1, 0]))


def test_bad_arguments_are_refused():
    scan = Scan.of(q=[0.1, 0.2, 0.3])
    for more in ({"period_range": (50, 40)}, {"period_range": (0, 40)}, {"most": 0}, {"tolerance": -1.0}):
        with pytest.raises(InputError):
            assign(scan, **more)
    with pytest.raises(InputError, match="no σ of the positions"):
        assign(scan, tolerance=0)
    with pytest.raises(InputError, match="holds no period"):
        assign(scan, period_range=(1.0, 1.1))


def test_orders_that_no_period_explains_are_refused():
    """Between order 1 at 0.1 and order 2 at 0.102 no line is left for 0.101, and 0.3 would come before."""
    with pytest.raises(InputError, match="does not rise"):
        assign(Scan.of(q=[0.1, 0.2, 0.3], order=[1, 5, 4]))
    with pytest.raises(InputError, match="holds no period"):
        assign(Scan.of(q=[0.1, 0.101, 0.102, 0.3], order=[1, 0, 2, 0], position_sigma=np.full(4, 1e-4)))


def test_lines_far_beyond_what_carries_an_order_are_stray():
    found = assign(Scan.of(q=[1e-4, 2e-4, 5.0], order=[20, 0, 0], position_sigma=[1e-7, 1e-7, 1e-3]), tolerance=0)
    assert found[0].order.tolist() == [20, 40, 0]


def test_errors_far_below_the_shift_allowed_for_are_raised_and_told():
    q = 2 * np.pi * np.arange(1, 6) / 52
    found = assign(Scan.of(q=q, position_sigma=np.full(5, 1e-9)), tolerance=0.01)
    assert found[0].order.tolist() == [1, 2, 3, 4, 5]
    assert "σ of 5 lines is taken as 0.0001" in found[0].notes[1]
