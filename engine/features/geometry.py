"""Distances and angles between extrema, with the uncertainties that their joint errors give them.

All positions come from one set of coefficients, so their errors are correlated: each measurement displaces
every extremum by −H⁻¹ ∇(its change of the density). What that does to a distance or an angle is linear in
the gradients at two or three points, and its variance follows as that of any such number; no covariance of
all positions is made.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import FloatArray, IntArray
from engine.errors import InputError
from engine.features.extrema import Extrema
from engine.features.precision import Uncertain, displacement_variances
from engine.fields import multipliers
from engine.lattice import Lattice
from engine.symmetry.operations import Operation, format_operation

STRAIGHT = 1e-6
"""Radians from 0 or 180° within which an angle counts as straight."""
PORTION = 1 << 20


@dataclass(frozen=True, slots=True, kw_only=True)
class Distances:
    """K distances from an extremum to another or to an image of one.

    Attributes
    ----------
    first, second : int64, shape (K,)
        Rows of the extrema.
    operation : tuple of str
        What takes the second from where it is listed to where the distance ends, as coordinates.
    vector : float64, shape (K, d)
        From the first to that end, Cartesian, Å.
    value : float64, shape (K,)
        Å.
    sigma : float64, shape (K,), or None
        Å; None where the set has no uncertainties.
    """

    first: IntArray
    second: IntArray
    operation: tuple[str, ...]
    vector: FloatArray
    value: FloatArray
    sigma: FloatArray | None


@dataclass(frozen=True, slots=True, kw_only=True)
class Angles:
    """K angles first–middle–last.

    Attributes
    ----------
    rows : int64, shape (K, 3)
        Rows of the extrema.
    translations : int64, shape (K, 2, d)
        Of the first and the last, from where they are listed to where the legs end.
    value : float64, shape (K,)
        Degrees.
    sigma : float64, shape (K,), or None
        Degrees. Of an angle that is straight (0 or 180°) the root mean square of its deviation from that:
        to first order the angle itself does not change.
    """

    rows: IntArray
    translations: IntArray
    value: FloatArray
    sigma: FloatArray | None


def distances(extrema: Extrema, pairs: ArrayLike, *, translations: ArrayLike | None = None) -> Distances:
    """Distances between listed extrema.

    Parameters
    ----------
    extrema : Extrema
    pairs : int, shape (K, 2)
        Rows of the extrema.
    translations : int, shape (K, d), optional
        Lattice translation of the second of each pair; by default that which brings it nearest.

    Raises
    ------
    InputError
        A row that is not there, translations of another shape, or a pair of one and the same position.
    """
    rows = as_rows(extrema, pairs, 2, "pairs")
    lattice, x = extrema.coefficients.lattice, extrema.fractional
    gap = x[rows[:, 1]] - x[rows[:, 0]]
    shifts = _shifts(extrema, translations, (len(rows), lattice.dimension))
    if shifts is None:
        shifts = nearest_translations(lattice, gap)
    ends = lattice.to_cartesian(gap + shifts)
    same = np.flatnonzero((rows[:, 0] == rows[:, 1]) & ~shifts.any(axis=1))
    if same.size:
        raise InputError.for_rows("pairs", same, "name one position twice", "name two, or give a translation")
    eye = np.broadcast_to(np.eye(lattice.dimension), (len(rows), lattice.dimension, lattice.dimension))
    words = tuple(coordinates_of(np.eye(lattice.dimension, dtype=np.int64), shift, 1) for shift in shifts)
    return joined(extrema, rows[:, 0], rows[:, 1], eye, ends, words)


def angles(extrema: Extrema, triples: ArrayLike, *, translations: ArrayLike | None = None) -> Angles:
    """Angles at the second of three listed extrema.

    Parameters
    ----------
    extrema : Extrema
    triples : int, shape (K, 3)
        Rows of the extrema, that of the vertex in the middle.
    translations : int, shape (K, 2, d), optional
        Lattice translations of the first and the last; by default those that bring them nearest to the
        vertex.

    Raises
    ------
    InputError
        A layer stack, a row that is not there, translations of another shape, or a leg without length.
    """
    lattice, x = extrema.coefficients.lattice, extrema.fractional
    d = lattice.dimension
    if d == 1:
        raise InputError("triples", "a layer stack has no angles", "ask for distances")
    rows = as_rows(extrema, triples, 3, "triples")
    gaps = x[rows[:, [0, 2]]] - x[rows[:, 1]][:, None]
    shifts = _shifts(extrema, translations, (len(rows), 2, d))
    if shifts is None:
        shifts = nearest_translations(lattice, gaps.reshape(-1, d)).reshape(-1, 2, d)
    legs = lattice.to_cartesian(gaps + shifts)
    lengths = np.linalg.norm(legs, axis=2)
    if not lengths.all():
        raise InputError.for_rows(
            "triples", np.flatnonzero(~lengths.all(axis=1)), "have a leg without length", "name three positions"
        )
    units = legs / lengths[..., None]
    value = _angle_between(units[:, 0], units[:, 1])
    sigma = None
    uncertain = _uncertain(extrema)
    if uncertain is not None:
        sigma = np.degrees(np.sqrt(_angle_variances(extrema, uncertain, rows, units, lengths, value)))
    return Angles(rows=rows, translations=shifts, value=np.degrees(value), sigma=sigma)


def nearest_translations(lattice: Lattice, gap: FloatArray) -> IntArray:
    """The lattice translation that makes each fractional vector (K, d) shortest; (K, d)."""
    d = lattice.dimension
    corners = np.array(list(itertools.product((-0.5, 0.5), repeat=d)))
    # Rounded, no vector is longer than half the longest diagonal; the shortest lies within twice that.
    bound = 2 * float(np.linalg.norm(lattice.to_cartesian(corners), axis=1).max())
    layers = np.floor(bound * np.linalg.norm(lattice.reciprocal, axis=1) / (2 * np.pi)).astype(np.int64)
    shifts = translations_within(layers)
    shifts = shifts[np.linalg.norm(lattice.to_cartesian(shifts.astype(np.float64)), axis=1) <= bound * (1 + 1e-9)]
    rounded = -np.rint(gap).astype(np.int64)
    made = np.empty_like(rounded)
    step = max(1, PORTION // len(shifts))
    for start in range(0, len(gap), step):
        part = slice(start, start + step)
        tried = lattice.to_cartesian((gap[part] + rounded[part])[:, None] + shifts)
        # Of several that are equally near but for rounding the first is taken, rounded itself before all.
        length = np.round(np.linalg.norm(tried, axis=2), 9)
        made[part] = rounded[part] + shifts[length.argmin(axis=1)]
    return made


def translations_within(layers: IntArray) -> IntArray:
    """All translations within so many cells along each axis, the shortest steps first; (T, d)."""
    axes = [np.arange(-n, n + 1) for n in layers.tolist()]
    every = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, layers.size)
    return np.asarray(every[np.argsort(np.abs(every).sum(axis=1), kind="stable")])


def joined(
    extrema: Extrema, first: IntArray, second: IntArray, turned: FloatArray, vector: FloatArray, words: tuple[str, ...]
) -> Distances:
    """`turned` (K, d, d) are the Cartesian rotations that carry the displacement of each second one."""
    value = np.linalg.norm(vector, axis=1)
    sigma = None
    uncertain = _uncertain(extrema)
    if uncertain is not None:
        unit = vector / value[:, None]
        carried = np.einsum("ki,kij->kj", unit, turned)
        sigma = np.sqrt(_variances(extrema, uncertain, np.stack([first, second], 1), np.stack([-unit, carried], 1)))
    return Distances(first=first, second=second, operation=words, vector=vector, value=value, sigma=sigma)


def _angle_between(left: FloatArray, right: FloatArray) -> FloatArray:
    """Of unit vectors (K, d), radians; accurate near 0 and π too: by the chords of the half angles."""
    chord, sum_ = np.linalg.norm(left - right, axis=1), np.linalg.norm(left + right, axis=1)
    return np.asarray(2 * np.arctan2(chord, sum_))


def _angle_variances(
    extrema: Extrema, uncertain: Uncertain, rows: IntArray, units: FloatArray, lengths: FloatArray, value: FloatArray
) -> FloatArray:
    left, right = units[:, 0], units[:, 1]
    sine, cosine = np.sin(value)[:, None], np.cos(value)[:, None]
    bent = np.minimum(value, np.pi - value) > STRAIGHT
    safe = np.where(bent[:, None], sine, 1.0)
    # ∂θ/∂a = (â cos θ − b̂)/(|a| sin θ), a and b the legs.
    to_left = (left * cosine - right) / (safe * lengths[:, :1])
    to_right = (right * cosine - left) / (safe * lengths[:, 1:])
    total = _variances(extrema, uncertain, rows, np.stack([to_left, -to_left - to_right, to_right], axis=1))
    straight = np.flatnonzero(~bent)
    if straight.size:
        total[straight] = 0.0
        sign = np.sign(cosine[straight])
        # The two legs turn against each other about both axes across them.
        for across in _perpendicular(left[straight]):
            legs = across / lengths[straight, :1], -sign * across / lengths[straight, 1:]
            weights = np.stack([legs[0], -legs[0] - legs[1], legs[1]], axis=1)
            total[straight] += _variances(extrema, uncertain, rows[straight], weights)
    return total


def _perpendicular(unit: FloatArray) -> tuple[FloatArray, ...]:
    """Unit vectors that with `unit` (K, d) make up an orthonormal set."""
    if unit.shape[1] == 2:
        return (np.stack([-unit[:, 1], unit[:, 0]], axis=1),)
    least = np.eye(3)[np.abs(unit).argmin(axis=1)]
    one = np.cross(unit, least)
    one /= np.linalg.norm(one, axis=1)[:, None]
    return one, np.cross(unit, one)


def _uncertain(extrema: Extrema) -> Uncertain | None:
    if extrema.sigma is None:
        return None
    return Uncertain.of(multipliers(extrema.coefficients, extrema.treatment))


def _variances(extrema: Extrema, uncertain: Uncertain, points: IntArray, weights: FloatArray) -> FloatArray:
    """Of Σ_t weights_kt · δr(points_kt), with δr = −P H⁻¹ ∇δn and P what the site symmetry allows; (K,)."""
    moved = -extrema.freedom @ np.linalg.inv(extrema.hessian)
    carried = np.einsum("kti,ktij->ktj", weights, moved[points])
    return displacement_variances(uncertain, extrema.fractional, points, carried)


def as_rows(extrema: Extrema, value: ArrayLike, width: int, name: str) -> IntArray:
    given = np.asarray(value)
    if given.ndim != 2 or given.shape[1] != width or given.dtype.kind not in "iu":
        raise InputError(name, "is not rows of whole numbers", f"give {width} rows of the extrema each")
    bad = np.flatnonzero(((given < 0) | (given >= extrema.count)).any(axis=1))
    if bad.size:
        raise InputError.for_rows(
            name, bad, f"name an extremum beyond the {extrema.count} there are", "count them from 0"
        )
    return given.astype(np.int64)


def _shifts(extrema: Extrema, value: ArrayLike | None, shape: tuple[int, ...]) -> IntArray | None:
    if value is None:
        return None
    given = np.asarray(value)
    if given.shape != shape or given.dtype.kind not in "iu":
        raise InputError("translations", "do not fit", f"give whole numbers of the shape {shape}")
    return given.astype(np.int64)


def coordinates_of(rotation: IntArray, shift: IntArray, denominator: int) -> str:
    """x' = R x + shift/denominator as coordinates."""
    fractions = tuple(Fraction(int(n), denominator) for n in shift)
    return format_operation(Operation(rotation, fractions)).replace("+-", "-")
