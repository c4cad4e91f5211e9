"""Evidence of numberings against brute-force integration, and numberings against plain loops."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate, stats

from engine.films.numbering import STRAYS_EXPECTED, Errors, inverses, number, weigh


def errors_of(each, shift=0.0, bend=0.0):
    each = np.asarray(each, dtype=float)
    return Errors(each=each, shift=np.full(each.size, shift), bend=np.broadcast_to(bend, each.shape).astype(float))


def brute_evidence(orders, q, errors, period):
    """The same integral over the slope by quadrature, with the density of the normal distribution of a library."""
    seen = orders > 0
    covariance = (
        np.diag(errors.each[seen] ** 2)
        + np.outer(errors.shift[seen], errors.shift[seen])
        + np.outer(errors.bend[seen], errors.bend[seen])
    )
    normal = stats.multivariate_normal(np.zeros(seen.sum()), covariance)
    centre = 2 * np.pi / period
    peak = normal.logpdf(q[seen] - centre * orders[seen])

    def integrand(log_slope):
        return np.exp(normal.logpdf(q[seen] - np.exp(log_slope) * orders[seen]) - peak)

    area = integrate.quad(integrand, np.log(centre) - 0.05, np.log(centre) + 0.05, points=[np.log(centre)], limit=400)[
        0
    ]
    k, highest = seen.sum(), orders.max()
    # A probability p of each order, uniform in 0…1; the highest is there by definition.
    presence = integrate.quad(lambda p: p ** (k - 1) * (1 - p) ** (highest - k), 0, 1)[0]
    return peak + np.log(area / np.log(2)) + np.log(presence) + k * np.log(q[-1] / STRAYS_EXPECTED)


@pytest.mark.parametrize(("shift", "bend"), [(0.0, 0.0), (1e-3, 0.0), (2e-3, 1e-4)])
def test_evidence_is_the_integral_over_slope_shift_and_presence(shift, bend):
    rng = np.random.default_rng(3)
    orders = np.array([[1, 2, 0, 4, 5], [2, 4, 5, 8, 10]])
    each = rng.uniform(5e-4, 1e-3, 5)
    q = np.array([1, 2, 2.5, 4, 5]) * 2 * np.pi / 52 + each * rng.normal(size=5)
    errors = errors_of(each, shift, bend / q)
    found = weigh(orders, q, errors)
    for row in range(2):
        expected = brute_evidence(found.orders[row], q, errors, found.period[row])
        # Laplace's approximation of the integral over the period, which is sharp.
        assert found.score[row] == pytest.approx(expected, abs=2e-3)


def test_chi_squared_of_sharp_lines_keeps_its_digits():
    rng = np.random.default_rng(4)
    orders = np.arange(1, 9)
    each = np.full(8, 1e-7)
    q = orders * 0.12 + each * rng.normal(size=8)
    found = weigh(orders[None], q, errors_of(each))
    slope = np.sum(orders * (q - 0.12 * orders)) / np.sum(orders**2)
    expected = np.sum((q - 0.12 * orders - slope * orders) ** 2) / 1e-14
    assert found.chi_squared[0] == pytest.approx(expected, rel=1e-6)


def test_numberings_are_distinct_and_give_no_order_twice():
    rng = np.random.default_rng(9)
    q = np.sort(rng.uniform(0.05, 1.2, 9))
    errors = errors_of(np.full(9, 2e-3))
    known = np.zeros(9, dtype=np.int64)
    rows = number(inverses(q, known, errors, 5.0, 250.0), q, known, errors)
    assert np.unique(rows, axis=0).shape == rows.shape
    for row in rows:
        numbered = row[row > 0]
        assert numbered.size >= 2
        assert (np.diff(numbered) > 0).all()


def test_every_numbering_of_lines_that_fit_is_among_the_candidates():
    """Each period 2πl/q of each line, each line within 2σ of an order of it: plain loops find no better."""
    rng = np.random.default_rng(11)
    q = np.sort(np.array([1, 2, 3, 5]) * 0.13 + 3e-4 * rng.normal(size=4))
    errors = errors_of(np.full(4, 3e-4))
    known = np.zeros(4, dtype=np.int64)
    rows = {tuple(row) for row in number(inverses(q, known, errors, 4.0, 400.0), q, known, errors).tolist()}
    for factor in (1, 2, 3, 4, 5):
        assert tuple((factor * np.array([1, 2, 3, 5])).tolist()) in rows


def test_of_two_lines_near_one_order_the_nearer_is_numbered():
    q = np.array([0.1, 0.1995, 0.2005, 0.3])
    errors = errors_of([1e-3, 1e-3, 0.2e-3, 1e-3])
    known = np.zeros(4, dtype=np.int64)
    assert number(np.array([10.0]), q, known, errors)[0].tolist() == [1, 2, 0, 3]
    told = np.array([0, 0, 2, 0])
    assert number(np.array([10.0]), q, told, errors)[0].tolist() == [1, 0, 2, 3]


def test_half_a_period_below_the_first_order_is_no_order():
    q = np.array([0.02, 0.1, 0.2])
    rows = number(np.array([10.0]), q, np.zeros(3, dtype=np.int64), errors_of(np.full(3, 1e-3)))
    assert rows.tolist() == [[0, 1, 2]]


def test_orders_carried_never_stand_out_of_sequence_with_those_found():
    """A spacing of 0.1 makes 0.3 order 3, which cannot follow 0.2 as order 5; one of 0.04 numbers all three."""
    q = np.array([0.1, 0.2, 0.3])
    rows = number(np.array([10.0, 25.0]), q, np.array([0, 5, 0]), errors_of(np.full(3, 0.02)))
    assert rows.size
    assert all((np.diff(row[row > 0]) > 0).all() for row in rows)
