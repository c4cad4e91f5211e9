"""The non-uniform transforms against the oracle, and the wall in front of the library."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

import engine
from engine.sampling import FreePoints
from engine.synthesis import Demand, nonuniform
from tests.strategies import (
    CRYSTAL,
    GRIDS,
    LATTICES,
    Listing,
    deviation,
    example,
    free_points,
    grid,
    listing,
    positions_of,
    summed,
)

DEMANDS = {
    "default": (Demand(), 1e-9),
    "finest": (Demand(tolerance=1e-12), 1e-12),
    "coarse": (Demand(tolerance=1e-4), 1e-4),
    "two threads": (Demand(threads=2), 1e-9),
    "single": (Demand(precision="single"), 1e-5),
}
"""The bound is the tolerance that was demanded, relative to the largest |value|."""


@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
@pytest.mark.parametrize("demand", DEMANDS)
@pytest.mark.parametrize("name", GRIDS)
def test_grids(name, demand, real):
    demand, bound = DEMANDS[demand]
    wanted, sampling, expected = example(name, real)
    found = summed(wanted.series(), sampling, "nonuniform", demand)
    assert found.dtype.kind == ("f" if real else "c")
    assert deviation(found, expected) < bound


@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
@pytest.mark.parametrize("demand", DEMANDS)
@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_free_points(dimension, demand, real):
    demand, bound = DEMANDS[demand]
    wanted = listing(LATTICES[dimension], real=real, seed=42)
    sampling = free_points(dimension)
    found = summed(wanted.series(), sampling, "nonuniform", demand)
    assert deviation(found, wanted.at(sampling.fractional)) < bound


def test_indices_far_to_one_side():
    """The modes are shifted to the middle of their extent, which must come back as a phase."""
    rng = np.random.default_rng(6)
    indices = rng.integers(0, 8, (40, 3)) + np.array([30, -50, 7])
    indices = np.unique(indices, axis=0)
    values = rng.normal(size=len(indices)) + 1j * rng.normal(size=len(indices))
    wanted = Listing(CRYSTAL, indices, values, False)
    for sampling in (free_points(3), grid([0.1, 0.2, 0.3], np.eye(3) / 7.7, (3, 4, 5))):
        found = summed(wanted.series(), sampling, "nonuniform", Demand(tolerance=1e-12))
        assert deviation(found, wanted.at(positions_of(sampling))) < 1e-12


@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
def test_a_box_done_in_blocks_of_planes(monkeypatch, real):
    monkeypatch.setattr(nonuniform, "BLOCK_BYTES", 1 << 15)
    _, sampling = GRIDS["free box in 3-D"]
    wanted = listing(CRYSTAL, real=real, seed=43)
    source = nonuniform.prepare(wanted.series(), sampling, Demand())
    assert source.block < sampling.shape[0]
    found = summed(wanted.series(), sampling, "nonuniform")
    assert deviation(found, wanted.at(positions_of(sampling))) < 1e-9


def test_one_coefficient_and_one_sample():
    for row in ((0, 0, 0), (2, -1, 3)):
        wanted = Listing(CRYSTAL, np.array([row]), np.array([1.3 - 0.2j]), False)
        for sampling in (FreePoints(np.array([[0.3, 0.1, 0.9]])), grid([0.3, 0.1, 0.9], np.eye(3), (1, 1, 1))):
            assert deviation(summed(wanted.series(), sampling, "nonuniform"), wanted.at(positions_of(sampling))) < 1e-9


def test_points_far_from_the_origin_keep_their_digits():
    wanted = listing(CRYSTAL, seed=44)
    near = np.random.default_rng(3).integers(0, 1024, (40, 3)) / 1024
    far = near + np.array([2.0**20, -(2.0**21), 2.0**22])
    found = summed(wanted.series(), FreePoints(far), "nonuniform", Demand(tolerance=1e-12))
    assert deviation(found, wanted.at(near)) < 1e-12


HOSTILE = """
import itertools, sys
import numpy as np
from engine import Lattice, TransformError
from engine.sampling import AffineGrid, FreePoints
from engine.series import Series
from engine.synthesis import Demand, fill, nonuniform, result_dtype

refused = 0
for d, real, bad in itertools.product((1, 2, 3), (True, False), (np.nan, np.inf, -np.inf)):
    lattice = Lattice.from_vectors(5 * np.eye(d))
    indices = np.eye(d, dtype=np.int64)
    good, origin, steps = np.ones(d, dtype=complex), np.zeros(d), 0.13 * np.eye(d)
    broken = {}
    for name, array in (("values", good), ("origin", origin), ("steps", steps)):
        broken[name] = array.copy()
        broken[name].flat[-1] = bad
    shape, names = (3, 4, 5)[:d], ("a", "b", "c")[:d]
    grid = AffineGrid(origin, steps, shape, names, (0.0,) * d)
    cases = [
        (Series(lattice, indices, broken["values"], real), grid),
        (Series(lattice, indices, good, real), AffineGrid(broken["origin"], steps, shape, names, (0.0,) * d)),
        (Series(lattice, indices, good, real), AffineGrid(origin, broken["steps"], shape, names, (0.0,) * d)),
        (Series(lattice, indices, broken["values"], real), FreePoints(np.zeros((2, d)))),
        (Series(lattice, indices, good, real), FreePoints(np.array([[0.1] * d, [0.1] * (d - 1) + [bad]]))),
        (Series(lattice, indices, good, real), FreePoints(np.empty((0, d)))),
    ]
    for series, sampling in cases:
        out = np.empty(sampling.shape, dtype=result_dtype(real, "double"))
        source = nonuniform.prepare(series, sampling, Demand())
        try:
            source.compute(0, sampling.shape[0], out)
        except TransformError:
            refused += 1
        else:
            sys.exit(f"not refused: {d} {real} {bad} {type(sampling).__name__}")
print(refused)
"""


def test_nothing_that_is_not_finite_reaches_the_library():
    """Such a point ends the process inside the library, hence a process of its own."""
    done = subprocess.run(
        [sys.executable, "-W", "ignore", "-c", HOSTILE],
        cwd=Path(engine.__file__).parents[1],
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
    )
    assert (done.returncode, done.stdout.strip()) == (0, str(3 * 2 * 3 * 6)), done.stderr


def test_a_failure_of_the_library_is_an_error_of_the_engine():
    def broken(*_, **__):
        raise RuntimeError("out of luck")

    with pytest.raises(engine.TransformError, match="out of luck") as caught:
        nonuniform._run(broken, [np.zeros(1)], np.zeros(1, dtype=complex))
    assert isinstance(caught.value.__cause__, RuntimeError)
