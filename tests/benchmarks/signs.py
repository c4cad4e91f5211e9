"""Signs of symmetric stacks: all sets of 20 orders in time and memory, the beam's hits, and invented stacks.

``one by one`` is a plain loop over sign sets, each judged by the same criteria on the same samples, tables of cosines
made beforehand; it is measured on some of the sets and scaled to all. ``in blocks`` judges 4096 sets at a time without
splitting the orders. The stacks are random and invented (tests/engine/films/signs/stacks.py): their knowledge goes from
level 0, the mean density and least structure, to 3, density and flatness of gallery and core.
"""

from __future__ import annotations

import time
import tracemalloc

import numpy as np

from engine.films.signs import DECISIVE, Criteria, beam
from engine.films.signs.exhaustive import search, sign_table, work_bytes
from tests.benchmarks.timing import CORES, best
from tests.engine.films.signs.problems import EVERYTHING, POSITIONS, SHAPE, problem
from tests.engine.films.signs.stacks import trials

ORDERS = 20
SOME = 2000
SEEDS = (2024, 201, 202, 203, 204)
STACKS = 200


def main() -> None:
    """Print the tables."""
    print(f"all sign sets of {ORDERS} free orders, seconds; 10 best kept")
    print("  criteria          1 thread  2 threads  in blocks*  one by one*  ×1 thread   peak MiB  said MiB")
    for name, criteria in (("all kinds", EVERYTHING), ("shape alone", SHAPE), ("flat regions", POSITIONS)):
        _row(name, criteria)
    print(f"  * on {SOME} sets one by one, 16 × 4096 in blocks, time scaled up; {CORES} cores")
    print()
    _beams()
    print()
    _stacks()


def _row(name: str, criteria: Criteria) -> None:
    _, terms = problem(ORDERS, 5, criteria)
    free = np.zeros(ORDERS, dtype=np.int64)
    tracemalloc.start()
    search(terms, free, best=10)
    peak = tracemalloc.get_traced_memory()[1] / 2**20
    tracemalloc.stop()
    times = best(3, one=lambda: search(terms, free, best=10), two=lambda: search(terms, free, best=10, threads=2))
    signs = sign_table(ORDERS, 0, 16 * 4096).astype(np.int64)
    begin = time.perf_counter()
    for part in np.split(signs, 16):
        terms.scores(part)
    blocks = (time.perf_counter() - begin) * 2**ORDERS / len(signs)
    begin = time.perf_counter()
    for number in range(SOME):
        terms.scores(signs[number : number + 1])
    plain = (time.perf_counter() - begin) * 2**ORDERS / SOME
    print(
        f"  {name:16s} {times['one']:9.2f}  {times['two']:9.2f}  {blocks:10.1f}  {plain:11.0f}  "
        f"{plain / times['one']:9.0f}  {peak:9.1f}  {work_bytes(terms, ORDERS, 1) / 2**20:8.1f}",
        flush=True,
    )


def _beams() -> None:
    print("beam search: cases of 60 (8 to 14 orders) in which the best set is that of the whole search")
    print("  criteria             width 16   64  256")
    for name, criteria in (("all kinds", EVERYTHING), ("shape alone", SHAPE), ("flat regions", POSITIONS)):
        hits = []
        for width in (16, 64, 256):
            same = 0
            for seed in range(60):
                stack, terms = problem(8 + seed % 7, 100 + seed, criteria)
                free = np.zeros(stack.count, dtype=np.int64)
                whole = search(terms, free, best=1).scores[0]
                same += bool(beam.search(stack, criteria, free, best=1, width=width).scores[0] <= whole + 1e-9)
            hits.append(same)
        print(f"  {name:20s} {hits[0]:8d} {hits[1]:4d} {hits[2]:4d}", flush=True)


def _stacks() -> None:
    print(
        f"{STACKS} invented stacks a seed: 5 to 12 orders, 3 to 8 % noise of intensities; decisive margin {DECISIVE:g}"
    )
    print("    seed  level  stacks  decidable  of these right  said decided  of these wrong  free signs    sure  wrong")
    for seed in SEEDS:
        made = trials(seed, STACKS)
        for level in (0, 1, 2, 3, "all"):
            some = [one for one in made if level in (one.level, "all")]
            decidable = [one for one in some if one.right_without_noise and one.margin_without_noise >= DECISIVE]
            said = [one for one in some if one.decided]
            wrong = sum(not one.right for one in said)
            free, sure = sum(one.free for one in some), sum(one.sure for one in some)
            print(
                f"  {seed:6d}  {level!s:>5s}  {len(some):6d}  {len(decidable):9d}"
                f"  {sum(one.right for one in decidable):14d}  {len(said):12d}  {wrong:14d}  {free:10d}  {sure:6d}"
                f"  {sum(one.sure_wrong for one in some):5d}",
                flush=True,
            )


if __name__ == "__main__":
    main()
