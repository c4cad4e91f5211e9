from dataclasses import replace

import numpy as np
import pytest

from engine import Treatment
from engine.features.precision import Displacements, Uncertain, displacement_variances, point_covariances
from engine.fields import multipliers
from engine.symmetry import space_group
from engine.windows import Window
from tests.engine.features.densities import plain_jet, random_set, symmetric_set


def uncertain_set(dimension=2, treatment=None):
    coefficients, _ = random_set(dimension, 12)
    rng = np.random.default_rng(8)
    coefficients = replace(coefficients, sigma=rng.uniform(0.01, 0.2, coefficients.count))
    return coefficients, Uncertain.of(multipliers(coefficients, treatment or Treatment()))


def plain_covariance(coefficients, functions, factors=None):
    """Σ_o σ_o² ∂f/∂A_o ∂f/∂A_o: what one σ of each amplitude does to each number, pair by pair."""
    moved = np.zeros((len(functions), coefficients.count))
    for row in range(coefficients.count):
        m, v = coefficients.indices[row], coefficients.values[row]
        change = coefficients.sigma[row] * v / abs(v) * (1.0 if factors is None else factors[row])
        one = m[None] if not m.any() else np.stack([m, -m])
        values = np.array([change]) if not m.any() else np.array([change, change.conjugate()])
        made = type("Pair", (), {"indices": one, "values": values, "lattice": coefficients.lattice})
        moved[:, row] = [function(made) for function in functions]
    return moved @ moved.T


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_values_and_slopes(dimension):
    coefficients, uncertain = uncertain_set(dimension)
    x = np.random.default_rng(1).random((3, dimension))
    variance, slopes = point_covariances(uncertain, x)
    for row in range(3):
        functions = [lambda made, row=row: plain_jet(made, x[row])[0]]
        functions += [lambda made, row=row, j=j: plain_jet(made, x[row])[1][j] for j in range(dimension)]
        expected = plain_covariance(coefficients, functions)
        assert variance[row] == pytest.approx(expected[0, 0], rel=1e-9)
        np.testing.assert_allclose(slopes[row], expected[1:, 1:], rtol=1e-8, atol=1e-12 * expected.max())


def test_windows_count_and_the_order_of_the_errors_too():
    """The errors stand by measurement, the set by index: factors must follow."""
    treatment = Treatment(window=Window("lanczos"))
    coefficients, uncertain = uncertain_set(2, treatment)
    factors = multipliers(coefficients, treatment).factors[0]
    shuffled = replace(uncertain, factors=uncertain.factors[::-1].copy())
    x = np.array([[0.3, 0.8]])
    expected = plain_covariance(coefficients, [lambda made: plain_jet(made, x[0])[0]], factors)
    assert point_covariances(uncertain, x)[0][0] == pytest.approx(expected[0, 0], rel=1e-9)
    assert point_covariances(shuffled, x)[0][0] != pytest.approx(expected[0, 0], rel=1e-3)


def test_numbers_of_several_points_are_correlated():
    coefficients, uncertain = uncertain_set(2)
    rng = np.random.default_rng(2)
    x, weights = rng.random((4, 2)), rng.normal(size=(5, 3, 2))
    points = np.array([[0, 1, 2], [3, 3, 1], [2, 0, 1], [1, 1, 1], [0, 3, 2]])
    found = displacement_variances(uncertain, x, points, weights)
    functions = [
        lambda made, k=k: sum(weights[k, t] @ plain_jet(made, x[points[k, t]])[1] for t in range(3)) for k in range(5)
    ]
    np.testing.assert_allclose(found, np.diag(plain_covariance(coefficients, functions)), rtol=1e-9)


def test_factors_are_those_of_a_real_number():
    """t_{−G} = conj t_G."""
    coefficients, _ = uncertain_set(3)
    rng = np.random.default_rng(3)
    one = Displacements(rng.random((2, 3)), np.array([[0, 1]]), rng.normal(size=(1, 2, 3)))
    m = coefficients.indices
    np.testing.assert_allclose(one.factors(coefficients.lattice, -m), one.factors(coefficients.lattice, m).conj())


def test_many_points_are_done_in_portions(monkeypatch):
    _, uncertain = uncertain_set(2)
    x = np.random.default_rng(4).random((11, 2))
    whole = point_covariances(uncertain, x)
    monkeypatch.setattr("engine.features.precision.PORTION", 3)
    np.testing.assert_allclose(point_covariances(uncertain, x)[1], whole[1], rtol=1e-12)


def test_a_set_without_uncertainties_has_none():
    coefficients, _ = random_set(2, 1)
    assert Uncertain.of(multipliers(coefficients, Treatment())) is None


def test_factors_follow_the_measurements_of_a_symmetric_set():
    """A window on the set is the set of windowed coefficients and σ's; equivalents stand side by side in its errors."""
    known = symmetric_set(space_group(19), 2)
    treatment = Treatment(window=Window("raised_cosine"))
    factors = multipliers(known, treatment).factors[0]
    windowed = replace(known, values=known.values * factors, sigma=known.sigma * factors)
    x = np.random.default_rng(6).random((3, 3))
    one = point_covariances(Uncertain.of(multipliers(known, treatment)), x)
    other = point_covariances(Uncertain.of(multipliers(windowed, Treatment())), x)
    np.testing.assert_allclose(one[0], other[0], rtol=1e-9)
    np.testing.assert_allclose(one[1], other[1], rtol=1e-9, atol=1e-12 * np.abs(other[1]).max())
