"""What the tests draw their examples from, and the one oracle they compare with.

Every random number comes from a seeded generator or from hypothesis; nothing touches global
state. The oracle is plain numpy and shares no code with the engine: it adds up the complete list of
coefficients, both of each Friedel pair written out, at positions that are spelt out too.
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass
from functools import cache

import numpy as np
from hypothesis import strategies as st

from engine import CoefficientSet, Columns, InputError, Lattice, assemble
from engine.sampling import AffineGrid, FreePoints
from engine.series import Series
from engine.synthesis import Demand, fill, plan, result_dtype

STACK = Lattice.from_period(58.4)
PLANAR = Lattice.from_planar_parameters(21.3, 34.7, 104.0)
CRYSTAL = Lattice.from_parameters(7.3, 11.9, 16.4, 82.0, 97.0, 106.0)
LATTICES = {1: STACK, 2: PLANAR, 3: CRYSTAL}
"""One lattice of each dimension, without a right angle or two equal lengths."""

REACH = {1: (24,), 2: (6, 5), 3: (4, 3, 5)}
"""Largest indices of the seeded examples, different along each axis."""


def frozen(array):
    """The array, made read-only: whoever writes to what it was given is found out."""
    array.setflags(write=False)
    return array


@dataclass(frozen=True, eq=False)
class Listing:
    """A complete list of coefficients: n(x) = Σ values exp(2πi indices·x) over all rows."""

    lattice: Lattice
    indices: np.ndarray
    values: np.ndarray
    real: bool

    @property
    def weight(self):
        """Σ |v|, which no value of the density can exceed."""
        return float(np.abs(self.values).sum())

    def series(self):
        """The engine's series of the list: one of each pair where the density is real. Read-only."""
        kept = forward(self.indices) if self.real else np.ones(len(self.values), dtype=bool)
        indices = np.asfortranarray(self.indices[kept])
        return Series(self.lattice, frozen(indices), frozen(self.values[kept]), self.real)

    def columns(self, **more):
        """The list as columns of density coefficients."""
        return Columns(indices=tuple(self.indices.T), real=self.values.real, imag=self.values.imag, **more)

    def coefficients(self, **options) -> CoefficientSet:
        """The engine's set of the list."""
        density = "real" if self.real else "complex"
        return assemble(self.lattice, self.columns(), values="density_coefficient", density=density, **options)

    def at(self, positions):
        """The oracle's values at fractional positions (..., d); real where the density is."""
        made = oracle(self.indices, self.values, positions)
        return made.real if self.real else made


def oracle(indices, values, positions):
    """Σ v exp(2πi m·x) over every row, at every position; positions (..., d) -> (...)."""
    positions = np.asarray(positions, dtype=np.float64)
    flat = positions.reshape(-1, positions.shape[-1])
    made = np.empty(len(flat), dtype=np.complex128)
    for start in range(0, len(flat), 1024):
        turns = flat[start : start + 1024] @ np.asarray(indices, dtype=np.float64).T
        made[start : start + 1024] = np.exp(2j * np.pi * (turns - np.floor(turns))) @ values
    return made.reshape(positions.shape[:-1])


def forward(indices):
    """One of each pair ±m, and the zero: the last index other than zero is positive."""
    rows = ([x for x in row if x] for row in indices.tolist())
    return np.array([not row or row[-1] > 0 for row in rows], dtype=bool)


def positions_of(sampling):
    """Fractional positions of a sampling, sample by sample."""
    if isinstance(sampling, FreePoints):
        return sampling.fractional
    made = np.empty((*sampling.shape, sampling.origin.size))
    for sample in np.ndindex(*sampling.shape):
        made[sample] = sampling.origin + sum(s * step for s, step in zip(sample, sampling.steps, strict=True))
    return made


def listing(lattice, *, real=True, seed=0, reach=None, share=0.6, zero=True):
    """A random list with indices out to `reach`; of all there are, a share is present."""
    rng = np.random.default_rng(seed)
    reach = reach or REACH[lattice.dimension]
    every = np.array(list(itertools.product(*(range(-n, n + 1) for n in reach))), dtype=np.int64)
    every = every[every.any(axis=1)]
    if real:
        every = every[forward(every)]
    # The outermost corner is always present, so that the extents are those asked for.
    kept = rng.random(len(every)) < share
    kept[-1] = True
    indices = every[kept]
    values = rng.normal(size=len(indices)) + 1j * rng.normal(size=len(indices))
    if real:
        indices, values = np.concatenate([indices, -indices]), np.concatenate([values, values.conj()])
    if zero:
        mean = rng.normal() if real else complex(rng.normal(), rng.normal())
        indices = np.concatenate([indices, np.zeros((1, len(reach)), dtype=np.int64)])
        values = np.append(values, mean)
    order = rng.permutation(len(values))
    return Listing(lattice, frozen(indices[order]), frozen(values[order]), real)


def summed(series, sampling, method=None, demand=None, out=None):
    """All values of a sum, by one method of the engine."""
    demand = demand or Demand()
    if out is None:
        out = np.empty(sampling.shape, dtype=result_dtype(series.real, demand.precision))
        out.fill(np.nan)
    fill(plan(series, sampling, demand, method=method).prepare(), out, threads=demand.threads)
    return out


def deviation(found, expected):
    """Largest difference over all samples, relative to the largest |value| expected."""
    found, expected = np.asarray(found), np.asarray(expected)
    assert found.shape == expected.shape
    return float(np.abs(found - expected).max() / np.abs(expected).max())


def grid(origin, steps, shape):
    """An affine grid straight from its numbers."""
    origin, steps = np.array(origin, dtype=np.float64), np.atleast_2d(np.array(steps, dtype=np.float64))
    labels = tuple(f"axis_{j}" for j in range(len(shape)))
    return AffineGrid(frozen(origin), frozen(steps), tuple(shape), labels, (0.0,) * len(shape))


def _commensurate():
    """Grids on which the cascade is exact: name -> (dimension of the lattice, grid).

    Lengths are unequal along every axis; odd, even and prime ones are among them, ones coarser
    than the indices reach, origins off the lattice, and edges that are not the cell's.
    """
    eye = np.eye(3)
    return {
        "cell 1-D odd prime": (1, grid([0], [1 / 7], (7,))),
        "cell 1-D even": (1, grid([0], [1 / 60], (60,))),
        "cell 1-D index at N/2": (1, grid([0], [1 / 48], (48,))),
        "cell 1-D one sample": (1, grid([0], [1.0], (1,))),
        "1-D two cells and the end": (1, grid([0.3], [2 / 16], (17,))),
        "1-D part of a cell": (1, grid([0.25], [1 / 64], (9,))),
        "1-D backwards": (1, grid([0.25], [-1 / 53], (53,))),
        "cell 2-D": (2, grid([0, 0], np.diag([1 / 8, 1 / 9]), (8, 9))),
        "cell 2-D index at N/2": (2, grid([0, 0], np.diag([1 / 12, 1 / 10]), (12, 10))),
        "cell 2-D fine": (2, grid([0, 0], np.diag([1 / 17, 1 / 40]), (17, 40))),
        "cell 2-D coarse": (2, grid([0.1, 0.7], np.diag([1 / 3, 1 / 4]), (3, 4))),
        "2-D two cells and the end": (2, grid([0, 0], np.diag([2 / 10, 2 / 14]), (11, 15))),
        "2-D part of a cell": (2, grid([0.5, 0.125], np.diag([1 / 30, 1 / 16]), (7, 5))),
        "2-D another setting": (2, grid([0.1, 0.2], [[1 / 11, 1 / 11], [-1 / 18, 2 / 18]], (11, 18))),
        "line in 2-D": (2, grid([0.2, 0.3], [[1 / 13, -2 / 13]], (13,))),
        "line in 2-D, mixed fractions": (2, grid([0, 0], [[1 / 4, 1 / 6]], (13,))),
        "cell 3-D": (3, grid([0, 0, 0], np.diag([1 / 6, 1 / 7, 1 / 10]), (6, 7, 10))),
        "cell 3-D index at N/2": (3, grid([0, 0, 0], np.diag([1 / 8, 1 / 6, 1 / 10]), (8, 6, 10))),
        "cell 3-D odd": (3, grid([0, 0, 0], np.diag([1 / 9, 1 / 7, 1 / 11]), (9, 7, 11))),
        "cell 3-D fine": (3, grid([0.05, 0, 0.4], np.diag([1 / 10, 1 / 13, 1 / 18]), (10, 13, 18))),
        "cell 3-D coarse": (3, grid([0, 0, 0], np.diag([1 / 2, 1 / 3, 1 / 4]), (2, 3, 4))),
        "cell 3-D one sample": (3, grid([0.1, 0.2, 0.3], eye, (1, 1, 1))),
        "cell 3-D thin": (3, grid([0, 0.2, 0], np.diag([1, 1 / 5, 1 / 8]), (1, 5, 8))),
        "3-D two cells and the end": (3, grid([0, 0, 0], np.diag([2 / 6, 2 / 8, 2 / 10]), (7, 9, 11))),
        "3-D part of a cell": (3, grid([0.1, 0, 0.25], np.diag([1 / 12, 1 / 20, 1 / 9]), (5, 4, 7))),
        "3-D another setting": (
            3,
            grid([0.2, 0, 0.1], [[0, 1 / 7, 1 / 7], [1 / 9, 0, 1 / 9], [1 / 10, 1 / 10, 0]], (7, 9, 10)),
        ),
        "plane in 3-D": (3, grid([0, 0, 0.3], [[1 / 8, 0, 0], [0, 1 / 9, 0]], (8, 9))),
        "oblique plane in 3-D": (3, grid([0.1, 0.2, 0.3], [[1 / 12, -1 / 12, 0], [0, 1 / 7, 2 / 7]], (12, 7))),
        "line in 3-D": (3, grid([0.3, 0.1, 0.7], [[1 / 11, 1 / 11, -1 / 11]], (11,))),
    }


def _incommensurate():
    """Grids that only the direct and the non-uniform method can do."""
    root = math.sqrt(2)
    return {
        "line in 1-D": (1, grid([0.1], [0.0137 * root], (43,))),
        "line in 2-D": (2, grid([0.1, 0.4], [[0.01 * root, 0.03]], (31,))),
        "plane in 2-D": (2, grid([-0.2, 0.4], [[0.02 * root, 0.03], [0.01, -0.04 * root]], (9, 14))),
        "line in 3-D": (3, grid([0.1, 0.4, 1.2], [[0.01 * root, 0.03, -0.02]], (23,))),
        "plane in 3-D": (
            3,
            grid([0.1, 0.4, 0.2], [[0.01 * root, 0.03, 0.02], [0.04, -0.02 * root, 0.01]], (8, 11)),
        ),
        "box in 3-D": (
            3,
            grid(
                [0.1, -0.4, 0.2],
                [[0.01 * root, 0.03, 0.02], [0.04, -0.02 * root, 0.01], [0.01, 0.01, 0.05 * root]],
                (6, 7, 10),
            ),
        ),
    }


COMMENSURATE = _commensurate()
INCOMMENSURATE = {f"free {name}": case for name, case in _incommensurate().items()}
GRIDS = {**COMMENSURATE, **INCOMMENSURATE}


@cache
def example(name, real):
    """A list of coefficients, the named grid, and the oracle's values on it."""
    dimension, sampling = GRIDS[name]
    wanted = listing(LATTICES[dimension], real=real, seed=11)
    return wanted, sampling, frozen(wanted.at(positions_of(sampling)))


def free_points(dimension, count=57, seed=5):
    """Points inside and far outside the cell."""
    return FreePoints(frozen(np.random.default_rng(seed).uniform(-3, 3, size=(count, dimension))))


# Strategies for hypothesis.

coordinate = st.floats(-2, 2, allow_nan=False, width=32)
length = st.floats(2, 40, allow_nan=False, width=32)
angle = st.floats(66, 114, allow_nan=False, width=32)


@st.composite
def lattices(draw, dimension):
    """Any lattice that is not close to flat."""
    if dimension == 1:
        return Lattice.from_period(draw(length))
    if dimension == 2:
        return Lattice.from_planar_parameters(draw(length), draw(length), draw(angle))
    return Lattice.from_parameters(*(draw(length) for _ in range(3)), *(draw(angle) for _ in range(3)))


@st.composite
def listings(draw, *, dimension=None, real=None, lattice=None):
    """Any short list of coefficients on any lattice."""
    d = draw(st.sampled_from((1, 2, 3))) if dimension is None else dimension
    is_real = draw(st.booleans()) if real is None else real
    index = st.tuples(*(st.integers(-5, 5) for _ in range(d)))
    rows = np.array(draw(st.lists(index, min_size=1, max_size=12, unique=True)), dtype=np.int64)
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    values = rng.uniform(0.1, 10, len(rows)) * np.exp(2j * np.pi * rng.random(len(rows)))
    if is_real:
        # Of each pair keep one, then write out both.
        rows = np.unique(np.where(forward(rows)[:, None], rows, -rows), axis=0)
        values = np.where(rows.any(axis=1), values[: len(rows)], values[: len(rows)].real)
        others = rows.any(axis=1)
        rows = np.concatenate([rows, -rows[others]])
        values = np.concatenate([values, values[others].conj()])
    return Listing(draw(lattices(d)) if lattice is None else lattice, rows, values, is_real)


@st.composite
def unimodular(draw, dimension):
    """An integer matrix with determinant 1: a product of shears of the axes."""
    matrix = np.eye(dimension, dtype=np.int64)
    pairs = [(i, j) for i in range(dimension) for j in range(dimension) if i != j]
    for _ in range(draw(st.integers(0, 4)) if pairs else 0):
        i, j = draw(st.sampled_from(pairs))
        shear = np.eye(dimension, dtype=np.int64)
        shear[i, j] = draw(st.sampled_from((-1, 1)))
        matrix = shear @ matrix
    return matrix


def positions(dimension, most=8):
    """Some fractional positions, shape (M, d)."""
    point = st.tuples(*(coordinate for _ in range(dimension)))
    return st.lists(point, min_size=1, max_size=most).map(lambda rows: np.array(rows, dtype=np.float64))


def refusal_of(call):
    """The InputError that a call ends with."""
    try:
        call()
    except InputError as refusal:
        return refusal
    raise AssertionError("nothing was refused")
