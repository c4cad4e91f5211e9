"""Standard uncertainties against published formulas."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from engine import Columns, Lattice, assemble, evaluate, sampling
from engine.phases import coefficient_set
from engine.reflections import Reflections
from engine.symmetry import classify, plane_group, space_group, stack_group, unique_reflections
from engine.symmetry.expand import expand

CELL = Lattice.from_parameters(7.1, 8.3, 9.7, 84, 97, 102)


def sigma_at(coefficients, positions):
    where = sampling.points(coefficients.lattice, positions)
    return evaluate(coefficients, where, uncertainty=True).sigma.values


@pytest.mark.parametrize("phase_sigma_deg", [None, 0.5, 2.0])
def test_p1_without_correlation(phase_sigma_deg):
    """var n = 2Σ(σ_A² + A²σ_φ²) + 2Σ(σ_A² − A²σ_φ²) cos(2G·r + 2φ), over one of each pair, for small σ_φ.

    Conventions of the project, §7; for amplitudes alone Cruickshank & Rollett, Acta Cryst. 6 (1953) 705.
    """
    rng = np.random.default_rng(0)
    indices = np.unique(rng.integers(-6, 7, (120, 3)), axis=0)
    indices = indices[indices[:, 2] > 0]
    amplitude, phase = rng.uniform(1, 9, len(indices)), rng.uniform(-np.pi, np.pi, len(indices))
    sigma = rng.uniform(0.05, 0.4, len(indices))
    turn = (
        np.zeros(len(indices))
        if phase_sigma_deg is None
        else np.deg2rad(phase_sigma_deg) * rng.uniform(0.5, 1, len(indices))
    )
    made = assemble(
        CELL,
        Columns(
            indices=tuple(indices.T),
            amplitude=amplitude,
            phase_deg=np.rad2deg(phase),
            sigma=sigma,
            phase_sigma_deg=None if phase_sigma_deg is None else np.rad2deg(turn),
        ),
        values="density_coefficient",
    )
    positions = rng.uniform(-1, 1, (40, 3))
    angles = 2 * (2 * np.pi * positions @ indices.T + phase)
    expected = 2 * np.sum(sigma**2 + amplitude**2 * turn**2)
    expected = expected + 2 * np.cos(angles) @ (sigma**2 - amplitude**2 * turn**2)
    np.testing.assert_allclose(sigma_at(made, positions) ** 2, expected, rtol=3 * turn.max() ** 2 + 1e-9)


def random_set(group, lattice, d_min, rng):
    """Random amplitudes, all with the same σ for every coefficient, and random phases that the group allows."""
    unique = unique_reflections(lattice, group, d_min, friedel=True)
    kinds = classify(unique, group)
    count = len(unique)
    allowed = kinds.restricted_phase + np.pi * rng.integers(0, 2, count)
    reflections = Reflections(
        lattice=lattice,
        indices=unique,
        quantity="amplitude",
        observed=rng.uniform(1, 9, count),
        sigma=np.ones(count),
        phase=np.where(kinds.centric, allowed, rng.uniform(-np.pi, np.pi, count)),
        phase_sigma=None,
        merit=None,
        row=np.arange(count),
        scale="arbitrary",
    )
    return replace(coefficient_set(expand(reflections, group).reflections), group=group)


ORTHORHOMBIC = Lattice.from_parameters(9, 10, 11, 90, 90, 90)
CUBIC = Lattice.from_parameters(10, 10, 10, 90, 90, 90)
SITES = {
    # Group, cell, d_min, order of the site's symmetry, fractional position.
    "inversion centre of P-1": (space_group("P-1"), CELL, 1.0, 2, [0.5, 0, 0.5]),
    "mirror of Pm": (space_group("Pm"), ORTHORHOMBIC, 1.0, 2, [0.13, 0.5, 0.37]),
    "2-fold axis of P2": (space_group("P2"), ORTHORHOMBIC, 1.0, 2, [0.5, 0.21, 0]),
    "2/m of P2/m": (space_group("P2/m"), ORTHORHOMBIC, 0.9, 4, [0, 0.5, 0.5]),
    "3-fold axis of Pa-3": (space_group("Pa-3"), CUBIC, 0.75, 3, [0.17, 0.17, 0.17]),
    "-3 of Pa-3": (space_group("Pa-3"), CUBIC, 0.75, 6, [0, 0, 0]),
    "4mm of p4mm": (plane_group("p4mm"), Lattice.from_planar_parameters(30, 30, 90), 0.8, 8, [0.5, 0.5]),
    "centre of a stack": (stack_group("-1"), Lattice.from_period(400), 1.0, 2, [0.5]),
}


@pytest.mark.parametrize("site", SITES)
def test_sigma_on_symmetry_elements(site):
    """Larger than at general positions by √(order of the site symmetry) for many random terms.

    Check 15; Cruickshank & Rollett, Acta Cryst. 6 (1953) 705.
    """
    group, lattice, d_min, order, position = SITES[site]
    rng = np.random.default_rng(5)
    general = rng.uniform(0.06, 0.44, (60, lattice.dimension))
    variances = np.zeros(2)
    for _ in range(10):
        made = random_set(group, lattice, d_min, rng)
        variances += [np.mean(sigma_at(made, [position]) ** 2), np.mean(sigma_at(made, general) ** 2)]
    ratio = np.sqrt(variances[0] / variances[1])
    assert ratio == pytest.approx(np.sqrt(order), rel=0.04)
