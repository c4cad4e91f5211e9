"""Positions as sites of a crystal: which are the same, their multiplicity and site symmetry.

International Tables for Crystallography A, chapter 1.4: the operations that leave a position where it is
form its site-symmetry group, whose order times the multiplicity is the order of the group.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components
from scipy.spatial import cKDTree

from engine.arrays import BoolArray, FloatArray, IntArray
from engine.features.jets import JetField
from engine.lattice import Lattice
from engine.symmetry.group import Group
from engine.symmetry.operations import Operation, format_operation

SAME = 1e-5
"""Å. Converged positions are the same where they are closer; and on a symmetry element where it is."""
INVARIANT = 1e-6
"""Largest change of a field, relative to its root mean square, under an operation that it has."""
PROBES = 4
KEY = 1_000_000
"""Steps of a coordinate in which positions are ranked."""
PORTION = 1 << 20


@dataclass(frozen=True, slots=True)
class Domain:
    """Positions that hold at least one of each set of equivalents: where f(x) = Σ w_j cos 2π(x_j − p_j) is largest.

    p and w are chosen without relation to any symmetry; a margin takes care of ties.
    """

    group: Group

    def holds(self, lattice: Lattice, fractional: FloatArray, margin: float) -> BoolArray:
        """Whether a position within `margin` (Å) may be the one with the largest f; (M, d) -> (M,)."""
        d = lattice.dimension
        weights, origin = np.array([1.0, 1.37, 0.81])[:d], np.array([0.1234, 0.0577, 0.2019])[:d]
        # |∇f| ≤ Σ w_j |g_j|; the position and its images move by the margin each.
        tie = 2 * margin * float(weights @ np.linalg.norm(lattice.reciprocal, axis=1))

        def rank(x: FloatArray) -> FloatArray:
            return np.asarray(np.cos(2 * np.pi * (x - origin)) @ weights)

        own = rank(fractional)
        held = np.ones(len(fractional), dtype=np.bool_)
        for rotation, translation in zip(self.group.rotations[1:], self.group.translations[1:], strict=True):
            rows = np.flatnonzero(held)
            held[rows] = rank(fractional[rows] @ rotation.T + translation) <= own[rows] + tie
        return held


@dataclass(frozen=True, slots=True)
class Sites:
    """Distinct positions, one of each set of equivalents.

    Attributes
    ----------
    fractional : float64, shape (M, d)
        In [0, 1); of the equivalents the one that comes first by x, then y, then z.
    rows : int64, shape (M,)
        Position that each was made from.
    multiplicity : int64, shape (M,)
        Equivalents in the cell.
    shift : float64, shape (M,)
        Å by which it was moved onto the symmetry elements that it lies on.
    """

    fractional: FloatArray
    rows: IntArray
    multiplicity: IntArray
    shift: FloatArray


@dataclass(frozen=True, slots=True)
class SiteSymmetry:
    """Site symmetry of M positions.

    Attributes
    ----------
    order : int64, shape (M,)
    operations : tuple of tuple of str
        Those that leave the position where it is, as coordinates, lattice translations included.
    freedom : float64, shape (M, d, d)
        Cartesian projector on the displacements that keep the site symmetry.
    """

    order: IntArray
    operations: tuple[tuple[str, ...], ...]
    freedom: FloatArray


def held_group(group: Group, field: JetField) -> Group:
    """The operations of a group that a series has in truth, tried at positions of no symmetry."""
    d = group.dimension
    probes = np.random.default_rng(19).random((PROBES, d))
    images = np.einsum("nij,mj->nmi", group.rotations, probes) + group.translations[:, None]
    values = field.at(images.reshape(-1, d)).value.reshape(group.order, PROBES)
    others = field.series.indices.any(axis=1)
    spread = float(np.sqrt(2 * np.sum(np.abs(field.series.values[others]) ** 2)))
    kept = np.abs(values - values[0]).max(axis=1) <= INVARIANT * spread
    if kept.all():
        return group
    name = f"{np.count_nonzero(kept)} of the {group.order} operations of {group.name}"
    return Group(rotations=group.rotations[kept], translations=group.translations[kept], name=name)


def merged(lattice: Lattice, fractional: FloatArray, kind: IntArray, distance: float) -> IntArray:
    """Rows (M, d) that stay when those of one kind within `distance` (Å), modulo translations, become one."""
    pairs = close_pairs(lattice, fractional, fractional, distance)
    same = kind[pairs[:, 0]] == kind[pairs[:, 1]]
    return _first_of_each(len(fractional), pairs[same])


def close_pairs(lattice: Lattice, first: FloatArray, second: FloatArray, distance: float) -> IntArray:
    """Pairs (i, j) with first_i and second_j within `distance` (Å) modulo translations; (K, 2)."""
    if not len(first) or not len(second):
        return np.zeros((0, 2), dtype=np.int64)
    # |Δx| ≤ |Δr|·‖A⁻¹‖: the search in fractional coordinates finds too many, never too few.
    bound = distance * float(np.linalg.norm(np.linalg.inv(lattice.vectors), 2)) * (1 + 1e-6)
    left, right = _on_circle(first), _on_circle(second)
    circle = np.ones(lattice.dimension)
    other = cKDTree(right, boxsize=circle)
    made = cKDTree(left, boxsize=circle).sparse_distance_matrix(other, min(bound, 0.5), output_type="ndarray")
    pairs = np.stack([made["i"], made["j"]], axis=1).astype(np.int64)
    gap = left[pairs[:, 0]] - right[pairs[:, 1]]
    near = np.linalg.norm(lattice.to_cartesian(gap - np.rint(gap)), axis=1) <= distance
    return np.asarray(pairs[near])


def _on_circle(fractional: FloatArray) -> FloatArray:
    wrapped = fractional - np.floor(fractional)
    return np.asarray(np.where(wrapped >= 1.0, 0.0, wrapped))


def _first_of_each(count: int, pairs: IntArray) -> IntArray:
    """The lowest row of each connected set."""
    graph = coo_array((np.ones(len(pairs), dtype=np.int8), (pairs[:, 0], pairs[:, 1])), shape=(count, count))
    _, label = connected_components(graph, directed=False)
    return np.unique(label, return_index=True)[1].astype(np.int64)


def sites_of(lattice: Lattice, group: Group, fractional: FloatArray, kind: IntArray) -> Sites:
    """Gather converged positions (M, d) of kinds (M,) into sites; the rows' order is kept."""
    place = fractional.copy()
    order = np.ones(len(place), dtype=np.int64)
    for rows in _portions(len(place), group.order):
        # Snapped on one element a position may turn out to lie on another one as well.
        for _ in range(3):
            gap, fixed = _fixing(lattice, group, place[rows])
            order[rows] = np.count_nonzero(fixed, axis=1)
            place[rows] += np.einsum("mn,mni->mi", fixed, gap) / order[rows, None]
    kept = _distinct(lattice, group, place, kind)
    leading = np.concatenate(
        [
            np.zeros((0, lattice.dimension)),
            *(_leading(group, place[kept[rows]]) for rows in _portions(len(kept), group.order)),
        ]
    )
    return Sites(
        fractional=leading,
        rows=kept,
        multiplicity=group.order // order[kept],
        shift=np.linalg.norm(lattice.to_cartesian(place[kept] - fractional[kept]), axis=1),
    )


def site_symmetry(lattice: Lattice, group: Group, fractional: FloatArray) -> SiteSymmetry:
    """Site symmetry of positions (M, d) that lie on their symmetry elements within 1e-5 Å."""
    d = lattice.dimension
    fixed = np.zeros((len(fractional), group.order), dtype=np.bool_)
    for rows in _portions(len(fractional), group.order):
        fixed[rows] = _fixing(lattice, group, fractional[rows])[1]
    order = np.count_nonzero(fixed, axis=1).astype(np.int64)
    # Whole numbers add up exactly: what symmetry forbids is zero and not nearly so.
    share = np.einsum("mn,nij->mij", fixed.astype(np.float64), group.rotations.astype(np.float64))
    share /= order[:, None, None]
    # A displacement A'x turns into A'Rx, with the direct vectors as the columns of A'.
    columns = lattice.vectors.T
    freedom = columns @ share @ np.linalg.inv(columns) if len(share) else np.zeros((0, d, d))
    freedom[np.abs(freedom) < 1e-12] = 0.0
    return SiteSymmetry(order, _listed(group, fractional, fixed), freedom)


def orbit(lattice: Lattice, group: Group, fractional: FloatArray) -> tuple[IntArray, IntArray, FloatArray]:
    """Distinct equivalents in the cell of sites (M, d): row and operation of each (K,), positions in [0, 1) (K, d)."""
    rows, operations, places = [], [], [np.zeros((0, lattice.dimension))]
    for part in _portions(len(fractional), group.order):
        images = _images(group, fractional[part])
        count = images.shape[0]
        row = np.repeat(np.arange(count), group.order)
        flat = _on_circle(images.reshape(-1, lattice.dimension))
        kept = merged(lattice, flat, row, SAME)
        rows.append(row[kept] + part.start)
        operations.append(kept % group.order)
        places.append(flat[kept])
    none = np.zeros(0, dtype=np.int64)
    return np.concatenate([none, *rows]), np.concatenate([none, *operations]), np.concatenate(places)


def _portions(count: int, order: int) -> Iterator[slice]:
    step = max(1, PORTION // order)
    for start in range(0, count, step):
        yield slice(start, start + step)


def _images(group: Group, fractional: FloatArray) -> FloatArray:
    """(M, n, d)."""
    return np.asarray(np.einsum("nij,mj->mni", group.rotations, fractional) + group.translations)


def _fixing(lattice: Lattice, group: Group, fractional: FloatArray) -> tuple[FloatArray, BoolArray]:
    """From each position to the nearest translate of each image (M, n, d), and whether the two are one."""
    gap = _images(group, fractional) - fractional[:, None]
    gap -= np.rint(gap)
    return gap, np.linalg.norm(lattice.to_cartesian(gap), axis=2) <= SAME


def _distinct(lattice: Lattice, group: Group, place: FloatArray, kind: IntArray) -> IntArray:
    """The first row of each set of equivalents."""
    pairs = [np.zeros((0, 2), dtype=np.int64)]
    for rotation, translation in zip(group.rotations, group.translations, strict=True):
        found = close_pairs(lattice, place @ rotation.T + translation, place, SAME)
        pairs.append(found[(found[:, 0] != found[:, 1]) & (kind[found[:, 0]] == kind[found[:, 1]])])
    return _first_of_each(len(place), np.concatenate(pairs))


def _leading(group: Group, place: FloatArray) -> FloatArray:
    """The first image by x, then y, then z, in [0, 1)."""
    images = _images(group, place)
    # A coordinate that rounding has left beside a whole number is that number.
    images -= np.floor(images + 1e-10)
    images[np.abs(images) <= 1e-10] = 0.0
    keys = np.rint(images * KEY).astype(np.int64) % KEY
    rank = keys[..., 0]
    for axis in range(1, keys.shape[2]):
        rank = rank * KEY + keys[..., axis]
    return np.asarray(images[np.arange(len(place)), rank.argmin(axis=1)])


def _listed(group: Group, place: FloatArray, fixed: BoolArray) -> tuple[tuple[str, ...], ...]:
    made: list[tuple[str, ...]] = []
    for x, which in zip(place, fixed, strict=True):
        if np.count_nonzero(which) == 1:
            made.append((format_operation(Operation(group.rotations[0], (Fraction(0),) * len(x))),))
            continue
        chosen = np.flatnonzero(which)
        whole = np.rint(group.rotations[chosen] @ x + group.translations[chosen] - x).astype(np.int64)
        shifts = group.numerators[chosen] - whole * group.denominator
        texts = []
        for rotation, shift in zip(group.rotations[chosen], shifts.tolist(), strict=True):
            operation = Operation(rotation, tuple(Fraction(n, group.denominator) for n in shift))
            texts.append(format_operation(operation).replace("+-", "-"))
        made.append(tuple(texts))
    return tuple(made)
