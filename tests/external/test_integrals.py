"""Integrals against sources that share nothing with the engine: 50-digit sums, electrons in atoms."""

from __future__ import annotations

from fractions import Fraction

import mpmath
import numpy as np
import pytest

from engine import Columns, Lattice, assemble
from engine.features.integrals import ball, integrals, parallelepiped, segment, slab
from engine.features.layers import stack_layers

CELL = (7.1, 8.3, 9.7, 88.0, 101.0, 95.0)


def invented(seed=3, count=40, reach=6):
    """Indices and coefficients of an invented real density, one of each pair."""
    rng = np.random.default_rng(seed)
    rows = {(0, 0, 0)}
    while len(rows) < count:
        h, k, l = (int(x) for x in rng.integers(-reach, reach + 1, 3))
        if (l, k, h) > (0, 0, 0) and (-h, -k, -l) not in rows:
            rows.add((h, k, l))
    indices = np.array(sorted(rows))
    values = rng.normal(size=len(indices)) + 1j * rng.normal(size=len(indices))
    return indices, np.where(indices.any(axis=1), values, values.real)


def box_in_fifty_digits(indices, values, origin, edges, volume):
    """∫ over o + Σ s_j e_j, 0 ≤ s_j ≤ 1, term by term: the product of (exp(2πi m·e_j) − 1)/(2πi m·e_j)."""
    with mpmath.workdps(50):
        total = mpmath.mpf(0)
        for row, value in zip(indices.tolist(), values, strict=True):
            term = mpmath.mpc(value) * mpmath.expjpi(2 * _exact(row, origin))
            for edge in edges:
                turns = _exact(row, edge)
                if turns:
                    term *= (mpmath.expjpi(2 * turns) - 1) / (2j * mpmath.pi * turns)
            total += term.real * (2 if any(row) else 1)
        return float(total * volume)


def _exact(row, vector):
    total = sum(index * Fraction(x) for index, x in zip(row, vector, strict=True))
    return mpmath.mpf(total.numerator) / total.denominator


def columns_of(indices, values):
    return Columns(indices=tuple(indices.T), real=values.real, imag=values.imag)


@pytest.mark.parametrize("far", [0.0, 1000.0])
def test_a_box_in_fifty_digits(far):
    """Check 16 for integrals; far from the origin too, where phases m·x lose digits."""
    lattice = Lattice.from_parameters(*CELL)
    indices, values = invented()
    made = assemble(lattice, columns_of(indices, values), values="density_coefficient")
    origin = [0.25 + far, -0.375 - far, 0.125]
    edges = [[0.5, 0.0625, 0.0], [0.125, 0.25, -0.0625], [0.0, 0.0, 1.75]]
    size = float(np.linalg.det(np.array(edges))) * lattice.volume
    found = integrals(made, [parallelepiped(lattice, edges, origin=origin)])
    expected = box_in_fifty_digits(indices, values, origin, edges, size)
    assert found.values[0] == pytest.approx(expected, abs=1e-12 * np.abs(values).sum() * size)
    one = integrals(made, [segment(lattice, origin, np.add(origin, edges[0]))])
    length = float(np.linalg.norm(lattice.to_cartesian(np.array(edges[0]))))
    wanted = box_in_fifty_digits(indices, values, origin, edges[:1], length)
    assert one.values[0] == pytest.approx(wanted, abs=1e-12 * np.abs(values).sum() * length)


def test_a_ball_by_quadrature_in_many_digits():
    """∫ exp(iG·r) over a ball about the origin is ∫ 4πr² sin(Gr)/(Gr) dr, done by mpmath."""
    lattice = Lattice.from_parameters(*CELL)
    indices, values = invented(count=6)
    made = assemble(lattice, columns_of(indices, values), values="density_coefficient")
    radius = 2.25
    total = 0.0
    with mpmath.workdps(20):
        for row, value in zip(indices, values, strict=True):
            g = mpmath.mpf(float(np.linalg.norm(row @ lattice.reciprocal)))
            wave = mpmath.quad(lambda r, g=g: 4 * mpmath.pi * r**2 * mpmath.sinc(g * r), [0, radius / 2, radius])
            total += float(wave) * value.real * (2 if row.any() else 1)
    found = integrals(made, [ball(lattice, [0, 0, 0], radius)]).values[0]
    assert found == pytest.approx(total, rel=1e-11)


def test_electrons_of_gaussian_atoms():
    """An invented crystal of two Gaussian atoms, Z = 6 and 14 electrons of B = 9 Å²: each is found in a box
    around it, both in the cell, and half of one in the half space through its centre."""
    lattice = Lattice.from_parameters(9.0, 9.0, 18.0, 90.0, 90.0, 90.0)
    reach = (20, 20, 40)
    axes = [np.arange(-n, n + 1) for n in reach]
    indices = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, 3)
    s = lattice.magnitudes(indices) / (4 * np.pi)
    indices, s = indices[s < 1.1], s[s < 1.1]
    atoms = {6: (0.5, 0.5, 0.25), 14: (0.5, 0.5, 0.75)}
    factor = sum(z * np.exp(2j * np.pi * indices @ np.array(x)) for z, x in atoms.items()) * np.exp(-9.0 * s**2)
    made = assemble(lattice, columns_of(indices, factor), values="structure_factor", unit="e/Å³")
    half = np.diag([1.0, 1.0, 0.5])
    found = integrals(
        made,
        [
            parallelepiped(lattice, np.eye(3), origin=[0, 0, 0]),
            parallelepiped(lattice, half, origin=[0, 0, 0]),
            parallelepiped(lattice, half, origin=[0, 0, 0.5]),
            ball(lattice, atoms[6], 4.0),
            slab(lattice, [0, 0, 1], 9.0, 13.5, per="cell"),
            slab(lattice, [0, 0, 1], 9.0, 18.0),
        ],
    )
    assert found.units == ("e", "e", "e", "e", "e", "e/Å²")
    np.testing.assert_allclose(found.values, [20, 6, 14, 6, 7, 14 / 81], rtol=2e-5)
    # Its layers are those atoms: areas Z per cross-section, standard deviation √(B/8π²).
    layers = stack_layers(made, [0, 0, 1], baseline="zero", least_prominence=1e-3)
    np.testing.assert_allclose(layers.position, [4.5, 13.5], atol=1e-6)
    np.testing.assert_allclose(layers.area, [6 / 81, 14 / 81], rtol=1e-4)
    np.testing.assert_allclose(layers.width, 2 * np.sqrt(2 * np.log(2) * 9 / (8 * np.pi**2)), rtol=1e-5)
