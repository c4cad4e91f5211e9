"""The direct sum against the oracle."""

from __future__ import annotations

import numpy as np
import pytest

from engine.sampling import FreePoints
from engine.synthesis import Demand, direct
from tests.strategies import (
    CRYSTAL,
    GRIDS,
    LATTICES,
    STACK,
    Listing,
    deviation,
    example,
    free_points,
    grid,
    listing,
    positions_of,
    summed,
)

BOUND = {"double": 1e-12, "single": 1e-5}
"""Promised relative to the largest |value|: a hundred terms lose some hundred units of the last place,
2e-14 here; single precision is that of the output, 6e-8, with room."""


@pytest.mark.parametrize("precision", ["double", "single"])
@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
@pytest.mark.parametrize("name", GRIDS)
def test_grids(name, real, precision):
    wanted, sampling, expected = example(name, real)
    found = summed(wanted.series(), sampling, "direct", Demand(precision=precision))
    kind = "f" if real else "c"
    assert found.dtype.kind == kind
    assert found.dtype.itemsize == {"f": 4, "c": 8}[kind] * (2 if precision == "double" else 1)
    assert deviation(found, expected) < BOUND[precision]


@pytest.mark.parametrize("threads", [1, 2])
@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_free_points(dimension, real, threads):
    wanted = listing(LATTICES[dimension], real=real, seed=12)
    sampling = free_points(dimension)
    found = summed(wanted.series(), sampling, "direct", Demand(threads=threads))
    assert deviation(found, wanted.at(sampling.fractional)) < BOUND["double"]


@pytest.mark.parametrize("chunk", [1, 7, 100])
@pytest.mark.parametrize("threads", [1, 2])
def test_the_size_of_the_temporaries_changes_nothing(monkeypatch, chunk, threads):
    monkeypatch.setattr(direct, "CHUNK", chunk)
    wanted = listing(CRYSTAL, seed=13, share=0.2)
    for sampling in (grid([0.1, 0, 0], np.eye(3) / 7.3, (4, 3, 5)), grid([0, 0, 0], [[0.013, 0.02, 0.1]], (23,))):
        found = summed(wanted.series(), sampling, "direct", Demand(threads=threads))
        assert deviation(found, wanted.at(positions_of(sampling))) < BOUND["double"]
    sampling = free_points(3, count=19)
    found = summed(wanted.series(), sampling, "direct", Demand(threads=threads))
    assert deviation(found, wanted.at(sampling.fractional)) < BOUND["double"]


@pytest.mark.parametrize("samples", [1, 2, 3, 4, 5, 15, 16, 17, 50])
def test_a_line_of_any_length_is_split_in_two_axes(samples):
    wanted = listing(CRYSTAL, seed=14)
    sampling = grid([0.2, 0.3, 0.1], [[0.013, 0.02, 0.1]], (samples,))
    found = summed(wanted.series(), sampling, "direct")
    assert deviation(found, wanted.at(positions_of(sampling))) < BOUND["double"]


def test_one_coefficient_is_one_cosine():
    l, x = 7, np.linspace(-1, 2, 31)[:, None]
    wanted = Listing(STACK, np.array([[l], [-l]]), np.array([1 - 2j, 1 + 2j]), True)
    found = summed(wanted.series(), FreePoints(x), "direct")
    expected = 2 * (np.cos(2 * np.pi * l * x[:, 0]) + 2 * np.sin(2 * np.pi * l * x[:, 0]))
    # Here the phases of 14 turns count: 14·2π·1e-16.
    np.testing.assert_allclose(found, expected, atol=1e-13)


def test_phases_far_from_the_origin_keep_their_digits():
    """Whole cells are taken off before the phase is formed; a million of them cost ten digits otherwise."""
    wanted = listing(CRYSTAL, seed=15)
    near = np.random.default_rng(3).integers(0, 1024, (40, 3)) / 1024
    far = near + np.array([2.0**20, -(2.0**21), 2.0**22])
    found = summed(wanted.series(), FreePoints(far), "direct")
    assert deviation(found, wanted.at(near)) < BOUND["double"]
    sampling = grid(far[0], np.eye(3) / 8, (2, 3, 4))
    same = grid(near[0], np.eye(3) / 8, (2, 3, 4))
    assert deviation(summed(wanted.series(), sampling, "direct"), wanted.at(positions_of(same))) < BOUND["double"]
