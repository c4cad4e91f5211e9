"""Running a source: whole or in blocks, in one thread or several."""

from __future__ import annotations

import threading

import numpy as np
import pytest

from engine.synthesis import Demand, fill, plan, result_dtype, stream
from tests.strategies import COMMENSURATE, CRYSTAL, GRIDS, INCOMMENSURATE, deviation, example, free_points, listing


class Counted:
    """A source whose planes hold their own number; it knows what it was asked for."""

    def __init__(self, planes, block, concurrent=True):
        self.planes, self.block, self.concurrent = planes, block, concurrent
        self.asked = []
        self.threads = set()
        self.fail_at = None

    def compute(self, start, stop, out):
        if self.fail_at is not None and start <= self.fail_at < stop:
            raise ValueError("broken plane")
        self.asked.append((start, stop))
        self.threads.add(threading.get_ident())
        assert out.shape[0] == stop - start
        out[...] = np.arange(start, stop).reshape(-1, *(1,) * (out.ndim - 1))


def numbers(planes):
    return np.broadcast_to(np.arange(planes)[:, None], (planes, 4))


@pytest.mark.parametrize("threads", [1, 2, 3, 8])
@pytest.mark.parametrize(("planes", "block"), [(1, 1), (7, 1), (7, 2), (7, 7), (7, 100), (24, 5)])
def test_every_plane_is_computed_once(planes, block, threads):
    source = Counted(planes, block)
    out = np.full((planes, 4), -1.0)
    fill(source, out, threads=threads)
    np.testing.assert_array_equal(out, numbers(planes))
    expected = [(start, min(start + block, planes)) for start in range(0, planes, block)]
    assert sorted(source.asked) == expected


def test_a_source_that_minds_its_own_threads_is_run_in_one():
    source = Counted(24, 5, concurrent=False)
    fill(source, np.empty((24, 4)), threads=4)
    assert source.threads == {threading.get_ident()}
    assert next(iter(stream(source, np.dtype(float), (4,), 4))).shape == (5, 4)
    assert source.threads == {threading.get_ident()}


@pytest.mark.parametrize("threads", [1, 2])
def test_progress_ends_with_all_planes(threads):
    seen = []
    fill(Counted(24, 5), np.empty((24, 4)), threads=threads, progress=lambda done, total: seen.append((done, total)))
    assert [done for done, _ in seen] == sorted(done for done, _ in seen)
    assert seen[-1] == (24, 24)
    assert len(seen) == 5


@pytest.mark.parametrize("threads", [1, 2])
def test_each_block_is_shown_once_and_alone(threads):
    rows, inside = [], []

    def each(block):
        inside.append(1)
        assert len(inside) == 1
        rows.extend(block[:, 0].tolist())
        inside.pop()

    fill(Counted(24, 1), np.empty((24, 4)), threads=threads, each=each)
    assert sorted(rows) == list(range(24))


@pytest.mark.parametrize("threads", [1, 2])
def test_progress_may_end_the_work(threads):
    class Stopped(Exception):
        pass

    source = Counted(1000, 1)

    def progress(done, total):
        if done >= 3:
            raise Stopped

    with pytest.raises(Stopped):
        fill(source, np.empty((1000, 4)), threads=threads, progress=progress)
    # Each thread stops at its next report.
    assert len(source.asked) <= 3 + threads


@pytest.mark.parametrize("threads", [1, 2])
def test_a_fault_in_a_block_comes_out(threads):
    source = Counted(24, 1)
    source.fail_at = 17
    with pytest.raises(ValueError, match="broken plane"):
        fill(source, np.empty((24, 4)), threads=threads)
    with pytest.raises(ValueError, match="broken plane"):
        list(stream(source, np.dtype(float), (4,), threads))


@pytest.mark.parametrize("threads", [1, 2, 5])
@pytest.mark.parametrize(("planes", "block"), [(1, 1), (7, 2), (7, 7), (24, 5), (24, 1)])
def test_a_stream_yields_the_blocks_in_order(planes, block, threads):
    blocks = list(stream(Counted(planes, block), np.dtype(np.float32), (4,), threads))
    assert [len(one) for one in blocks] == [min(block, planes - start) for start in range(0, planes, block)]
    assert all(one.dtype == np.float32 for one in blocks)
    np.testing.assert_array_equal(np.concatenate(blocks), numbers(planes))


@pytest.mark.parametrize("threads", [1, 2])
def test_a_stream_keeps_only_a_few_blocks_ahead(threads):
    source = Counted(200, 1)
    running = stream(source, np.dtype(float), (4,), threads)
    next(running)
    assert len(source.asked) <= threads + 2
    running.close()
    assert len(source.asked) <= threads + 3


@pytest.mark.parametrize("threads", [1, 2])
@pytest.mark.parametrize("method", ["direct", "cascade", "nonuniform"])
@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
def test_stream_and_fill_are_the_same_values(method, real, threads):
    kept = {"cascade": COMMENSURATE, "direct": GRIDS, "nonuniform": INCOMMENSURATE}[method]
    for name in kept:
        wanted, sampling, expected = example(name, real)
        made = plan(wanted.series(), sampling, Demand(threads=threads), method=method)
        dtype = result_dtype(real, "double")
        whole = np.empty(sampling.shape, dtype=dtype)
        fill(made.prepare(), whole, threads=threads)
        parts = list(stream(made.prepare(), dtype, sampling.shape[1:], threads))
        joined = np.concatenate(parts)
        assert joined.dtype == dtype
        # The same arithmetic; only the library's own threads may add up in another order.
        assert deviation(joined, whole) < (1e-15 if method != "nonuniform" else 1e-12)
        assert deviation(joined, expected) < (1e-12 if method != "nonuniform" else 1e-9)


def test_one_thread_repeats_bit_for_bit():
    wanted = listing(CRYSTAL, seed=3)
    for sampling in (GRIDS["cell 3-D"][1], GRIDS["free box in 3-D"][1], free_points(3)):
        made = plan(wanted.series(), sampling)
        first, second = np.empty(sampling.shape), np.empty(sampling.shape)
        fill(made.prepare(), first, threads=1)
        fill(made.prepare(), second, threads=1)
        np.testing.assert_array_equal(first, second)
