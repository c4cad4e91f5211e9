"""Displacement parameters of atoms: U, B and β, and what they must obey.

The displacement factor is T = exp(−Σ β_ik h_i h_k) (International Tables for Crystallography B,
chapter 1.2). The other ways to write it (Trueblood et al., Acta Cryst. A52 (1996) 770) become β:

isotropic    exp(−B s²), B = 8π²U: β = (B/4) G*, G* the metric of the reciprocal lattice, a*_i·a*_k
tensor U     exp(−2π² Σ U^ik a*_i a*_k h_i h_k), as the CIF dictionary has it: β_ik = 2π² a*_i a*_k U^ik

with reciprocal vectors a*_i = g_i/2π and their lengths. A tensor that is isotropic has
U^ik = U a*_i·a*_k/(|a*_i||a*_k|), which is diagonal only where the axes are orthogonal.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import BoolArray, FloatArray, as_vector, refuse_rows
from engine.errors import InputError
from engine.lattice import Lattice

SITE_SYMMETRY = 0.05
"""How far a tensor may be from the symmetry of its site, relative to its largest element: what the
rounding of printed tensors does."""


def beta_from_u(lattice: Lattice, u: ArrayLike) -> FloatArray:
    """β_ik = 2π² a*_i a*_k U^ik; U in Å² on the axes of the CIF dictionary, (M, d, d) -> (M, d, d).

    Raises
    ------
    InputError
        Not a stack of d×d matrices.
    """
    return np.asarray(as_tensors(u, lattice.dimension, "u") * _u_scale(lattice))


def u_from_beta(lattice: Lattice, beta: ArrayLike) -> FloatArray:
    """The inverse of `beta_from_u`; (M, d, d) -> (M, d, d), Å².

    Raises
    ------
    InputError
        Not a stack of d×d matrices.
    """
    return np.asarray(as_tensors(beta, lattice.dimension, "beta") / _u_scale(lattice))


def beta_from_b(lattice: Lattice, b_iso: ArrayLike) -> FloatArray:
    """β = (B/4) G* of isotropic displacements; B in Å², (M,) -> (M, d, d).

    Raises
    ------
    InputError
        Not a row of finite numbers.
    """
    given = as_vector(b_iso, np.asarray(b_iso).size, "b_iso")
    return np.asarray(given[:, None, None] / 4 * _reciprocal_metric(lattice))


def as_tensors(value: ArrayLike, d: int, name: str, count: int | None = None) -> FloatArray:
    """A copy of a stack of d×d matrices, float64, (count, d, d); NaN is let through.

    Raises
    ------
    InputError
        Wrong shape.
    """
    array = np.array(value, dtype=np.float64)
    if array.ndim != 3 or array.shape[1:] != (d, d) or count not in (None, array.shape[0]):
        have = " × ".join(map(str, array.shape)) or "a single number"
        raise InputError(name, f"has the shape {have}", f"give {count or 'n'} × {d} × {d} numbers")
    return array


def displacements(lattice: Lattice, count: int, b_iso: ArrayLike | None, beta: ArrayLike | None) -> FloatArray:
    """β of every atom from what is given for it, (count, d, d); see `Model.from_atoms`."""
    d = lattice.dimension
    b = np.full(count, np.nan) if b_iso is None else np.array(b_iso, dtype=np.float64)
    as_vector(np.where(np.isnan(b), 0.0, b), count, "b_iso")
    tensors = np.full((count, d, d), np.nan) if beta is None else as_tensors(beta, d, "beta", count)
    anisotropic: BoolArray = np.logical_not(np.isnan(tensors).any(axis=(1, 2)))
    refuse_rows(
        np.isnan(b) != anisotropic,
        "b_iso",
        "and beta are both given or both absent for an atom",
        "give one of the two, and NaN for the other",
    )
    refuse_rows(b < 0, "b_iso", "is negative", "give B of 0 or more, Å²")
    isotropic = beta_from_b(lattice, np.where(anisotropic, 0.0, b))
    tensors = np.where(anisotropic[:, None, None], tensors, isotropic)
    refuse_rows(~np.isfinite(tensors.sum(axis=(1, 2))), "beta", "is not finite", "give finite numbers")
    largest = np.abs(tensors).max(axis=(1, 2))
    asymmetry = np.abs(tensors - tensors.transpose(0, 2, 1)).max(axis=(1, 2))
    refuse_rows(asymmetry > 1e-9 * largest, "beta", "is not symmetric", "give β_ik = β_ki")
    refuse_rows(
        np.linalg.eigvalsh(tensors)[:, 0] < -1e-9 * largest,
        "beta",
        "is not positive: the atom would scatter more at larger angles",
        "correct the tensor, or give b_iso",
    )
    return np.asarray(tensors)


def refuse_against_site(lattice: Lattice, beta: FloatArray, rotations: FloatArray, stays: BoolArray) -> None:
    """Refuse tensors (M, d, d) that the operations of their site, `stays` (n, M), would change.

    Raises
    ------
    InputError
        Naming the atoms.
    """
    u = beta / _u_scale(lattice)
    turned = np.einsum("nij,mjk,nlk->nmil", rotations, beta, rotations, optimize=True) / _u_scale(lattice)
    off = np.where(stays, np.abs(turned - u).max(axis=(2, 3)), 0.0).max(axis=0)
    refuse_rows(
        off > SITE_SYMMETRY * np.abs(u).max(axis=(1, 2)),
        "beta",
        "does not have the symmetry of the special position its atom is on",
        "correct the tensor or the position",
    )


def _reciprocal_metric(lattice: Lattice) -> FloatArray:
    return np.asarray(lattice.reciprocal @ lattice.reciprocal.T / (2 * math.pi) ** 2)


def _u_scale(lattice: Lattice) -> FloatArray:
    lengths = np.sqrt(np.diag(_reciprocal_metric(lattice)))
    return np.asarray(2 * math.pi**2 * np.outer(lengths, lengths))
