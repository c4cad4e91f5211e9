"""Checks 17 and 18: one wave has one period, and a lattice translation changes nothing."""

from __future__ import annotations

import numpy as np
import pytest

from engine import Columns, Demand, Lattice, Treatment, assemble, averages, evaluate, sampling

OBLIQUE = {
    1: Lattice.from_period(37.2),
    2: Lattice.from_planar_parameters(7.1, 9.4, 101.5),
    3: Lattice.from_parameters(6.3, 8.8, 11.7, 78.0, 96.5, 107.0),
}
PLAN_BOUND = Demand().tolerance
"""Of the largest |value|: what a sum promises where nothing else is asked for."""


@pytest.mark.parametrize("both", [False, True], ids=["one given", "both given"])
@pytest.mark.parametrize("l", [1, 2, 3, 7, 40])
def test_one_pair_along_a_stack_is_a_single_cosine(l, both):
    """Check 17: common practice. n(z) = (2A/d) cos(2πlz/d − φ), period d/l."""
    period, amplitude, phase = 58.4, 12.5, 50.0
    stack = Lattice.from_period(period)
    rows, phases = ([l, -l], [phase, -phase]) if both else ([l], [phase])
    columns = Columns(indices=[rows], amplitude=[amplitude] * len(rows), phase_deg=phases)
    coefficients = assemble(stack, columns, values="structure_factor")
    field = evaluate(coefficients, sampling.line(stack, [0], [1], 1009))
    z = field.axes[0].coordinates()
    expected = 2 * amplitude / period * np.cos(2 * np.pi * z / (period / l) - np.radians(phase))
    np.testing.assert_allclose(field.values, expected, atol=PLAN_BOUND * expected.max())


@pytest.mark.parametrize("lateral", [False, True])
@pytest.mark.parametrize("l", [1, 2, 5])
def test_one_pair_along_the_stacking_normal_of_a_crystal(l, lateral):
    """Check 17 where the normal of the layers is not a cell edge: the period is d(001)/l, not c/l."""
    crystal = OBLIQUE[3]
    rows = np.array([[0, 0, l], [1, 0, l]])
    columns = Columns(indices=list(rows.T), amplitude=[4.0, 9.0], phase_deg=[-70.0, 20.0])
    coefficients = assemble(crystal, columns, values="structure_factor")
    if lateral:
        treatment = Treatment(average=averages.lateral(crystal, [0, 0, 1]))
    else:
        coefficients = coefficients.select(~coefficients.indices[:, 0].astype(bool))
        treatment = Treatment()
    field = evaluate(coefficients, sampling.normal_line(crystal, [0, 0, 1], 501), treatment)
    # d(001) = V / |a × b|, from the direct vectors alone.
    a, b, c = crystal.vectors
    spacing = np.dot(np.cross(a, b), c) / np.linalg.norm(np.cross(a, b))
    assert spacing < 0.995 * np.linalg.norm(c)
    z = field.axes[0].coordinates()
    expected = 8.0 / crystal.volume * np.cos(2 * np.pi * z / (spacing / l) + np.radians(70))
    np.testing.assert_allclose(field.values, expected, atol=PLAN_BOUND * expected.max())


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_every_wavevector_times_every_translation_is_a_multiple_of_two_pi(dimension):
    """Check 18: common practice."""
    lattice = OBLIQUE[dimension]
    random = np.random.default_rng([18, dimension])
    indices = random.integers(-60, 61, (400, dimension))
    translations = random.integers(-60, 61, (300, dimension))
    wavevectors = lattice.wavevectors(indices)
    cartesian = lattice.to_cartesian(translations.astype(float))
    turns = wavevectors @ cartesian.T / (2 * np.pi)
    # A scalar product keeps the digits of its largest terms: a few roundings of |G||T|/2π.
    size = np.linalg.norm(wavevectors, axis=1)[:, None] * np.linalg.norm(cartesian, axis=1) / (2 * np.pi)
    assert np.all(np.abs(turns - np.rint(turns)) <= 8 * np.finfo(float).eps * size)
    np.testing.assert_array_equal(np.rint(turns), indices @ translations.T)


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_the_density_repeats_at_every_translation(dimension):
    """Check 18 in the density: n(r + T) = n(r), T a lattice vector in Å."""
    lattice = OBLIQUE[dimension]
    random = np.random.default_rng([181, dimension])
    rows = np.unique(random.integers(-6, 7, (40, dimension)), axis=0)
    rows = rows[(rows @ [1, 20, 400][:dimension]) > 0]
    columns = Columns(
        indices=list(rows.T),
        amplitude=random.uniform(1, 5, len(rows)),
        phase_deg=random.uniform(0, 360, len(rows)),
    )
    coefficients = assemble(lattice, columns, values="structure_factor")

    def values(cartesian: np.ndarray) -> np.ndarray:
        where = sampling.points(lattice, cartesian, coordinates="cartesian")
        return evaluate(coefficients, where).values

    here = lattice.to_cartesian(random.uniform(0, 1, (50, dimension)))
    translations = lattice.to_cartesian(random.integers(-30, 31, (50, dimension)).astype(float))
    # 500 Å away the last digit of a position is 1e-13 Å, a phase of 1e-12.
    first = values(here)
    np.testing.assert_allclose(values(here + translations), first, atol=2e-9 * np.abs(first).max())
    # Half a translation is not one: a stack aside, odd orders change their sign.
    assert np.abs(values(here + lattice.vectors[0] / 2) - first).max() > 0.1 * np.abs(first).max()
