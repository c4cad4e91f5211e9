"""Numbers that are linear in the coefficients, and their covariance, against plain sums and draws."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine import Treatment, Window, evaluate, sampling
from engine.series import Series
from engine.uncertainty import PointDerivatives, covariance, errors_of, functionals, numbers
from tests.engine.uncertainty.measured import CRYSTALS, GENERAL, drawn, measured, simulated

ORDERS = ((), (0,), (1,), (2,), (0, 0), (0, 1), (2, 1), (2, 2))


def crystal(name, **options):
    group, lattice, d_min, positions = CRYSTALS[name]
    return measured(group, lattice, d_min, **options), np.array(positions, dtype=float)


def derivatives(data, amplitude, deviation, positions, orders):
    """The same numbers of every draw by plain sums: (draws, positions × orders)."""
    reciprocal = data.lattice.reciprocal

    def multiply(axes):
        return lambda m: np.prod([1j * (m @ reciprocal)[:, axis] for axis in axes], axis=0) * np.ones(len(m))

    made = [simulated(data, amplitude, deviation, positions, multiply(axes)) for axes in orders]
    return np.stack(made, axis=-1).reshape(len(amplitude), -1)


@pytest.mark.parametrize("name", ["P1", "P212121", "Pm-3m", "p3", "stack"])
@pytest.mark.parametrize("chunk", [1, 50, 1 << 21])
def test_numbers_are_plain_sums(name, chunk, monkeypatch):
    monkeypatch.setattr(functionals, "CHUNK", chunk)
    data, positions = crystal(name, zero=True)
    orders = [axes for axes in ORDERS if all(axis < data.lattice.dimension for axis in axes)]
    nominal = data.reflections.observed[None]
    expected = derivatives(data, nominal, np.zeros_like(nominal), positions, orders)[0]
    found = numbers(data.coefficients().series(), PointDerivatives(positions, tuple(orders)))
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-9 * np.abs(expected).max())


def test_numbers_of_nothing_are_zero():
    data, positions = crystal("P1")
    empty = Series(data.lattice, np.zeros((0, 3), dtype=np.int64), np.zeros(0, dtype=complex), True)
    np.testing.assert_array_equal(numbers(empty, PointDerivatives(positions)), np.zeros(len(positions)))


def assert_covariance(draws, found):
    """Within five standard errors of a sample covariance, taken from the draws themselves."""
    apart = draws - draws.mean(axis=0)
    made = apart.T @ apart / len(apart)
    error = np.sqrt(((apart**2).T @ apart**2 / len(apart) - made**2) / len(apart))
    # On an axis some numbers are zero, and differ by rounding alone.
    assert np.all(np.abs(made - found) < 5 * error + 1e-12 * np.abs(found).max())


@pytest.mark.parametrize("name", ["P1", "P212121", "Pa-3", "p3", "stack"])
def test_covariance_is_that_of_draws(name):
    """Of a value, a slope and a curvature at two points, all with each other."""
    data, positions = crystal(name, phase_sigma=0.5, sigma=0.2)
    draws = 10_000
    orders = ((), (0,), (0, 0))
    made = derivatives(data, *drawn(data, draws), positions[:2], orders)
    found = covariance(errors_of(data.coefficients()), PointDerivatives(positions[:2], orders))
    assert_covariance(made, found)


def test_covariance_with_a_common_scale_and_a_given_mean():
    data, positions = crystal("P212121", sigma=0.1, mean=50.0, scale_sigma=0.05)
    draws = 10_000
    amplitude, deviation = drawn(data, draws)
    scale = 1 + 0.05 * np.random.default_rng(2).normal(size=(draws, 1))
    nominal = data.reflections.observed[None]
    made = derivatives(data, amplitude, deviation, positions, ((),))
    made = made + (scale - 1) * derivatives(data, nominal, np.zeros_like(nominal), positions, ((),))
    found = covariance(errors_of(data.coefficients()), PointDerivatives(positions))
    assert_covariance(made, found)
    # The scale alone moves all numbers together.
    alone = errors_of(replace(data.coefficients(), sigma=None))
    one = covariance(alone, PointDerivatives(positions))
    values = derivatives(data, nominal, np.zeros_like(nominal), positions, ((),))[0]
    np.testing.assert_allclose(one, 0.05**2 * np.outer(values, values), rtol=1e-9, atol=1e-12)


@given(st.sampled_from(sorted(CRYSTALS)), st.integers(0, 2**16), st.sampled_from([None, 0.1, 2.0]))
@settings(max_examples=25)
def test_covariance_is_symmetric_positive_and_holds_the_variances(name, seed, phase_sigma):
    data, _ = crystal(name, seed=seed, phase_sigma=phase_sigma, scale_sigma=0.03)
    made = data.coefficients()
    rng = np.random.default_rng(seed)
    positions = rng.uniform(-2, 2, (6, data.lattice.dimension))
    found = covariance(errors_of(made), PointDerivatives(positions))
    np.testing.assert_array_equal(found, found.T)
    assert np.linalg.eigvalsh(found).min() > -1e-12 * np.trace(found)
    field = evaluate(made, sampling.points(data.lattice, positions), uncertainty=True)
    np.testing.assert_allclose(np.sqrt(np.diag(found)), field.sigma.values, rtol=1e-8)


@given(st.sampled_from(sorted(CRYSTALS)), st.integers(0, 2**16), st.integers(1, 60))
@settings(max_examples=25)
def test_pieces_and_blocks_give_the_same(name, seed, chunk):
    data, _ = crystal(name, seed=seed, phase_sigma=0.3, scale_sigma=0.03, mean=4.0)
    errors = errors_of(data.coefficients())
    positions = np.random.default_rng(seed).uniform(-2, 2, (4, data.lattice.dimension))
    functional = PointDerivatives(positions, ((), (0,), (0, 0)))
    whole = covariance(errors, functional)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(functionals, "CHUNK", chunk * functional.count)
        pieces = covariance(errors, functional)
        blocks = covariance(errors, functional, block=3)
    np.testing.assert_allclose(pieces, whole, rtol=1e-9, atol=1e-12 * whole.max())
    assert blocks.shape == (4, 3, 3)
    for number, block in enumerate(blocks):
        own = slice(3 * number, 3 * number + 3)
        np.testing.assert_allclose(block, whole[own, own], rtol=1e-9, atol=1e-12 * whole.max())


def test_factors_are_those_of_a_window():
    data, positions = crystal("P212121", phase_sigma=0.2, scale_sigma=0.03)
    made = data.coefficients()
    errors = errors_of(made)
    window = Window("raised_cosine")
    magnitudes = made.lattice.magnitudes(errors.indices)
    found = covariance(errors, PointDerivatives(positions), factors=window.factors(magnitudes, magnitudes.max()))
    field = evaluate(made, sampling.points(made.lattice, positions), Treatment(window=window), uncertainty=True)
    np.testing.assert_allclose(np.sqrt(np.diag(found)), field.sigma.values, rtol=1e-9)


@dataclass(frozen=True)
class Box:
    """Integral over a parallelepiped of fractional size `edges` around `centre`, in units of the cell."""

    centre: tuple[float, ...]
    edges: tuple[float, ...]

    @property
    def count(self):
        return 1

    def factors(self, lattice, indices):
        shape = np.prod(np.sinc(indices * np.array(self.edges)) * np.array(self.edges), axis=1)
        return (shape * np.exp(2j * np.pi * indices @ np.array(self.centre)))[None]


def test_any_linear_functional_is_taken():
    """The mean over a box is the box average of the field at its centre."""
    from engine.averages import box

    data, _ = crystal("P212121", phase_sigma=0.4)
    made = data.coefficients()
    edges = (0.3, 0.2, 0.5)
    functional = Box(tuple(GENERAL[0]), edges)
    volume = np.prod(edges)
    field = evaluate(
        made,
        sampling.points(made.lattice, GENERAL[:1]),
        Treatment(average=box(made.lattice, np.diag(edges))),
        uncertainty=True,
    )
    found = covariance(errors_of(made), functional)
    assert np.sqrt(found[0, 0]) / volume == pytest.approx(field.sigma.values[0], rel=1e-9)
    assert numbers(made.series(), functional)[0] / volume == pytest.approx(field.values[0], rel=1e-9)


def test_no_number_has_no_covariance():
    data, _ = crystal("P1")
    assert covariance(errors_of(data.coefficients()), PointDerivatives(np.zeros((0, 3)))).shape == (0, 0)
    assert covariance(errors_of(data.coefficients()), PointDerivatives(np.zeros((0, 3))), block=3).shape == (0, 3, 3)
