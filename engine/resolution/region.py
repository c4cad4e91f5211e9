"""The lattice points among which a set's coefficients lie.

The whole reciprocal lattice as a rule; only a row of it where all G are parallel, as the 00l orders of a
film, or a plane of it where all lie in one. Row and plane are lattices of their own with a basis of
whole indices, so that one way of counting and listing serves all.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from engine.arrays import BoolArray, FloatArray, IntArray
from engine.averages import along
from engine.lattice import Lattice
from engine.series import faces_backward

MARGIN = 1e-9
"""Relative; a limit must not cut the very term that it was read from."""
SAMPLE = 64
_BLOCK = 1 << 16


@dataclass(frozen=True, slots=True, kw_only=True)
class Region:
    """A lattice of G inside a reciprocal lattice.

    Attributes
    ----------
    lattice : Lattice
        Of dimension d.
    basis : int64, shape (r, d)
        Indices of its basis vectors; r = d for the whole lattice.
    waves : float64, shape (r, r)
        Lower triangular: the basis vectors of G in Cartesian coordinates of their own, Å⁻¹.
    """

    lattice: Lattice
    basis: IntArray
    waves: FloatArray

    @property
    def rank(self) -> int:
        """1 for a row, 2 for a plane, 3 for the whole of a crystal's lattice."""
        return int(self.basis.shape[0])

    @property
    def whole(self) -> bool:
        return self.rank == self.lattice.dimension

    @property
    def density(self) -> float:
        """Points to the unit of reciprocal space, Å^r."""
        return 1 / float(np.prod(np.diag(self.waves)))

    def words(self) -> str:
        """Which lattice it is."""
        if self.whole:
            return "the whole reciprocal lattice"
        rows = " and ".join("(" + " ".join(str(i) for i in row) + ")" for row in self.basis.tolist())
        return f"the {'row' if self.rank == 1 else 'plane'} of reciprocal-lattice points through the origin and {rows}"

    def expected(self, g_max: float, g_min: float = 0.0) -> float:
        """Points with g_min ≤ |G| ≤ g_max (Å⁻¹) by volume."""
        sphere = {1: 2.0, 2: math.pi, 3: 4 * math.pi / 3}[self.rank]
        return sphere * (g_max**self.rank - g_min**self.rank) * self.density

    def work(self, g_max: float) -> float:
        """Bound, within a small factor, of what a list out to g_max needs: points, or lines looked through."""
        lines = math.prod(2 * n + 1 for n in self._bounds(g_max)[1:])
        return max(self.expected(g_max), float(lines))

    def points(self, g_max: float, *, friedel: bool, g_min: float = 0.0) -> IntArray:
        """Indices of all points but zero with g_min < |G| ≤ g_max; int64, shape (M, d).

        g_max is taken with a margin of 1e-9 outwards, g_min too, so that the points listed for two
        successive ranges are those of both together.

        Parameters
        ----------
        friedel : bool
            Only one of each pair ±m, the one whose last index other than zero is positive.
        """
        outer, inner = g_max * (1 + MARGIN), g_min * (1 + MARGIN)
        low, high, rest = self._intervals(outer, friedel)
        parts = []
        lengths = np.maximum(high - low + 1, 0)
        ends = np.cumsum(lengths)
        start = 0
        while start < lengths.size:
            done = int(ends[start - 1]) if start else 0
            stop = max(int(np.searchsorted(ends, done + _BLOCK, side="right")), start + 1)
            run = lengths[start:stop]
            line = np.repeat(np.arange(start, stop), run)
            first = np.arange(line.size) - np.repeat(ends[start:stop] - run - done, run) + low[line]
            rows = np.column_stack([first, rest[line]])
            square = ((rows.astype(np.float64) @ self.waves) ** 2).sum(axis=1)
            kept = (square <= outer**2) & (square > inner**2)
            parts.append(rows[kept])
            start = stop
        made = np.concatenate(parts) if parts else np.zeros((0, self.rank), dtype=np.int64)
        if not self.whole:
            made = made @ self.basis
            if friedel:
                # The half was taken by the indices on the basis.
                made = np.where(faces_backward(made)[:, None], -made, made)
        return np.asfortranarray(made)

    def _bounds(self, g_max: float) -> list[int]:
        """|m_j| ≤ |a_j| G/2π with a_j the vectors reciprocal to the basis."""
        lengths = np.linalg.norm(np.linalg.inv(self.waves), axis=0)
        return [int(g_max * length) for length in lengths.tolist()]

    def _intervals(self, g_max: float, friedel: bool) -> tuple[IntArray, IntArray, IntArray]:
        """Of each line along the first basis vector: the range of its first index, and the other indices."""
        bounds = self._bounds(g_max)[1:]
        axes = [np.arange(-n, n + 1) for n in bounds]
        rest = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, len(bounds)) if axes else _nothing()
        if friedel and axes:
            rest = rest[~faces_backward(rest)]
        # |m_1 b_1 + c|² ≤ G² with b_1 along its own first axis.
        scale = float(self.waves[0, 0])
        offset = rest @ self.waves[1:]
        square = g_max**2 - (offset[:, 1:] ** 2).sum(axis=1)
        reach = np.sqrt(np.maximum(square, 0.0))
        low = np.ceil((-offset[:, 0] - reach) / scale - MARGIN).astype(np.int64)
        high = np.floor((-offset[:, 0] + reach) / scale + MARGIN).astype(np.int64)
        if friedel:
            low = np.where(rest.any(axis=1), low, 1)
        inside = (square >= -MARGIN * g_max**2) & (high >= low)
        return low[inside], high[inside], rest[inside]


def region_of(lattice: Lattice, indices: IntArray) -> Region | None:
    """The smallest lattice of G, complete in its row, plane or space, that holds the indices (N, d).

    None where there is no index but zero.
    """
    others = indices[indices.any(axis=1)]
    if not others.size:
        return None
    # A few rows that span the whole end the question; if they do not, all are asked.
    basis = _basis(others[:SAMPLE])
    if len(basis) < lattice.dimension:
        basis = _basis(others)
    if len(basis) == 2 < lattice.dimension:
        basis = _shortened(basis, lattice)
    waves = lattice.wavevectors(basis)
    # Lower triangular rows with a positive diagonal: the same lengths and angles.
    triangle = np.asarray(np.linalg.cholesky(waves @ waves.T), dtype=np.float64)
    return Region(lattice=lattice, basis=basis, waves=triangle)


def _basis(others: IntArray) -> IntArray:
    """Basis of the smallest complete lattice of whole indices that holds rows other than zero."""
    d = others.shape[1]
    first = others[0] // np.gcd.reduce(others[0])
    off = others[~along(first, others)]
    if not off.size:
        return np.asarray(first[None, :])
    if d == 3:
        normal = np.cross(first, off[0])
        normal //= np.gcd.reduce(normal)
        if not np.any(off @ normal):
            return _plane(normal)
    return np.eye(d, dtype=np.int64)


def held(rows: IntArray, among: IntArray) -> BoolArray:
    """Which rows (M, d) are among others (N, d); shape (M,)."""
    d = rows.shape[1]
    reach = [max(int(np.abs(part).max(initial=0)) for part in (rows[:, j], among[:, j])) for j in range(d)]
    sizes = [2 * n + 1 for n in reach]
    if math.prod(sizes) < 1 << 62:
        strides = np.array([math.prod(sizes[:j]) for j in range(d)], dtype=np.int64)
        return np.asarray(np.isin(rows @ strides, among @ strides))
    kind = np.dtype((np.void, 8 * d))
    known = set(np.ascontiguousarray(among).view(kind)[:, 0].tolist())
    return np.array([key in known for key in np.ascontiguousarray(rows).view(kind)[:, 0].tolist()], dtype=np.bool_)


def _plane(normal: IntArray) -> IntArray:
    """Basis of all whole m with m·normal = 0, normal without a common divisor; (3,) -> (2, 3)."""
    a, b, c = (int(x) for x in normal)
    if a == 0 and b == 0:
        return np.array([[1, 0, 0], [0, 1, 0]], dtype=np.int64)
    g, x, y = _bezout(a, b)
    return np.array([[b // g, -a // g, 0], [-x * c, -y * c, g]], dtype=np.int64)


def _bezout(a: int, b: int) -> tuple[int, int, int]:
    """g = gcd(a, b) > 0 and x, y with a x + b y = g (Euclid)."""
    x, y, u, v = 1, 0, 0, 1
    while b:
        q, r = divmod(a, b)
        a, b, x, y, u, v = b, r, u, v, x - q * u, y - q * v
    return (a, x, y) if a > 0 else (-a, -x, -y)


def _shortened(basis: IntArray, lattice: Lattice) -> IntArray:
    """The shortest two vectors of a plane (Lagrange's reduction)."""
    one, two = basis
    while True:
        p, q = lattice.wavevectors(np.stack([one, two]))
        if q @ q < p @ p * (1 - 1e-12):
            one, two = two, one
            continue
        turns = int(np.rint(p @ q / (p @ p)))
        if turns == 0:
            return np.stack([one, two])
        two = two - turns * one


def _nothing() -> IntArray:
    return np.zeros((1, 0), dtype=np.int64)
