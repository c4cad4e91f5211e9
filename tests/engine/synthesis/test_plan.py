"""Which method is taken, what it is said to cost, what is refused before anything is allocated."""

from __future__ import annotations

import json
import subprocess
import sys
import time
import tracemalloc
from pathlib import Path

import numpy as np
import pytest

import engine
from engine import InputError, TooLargeError
from engine.sampling import FreePoints, box, full_cell, line, plane, points
from engine.synthesis import Demand, fill, plan, result_dtype
from tests.strategies import (
    CRYSTAL,
    GRIDS,
    LATTICES,
    PLANAR,
    STACK,
    Listing,
    example,
    free_points,
    listing,
    refusal_of,
    summed,
)

METHODS = ("direct", "cascade", "nonuniform")

LARGE = {d: listing(LATTICES[d], seed=51, reach=reach) for d, reach in ((1, (200,)), (2, (20, 24)), (3, (9, 8, 10)))}


# The choice.


@pytest.mark.parametrize("name", GRIDS)
def test_the_cheapest_method_is_taken(name):
    wanted, sampling, _ = example(name, True)
    methods = METHODS if not name.startswith("free") else ("direct", "nonuniform")
    costs = {method: plan(wanted.series(), sampling, method=method).chosen.seconds for method in methods}
    chosen = plan(wanted.series(), sampling)
    assert chosen.chosen.seconds == min(costs.values())
    assert chosen.method == min(costs, key=costs.get)


def test_each_method_has_its_work():
    series = LARGE[3].series()
    rng = np.random.default_rng(1)
    assert plan(series, full_cell(CRYSTAL, (96, 100, 108))).method == "cascade"
    assert plan(series, plane(CRYSTAL, [0, 0, 0.3], [1, 0, 0], [0, 1, 0], (200, 210))).method == "cascade"
    tilted = plane(CRYSTAL, [0, 0, 0], [0.9123, 0.1, 0], [0.05, 0.8371, 0.3], (200, 210))
    assert plan(series, tilted).method == "nonuniform"
    assert plan(series, points(CRYSTAL, rng.random((3, 3)))).method == "direct"
    assert plan(series, points(CRYSTAL, rng.random((100_000, 3)))).method == "nonuniform"
    few = listing(STACK, seed=1, reach=(3,)).series()
    assert plan(few, line(STACK, [0.0], [0.777], 50)).method == "direct"


def test_the_direct_sum_of_a_long_thin_plane_is_not_thought_cheap():
    """The exponentials of the long axis are made anew for every block of planes."""
    series = LARGE[2].series()
    wide = plan(series, plane(PLANAR, [0, 0], [0.91, 0], [0, 0.83], (64, 100_000)), method="direct")
    assert wide.chosen.seconds > 13 * 100_000 * series.count * 1e-8


def test_a_plan_says_what_it_will_do():
    series = LARGE[3].series()
    sampling = full_cell(CRYSTAL, (20, 24, 30))
    for real, precision, item in (
        (True, "double", 8),
        (True, "single", 4),
        (False, "double", 16),
        (False, "single", 8),
    ):
        one = series if real else series.complete()
        made = plan(one, sampling, Demand(precision=precision))
        assert made.output == 20 * 24 * 30 * item
        assert made.bytes == made.output + made.chosen.workspace
        assert made.method == made.chosen.method
        assert made.chosen.accuracy == pytest.approx(1e-12 if precision == "double" else 1e-5)
    loose = plan(series, free_points(3), Demand(tolerance=1e-6), method="nonuniform")
    assert loose.chosen.accuracy == 1e-6


def test_no_coefficients_sum_to_zero():
    for d in (1, 2, 3):
        for real in (True, False):
            nothing = Listing(LATTICES[d], np.empty((0, d), dtype=np.int64), np.empty(0, dtype=complex), real)
            for sampling in (full_cell(LATTICES[d], (4, 5, 6)[:d]), free_points(d)):
                found = summed(nothing.series(), sampling)
                assert found.shape == sampling.shape
                assert not found.any()


# Refusals.


def test_a_method_that_does_not_fit_is_refused():
    wanted, sampling, _ = example("free plane in 3-D", True)
    assert refusal_of(lambda: plan(wanted.series(), sampling, method="cascade")).path == ("method",)
    assert refusal_of(lambda: plan(wanted.series(), free_points(3), method="cascade")).path == ("method",)
    assert refusal_of(lambda: plan(wanted.series(), sampling, method="guess")).path == ("method",)


@pytest.mark.parametrize("tolerance", [0.0, 1e-13, 0.1, -1.0, float("nan"), float("inf")])
def test_a_tolerance_that_cannot_be_had_is_refused(tolerance):
    wanted, sampling, _ = example("cell 1-D even", True)
    refusal = refusal_of(lambda: plan(wanted.series(), sampling, Demand(tolerance=tolerance)))
    assert refusal.path == ("tolerance",)


@pytest.mark.parametrize("threads", [0, -1])
def test_no_threads_are_refused(threads):
    wanted, sampling, _ = example("cell 1-D even", True)
    assert refusal_of(lambda: plan(wanted.series(), sampling, Demand(threads=threads))).path == ("threads",)


def test_too_large_by_a_byte():
    series = LARGE[3].series()
    sampling = full_cell(CRYSTAL, (20, 24, 30))
    least = min(plan(series, sampling, method=method).bytes for method in METHODS)
    assert plan(series, sampling, max_bytes=least).bytes == least
    with pytest.raises(TooLargeError) as caught:
        plan(series, sampling, max_bytes=least - 1)
    assert caught.value.path == ("samples",)


def test_a_method_that_is_too_large_gives_way_to_a_slower_one():
    rng = np.random.default_rng(1)
    indices = np.unique(rng.integers(-50, 51, (2000, 3)), axis=0)
    series = Listing(CRYSTAL, indices, np.ones(len(indices), dtype=complex), False).series()
    sampling = FreePoints(rng.random((20_000, 3)))
    fast, slow = (plan(series, sampling, method=method) for method in ("nonuniform", "direct"))
    assert fast.chosen.seconds < slow.chosen.seconds
    assert fast.bytes > slow.bytes
    assert plan(series, sampling, max_bytes=fast.bytes).method == "nonuniform"
    assert plan(series, sampling, max_bytes=fast.bytes - 1).method == "direct"


HUGE = {
    "cell": full_cell(CRYSTAL, (10**5, 10**5, 10**5)),
    "box": box(CRYSTAL, [0, 0, 0], list(0.777 * np.eye(3)), (10**5, 10**5, 10**5)),
    "plane": plane(CRYSTAL, [0, 0, 0], [1, 0, 0], [0, 0.7, 0], (10**8, 10**7)),
    "line": line(CRYSTAL, [0, 0, 0], [0, 0, 1], 10**15),
    "beyond 64 bits": full_cell(CRYSTAL, (10**12, 10**12, 10**12)),
}


@pytest.mark.parametrize("method", [None, "direct", "nonuniform"])
@pytest.mark.parametrize("name", HUGE)
def test_a_thousand_million_million_samples_are_refused_at_once(name, method):
    series = LARGE[3].series()
    plan(series, full_cell(CRYSTAL, (4, 5, 6)))
    tracemalloc.start()
    begin = time.perf_counter()
    try:
        with pytest.raises(TooLargeError):
            plan(series, HUGE[name], method=method, max_bytes=1 << 40)
        taken = time.perf_counter() - begin
        peak = tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()
    # A few products of extents: a millisecond, and nothing in proportion to the samples.
    assert taken < 0.5
    assert peak < 1 << 20


# Bytes.


def peak_of(series, sampling, demand, method):
    """Bytes at the peak of a sum, output included, as numpy reports them."""
    made = plan(series, sampling, demand, method=method)
    tracemalloc.start()
    try:
        out = np.empty(sampling.shape, dtype=result_dtype(series.real, demand.precision))
        fill(made.prepare(), out, threads=demand.threads)
        return tracemalloc.get_traced_memory()[1], made.bytes
    finally:
        tracemalloc.stop()


EYE = list(np.eye(3))
SAMPLINGS = {
    "long line": (1, full_cell(STACK, (100_000,)), METHODS),
    "line of three cells": (1, line(STACK, [0.0], [3.0], 30_001), METHODS),
    "free line": (1, line(STACK, [0.0], [0.777], 30_001), ("direct", "nonuniform")),
    "cell 2-D": (2, full_cell(PLANAR, (250, 300)), METHODS),
    "flat plane": (2, full_cell(PLANAR, (10, 30_000)), ("cascade", "nonuniform")),
    "wide plane, by a matrix": (2, full_cell(PLANAR, (210, 8000)), ("cascade",)),
    "plane of twelve cells": (2, plane(PLANAR, [0, 0], [3, 0], [0, 4], (301, 401), include_end=True), METHODS),
    "free plane": (2, plane(PLANAR, [0, 0], [0.71, 0], [0, 0.83], (250, 300)), ("direct", "nonuniform")),
    "cell 3-D": (3, full_cell(CRYSTAL, (40, 44, 48)), METHODS),
    "coarse cell": (3, full_cell(CRYSTAL, (12, 10, 15)), METHODS),
    "box of eight cells": (3, box(CRYSTAL, [0, 0, 0], [2 * e for e in EYE], (41, 45, 37), include_end=True), METHODS),
    "another setting": (3, box(CRYSTAL, [0.1, 0, 0], [[1, 1, 0], [0, 1, 1], [1, 0, 1]], (36, 40, 42)), METHODS),
    "plane in 3-D": (3, plane(CRYSTAL, [0, 0, 0.3], [1, 0, 0], [0, 1, 0], (200, 220)), METHODS),
    "free box": (3, box(CRYSTAL, [0, 0, 0], [0.7 * e for e in EYE], (30, 31, 32)), ("direct", "nonuniform")),
    "few points": (3, points(CRYSTAL, np.random.default_rng(0).random((300, 3))), ("direct", "nonuniform")),
    "many points": (3, points(CRYSTAL, np.random.default_rng(0).random((100_000, 3))), ("nonuniform",)),
}
CASES = {
    "real": (True, Demand()),
    "complex": (False, Demand()),
    "real in two threads": (True, Demand(threads=2)),
    "complex, single": (False, Demand(precision="single")),
}


@pytest.mark.parametrize("case", CASES)
@pytest.mark.parametrize("name", SAMPLINGS)
def test_the_bytes_of_a_plan_are_a_bound_of_the_peak(name, case):
    d, sampling, methods = SAMPLINGS[name]
    real, demand = CASES[case]
    series = LARGE[d].series() if real else LARGE[d].series().complete()
    for method in methods:
        # The first call of all loads and compiles things that stay.
        summed(series, full_cell(LATTICES[d], (2, 3, 4)[:d]), None if method == "cascade" else method)
        peak, said = peak_of(series, sampling, demand, method)
        assert peak <= said, method


def test_the_bytes_of_a_cascade_are_not_far_above_the_peak():
    peak, said = peak_of(LARGE[3].series(), full_cell(CRYSTAL, (96, 100, 108)), Demand(), "cascade")
    assert said < 2 * peak


RESIDENT = r"""
import json, re, sys
from pathlib import Path
import numpy as np, psutil
from tests.engine.synthesis.test_plan import LARGE, CRYSTAL, box, points
from engine.synthesis import Demand, fill, plan, result_dtype
from tests.strategies import summed, free_points, grid

kind, threads = sys.argv[1], int(sys.argv[2])
series = LARGE[3].series()
if kind == "grid":
    sampling = box(CRYSTAL, [0, 0, 0], list(0.83 * np.eye(3)), (80, 90, 100))
else:
    sampling = points(CRYSTAL, np.random.default_rng(0).random((400_000, 3)))
small = grid([0, 0, 0], 0.13 * np.eye(3), (4, 5, 6)) if kind == "grid" else free_points(3)
summed(series, small, "nonuniform", Demand(threads=threads))
made = plan(series, sampling, Demand(threads=threads), method="nonuniform")
before = psutil.Process().memory_info().rss
out = np.empty(sampling.shape)
fill(made.prepare(), out, threads=threads)
# Not getrusage: its peak comes down from the parent process.
peak = 1024 * int(re.search(r"VmHWM:\s+(\d+) kB", Path("/proc/self/status").read_text()).group(1))
print(json.dumps({"peak": peak - before, "said": made.bytes}))
"""


@pytest.mark.skipif(not Path("/proc/self/status").is_file(), reason="the peak of a process is read from /proc")
@pytest.mark.parametrize("threads", [1, 2])
@pytest.mark.parametrize("kind", ["grid", "points"])
def test_the_bytes_of_a_nonuniform_transform_cover_what_the_library_takes(kind, threads):
    """Its own arrays are unknown to numpy, so the process is measured: resident pages, against a bound
    with 12 MiB on top for the allocator and the stacks of the threads."""
    done = subprocess.run(
        [sys.executable, "-c", RESIDENT, kind, str(threads)],
        cwd=Path(engine.__file__).parents[1],
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    measured = json.loads(done.stdout)
    assert measured["peak"] <= measured["said"] + (12 << 20)
    assert measured["said"] < 2 * measured["peak"]


def test_refusals_are_input_errors():
    assert issubclass(TooLargeError, InputError)
