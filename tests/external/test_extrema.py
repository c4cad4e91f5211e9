"""Extrema of densities against closed forms, tables of special positions, and repeated measurements.

Closed forms: a Gaussian atom whose structure factor is f exp(−B s²) is the density
f (4π/B)^{d/2} exp(−4π² r²/B), with the curvature −8π²/B of its height, as long as B/d_min² is large.
Special positions: International Tables for Crystallography A, memory. Repeated measurements: amplitudes drawn
anew from their σ's, the extremum sought again by Newton's method in plain sums (tests/engine/features/densities.py).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from engine import Columns, Lattice, assemble
from engine.features.extrema import find_extrema
from engine.features.geometry import angles, distances
from engine.features.neighbours import neighbours
from engine.symmetry import space_group
from tests.engine.features.densities import apart, complete, gaussian_atoms, newton, symmetric_set
from tests.external.silicon import ATOMS, BOND_MIDPOINT, EDGE, deformation_set

DRAWS = 2000
SPREAD = 4.5 / np.sqrt(2 * DRAWS)
"""A standard deviation estimated from so many draws is this uncertain, 4.5 times over."""

CELLS = {
    1: (Lattice.from_period(21.0), [[0.12], [0.55]], 0.5),
    2: (Lattice.from_planar_parameters(8.0, 11.0, 104.0), [[0.1, 0.2], [0.62, 0.55], [0.15, 0.7]], 0.5),
    3: (Lattice.from_parameters(6.0, 7.0, 8.0, 82, 97, 106), [[0.1, 0.2, 0.3], [0.62, 0.55, 0.8]], 0.55),
}
B = 16.0


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_gaussian_atoms(dimension):
    """Far apart beside their width of (B/8π²)^½ = 0.45 Å: each is a maximum where it was put, of its closed form."""
    lattice, x, d_min = CELLS[dimension]
    strengths = np.array([6.0, 14.0, 30.0][: len(x)])
    # Not among the ripples between them: there are very many.
    found = find_extrema(gaussian_atoms(lattice, x, strengths, B, d_min), least_value=1.0)
    assert found.count == len(x)
    order = np.argsort(-strengths)
    assert apart(lattice, found.fractional, np.array(x)[order]).diagonal().max() < 1e-5
    heights = strengths[order] * (4 * np.pi / B) ** (dimension / 2)
    np.testing.assert_allclose(found.value, heights, rtol=1e-4)
    np.testing.assert_allclose(
        found.curvatures, np.repeat(-8 * np.pi**2 / B * heights[:, None], dimension, 1), rtol=1e-3
    )


def test_the_bonds_of_gaussian_atoms():
    lattice, x, d_min = CELLS[2]
    found = find_extrema(gaussian_atoms(lattice, x, [9, 8, 7], B, d_min), most=3)
    expected = apart(lattice, x, x)
    made = distances(found, [[0, 1], [0, 2], [1, 2]])
    np.testing.assert_allclose(made.value, expected[[0, 0, 1], [1, 2, 2]], atol=1e-5)
    corner = angles(found, [[1, 0, 2]])
    legs = distances(found, [[0, 1], [0, 2]]).vector
    cosine = legs[0] @ legs[1] / np.prod(np.linalg.norm(legs, axis=1))
    assert corner.value[0] == pytest.approx(np.degrees(np.arccos(cosine)), abs=1e-4)


def diamond():
    """Gaussian atoms on 8(a) of Fd-3m, origin on an atom (choice 1), which the setting of the library has."""
    lattice = Lattice.from_parameters(EDGE, EDGE, EDGE, 90, 90, 90)
    made = gaussian_atoms(lattice, ATOMS, np.full(8, 14.0), 6.0, 0.9, 0.2)
    return replace(made, group=space_group(227))


def test_the_atoms_and_bonds_of_diamond():
    """8(a) with site symmetry -43m of order 24; four neighbours √3/4 a away, at 109.47°."""
    found = find_extrema(diamond(), most=1)
    assert found.multiplicity.tolist() == [8]
    assert found.site_order.tolist() == [24]
    np.testing.assert_allclose(found.fractional, [[0, 0, 0]], atol=1e-12)
    assert not found.position_sigma.any()
    near = neighbours(found, 2.5)
    np.testing.assert_allclose(near.value, np.full(4, np.sqrt(3) / 4 * EDGE), rtol=1e-12)
    np.testing.assert_allclose(near.sigma, 0, atol=1e-12)
    cosines = near.vector @ near.vector.T / near.value[0] ** 2
    np.testing.assert_allclose(cosines[~np.eye(4, dtype=bool)], -1 / 3, atol=1e-12)
    # By the way: twelve next neighbours, a/√2.
    assert len(neighbours(found, 3.9).value) == 16


def test_the_bond_of_silicon():
    """Check 11: the static deformation density has its maxima halfway along the bonds, 16(c) of order 12."""
    one = deformation_set(forbidden_adds=True)
    coefficients = assemble(
        Lattice.from_parameters(*one.cell),
        Columns(
            indices=(np.array(one.h), np.array(one.k), np.array(one.l)),
            amplitude=np.array(one.amplitude),
            phase_deg=np.array(one.phase_deg),
        ),
        values="structure_factor",
    )
    coefficients = replace(coefficients, group=space_group(227))
    found = find_extrema(coefficients, most=1)
    assert found.multiplicity.tolist() == [16]
    assert found.site_order.tolist() == [12]
    images = np.einsum("nij,j->ni", coefficients.group.rotations, found.fractional[0]) + coefficients.group.translations
    assert apart(coefficients.lattice, images, [BOND_MIDPOINT]).min() < 1e-9
    assert found.value[0] == pytest.approx(0.22, abs=0.03)
    # Sharp across the bond and along it alike in kind; two curvatures are equal by the threefold axis.
    gaps = np.diff(found.curvatures[0])
    assert gaps.min() < 1e-9 * np.abs(found.curvatures).max() < gaps.max()


def draws_of(coefficients, seed=1):
    """Amplitudes of a set drawn anew from their σ's, phases kept: complete lists of indices and of values (D, N)."""
    rng = np.random.default_rng(seed)
    indices, values = complete(coefficients)
    errors = rng.normal(size=(DRAWS, coefficients.count)) * coefficients.sigma
    if coefficients.group is not None:
        # Equivalents are one measurement.
        r = coefficients.group.rotations
        orbit = [min(max(tuple(m), tuple(-m)) for m in np.unique(h @ r, axis=0)) for h in coefficients.indices]
        first = {key: row for row, key in reversed(list(enumerate(orbit)))}
        errors = errors[:, [first[key] for key in orbit]]
    others = coefficients.indices.any(axis=1)
    errors = np.concatenate([errors, errors[:, others]], axis=1)
    return indices, values + errors * np.exp(1j * np.angle(values))


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_uncertainties_are_those_of_repeated_measurements(dimension):
    lattice, x, d_min = CELLS[dimension]
    strengths = [6.0, 14.0, 30.0][: len(x)]
    d_min *= 2.8
    coefficients = gaussian_atoms(lattice, x, strengths, 5.0, d_min, 0.12)
    found = find_extrema(coefficients, most=len(x))
    indices, values = draws_of(coefficients)
    places = newton(indices, values, lattice, found.fractional)
    heights = np.einsum("dn,dmn->dm", values, np.exp(2j * np.pi * places @ indices.T)).real
    np.testing.assert_allclose(heights.std(axis=0), found.sigma, rtol=SPREAD)
    cartesian = places @ lattice.vectors
    np.testing.assert_allclose(cartesian.std(axis=0), found.position_sigma, rtol=SPREAD)
    for row in range(found.count):
        drawn = np.cov(cartesian[:, row].T).reshape(dimension, dimension)
        size = np.sqrt(np.outer(np.diag(drawn), np.diag(drawn)))
        assert np.abs((drawn - found.position_covariance[row]) / size).max() < 2 * SPREAD
    made = distances(found, [[0, 1]])
    shift = made.vector[0] - (found.cartesian[1] - found.cartesian[0])
    drawn = np.linalg.norm(cartesian[:, 1] - cartesian[:, 0] + shift, axis=1)
    assert drawn.std() == pytest.approx(made.sigma[0], rel=SPREAD)
    assert drawn.mean() == pytest.approx(made.value[0], abs=5 * made.sigma[0] / np.sqrt(DRAWS) + made.sigma[0] ** 2)
    if dimension == 2:
        corner = angles(found, [[0, 2, 1]])
        ends = found.fractional[[0, 1]] + corner.translations[0]
        legs = cartesian[:, [0, 1]] + (ends - found.fractional[[0, 1]]) @ lattice.vectors - cartesian[:, [2]]
        units = legs / np.linalg.norm(legs, axis=2)[..., None]
        drawn = np.degrees(np.arccos(np.einsum("di,di->d", units[:, 0], units[:, 1])))
        assert drawn.std() == pytest.approx(corner.sigma[0], rel=SPREAD)
        assert drawn.mean() == pytest.approx(corner.value[0], abs=corner.sigma[0])


def test_uncertainties_of_symmetric_sets():
    """Equivalents measured as one: heights, positions, and distances between equivalents whose errors are tied."""
    coefficients = symmetric_set(space_group(4), 3, 1.9, 4.5, 0.05, count=2)
    coefficients = replace(coefficients, sigma=np.full(coefficients.count, 0.01 * np.abs(coefficients.values).max()))
    lattice, group = coefficients.lattice, coefficients.group
    found = find_extrema(coefficients, most=2)
    indices, values = draws_of(coefficients)
    places = newton(indices, values, lattice, found.fractional)
    cartesian = places @ lattice.vectors
    heights = np.einsum("dn,dmn->dm", values, np.exp(2j * np.pi * places @ indices.T)).real
    np.testing.assert_allclose(heights.std(axis=0), found.sigma, rtol=SPREAD)
    np.testing.assert_allclose(cartesian.std(axis=0), found.position_sigma, rtol=SPREAD)
    near = neighbours(found, 6.0, rows=[0])
    moved = np.flatnonzero(near.sigma > 1e-9)
    assert {"x", "-x"} & {near.operation[row].split(",")[0][:2].rstrip("+") for row in moved}
    for row in moved[:12]:
        turned = near.operation[row].startswith("-x")
        rotation = np.diag([-1.0, 1.0, -1.0]) if turned else np.eye(3)
        end = places[:, near.second[row]] @ rotation.T @ lattice.vectors
        start = found.fractional[near.second[row]] @ rotation.T @ lattice.vectors
        vector = near.vector[row] + (end - start) - (cartesian[:, 0] - found.cartesian[0])
        assert np.linalg.norm(vector, axis=1).std() == pytest.approx(near.sigma[row], rel=SPREAD)
    assert group.order == 2
