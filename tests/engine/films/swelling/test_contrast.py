"""Signs from amplitudes that are linear in the contrast."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine import InputError
from engine.films.orders import FilmOrders
from engine.films.swelling import contrast_signs

D = 52.0
X = np.array([0.0, 0.5, 1.0, 0.2])
L = np.arange(1, 9)
A = np.array([-22.0, 9.0, -6.5, 4.0, -1.2, 0.9, 2.2, -1.5])
"""Invented, for film FG-7 in light water; water sits about z = d/2 in a Gaussian sheet."""
B = 30 * np.exp(-((2 * np.pi * L * 3.5 / D) ** 2) / 2) * (-1.0) ** L


def sets(seed=0, noise=0.02, keep=None):
    rng = np.random.default_rng(seed)
    made = []
    for number, x in enumerate(X):
        truth = A + x * B
        sigma = noise * np.abs(truth) + 0.05
        size = np.abs(truth + sigma * rng.normal(size=L.size))
        rows = np.ones(L.size, dtype=bool) if keep is None else keep[number]
        made.append(FilmOrders.of(D, L[rows], size[rows], sigma[rows]))
    return made


TRUTH = np.sign(A[:, None] + np.outer(B, X))


def test_water_about_the_edge_decides_every_sign():
    made = contrast_signs(sets(), X, exchange="edge")
    sure = made.decided
    assert sure.mean() > 0.8
    np.testing.assert_array_equal(made.signs[sure], TRUTH[sure])
    np.testing.assert_allclose(made.line[:5, 1], B[:5], atol=1.0)
    np.testing.assert_array_equal(made.freedom, 2)


def test_known_slopes_do_the_same():
    made = contrast_signs(sets(), X, exchange="edge")
    same = contrast_signs(sets(), X, slope_sign=(-1.0) ** L)
    np.testing.assert_array_equal(made.signs, same.signs)
    np.testing.assert_allclose(made.margin, same.margin)
    turned = contrast_signs(sets(), X, slope_sign=-((-1.0) ** L))
    np.testing.assert_array_equal(turned.signs, -made.signs)
    np.testing.assert_allclose(turned.line, -made.line)


def test_without_a_known_slope_signs_are_relative():
    made = contrast_signs(sets(), X)
    assert not made.decided.any()
    np.testing.assert_allclose(made.margin, 0.0, atol=1e-9)
    sure = made.relative_decided
    assert sure.sum() >= 5
    np.testing.assert_array_equal((made.signs * made.signs[:, :1])[sure], (TRUTH * TRUTH[:, :1])[sure])
    assert any("relative" in note for note in made.notes)


@settings(max_examples=40, deadline=None)
@given(st.lists(st.floats(0.3, 9), min_size=4, max_size=4), st.sampled_from([-1.0, 1.0]))
def test_each_order_is_the_best_of_all_choices(size, slope):
    """Against all sixteen choices of four signs, with straight lines by numpy."""
    error = np.array([0.3, 0.5, 0.2, 0.4])
    orders = [FilmOrders.of(D, [1], [f], [s]) for f, s in zip(size, error, strict=True)]
    made = contrast_signs(orders, X, slope_sign=[slope], model_error=0.0)
    best = np.inf
    for signs in itertools.product([1, -1], repeat=4):
        line = np.polyfit(X, np.array(signs) * size, 1, w=1 / error)
        best = min(best, np.sum(((np.array(signs) * size - np.polyval(line, X)) / error) ** 2))
    fitted = np.polyfit(X, made.signs[0] * size, 1, w=1 / error)
    np.testing.assert_allclose(made.line[0], fitted[::-1], atol=1e-9)
    reached = np.sum(((made.signs[0] * size - np.polyval(fitted, X)) / error) ** 2)
    assert made.chi_square[0] == pytest.approx(reached, abs=1e-9)
    assert reached == pytest.approx(best, abs=1e-7)
    assert slope * fitted[0] >= -1e-9


def test_margins_are_the_rise_of_chi_square():
    """One order by hand: |F| = 3, 1, 1 at x = 0, 1, 2: 3, 1, −1 is a line; 3, 1, 1 does not."""
    orders = [FilmOrders.of(D, [1], [f], [0.1]) for f in (3.0, 1.0, 1.0)]
    made = contrast_signs(orders, [0.0, 1.0, 2.0], slope_sign=[-1], model_error=0.0)
    np.testing.assert_array_equal(made.signs[0], [1, 1, -1])
    assert made.chi_square[0] == pytest.approx(0.0, abs=1e-12)
    # 3, 1, 1: second difference 2 = residuals (1/3, −2/3, 1/3), χ² = (6/9)/0.01.
    assert made.relative_margin[0] == pytest.approx(66.6667, rel=1e-4)
    # With the first sign reversed, −3, −1, −1 is best: as far from a line, and its slope of 1 must fall to zero from
    # the wrong side; σ² of a slope is 0.01/2.
    assert made.margin[0, 0] == pytest.approx(66.6667 + 1 / 0.005, rel=1e-4)


def test_orders_of_two_contrasts_are_told_and_not_used():
    keep = [np.ones(8, dtype=bool), L != 8, L != 8, L != 3]
    made = contrast_signs(sets(keep=keep), X, exchange="edge")
    assert made.unused == (8,)
    np.testing.assert_array_equal(made.order, np.arange(1, 8))
    assert made.signs[2, 3] == 0
    assert made.freedom[2] == 1
    known = made.coefficients(0).phase_known
    assert not known[-1]


def test_coefficients():
    data = sets()
    made = contrast_signs(data, X, exchange="edge")
    mine = made.coefficients(1, mean=0.2)
    sure = made.decided[:, 1]
    np.testing.assert_array_equal(mine.phase_known[1:], sure)
    np.testing.assert_allclose(mine.values[1:][sure], (made.signs[:, 1] * data[1].amplitude / D)[sure])
    np.testing.assert_allclose(mine.merit[1:], np.tanh(made.margin[:, 1] / 4))


def test_a_structure_that_changes_loosens_the_margins():
    good = contrast_signs(sets(), X, exchange="edge")
    bad = sets()
    bad[1] = FilmOrders.of(D, L, bad[1].amplitude * 1.4, bad[1].sigma)
    made = contrast_signs(bad, X, exchange="edge")
    assert made.chi_square[0] > 10 * made.freedom[0]
    assert made.margin[0, 0] < good.margin[0, 0]


def bare():
    return [FilmOrders.of(D, [1, 2], [1.0, 2.0]) for _ in range(3)]


@pytest.mark.parametrize(
    ("call", "place"),
    [
        (lambda: contrast_signs(sets()[:2], X[:2]), "2 contrasts"),
        (lambda: contrast_signs(sets(), [0, 0, 1, 1]), "distinct"),
        (lambda: contrast_signs(sets(), X[:3]), "contrast"),
        (lambda: contrast_signs([*sets()[:3], FilmOrders.of(60.0, [1], [1.0], [0.1])], X), "another period"),
        (lambda: contrast_signs([*sets()[:3], FilmOrders.of(D, [1], [1.0], [0.1], unit="e/Å³")], X), "scale or unit"),
        (lambda: contrast_signs(sets(), X, exchange="rim"), "exchange"),
        (lambda: contrast_signs(sets(), X, exchange="edge", slope_sign=np.ones(8)), "twice"),
        (lambda: contrast_signs(sets(), X, slope_sign=np.full(8, 0.5)), "slope_sign"),
        (lambda: contrast_signs(sets(), X, model_error=2.0), "model_error"),
        (lambda: contrast_signs(bare(), X[:3]), "sigma"),
        (
            lambda: contrast_signs([FilmOrders.of(D, [l], [1.0], [0.1]) for l in (1, 2, 3)], X[:3]),
            "share no order",
        ),
        (lambda: contrast_signs(sets(), X).coefficients(4), "entry"),
    ],
)
def test_refusals(call, place):
    with pytest.raises(InputError, match=place):
        call()


def test_an_assumed_sigma_is_told():
    made = contrast_signs(bare(), X[:3], relative_sigma=0.05)
    assert any("5 % of the amplitude assumed" in note for note in made.notes)
