"""What integrals, layers and comparisons share: functionals along lines, and a density with its errors."""

from __future__ import annotations

from dataclasses import replace

import mpmath
import numpy as np
import pytest

from engine import Treatment, Window
from engine.averages import lateral
from engine.features.linear import Joined, LineDerivatives, LineMoments, density_of
from tests.engine.features.drawn import draws, measured
from tests.strategies import CRYSTAL, LATTICES, STACK, deviation, listing, refusal_of


def line_in(lattice):
    span = np.array([0.3, -0.7, 0.4])[: lattice.dimension]
    return np.array([0.1, 0.25, -3.6])[: lattice.dimension], span / np.linalg.norm(lattice.to_cartesian(span))


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_derivatives_along_a_line_by_differences(dimension):
    wanted = listing(LATTICES[dimension], seed=9)
    origin, direction = line_in(wanted.lattice)
    at, h = np.linspace(-2, 7, 11), 1e-3

    def n(t):
        return wanted.at(origin + t[:, None] * direction)

    made = density_of(wanted.coefficients()).numbers(LineDerivatives(origin, direction, at, (0, 1, 2))).reshape(3, -1)
    assert deviation(made[0], n(at)) < 1e-12
    # Fourth order in the step.
    first = (8 * (n(at + h) - n(at - h)) - n(at + 2 * h) + n(at - 2 * h)) / (12 * h)
    second = (16 * (n(at + h) + n(at - h)) - n(at + 2 * h) - n(at - 2 * h) - 30 * n(at)) / (12 * h * h)
    assert deviation(made[1], first) < 1e-8
    assert deviation(made[2], second) < 1e-6


@pytest.mark.parametrize("length", [1e-6, 0.01, 0.05, 0.7, 4.0, 60.0])
def test_moments_in_many_digits(length):
    """∫ n dt and ∫ (t − c) n dt of single waves, over lengths from nothing to many wavelengths."""
    begin = 1.3
    length = begin + length - begin
    made = LineMoments(np.array([0.2]), np.array([1 / 58.4]), np.array([begin]), np.array([begin + length]))
    orders = np.array([[0], [1], [7], [24], [-7]])
    found = made.factors(STACK, orders)
    assert found.shape == (2, 5)
    with mpmath.workdps(30):
        middle, half = mpmath.mpf(begin) + mpmath.mpf(length) / 2, mpmath.mpf(length) / 2
        for column, order in enumerate(orders[:, 0].tolist()):
            kappa = 2 * mpmath.pi * order / mpmath.mpf(58.4)
            phase = mpmath.expjpi(2 * order * mpmath.mpf(0.2)) * mpmath.expj(kappa * middle)
            x = kappa * half
            zeroth = 2 * half * (mpmath.sin(x) / x if order else 1) * phase
            first = 2j * half**2 * ((mpmath.sin(x) / x - mpmath.cos(x)) / x if order else 0) * phase
            assert found[0, column] == pytest.approx(complex(zeroth), rel=1e-12, abs=1e-13 * length)
            assert found[1, column] == pytest.approx(complex(first), rel=1e-10, abs=1e-13 * length**2)


def test_joined_functionals_stand_one_after_the_other():
    origin, direction = line_in(CRYSTAL)
    parts = [
        LineDerivatives(origin, direction, np.array([0.0, 1.0]), (0, 1)),
        LineMoments(origin, direction, np.array([0.0]), np.array([2.0])),
    ]
    joined = Joined(parts)
    indices = listing(CRYSTAL).indices
    assert joined.count == 6
    np.testing.assert_array_equal(joined.factors(CRYSTAL, indices)[4:], parts[1].factors(CRYSTAL, indices))


def test_the_treatment_is_in_values_and_errors():
    coefficients = measured(2)
    treatment = Treatment(window=Window("lanczos"), sharpen=-3.0)
    density = density_of(coefficients, treatment)
    origin, direction = line_in(coefficients.lattice)
    functional = LineDerivatives(origin, direction, np.array([0.0, 3.0]))
    magnitudes = coefficients.lattice.magnitudes(coefficients.indices)
    factor = np.sinc(magnitudes / magnitudes.max()) * np.exp(-3.0 * (magnitudes / (4 * np.pi)) ** 2)
    waves = functional.factors(coefficients.lattice, coefficients.indices)
    waves = waves * factor * np.where(coefficients.indices.any(axis=1), 2, 1)
    np.testing.assert_allclose(density.numbers(functional), (waves @ coefficients.values).real, rtol=1e-11)
    drawn = (draws(coefficients, 20000) @ waves.T).real
    np.testing.assert_allclose(density.covariance(functional), np.cov(drawn.T), rtol=0.05, atol=1e-3 * drawn.var())


def test_a_coefficient_measured_as_zero_is_one_all_the_same():
    made = listing(STACK, share=1.0).coefficients()
    zeroed = replace(made, values=np.where(np.arange(made.count) == 5, 0, made.values))
    assert density_of(zeroed).series.count == made.count


def test_an_average_takes_its_errors_away():
    """Only terms along the normal are left, and they have the covariance that the whole list has at factors of 0."""
    coefficients = measured(3)
    density = density_of(coefficients, Treatment(average=lateral(CRYSTAL, [0, 0, 1])))
    assert not density.errors.indices[:, :2].any()
    origin, direction = line_in(CRYSTAL)
    functional = LineDerivatives(origin, direction, np.array([0.0, 3.0]))
    along = ~coefficients.indices[:, :2].any(axis=1)
    alone = density_of(coefficients.select(along)).covariance(functional)
    np.testing.assert_allclose(density.covariance(functional), alone, rtol=1e-12)
    none = density_of(
        coefficients.select(coefficients.indices[:, 0] != 0), Treatment(average=lateral(CRYSTAL, [0, 0, 1]))
    )
    assert not none.covariance(functional).any()
    assert not none.numbers(functional).any()


def test_notes():
    made = listing(STACK, zero=False).coefficients()
    density = density_of(replace(made, phase_known=np.arange(made.count) != 2))
    assert not density.zero_known
    assert density.covariance(LineDerivatives(np.zeros(1), np.ones(1), np.zeros(1))) is None
    assert (density.contains, density.omits) == ((), ())
    assert any("1 of" in note and "no phase" in note for note in density.notes)
    assert any("no uncertainties" in note for note in density.notes)


def test_no_numbers_have_an_empty_covariance():
    density = density_of(measured(1))
    nothing = LineDerivatives(np.zeros(1), np.ones(1), np.zeros(0))
    assert density.numbers(nothing).shape == (0,)
    assert density.covariance(nothing).shape == (0, 0)


def test_refusals():
    assert refusal_of(lambda: density_of(listing(STACK, real=False).coefficients(), name="second")).path == ("second",)
    assert refusal_of(lambda: density_of(listing(STACK).coefficients(), Treatment(field="gradient"))).path == ("field",)
