"""What symmetry does to reflections: equivalents, orbits, absences, centric reflections, weights.

From ρ(Rx + t) = ρ(x) follows F(hR) = F(h) exp(−2πi h·t), h a row of indices (International
Tables for Crystallography B, chapter 1.4). A real density obeys F(−h) = conj F(h) besides
(Friedel's law). All of it is exact: indices and translations are whole numbers, phases are
reduced before they become floating point.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import MAX_INDEX, BoolArray, FloatArray, IntArray
from engine.errors import InputError
from engine.symmetry.group import Group

_BLOCK = 1 << 13
"""Rows treated at a time, so that the table of their equivalents stays in the processor's cache."""


@dataclass(frozen=True, slots=True)
class Packing:
    """Index rows as single whole numbers, ordered by the last index, then the one before it.

    key = Σ h_j base^j with |h_j| ≤ (base − 1)/2: distinct rows have distinct keys, and
    key(−h) = −key(h).
    """

    weights: IntArray

    @classmethod
    def of(cls, indices: IntArray, group: Group) -> Packing:
        """Room for all equivalents of the indices (N, d).

        Raises
        ------
        InputError
            Indices so large that their keys would not fit 64 bits.
        """
        growth = int(np.abs(group.rotations).sum(axis=1).max())
        largest = int(np.abs(indices).max(initial=1)) * growth
        base = 2 * largest + 1
        if (base**group.dimension - 1) // 2 > np.iinfo(np.int64).max:
            raise InputError(
                "indices", f"reach ±{largest} among the equivalents", "check the indices, the cell and the group"
            )
        return cls(np.array([base**j for j in range(group.dimension)], dtype=np.int64))

    def columns(self, rotations: IntArray) -> IntArray:
        """R·weights for each rotation: h @ columns are the keys of hR; (n, d, d) -> (d, n)."""
        return np.ascontiguousarray((rotations @ self.weights).T)

    def unpacked(self, keys: IntArray) -> IntArray:
        """The rows of keys; (M,) -> (M, d)."""
        d = self.weights.size
        if d == 1:
            return keys[:, None].copy()
        base = int(self.weights[1])
        half = (base - 1) // 2
        made = np.empty((keys.size, d), dtype=np.int64, order="F")
        rest = keys
        for j in range(d - 1):
            # Divide first: key + half could leave 64 bits.
            quotient, digit = np.divmod(rest, base)
            over = digit > half
            made[:, j] = digit - base * over
            rest = quotient + over
        made[:, d - 1] = rest
        return made


def as_index_rows(indices: ArrayLike, dimension: int, name: str = "indices") -> IntArray:
    """Rows of whole indices, int64, shape (N, d); N may be 0.

    Raises
    ------
    InputError
        Wrong shape, not whole numbers, or beyond the bound of an index.
    """
    rows = np.asarray(indices)
    if rows.ndim != 2 or rows.shape[1] != dimension or rows.dtype.kind not in "iuf":
        raise InputError(name, "does not hold rows of indices", f"give numbers of shape (N, {dimension})")
    with np.errstate(invalid="ignore"):
        bad = np.flatnonzero(~np.all((np.abs(rows) <= MAX_INDEX) & (np.rint(rows) == rows), axis=1))
    if bad.size:
        raise InputError.for_rows(
            name, bad, f"holds what is not a whole number within ±{MAX_INDEX}", "give integer indices"
        )
    return rows.astype(np.int64, copy=False)


def equivalents(indices: ArrayLike, group: Group) -> tuple[IntArray, FloatArray]:
    """Equivalents hR of each reflection, and by how much their phase exceeds that of h.

    Parameters
    ----------
    indices : int, shape (N, d)
    group : Group
        Of n operations.

    Returns
    -------
    int64, shape (n, N, d)
        hR, an operation after the other; not distinct where h lies on a symmetry element.
    float64, shape (n, N)
        φ(hR) − φ(h) = −2π h·t, radians, in (−2π, 0].

    Raises
    ------
    InputError
        Not rows of whole indices of the group's dimension.
    """
    rows = as_index_rows(indices, group.dimension)
    turns = (group.numerators @ rows.T) % group.denominator
    return np.asarray(rows @ group.rotations), np.asarray(-2 * np.pi / group.denominator * turns, dtype=np.float64)


@dataclass(frozen=True, slots=True, kw_only=True)
class Classification:
    """What a group makes of each reflection.

    Attributes
    ----------
    absent : bool, shape (N,)
        Some operation has hR = h and h·t not an integer, so F = 0.
    centric : bool, shape (N,)
        Some operation has hR = −h, so a real density has φ = π h·t (mod π).
    restricted_phase : float64, shape (N,)
        That phase in [0, π), radians; NaN where the reflection is not centric.
    epsilon : int64, shape (N,)
        Statistical weight ε: operations with hR = h, centring left out.
    multiplicity : int64, shape (N,)
        Distinct equivalents, Friedel mates among them.
    """

    absent: BoolArray
    centric: BoolArray
    restricted_phase: FloatArray
    epsilon: IntArray
    multiplicity: IntArray


def classify(indices: ArrayLike, group: Group) -> Classification:
    """Absences, centric reflections with their phases, weights ε and multiplicities.

    International Tables for Crystallography B, chapters 1.4 and 2.1. F(0) counts as centric:
    it is real.

    Raises
    ------
    InputError
        Not rows of whole indices of the group's dimension.
    """
    rows = as_index_rows(indices, group.dimension)
    packing = Packing.of(rows, group)
    columns = packing.columns(group.rotations[group.cosets])
    # Operations of one coset differ by centring translations: once those are known to leave h
    # alone, h·t modulo 1 is the same for all of them.
    shifts = group.numerators[group.cosets].T
    centring = group.centring.T
    size = len(rows)
    absent, centric = np.zeros(size, dtype=np.bool_), np.zeros(size, dtype=np.bool_)
    half_turns, epsilon = np.zeros(size, dtype=np.int64), np.empty(size, dtype=np.int64)
    for part in _blocks(size):
        h = rows[part]
        keys, own = h @ columns, (h @ packing.weights)[:, None]
        same, opposite = keys == own, keys == -own
        turns = (h @ shifts) % group.denominator
        absent[part] = np.any(same & (turns != 0), axis=1) | np.any((h @ centring) % group.denominator != 0, axis=1)
        epsilon[part] = np.count_nonzero(same, axis=1)
        centric[part] = opposite.any(axis=1)
        half_turns[part] = np.take_along_axis(turns, opposite.argmax(axis=1)[:, None], axis=1)[:, 0]
    return Classification(
        absent=absent,
        centric=centric,
        restricted_phase=np.where(centric, np.pi / group.denominator * half_turns, np.nan),
        epsilon=epsilon,
        multiplicity=group.cosets.size // epsilon * np.where(centric, 1, 2),
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class Orbits:
    """Reflections gathered by symmetry: N rows in M orbits.

    The representative of an orbit is the equivalent that comes last when rows are ordered by
    their last index, then the one before it, and so on: l ≥ 0 first of all.

    Attributes
    ----------
    unique : int64, shape (M, d)
        Representatives, in that order.
    orbit : int64, shape (N,)
        Row of ``unique`` that each reflection belongs to.
    operation : int64, shape (N,)
        Operation of the group with unique[orbit] = hR, or −hR where conjugated.
    conjugated : bool, shape (N,)
        Whether a Friedel mate was taken on the way.
    shift : float64, shape (N,)
        2π h·t of that operation, in [0, 2π), radians.
    """

    unique: IntArray
    orbit: IntArray
    operation: IntArray
    conjugated: BoolArray
    shift: FloatArray

    @property
    def count(self) -> int:
        """Orbits."""
        return int(self.unique.shape[0])

    def carried(self, phase: FloatArray) -> FloatArray:
        """Phases of the rows brought to their representatives, radians in [−π, π]; (N,) -> (N,)."""
        moved = phase - self.shift
        return wrapped(np.where(self.conjugated, -moved, moved))


def orbits(indices: ArrayLike, group: Group, *, friedel: bool) -> Orbits:
    """Gather reflections into orbits, Friedel mates in one orbit or each by itself.

    Parameters
    ----------
    indices : int, shape (N, d)
    group : Group
    friedel : bool
        Whether F(−h) = conj F(h) joins mates: the density is real, anomalous scattering left aside.

    Raises
    ------
    InputError
        Not rows of whole indices of the group's dimension.
    """
    rows = as_index_rows(indices, group.dimension)
    packing = Packing.of(rows, group)
    chosen = rotations_up_to_sign(group) if friedel else group.cosets
    columns = packing.columns(group.rotations[chosen])
    size = len(rows)
    keys, operation = np.empty(size, dtype=np.int64), np.empty(size, dtype=np.int64)
    conjugated = np.zeros(size, dtype=np.bool_)
    for part in _blocks(size):
        made = rows[part] @ columns
        best = (np.abs(made) if friedel else made).argmax(axis=1)
        found = np.take_along_axis(made, best[:, None], axis=1)[:, 0]
        if friedel:
            conjugated[part] = found < 0
            found = np.abs(found)
        keys[part], operation[part] = found, chosen[best]
    unique, orbit = np.unique(keys, return_inverse=True)
    turns = np.einsum("ij,ij->i", rows, group.numerators[operation]) % group.denominator
    return Orbits(
        unique=packing.unpacked(unique),
        orbit=orbit.astype(np.int64),
        operation=operation,
        conjugated=conjugated,
        shift=2 * np.pi / group.denominator * turns,
    )


def rotations_up_to_sign(group: Group) -> IntArray:
    """Operations that with Friedel's law give every equivalent: of each pair R, −R the first."""
    flat = group.rotations[group.cosets].reshape(group.cosets.size, -1)
    sign = np.sign(np.take_along_axis(flat, (flat != 0).argmax(axis=1)[:, None], axis=1))
    _, first = np.unique(flat * sign, axis=0, return_index=True)
    return np.asarray(group.cosets[np.sort(first)])


def wrapped(phase: FloatArray) -> FloatArray:
    """Phases brought to [−π, π], radians; those that lie there already stay as they are."""
    return np.asarray(phase - 2 * np.pi * np.rint(phase / (2 * np.pi)))


def _blocks(size: int) -> Iterator[slice]:
    return (slice(start, min(start + _BLOCK, size)) for start in range(0, size, _BLOCK))
