"""Displacement tensors against the mean square displacement along the scattering vector, in Cartesian axes."""

from __future__ import annotations

import numpy as np
import pytest

from engine.lattice import Lattice
from engine.phases import beta_from_b, beta_from_u, u_from_beta
from engine.phases.displacements import as_tensors, displacements, refuse_against_site
from tests.engine.phases.trial import triclinic
from tests.strategies import refusal_of

LATTICE = triclinic()
H = np.array([[1, 0, 0], [0, 2, -1], [3, -4, 5]])
SPREAD = np.array([[0.03, 0.006, -0.004], [0.006, 0.02, 0.005], [-0.004, 0.005, 0.05]])
"""⟨u uᵀ⟩ in Cartesian axes, Å²."""


def exponents(beta):
    return np.einsum("hi,ij,hj->h", H, beta, H)


def test_tensor_u_of_the_cif_dictionary():
    """A displacement is u = Σ ξ^i |a*_i| a_i and U^ik = ⟨ξ^i ξ^k⟩; T = exp(−½⟨(G·u)²⟩).

    The components ξ^i are taken from Cartesian ones by solving for them.
    """
    lengths = np.linalg.norm(LATTICE.reciprocal, axis=1) / (2 * np.pi)
    axes = LATTICE.vectors.T * lengths
    u = np.linalg.solve(axes, np.linalg.solve(axes, SPREAD).T)
    wavevector = H @ LATTICE.reciprocal
    expected = np.einsum("hi,ij,hj->h", wavevector, SPREAD, wavevector) / 2
    beta = beta_from_u(LATTICE, u[None])
    np.testing.assert_allclose(exponents(beta[0]), expected, rtol=1e-12)
    np.testing.assert_allclose(u_from_beta(LATTICE, beta)[0], u, rtol=1e-12)


@pytest.mark.parametrize(
    "lattice", [LATTICE, Lattice.from_planar_parameters(3.0, 5.0, 110.0), Lattice.from_period(40.0)]
)
def test_isotropic_is_a_multiple_of_the_metric(lattice):
    """B s² with s = |G|/4π, and U^ik = U cos of the reciprocal angle, B = 8π²U."""
    d = lattice.dimension
    h = H[:, :d]
    unit = lattice.reciprocal / np.linalg.norm(lattice.reciprocal, axis=1)[:, None]
    beta = beta_from_b(lattice, [1.7])
    expected = 1.7 * (np.linalg.norm(h @ lattice.reciprocal, axis=1) / (4 * np.pi)) ** 2
    np.testing.assert_allclose(np.einsum("hi,ij,hj->h", h, beta[0], h), expected, rtol=1e-12)
    u = 1.7 / (8 * np.pi**2) * unit @ unit.T
    np.testing.assert_allclose(beta_from_u(lattice, u[None]), beta, rtol=1e-12, atol=1e-18)


def test_each_atom_by_its_own_way():
    nan = np.full((3, 3), np.nan)
    tensor = beta_from_u(LATTICE, SPREAD[None])[0]
    made = displacements(LATTICE, 2, [np.nan, 2.0], [tensor, nan])
    np.testing.assert_array_equal(made[0], tensor)
    np.testing.assert_array_equal(made[1], beta_from_b(LATTICE, [2.0])[0])


def test_a_tensor_keeps_the_symmetry_of_its_site():
    """On a twofold axis along z of a rectangular cell U13 and U23 vanish (Peterse & Palm, 1966)."""
    cell = Lattice.from_parameters(5, 6, 7, 90, 90, 90)
    rotations = np.array([np.eye(3), np.diag([-1, -1, 1])])
    allowed = np.array([[0.02, 0.01, 0], [0.01, 0.03, 0], [0, 0, 0.04]])
    wrong = allowed + np.array([[0, 0, 0.01], [0, 0, 0], [0.01, 0, 0]])
    beta = beta_from_u(cell, [allowed, wrong])
    refuse_against_site(cell, beta, rotations, np.array([[True, True], [True, False]]))
    refusal = refusal_of(lambda: refuse_against_site(cell, beta, rotations, np.ones((2, 2), dtype=bool)))
    assert (refusal.path, refusal.rows) == (("beta",), (1,))


GOOD = np.diag([0.01, 0.02, 0.03])
SKEW = GOOD + np.array([[0, 0.001, 0], [0, 0, 0], [0, 0, 0]])
NONE = np.full((3, 3), np.nan)


@pytest.mark.parametrize(
    ("call", "path", "rows"),
    [
        (lambda: displacements(LATTICE, 2, None, None), ("b_iso",), (0, 1)),
        (lambda: displacements(LATTICE, 2, [1.0, 1.0], [GOOD, NONE]), ("b_iso",), (0,)),
        (lambda: displacements(LATTICE, 2, [1.0, -1.0], None), ("b_iso",), (1,)),
        (lambda: displacements(LATTICE, 2, [1.0], None), ("b_iso",), ()),
        (lambda: displacements(LATTICE, 1, None, [GOOD, GOOD]), ("beta",), ()),
        (lambda: displacements(LATTICE, 2, None, [GOOD, SKEW]), ("beta",), (1,)),
        (lambda: displacements(LATTICE, 2, None, [GOOD, -GOOD]), ("beta",), (1,)),
        (lambda: displacements(LATTICE, 2, None, [GOOD, GOOD + np.inf]), ("beta",), (1,)),
        (lambda: as_tensors(0.1, 3, "u"), ("u",), ()),
        (lambda: beta_from_u(LATTICE, [[0.1, 0.1, 0.1]]), ("u",), ()),
        (lambda: u_from_beta(LATTICE, [[0.1, 0.1, 0.1]]), ("beta",), ()),
        (lambda: beta_from_b(LATTICE, [0.1, np.nan]), ("b_iso", 1), ()),
    ],
)
def test_refusals(call, path, rows):
    refusal = refusal_of(call)
    assert (refusal.path, refusal.rows) == (path, rows)
