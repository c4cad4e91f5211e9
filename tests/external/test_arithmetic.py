"""Check 16: any series at any point against sums in 50 digits, whole cells against numpy.fft.

Source: the reference libraries mpmath and numpy.fft. They are given F(hkl) and V as a laboratory
has them and sum (1/V) Σ F exp(−2πi h·x) themselves, so the engine's signs, mates and volume are
checked along with its arithmetic.

Bounds are relative to the largest |value| of the samples compared:

* direct sums and Fourier transforms in double precision, 1e-12: a phase 2π h·x with h·x below a
  few hundred turns is good to 1e-13, and rounding grows as log N (transform) or √N (sum);
* the non-uniform transform, 1e-9 by default and 1e-12 on request: what it is asked for;
* single precision, 1e-5: a hundred units in the last place.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import mpmath
import numpy as np
import pytest

from engine import Columns, Demand, Lattice, Treatment, assemble, evaluate, sampling
from engine.coefficients import CoefficientSet
from engine.sampling import Sampling
from tests.external import exact

DEFAULT = Demand().tolerance
WAYS = {
    "direct": ("direct", Demand(), 1e-12),
    "direct-single": ("direct", Demand(precision="single"), 1e-5),
    "nonuniform": ("nonuniform", Demand(), 1e-9),
    "nonuniform-fine": ("nonuniform", Demand(tolerance=1e-12), 1e-12),
    "nonuniform-single": ("nonuniform", Demand(precision="single"), 1e-5),
    "cascade": ("cascade", Demand(), 1e-12),
    "cascade-single": ("cascade", Demand(precision="single"), 1e-5),
}
"""Method, demand, bound."""

EXTENTS = (8, 6, 9)
"""Largest |h|, |k|, |l|; unequal, so that exchanged axes are noticed."""
COMPARED = 36
"""Samples of a grid that are summed in 50 digits, picked at random."""

# Counts along the axes: unequal, odd, even, prime; coarse ones are below twice the extents.
CELLS = {
    "cell-odd": (19, 15, 23),
    "cell-even": (18, 14, 20),
    "cell-coarse": (5, 4, 6),
    "cell-single-sample": (1, 7, 2),
    "cell-at-limit": (16, 12, 18),
}
COMMENSURATE = {*CELLS, "other-setting", "lattice-plane", "lattice-line"}
EVERYWHERE = ["points", "line", "box", *CELLS, "other-setting", "lattice-line"]
NAMES = {1: EVERYWHERE, 2: EVERYWHERE, 3: [*EVERYWHERE, "plane", "lattice-plane"]}


@dataclass(frozen=True)
class Example:
    """A chiral set on an oblique lattice and its reflections written out in full."""

    lattice: Lattice
    coefficients: CoefficientSet
    reflections: list[tuple[int, ...]]
    factors: list[mpmath.mpc]
    volume: mpmath.mpf


@dataclass(frozen=True)
class Reference:
    """A sampling and, at the samples ``picked`` (flat numbers), the values in 50 digits."""

    where: Sampling
    picked: np.ndarray
    values: np.ndarray


@cache
def example(dimension: int, density: str) -> Example:
    """Random phases in random cells: no centre, no symmetry, mates given on either side."""
    random = np.random.default_rng([16, dimension, density == "real"])
    cell = _random_cell(random, dimension)
    lattice = {
        1: lambda: Lattice.from_period(*cell),
        2: lambda: Lattice.from_planar_parameters(*cell),
        3: lambda: Lattice.from_parameters(*cell),
    }[dimension]()
    limits = EXTENTS[:dimension]
    grid = np.stack(np.meshgrid(*(np.arange(-m, m + 1) for m in limits), indexing="ij"), axis=-1)
    rows = random.permutation(grid.reshape(-1, dimension))
    rows = rows[rows.any(axis=1)][:90]
    if density == "real":
        # One of each pair, whichever comes first: half of them will have to be turned over.
        seen: set[tuple[int, ...]] = set()
        kept = []
        for row in rows.tolist():
            if tuple(-index for index in row) not in seen:
                seen.add(tuple(row))
                kept.append(row)
        rows = np.array(kept)
    amplitude = random.uniform(1, 10, len(rows))
    phase = random.uniform(-180, 180, len(rows))
    mean = 7.25 if density == "real" else 7.25 - 1.5j
    coefficients = assemble(
        lattice,
        Columns(indices=list(rows.T), amplitude=amplitude, phase_deg=phase),
        values="structure_factor",
        density=density,
        mean=mean,
    )
    reflections = [tuple(row) for row in rows.tolist()]
    factors = exact.factors_from(amplitude, phase)
    if density == "real":
        reflections, factors = exact.with_mates(reflections, factors)
    reflections.append((0,) * dimension)
    factors.append(mpmath.mpmathify(mean))
    return Example(lattice, coefficients, reflections, factors, exact.cell_volume(cell))


@cache
def reference(dimension: int, density: str, name: str) -> Reference:
    given = example(dimension, density)
    # The generator depends on the name, so that a test run alone meets the same samples.
    random = np.random.default_rng([161, dimension, *name.encode()])
    where, positions = _samples(given.lattice, name, random)
    count = where.samples
    picked = np.sort(random.choice(count, min(COMPARED, count), replace=False))
    values = exact.series_at(given.reflections, given.factors, [positions(number) for number in picked], given.volume)
    return Reference(where, picked, values)


CASES = [
    pytest.param(dimension, density, name, way, id=f"{dimension}d-{density}-{name}-{way}")
    for dimension in (1, 2, 3)
    for density in ("real", "complex")
    for name in NAMES[dimension]
    for way in WAYS
    if name in COMMENSURATE or not way.startswith("cascade")
]


@pytest.mark.parametrize(("dimension", "density", "name", "way"), CASES)
def test_series_agree_with_sums_in_50_digits(dimension, density, name, way):
    given, expected = example(dimension, density), reference(dimension, density, name)
    method, demand, bound = WAYS[way]
    field = evaluate(given.coefficients, expected.where, Treatment(), demand, method=method)
    assert field.methods == (method,)
    assert _error(field.values, expected) <= min(bound, field.accuracy)


@pytest.mark.parametrize("threads", [1, 2])
@pytest.mark.parametrize("density", ["real", "complex"])
@pytest.mark.parametrize(("dimension", "name"), [(dimension, name) for dimension in NAMES for name in NAMES[dimension]])
def test_the_method_of_the_plan_keeps_the_accuracy_it_states(dimension, name, density, threads):
    given, expected = example(dimension, density), reference(dimension, density, name)
    field = evaluate(given.coefficients, expected.where, demand=Demand(threads=threads))
    assert _error(field.values, expected) <= field.accuracy <= DEFAULT


@pytest.mark.parametrize("density", ["real", "complex"])
@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_the_inverted_structure_would_be_noticed(dimension, density):
    """The reference tells a structure from its mirror image; if not, no sign above is checked."""
    given, expected = example(dimension, density), reference(dimension, density, "points")
    inverted = [tuple(-index for index in row) for row in given.reflections]
    positions = [exact.fractions(expected.where.positions()[number]) for number in expected.picked]
    wrong = exact.series_at(inverted, given.factors, positions, given.volume)
    # Two unrelated maps differ by about their own size; a tenth of it is far from both.
    assert np.abs(wrong - expected.values).max() > 0.1 * np.abs(expected.values).max()


SHAPES = {
    1: [(64,), (63,), (20,), (7,)],
    2: [(48, 45), (27, 30), (15, 16), (4, 3), (8, 300)],
    3: [(30, 32, 27), (27, 25, 28), (10, 9, 8), (3, 5, 2), (6, 10, 150)],
}
"""Below 27 the indices, up to ±13, are folded. Along an axis longer than 100 they reach ±75, the
limit of 150, so that every kind of last stage is taken."""


@pytest.mark.parametrize("precision", ["double", "single"])
@pytest.mark.parametrize("density", ["real", "complex"])
@pytest.mark.parametrize(
    ("dimension", "shape"), [(dimension, shape) for dimension in SHAPES for shape in SHAPES[dimension]]
)
def test_whole_cells_agree_with_numpy(dimension, shape, density, precision):
    """(1/V) Σ F(h) exp(−2πi h·s/N) is numpy's forward transform of F, indices modulo N."""
    random = np.random.default_rng([162, dimension, density == "real"])
    lattice = Lattice.from_vectors(np.diag([9.0, 11.0, 12.5][:dimension]) + random.uniform(0, 2, (dimension,) * 2))
    limits = np.where(np.array(shape) > 100, 75, 13)
    rows = np.unique(random.integers(-limits, limits + 1, (2500, dimension)), axis=0)
    amplitude, phase = random.uniform(0, 5, len(rows)), random.uniform(0, 360, len(rows))
    if density == "real":
        ahead = (rows @ [1, 1000, 1_000_000][:dimension]) > 0
        rows, amplitude, phase = rows[ahead], amplitude[ahead], phase[ahead]
    columns = Columns(indices=list(rows.T), amplitude=amplitude, phase_deg=phase)
    coefficients = assemble(lattice, columns, values="structure_factor", density=density)

    factors = amplitude * np.exp(1j * np.deg2rad(phase))
    cube = np.zeros(shape, dtype=complex)
    np.add.at(cube, tuple((rows % shape).T), factors)
    if density == "real":
        np.add.at(cube, tuple((-rows % shape).T), factors.conj())
    expected = np.fft.fftn(cube) / np.linalg.det(lattice.vectors)

    field = evaluate(
        coefficients, sampling.full_cell(lattice, shape), demand=Demand(precision=precision), method="cascade"
    )
    # numpy's own rounding, some 1e-15, is inside the bound.
    bound = 1e-12 if precision == "double" else 1e-5
    assert np.abs(field.values - expected).max() <= bound * np.abs(expected).max()


def _random_cell(random: np.random.Generator, dimension: int) -> tuple[float, ...]:
    lengths = random.uniform(5, 18, dimension)
    angles = random.uniform(72, 108, (0, 0, 1, 3)[dimension])
    return tuple(float(number) for number in (*lengths, *angles))


def _samples(lattice: Lattice, name: str, random: np.random.Generator):
    """A sampling, and a function from a flat sample number to its exact position."""
    d = lattice.dimension
    if name == "points":
        # Also outside the cell, on either side.
        chosen = random.uniform(-2, 2, (COMPARED, d))
        return sampling.points(lattice, chosen), lambda number: exact.fractions(chosen[number])
    origin = random.uniform(-1, 1, d)
    include_end = False
    if name in CELLS:
        shape, edges, origin = CELLS[name][:d], np.eye(d), np.zeros(d)
        where = sampling.full_cell(lattice, shape)
    elif name == "line":
        shape, end, include_end = (47,), random.uniform(-1, 1, d), True
        where = sampling.line(lattice, origin, end, *shape)
        edges = [[b - a for a, b in zip(exact.fractions(origin), exact.fractions(end), strict=True)]]
    elif name == "lattice-line":
        shape, edges = (13,), [[1, -1, 2][:d]]
        where = sampling.lattice_line(lattice, edges[0], *shape, origin=origin, include_end=False)
    elif name in ("plane", "lattice-plane"):
        oblique = name == "plane"
        shape, include_end = (9, 14), oblique
        edges = random.uniform(-1, 1, (2, d)) if oblique else [[1, 0, 1], [0, 1, -1]]
        where = sampling.plane(lattice, origin, *edges, shape, include_end=include_end)
    else:
        shape = (11, 6, 7)[:d]
        setting = np.array([[1, 1, 0], [-1, 1, 0], [1, 0, 2]])[:d, :d]
        edges = random.uniform(-1, 1, (d, d)) if name == "box" else setting
        where = sampling.box(lattice, origin, edges, shape)
    divisions = [count - include_end for count in shape]

    def position(number: int):
        sample = np.array([np.unravel_index(number, shape)])
        return exact.on_grid(origin, edges, divisions, sample)[0]

    return where, position


def _error(values: np.ndarray, expected: Reference) -> float:
    """Largest difference relative to the largest |value| compared."""
    difference = np.abs(values.reshape(-1)[expected.picked] - expected.values).max()
    return float(difference / np.abs(expected.values).max())
