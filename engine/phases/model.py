"""Structure factors of a trial model: F(h) = Σ_j o_j f_j(s) T_j(h) exp(+2πi h·x_j).

International Tables for Crystallography B, chapter 1.2; T = exp(−Σ β_ik h_i h_k), see `displacements`.
The sum runs over all atoms of the cell, which the operations x' = R x + t make of the given ones.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import BoolArray, ComplexArray, FloatArray, IntArray, as_matrix, as_positive, as_vector, refuse_rows
from engine.errors import InputError
from engine.lattice import Lattice
from engine.phases.displacements import as_tensors, displacements, refuse_against_site
from engine.scattering import form_factors

FormFactor = Callable[[str, FloatArray], FloatArray]
"""From the name of an atom or ion and s = sin θ/λ (Å⁻¹, shape (N,)) to its scattering, shape (N,):
electrons for X-rays, fm for neutrons."""

ON_SITE = 0.05
"""An image this close to its atom, Å, is the atom itself on a special position: more than rounded
coordinates are off, less than any two positions of a disordered atom are apart."""
FRACTIONS = 960
"""Translations are compared to 1/960, of which halves to sixteenths, thirds and fifths are multiples."""
ATOMS_AT_A_TIME = 512
ROWS_AT_A_TIME = 64
"""A tile of complex terms, half a MiB, and the table of an axis stay in cache."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Model:
    """Atoms in a cell; make one with `from_atoms`.

    Attributes
    ----------
    lattice : Lattice
        Of dimension d.
    elements : tuple of str
        One name for each of the M atoms given.
    positions : float64, shape (M, d)
        Fractional.
    occupancy : float64, shape (M,)
        Of the site, 1 where it is full, also on a special position.
    beta : float64, shape (M, d, d)
        Displacement tensors, symmetric.
    rotations : float64, shape (n, d, d)
        Of the operations x' = R x + t that make all atoms of the cell.
    translations : float64, shape (n, d)
    site_order : int64, shape (M,)
        Operations that leave the atom where it is, up to a lattice translation; n/site_order
        atoms of the kind are in the cell.
    """

    lattice: Lattice
    elements: tuple[str, ...]
    positions: FloatArray
    occupancy: FloatArray
    beta: FloatArray
    rotations: FloatArray
    translations: FloatArray
    site_order: IntArray

    @classmethod
    def from_atoms(
        cls,
        lattice: Lattice,
        elements: Sequence[str],
        positions: ArrayLike,
        *,
        occupancy: ArrayLike | None = None,
        b_iso: ArrayLike | None = None,
        beta: ArrayLike | None = None,
        rotations: ArrayLike | None = None,
        translations: ArrayLike | None = None,
        on_site: float = ON_SITE,
    ) -> Model:
        """Check the atoms and find which of them lie on special positions.

        Parameters
        ----------
        lattice : Lattice
            Of dimension d.
        elements : sequence of str, length M
            Names of atoms or ions that the form factors know, such as ``Na1+``.
        positions : float, shape (M, d)
            Fractional.
        occupancy : float, shape (M,), optional
            0…1, of the site: a full special position has 1. All 1 by default.
        b_iso : float, shape (M,), optional
            B in Å²; NaN where `beta` is given. One of the two must be given for each atom.
        beta : float, shape (M, d, d), optional
            Displacement tensors, from `beta_from_u` where U is at hand; NaN where `b_iso` is given.
        rotations, translations : float, shapes (n, d, d) and (n, d), optional
            All operations x' = R x + t modulo lattice translations, those by centring included.
            The identity alone by default.
        on_site : float
            Å; see `ON_SITE`.

        Raises
        ------
        InputError
            Wrong shape; not finite; occupancy outside 0…1; an atom with both or neither of `b_iso`
            and `beta`; negative B; a tensor that is not symmetric, not positive or against the
            symmetry of its site; operations that are no group.
        """
        names = tuple(elements)
        d = lattice.dimension
        if not names or not all(isinstance(name, str) for name in names):
            raise InputError("elements", "is empty or holds something other than names", "give one name for each atom")
        m = len(names)
        x = as_matrix(positions, (m, d), "positions").copy()
        full = np.ones(m) if occupancy is None else as_vector(occupancy, m, "occupancy").copy()
        refuse_rows(
            (full < 0) | (full > 1), "occupancy", "lies outside 0…1", "give occupancies of the site, 1 where full"
        )
        tensors = displacements(lattice, m, b_iso, beta)
        r, t = _operations(d, rotations, translations)
        near = as_positive(on_site, "on_site", "Å")
        stays = _stays(lattice, x, r, t, near)
        order = np.asarray(stays.sum(axis=0), dtype=np.int64)
        refuse_rows(
            r.shape[0] % order != 0,
            "positions",
            f"lies within {near:g} Å of some of its images in a way that no special position has",
            "move it onto the special position, or lower on_site",
        )
        refuse_against_site(lattice, tensors, r, stays)
        return cls(
            lattice=lattice,
            elements=names,
            positions=x,
            occupancy=full,
            beta=tensors,
            rotations=r,
            translations=t,
            site_order=order,
        )

    @property
    def multiplicity(self) -> IntArray:
        """Atoms of each kind in the cell, shape (M,)."""
        return np.asarray(self.translations.shape[0] // self.site_order)

    def without(self, left_out: BoolArray) -> Model:
        """The model less the atoms where `left_out`, shape (M,), is true.

        Raises
        ------
        InputError
            Not M of true or false.
        """
        kept = np.logical_not(left_out)
        if kept.shape != (len(self.elements),):
            raise InputError(
                "left_out", f"has the shape {kept.shape}", f"give {len(self.elements)} of true or false, one per atom"
            )
        return Model(
            lattice=self.lattice,
            elements=tuple(name for name, keep in zip(self.elements, kept.tolist(), strict=True) if keep),
            positions=self.positions[kept],
            occupancy=self.occupancy[kept],
            beta=self.beta[kept],
            rotations=self.rotations,
            translations=self.translations,
            site_order=self.site_order[kept],
        )


def structure_factors(
    atoms: Model,
    indices: IntArray,
    *,
    form_factor: FormFactor | None = None,
    dispersion: Mapping[str, complex] | None = None,
) -> ComplexArray:
    """F(h) of the whole cell; electrons with X-ray form factors.

    Parameters
    ----------
    atoms : Model
    indices : int64, shape (N, d)
        The zero term is allowed: F(000).
    form_factor : callable, optional
        See `FormFactor`. By default free atoms and ions of Waasmaier & Kirfel, Acta Cryst. A51
        (1995) 416.
    dispersion : mapping, optional
        f′ + if″ of every name in the model, electrons. None by default.

    Raises
    ------
    InputError
        Indices of the wrong shape or not whole, a name without form factor or dispersion, s beyond the
        form factor's range.
    """
    d = atoms.lattice.dimension
    h = as_matrix(indices, (-1, d), "indices")
    refuse_rows(np.any(h != np.rint(h), axis=1), "indices", "are not whole numbers", "give integer indices")
    s = atoms.lattice.sine_over_wavelength(h.astype(np.int64))
    x, beta, weight, kind = _expanded(atoms)
    first, second = np.triu_indices(d)
    # h β h over the upper triangle, which holds each element off the diagonal once for two.
    squares = -h[:, first] * h[:, second]
    packed = beta[:, first, second] * np.where(first == second, 1.0, 2.0)
    total = np.zeros(h.shape[0], dtype=np.complex128)
    scattering = form_factor or _free_atom
    for number, name in enumerate(dict.fromkeys(atoms.elements)):
        f = np.asarray(scattering(name, s), dtype=np.float64)
        if f.shape != s.shape or not np.isfinite(f).all():
            raise InputError(
                ("form_factor", name), f"has no value for s up to {s.max():.3g} Å⁻¹", "leave out the outer reflections"
            )
        of_kind = np.flatnonzero(kind == number)
        summed = _geometric(h, squares, x[of_kind], packed[of_kind], weight[of_kind])
        total += (f + _dispersion(dispersion, name)) * summed
    return total


def _geometric(
    h: FloatArray, squares: FloatArray, x: FloatArray, packed: FloatArray, weight: FloatArray
) -> ComplexArray:
    """Σ_j w_j exp(−hβ_jh + 2πi h·x_j), in tiles of reflections by atoms.

    exp(2πi h·x) is a product of one factor an axis, and an axis has few distinct indices.
    """
    summed = np.zeros(h.shape[0], dtype=np.complex128)
    levels = [np.unique(column, return_inverse=True) for column in h.T]
    for left in range(0, x.shape[0], ATOMS_AT_A_TIME):
        part = slice(left, left + ATOMS_AT_A_TIME)
        tables = [_phasors(np.outer(level, x[part, axis])) for axis, (level, _) in enumerate(levels)]
        for start in range(0, h.shape[0], ROWS_AT_A_TIME):
            rows = slice(start, start + ROWS_AT_A_TIME)
            terms = np.exp(squares[rows] @ packed[part].T).astype(np.complex128)
            for table, (_, place) in zip(tables, levels, strict=True):
                terms *= table[place[rows]]
            summed[rows] += terms @ weight[part]
    return summed


def _phasors(turns: FloatArray) -> ComplexArray:
    return np.asarray(np.exp(2j * math.pi * (turns - np.rint(turns))))


def _expanded(atoms: Model) -> tuple[FloatArray, FloatArray, FloatArray, IntArray]:
    """All images: positions (nM, d), β (nM, d, d), weights (nM,), number of the element (nM,).

    An atom on a special position comes site_order times on each of its places and counts for as
    much less each time: the sum has the symmetry also where coordinates are rounded.
    """
    n, d = atoms.translations.shape
    images = np.einsum("nij,mj->nmi", atoms.rotations, atoms.positions) + atoms.translations[:, None, :]
    beta = np.einsum("nij,mjk,nlk->nmil", atoms.rotations, atoms.beta, atoms.rotations, optimize=True)
    names = list(dict.fromkeys(atoms.elements))
    kind = np.array([names.index(name) for name in atoms.elements], dtype=np.int64)
    return (
        images.reshape(-1, d),
        beta.reshape(-1, d, d),
        np.tile(atoms.occupancy / atoms.site_order, n),
        np.tile(kind, n),
    )


def _free_atom(name: str, s: FloatArray) -> FloatArray:
    return np.asarray(form_factors([name], s)[0])


def _dispersion(dispersion: Mapping[str, complex] | None, name: str) -> complex:
    if dispersion is None:
        return 0.0
    if name not in dispersion:
        raise InputError(("dispersion", name), "is absent", "give f′ + if″ for every element of the model")
    value = complex(dispersion[name])
    if not np.isfinite(value):
        raise InputError(("dispersion", name), "is not finite", "give f′ + if″ in electrons")
    return value


def _operations(d: int, rotations: ArrayLike | None, translations: ArrayLike | None) -> tuple[FloatArray, FloatArray]:
    if rotations is None and translations is None:
        return np.eye(d)[None], np.zeros((1, d))
    if rotations is None or translations is None:
        missing = "rotations" if rotations is None else "translations"
        raise InputError(missing, "is absent", "give rotations and translations together")
    t = as_matrix(translations, (-1, d), "translations").copy()
    r = as_tensors(rotations, d, "rotations", t.shape[0])
    keys = np.concatenate([r.reshape(t.shape[0], -1), np.rint((t - np.floor(t)) * FRACTIONS) % FRACTIONS], axis=1)
    whole = np.isfinite(r).all() and np.all(r == np.rint(r)) and np.allclose(np.abs(np.linalg.det(r)), 1)
    products = np.einsum("aij,bjk->abik", r, r).reshape(-1, d * d)
    moved = (np.einsum("aij,bj->abi", r, t) + t[:, None, :]).reshape(-1, d)
    composed = np.concatenate([products, np.rint((moved - np.floor(moved)) * FRACTIONS) % FRACTIONS], axis=1)
    if (
        not whole
        or np.unique(keys, axis=0).shape[0] != t.shape[0]
        or np.unique(np.concatenate([keys, composed]), axis=0).shape[0] != t.shape[0]
    ):
        raise InputError(
            "rotations",
            "and translations are not a group modulo lattice translations",
            "give every operation once, those by centring included, with translations as exact fractions",
        )
    return r, t


def _stays(lattice: Lattice, x: FloatArray, r: FloatArray, t: FloatArray, near: float) -> BoolArray:
    """Which operation leaves which atom in its place, (n, M)."""
    apart = np.einsum("nij,mj->nmi", r, x) + t[:, None, :] - x
    apart -= np.rint(apart)
    return np.asarray(np.linalg.norm(lattice.to_cartesian(apart), axis=-1) <= near)
