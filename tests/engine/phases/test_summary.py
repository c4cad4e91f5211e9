"""Centroids against mpmath's adaptive integrals, closed forms and explicit tables."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from scipy.integrate import quad

from engine.phases import concentration_of_merit, hendrickson_lattman, summarize, summarize_table, von_mises
from engine.phases.summary import SHARPEST
from tests.engine.phases.trial import measured, triclinic
from tests.strategies import refusal_of

ANGLES = np.arange(360) * np.pi / 180
CASES = [
    (0.3, -0.2, 0.1, 0.4),
    (1.5, 0.0, -2.0, 0.5),
    (0.01, 0.02, 9.0, -3.0),
    (-40.0, 11.0, 25.0, 13.0),
    (300.0, -200.0, 10.0, 800.0),
    (5e3, 1e3, 2e4, -3e4),
    (0.0, 3.0, 1e-300, 0.0),
]


def centroid_by_mpmath(coefficients):
    """⟨exp(iφ)⟩ by adaptive quadrature in 40 digits, cut finely about the highest peak."""
    with mpmath.workdps(40):
        a, b, c, d = (mpmath.mpf(float(x)) for x in coefficients)

        def exponent(t):
            return a * mpmath.cos(t) + b * mpmath.sin(t) + c * mpmath.cos(2 * t) + d * mpmath.sin(2 * t)

        fine = np.linspace(-np.pi, np.pi, 200001)
        values = coefficients @ np.stack([np.cos(fine), np.sin(fine), np.cos(2 * fine), np.sin(2 * fine)])
        peak, top = float(fine[values.argmax()]), mpmath.mpf(float(values.max()))
        width = 1 / np.sqrt(np.abs(coefficients).max() + 1)
        near = [peak + x * width for x in range(-12, 13, 3) if abs(x * width) < np.pi]
        cuts = sorted({*near, *(peak + x * np.pi / 8 for x in range(-8, 9))})

        def integral(wave):
            return mpmath.quad(lambda t: wave(t) * mpmath.exp(exponent(t) - top), cuts)

        return complex(mpmath.mpc(integral(mpmath.cos), integral(mpmath.sin)) / integral(lambda t: 1))


@pytest.mark.parametrize("coefficients", CASES)
def test_against_integration(coefficients):
    expected = centroid_by_mpmath(np.array(coefficients))
    found = summarize(hendrickson_lattman([coefficients]))
    # As the docstring promises: 1e-13, and the rounding of the exponent where it is large.
    bound = 1e-13 + 3e-16 * np.abs(coefficients).max()
    assert abs(found.merit[0] * np.exp(1j * found.phase[0]) - expected) < bound


def test_rows_do_not_depend_on_their_company():
    """Rows of unlike sharpness are integrated on unlike grids, in chunks."""
    rng = np.random.default_rng(7)
    rows = rng.normal(size=(20000, 4)) * 10 ** rng.uniform(-2, 3.5, size=(20000, 1))
    together = summarize(hendrickson_lattman(rows))
    some = rng.choice(20000, 30, replace=False)
    for row in some:
        alone = summarize(hendrickson_lattman(rows[row][None]))
        assert alone.merit[0] == pytest.approx(together.merit[row], abs=1e-13)
        assert alone.phase[0] == pytest.approx(together.phase[row], abs=1e-10)


def test_closed_form_and_integration_meet():
    """C = D = 0 is done by Bessel functions; C = 1e-18 changes nothing but the way."""
    kappa = np.array([0.0001, 0.5, 3.0, 90.0, 4e3])
    rows = np.stack([kappa * 0.6, kappa * 0.8, np.full(5, 1e-18), np.zeros(5)], axis=1)
    by_sum, closed = summarize(hendrickson_lattman(rows)), summarize(hendrickson_lattman(rows * [1, 1, 0, 0]))
    np.testing.assert_allclose(by_sum.merit, closed.merit, atol=2e-13)
    np.testing.assert_allclose(closed.phase, np.arctan2(0.8, 0.6), atol=1e-14)
    np.testing.assert_allclose(by_sum.phase, closed.phase, atol=1e-10)


def test_a_merit_comes_back():
    merit = np.array([0.05, 0.5, 0.93, 1 - 1e-12])
    phase = np.array([3.0, -0.5, 1.0, -3.1])
    found = summarize(von_mises(phase, concentration_of_merit(merit)))
    np.testing.assert_allclose(found.merit, merit, atol=1e-15)
    np.testing.assert_allclose(found.phase, phase, atol=1e-14)


def test_centric_from_its_two_phases():
    """By hand: the probabilities of φ and φ + π, their difference and the likelier of them."""
    coefficients = np.array([[0.8, -0.3, 4.0, 1.0], [-2.0, 1.0, 0.0, 0.0], [40.0, -60.0, 3.0, -2.0]])
    restricted = np.array([0.7, 0.0, -np.pi / 2])
    found = summarize(hendrickson_lattman(coefficients, restricted))
    for row, first, merit, phase in zip(coefficients, restricted, found.merit, found.phase, strict=True):
        both = np.array([first, first + np.pi])
        exponent = row @ np.stack([np.cos(both), np.sin(both), np.cos(2 * both), np.sin(2 * both)])
        p = np.exp(exponent - exponent.max()) / np.exp(exponent - exponent.max()).sum()
        assert merit == pytest.approx(abs(p[0] - p[1]), abs=1e-14)
        assert np.exp(1j * phase) == pytest.approx(np.exp(1j * both[p.argmax()]), abs=1e-14)
    back = summarize(von_mises([0.7 + np.pi], concentration_of_merit([0.4], np.array([True])), [0.7]))
    assert back.merit[0] == pytest.approx(0.4, abs=1e-15)
    assert back.phase[0] == pytest.approx(0.7 - np.pi)


def test_no_phase_is_better_than_another():
    """Flat, or the same after half a turn: m = 0 exactly, no phase, no contribution, no σ."""
    known = summarize(hendrickson_lattman([[0, 0, 0, 0], [0, 0, 3, -1], [1, 0, 0, 0]], [np.nan, np.nan, np.pi / 4]))
    flat = summarize(hendrickson_lattman(np.zeros((1, 4)), [0.3]))
    table = summarize_table(np.ones((1, 360)), ANGLES)
    for part, rows in ((known, slice(0, 2)), (flat, slice(None)), (table, slice(None))):
        assert part.merit[rows].tolist() == [0] * part.merit[rows].size
        assert np.isnan(part.phase[rows]).all()
        assert np.all(part.best(np.full(part.merit.size, 7.0))[rows] == 0)
        assert np.isinf(part.phase_sigma()[rows]).all()


def isomorphous(phi):
    """Probability of a phase from one derivative: Blow & Crick (1959), lack of closure of the triangle.

    |F_P| = 100, |F_PH| = 120, F_H = 45 exp(0.6 i), error of closure E = 15; numbers of our own.
    """
    closure = np.abs(100 * np.exp(1j * phi) + 45 * np.exp(0.6j)) - 120
    return np.exp(-(closure**2) / (2 * 15**2))


def test_best_coefficient_of_blow_and_crick():
    """The centroid, and the mean square error it leaves, by integrating over the circle."""

    def mean(wave):
        return quad(lambda t: wave(t) * isomorphous(t), -np.pi, np.pi, epsabs=1e-13, limit=400)[0]

    norm = mean(lambda t: 1.0)
    expected = 100 * (mean(np.cos) + 1j * mean(np.sin)) / norm
    found = summarize_table(isomorphous(ANGLES)[None], ANGLES)
    amplitude = np.array([100.0])
    assert found.best(amplitude)[0] == pytest.approx(expected, abs=1e-9)

    def error(coefficient):
        return mean(lambda t: abs(100 * np.exp(1j * t) - coefficient) ** 2) / norm

    assert found.unused_power(amplitude)[0] == pytest.approx(error(expected), rel=1e-10)
    for step in (1, -1, 1j, -1j):
        # A quadratic form with curvature 1: any other coefficient is worse by the square of the way.
        assert error(expected + step) == pytest.approx(error(expected) + 1, rel=1e-9)


def test_tables_take_any_scale_and_any_start():
    table = isomorphous(ANGLES)
    first = summarize_table(np.stack([table, table * 1e-200, table * 1e200]), ANGLES)
    np.testing.assert_allclose(first.merit, first.merit[0], rtol=1e-14)
    rolled = summarize_table(isomorphous(ANGLES - 1.0)[None], ANGLES - 1.0)
    assert rolled.merit[0] == pytest.approx(first.merit[0], abs=1e-13)
    assert rolled.phase[0] == pytest.approx(first.phase[0], abs=1e-13)
    centric = np.zeros((1, 360))
    centric[0, [90, 270]] = [1, 3]
    two = summarize_table(centric, ANGLES)
    assert two.merit[0] == pytest.approx(0.5)
    assert two.phase[0] == pytest.approx(-np.pi / 2)


def test_phases_put_on_reflections():
    lattice = triclinic()
    given = measured(lattice, np.array([[1, 0, 0], [0, 1, 0]]), [3.0, 4.0], sigma=np.array([0.1, 0.2]))
    summary = summarize(hendrickson_lattman([[1.0, 1.0, 0.2, 0.1], [0, 0, 0, 0]]))
    made = summary.applied(given)
    assert made.merit is summary.merit
    assert made.phase_sigma[0] == pytest.approx(np.sqrt(-2 * np.log(summary.merit[0])))
    assert np.isnan(made.phase_sigma[1])
    assert np.isnan(made.phase[1])
    np.testing.assert_array_equal(made.observed, given.observed)
    assert refusal_of(lambda: summary.applied(given.select(np.array([0])))).path == ("phases",)


@pytest.mark.parametrize(
    ("call", "path", "rows"),
    [
        (lambda: summarize(hendrickson_lattman([[1, 0, 0, 0], [1, 0, SHARPEST, 0]])), ("coefficients",), (1,)),
        (lambda: summarize_table(np.ones((2, 4)), [0, 1, 2, 3]), ("angles",), ()),
        (lambda: summarize_table(np.ones((2, 361)), np.arange(361) * np.pi / 180), ("angles",), ()),
        (lambda: summarize_table(np.ones((2, 1)), [0.0]), ("angles",), ()),
        (lambda: summarize_table(np.ones((2, 7)), ANGLES), ("table",), ()),
        (lambda: summarize_table(-np.eye(360)[:2], ANGLES), ("table",), (0, 1)),
        (lambda: summarize_table(np.zeros((1, 360)), ANGLES), ("table",), (0,)),
        (lambda: summarize_table(np.full((1, 360), np.nan), ANGLES), ("table", 0, 0), ()),
    ],
)
def test_refusals(call, path, rows):
    refusal = refusal_of(call)
    assert refusal.path == path
    assert refusal.rows == rows
