"""The cascade of Fourier transforms against the oracle."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from engine.synthesis import Demand, cascade, fill, result_dtype, stream
from engine.synthesis.folding import find_fold
from tests.strategies import (
    COMMENSURATE,
    CRYSTAL,
    LATTICES,
    PLANAR,
    STACK,
    Listing,
    deviation,
    example,
    grid,
    listing,
    positions_of,
    summed,
)

BOUND = {"double": 1e-12, "single": 1e-5}
"""Promised relative to the largest |value|: a transform of length N loses some log2 N units of the last
place, a matrix product √N, both below 1e-14 in double and 1e-6 in single precision here."""

LAST_STAGES = {"matrix": ({"double": 1e6, "single": 1e6}, 1e-6), "transform": ({"double": 0.0, "single": 0.0}, 1e-6)}


def source_of(wanted, sampling, demand=None):
    return cascade.prepare(wanted.series(), sampling, find_fold(sampling), demand or Demand())


@pytest.fixture(params=LAST_STAGES)
def last_stage(request, monkeypatch):
    """Both ways of doing the last stage, whatever would be chosen."""
    gain, rows = LAST_STAGES[request.param]
    monkeypatch.setattr(cascade, "MATRIX_GAIN", gain)
    monkeypatch.setattr(cascade, "ROWS_PER_TERM", rows)
    return request.param


@pytest.mark.parametrize("precision", ["double", "single"])
@pytest.mark.parametrize("threads", [1, 2])
@pytest.mark.parametrize("name", COMMENSURATE)
def test_real_grids(name, threads, precision, last_stage):
    wanted, sampling, expected = example(name, True)
    demand = Demand(precision=precision, threads=threads)
    source = source_of(wanted, sampling, demand)
    assert (source._basis is not None) == (last_stage == "matrix")
    found = summed(wanted.series(), sampling, "cascade", demand)
    assert found.dtype == (np.float64 if precision == "double" else np.float32)
    assert deviation(found, expected) < BOUND[precision]


@pytest.mark.parametrize("precision", ["double", "single"])
@pytest.mark.parametrize("threads", [1, 2])
@pytest.mark.parametrize("name", COMMENSURATE)
def test_complex_grids(name, threads, precision):
    wanted, sampling, expected = example(name, False)
    demand = Demand(precision=precision, threads=threads)
    found = summed(wanted.series(), sampling, "cascade", demand)
    assert found.dtype == (np.complex128 if precision == "double" else np.complex64)
    assert deviation(found, expected) < BOUND[precision]


@pytest.mark.parametrize("zero", [True, False], ids=["with zero term", "without"])
@pytest.mark.parametrize("shape", list(itertools.product((1, 2, 3, 4, 8, 9), repeat=2)), ids=str)
def test_every_way_of_folding_in_two_dimensions(shape, zero):
    """Indices out to 6 and 5 on lengths down to 1: folded onto the zero term, onto N/2, onto each other."""
    for real in (True, False):
        wanted = listing(PLANAR, real=real, seed=23, zero=zero)
        sampling = grid([0, 0], np.diag(1 / np.array(shape)), shape)
        found = summed(wanted.series(), sampling, "cascade")
        assert deviation(found, wanted.at(positions_of(sampling))) < BOUND["double"]


@pytest.mark.parametrize("shape", list(itertools.product((1, 2, 5, 8), (1, 3, 6), (1, 2, 7, 10))), ids=str)
def test_every_way_of_folding_in_three_dimensions(shape):
    for real in (True, False):
        wanted = listing(CRYSTAL, real=real, seed=24)
        sampling = grid([0.3, 0, 0.1], np.diag(1 / np.array(shape)), shape)
        found = summed(wanted.series(), sampling, "cascade")
        assert deviation(found, wanted.at(positions_of(sampling))) < BOUND["double"]


@pytest.mark.parametrize("axis", [0, 1, 2])
@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
def test_an_index_of_just_half_the_length(axis, real, last_stage):
    """At an even length N/2 and −N/2 are one frequency; each of them alone, and both, must arrive there."""
    shape = (8, 6, 10)
    half = shape[axis] // 2
    for others in ((0, 0), (1, 0), (0, -2), (2, 1)):
        for signs in ((1,), (-1,), (1, -1)):
            if real and signs == (1, -1) and others == (0, 0):
                continue
            rows = np.array([np.insert(others, axis, sign * half) for sign in signs])
            values = np.array([1.5 + 0.7j, 0.4 - 1.1j])[: len(signs)]
            if real:
                rows, values = np.concatenate([rows, -rows]), np.concatenate([values, values.conj()])
            wanted = Listing(CRYSTAL, rows, values, real)
            sampling = grid([0, 0, 0], np.diag(1 / np.array(shape)), shape)
            found = summed(wanted.series(), sampling, "cascade")
            assert deviation(found, wanted.at(positions_of(sampling))) < BOUND["double"]


@pytest.mark.parametrize("shape", [(7,), (8, 9), (6, 7, 10)], ids=str)
def test_against_the_library_transform_of_the_filled_cell(shape):
    """A second reference: the coefficients put into a full grid, and one transform of it."""
    wanted = listing(LATTICES[len(shape)], real=False, seed=25)
    full = np.zeros(shape, dtype=np.complex128)
    np.add.at(full, tuple((wanted.indices % shape).T), wanted.values)
    sampling = grid(np.zeros(len(shape)), np.diag(1 / np.array(shape)), shape)
    found = summed(wanted.series(), sampling, "cascade")
    assert deviation(found, np.fft.ifftn(full, norm="forward")) < BOUND["double"]


def test_the_last_stage_is_chosen_by_what_is_occupied():
    shape = (12, 12, 30)
    sampling = grid([0, 0, 0], np.diag(1 / np.array(shape)), shape)
    few = listing(CRYSTAL, seed=26, reach=(4, 3, 3))
    many = listing(CRYSTAL, seed=26, reach=(1, 1, 15))
    chosen = {}
    for wanted in (few, many):
        for precision in ("double", "single"):
            source = source_of(wanted, sampling, Demand(precision=precision))
            chosen[wanted is few, precision] = source._basis is not None
            found = summed(wanted.series(), sampling, "cascade", Demand(precision=precision))
            assert deviation(found, wanted.at(positions_of(sampling))) < BOUND[precision]
    # 16 l are fewer than 5.5 log2 31 = 27; it is the ratio that decides, and the number of rows.
    assert chosen == {(True, "double"): True, (True, "single"): True, (False, "double"): True, (False, "single"): True}
    wide = grid([0, 0, 0], np.diag(1 / np.array([24, 20, 60])), (24, 20, 60))
    deep = listing(CRYSTAL, seed=26, reach=(0, 0, 30), share=1.0)
    assert source_of(deep, wide)._basis is not None
    deeper = listing(CRYSTAL, seed=26, reach=(0, 0, 40), share=1.0)
    wider = grid([0, 0, 0], np.diag(1 / np.array([24, 20, 80])), (24, 20, 80))
    assert source_of(deeper, wider)._basis is None
    assert source_of(deeper, wider, Demand(precision="single"))._basis is not None


def test_no_matrix_is_made_for_a_single_row():
    """It would be larger than the line itself, by the number of coefficients."""
    sampling = grid([0], [1 / 4096], (4096,))
    assert source_of(listing(STACK, seed=1), sampling)._basis is None
    wanted = listing(PLANAR, seed=1)
    assert source_of(wanted, grid([0, 0], np.diag([1 / 8, 1 / 4096]), (8, 4096)))._basis is None
    assert source_of(wanted, grid([0, 0], np.diag([1 / 4096, 1 / 16]), (4096, 16)))._basis is not None


@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
@pytest.mark.parametrize("name", COMMENSURATE)
def test_values_can_be_written_into_strided_memory(name, real):
    wanted, sampling, expected = example(name, real)
    room = np.full((*sampling.shape, 3), np.nan, dtype=result_dtype(real, "double"))
    summed(wanted.series(), sampling, "cascade", out=room[..., 1])
    assert deviation(room[..., 1], expected) < BOUND["double"]
    assert np.isnan(room[..., [0, 2]]).all()


@pytest.mark.parametrize("block", [1, 3, 1000])
@pytest.mark.parametrize("name", COMMENSURATE)
def test_any_block_of_planes_is_the_same_values(name, block):
    wanted, sampling, expected = example(name, True)
    source = source_of(wanted, sampling)
    source.block = block
    found = np.concatenate(list(stream(source, np.dtype(float), sampling.shape[1:], 1)))
    assert deviation(found, expected) < BOUND["double"]


def test_a_source_can_be_computed_twice():
    _, sampling = COMMENSURATE["cell 3-D"]
    wanted = listing(CRYSTAL, seed=29)
    source = source_of(wanted, sampling)
    first, second = np.empty(sampling.shape), np.empty(sampling.shape)
    fill(source, first, threads=1)
    fill(source, second, threads=1)
    np.testing.assert_array_equal(first, second)


@pytest.mark.parametrize("chunk", [7, 64])
@pytest.mark.parametrize("threads", [1, 2])
def test_the_size_of_a_scattered_chunk_changes_nothing(monkeypatch, chunk, threads):
    monkeypatch.setattr(cascade, "_chunk", lambda count, threads: chunk)
    for name in ("cell 3-D", "cell 3-D coarse", "cell 3-D fine", "3-D another setting"):
        _, sampling = COMMENSURATE[name]
        for real in (True, False):
            wanted, _, expected = example(name, real)
            found = summed(wanted.series(), sampling, "cascade", Demand(threads=threads))
            assert deviation(found, expected) < BOUND["double"]


def test_many_terms_on_few_samples_in_single_precision():
    """Thousands of coefficients are added up in one place; the bound of single precision must hold."""
    wanted = listing(CRYSTAL, seed=31, reach=(12, 12, 12), share=1.0)
    for sampling in (
        grid([0, 0, 0], np.diag([1 / 2, 1 / 3, 1 / 5]), (2, 3, 5)),
        grid([0, 0, 0], [[0, 0, 1 / 9]], (9,)),
    ):
        found = summed(wanted.series(), sampling, "cascade", Demand(precision="single"))
        assert deviation(found, wanted.at(positions_of(sampling))) < BOUND["single"]


@pytest.mark.parametrize("row", [(0, 0, 0), (0, 0, 3), (2, -1, 0), (-3, 2, 4)], ids=str)
@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
def test_a_single_coefficient(row, real):
    values = np.array([1.7 if real and not any(row) else 1.7 - 0.6j])
    rows = np.array([row])
    if real and any(row):
        rows, values = np.concatenate([rows, -rows]), np.concatenate([values, values.conj()])
    wanted = Listing(CRYSTAL, rows, values, real)
    _, sampling = COMMENSURATE["cell 3-D odd"]
    found = summed(wanted.series(), sampling, "cascade")
    assert deviation(found, wanted.at(positions_of(sampling))) < BOUND["double"]
