"""All sign sets of up to some twenty orders.

The free orders are split in two: what either part adds to the profile on all samples is tabulated, 2^(n/2)
profiles each or fewer, and one addition makes the profile of a whole sign set. The quadratic criteria of all pairs
are a matrix product. As every part of a score is 0 or more, a sign set is dismissed as soon as the parts and
samples looked at so far exceed what could matter.
"""

from __future__ import annotations

import math
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from threading import Lock

import numpy as np
import threadpoolctl

from engine.arrays import FloatArray, IntArray
from engine.films.signs.collecting import Best, Found, Sums
from engine.films.signs.terms import PER_ELEMENT, Quadratic, Terms
from engine.synthesis import Progress

LAST_BITS = 10
"""Orders of the last part at the most: its profiles and the room to work on them stay in cache."""
ROWS = 32
"""Sign sets of the first part that a thread takes at a time."""
NOTHING = 1e-6
"""What all dismissed sign sets together could add to the sums of support, at the most."""

CHUNKS = (slice(0, None, PER_ELEMENT), slice(PER_ELEMENT // 2, None, PER_ELEMENT), slice(1, None, 2))
"""A coarse choice of samples and the rest, so that many sign sets need no more than the first."""


@dataclass(frozen=True, slots=True)
class _Half:
    """What some of the orders add to the terms, for each of S sign sets of theirs.

    `squares` one (S,) array for each quadratic form, `factors` (S, m) the signs; `below`, `slopes` one (S, M_c) array
    for each chunk of samples.
    """

    factors: FloatArray
    squares: tuple[FloatArray, ...]
    below: tuple[FloatArray, ...]
    slopes: tuple[FloatArray, ...]


@dataclass(frozen=True, slots=True)
class _Task:
    terms: Terms
    signs: IntArray
    first: IntArray
    last: IntArray
    tail: _Half
    soft: tuple[FloatArray, ...]
    forms: tuple[Quadratic, ...]
    mixed: tuple[FloatArray, ...]


def search(
    terms: Terms,
    signs: IntArray,
    *,
    best: int,
    bound: float = math.inf,
    threads: int = 1,
    progress: Progress | None = None,
) -> Found:
    """Look at all sign sets.

    Parameters
    ----------
    terms : Terms
    signs : int64, shape (n,)
        ±1 where the sign is given, 0 where it is free.
    best : int
        How many are kept.
    bound : float
        A score that some sign set is known to reach.
    threads : int
    progress : callable, optional
        Called with the sign sets done and in all.
    """
    free = np.flatnonzero(signs == 0)
    bits = min(LAST_BITS, free.size - free.size // 2)
    first, last = free[: free.size - bits], free[free.size - bits :]
    task = _prepared(terms, signs, first, last)
    rows = 1 << first.size
    found, sums, lock = Best(min(best, 1 << free.size)), Sums(rows, bits, math.inf), Lock()
    reach = 2 * (free.size * math.log(2) - math.log(NOTHING))
    lowest, done = bound, 0

    def run(share: list[int]) -> None:
        nonlocal lowest, done
        for start in share:
            stop = min(start + ROWS, rows)
            own = Sums(stop - start, bits, math.inf)
            with lock:
                limit = max(lowest + reach, found.worst)
            codes, scores = _block(task, start, stop, limit, own)
            with lock:
                found.add(codes, scores)
                lowest = min(lowest, own.best)
                _merge(sums, own, start)
                done += (stop - start) << bits
                if progress is not None:
                    progress(done, rows << bits)

    starts = range(0, rows, ROWS)
    workers = min(max(threads, 1), len(starts))
    shares = [list(starts[part::workers]) for part in range(workers)]
    with threadpoolctl.threadpool_limits(1):
        if workers == 1:
            run(shares[0])
        else:
            with ThreadPoolExecutor(workers) as pool:
                list(pool.map(run, shares))
    return _outcome(task, found, sums, free.size, reach)


def work_bytes(terms: Terms, free: int, threads: int) -> int:
    """Bytes held at the peak, roughly."""
    bits = min(LAST_BITS, free - free // 2)
    samples = sum(term.design.shape[1] for term in (terms.below, terms.roughness) if term is not None)
    tables = 8 * (1 << bits) * (samples + terms.count)
    each = 8 * (ROWS * (samples + terms.count) + (1 << bits) * (2 * samples + 10 * ROWS))
    return int(tables + max(threads, 1) * each + 2 * 8 * (1 << max(free - bits, 0)))


def sign_table(count: int, start: int = 0, stop: int | None = None) -> FloatArray:
    """Signs of the codes from `start` to `stop`: bit j, the highest first, is 0 where sign j is +; (S, count)."""
    codes = np.arange(start, (1 << count) if stop is None else stop, dtype=np.int64)
    bits = (codes[:, None] >> np.arange(count - 1, -1, -1)) & 1
    return np.asarray(1.0 - 2.0 * bits)


def _prepared(terms: Terms, signs: IntArray, first: IntArray, last: IntArray) -> _Task:
    # Signs that are given go with the last part: a constant of its tables.
    tail = _half(terms, last, sign_table(last.size), signs.astype(np.float64))
    forms = terms.forms()
    others = np.concatenate([last, np.flatnonzero(signs)])
    mixed = tuple(one.form[np.ix_(first, others)] for one in forms)
    soft = () if terms.roughness is None else tuple(terms.roughness.soft[part] for part in CHUNKS)
    return _Task(terms, signs, first, last, tail, soft, forms, mixed)


def _half(terms: Terms, chosen: IntArray, factors: FloatArray, given: FloatArray | None = None) -> _Half:
    """Tables of a part; with `given`, shape (n,), the signs given and the constants are in them."""
    full = np.zeros((factors.shape[0], terms.count))
    full[:, chosen] = factors
    columns = chosen
    if given is not None:
        full += given
        columns = np.concatenate([chosen, np.flatnonzero(given)])
    squares = tuple(
        np.einsum("si,si->s", full @ one.form, full) + 2 * (full @ one.line) + (0.0 if given is None else one.constant)
        for one in terms.forms()
    )
    below: tuple[FloatArray, ...] = ()
    slopes: tuple[FloatArray, ...] = ()
    if terms.below is not None:
        limit = 0.0 if given is None else terms.below.limit
        made = limit - full @ terms.below.design
        below = tuple(np.ascontiguousarray(made[:, part]) for part in CHUNKS)
    if terms.roughness is not None:
        made = full @ terms.roughness.design
        slopes = tuple(np.ascontiguousarray(made[:, part]) for part in CHUNKS)
    return _Half(full[:, columns], squares, below, slopes)


def _block(task: _Task, start: int, stop: int, limit: float, own: Sums) -> tuple[IntArray, FloatArray]:
    """Scores of some rows of the first part with all of the last; those not above the limit."""
    head = _half(task.terms, task.first, sign_table(task.first.size, start, stop))
    scores = np.zeros((stop - start, task.tail.factors.shape[0]))
    for one, mixed, here, there in zip(task.forms, task.mixed, head.squares, task.tail.squares, strict=True):
        square = (2 * head.factors @ mixed) @ task.tail.factors.T
        square += here[:, None]
        square += there
        scores += one.of_square(square)
    codes, kept = [np.zeros(0, dtype=np.int64)], [np.zeros(0)]
    for row, least in enumerate(scores):
        alive, values = _row(task, head, row, least, limit)
        own.add(row, alive, values)
        codes.append(((start + row) << task.last.size) + alive)
        kept.append(values)
    return np.concatenate(codes), np.concatenate(kept)


def _row(task: _Task, head: _Half, row: int, total: FloatArray, limit: float) -> tuple[IntArray, FloatArray]:
    """Codes of the last part that survive with one row of the first, and their scores."""
    alive = np.flatnonzero(total <= limit)
    total = total[alive]
    rough, bounds, roughness = np.zeros(alive.size), total, task.terms.roughness
    for number in range(max(len(head.below), len(head.slopes))):
        everything = alive.size == task.tail.factors.shape[0]
        if head.below:
            table = task.tail.below[number]
            lack = (table if everything else table[alive]) + head.below[number][row]
            np.maximum(lack, 0.0, out=lack)
            total = total + np.einsum("sj,sj->s", lack, lack)
        bounds = total
        if roughness is not None:
            table = task.tail.slopes[number]
            slopes = (table if everything else table[alive]) + head.slopes[number][row]
            np.multiply(slopes, slopes, out=slopes)
            slopes += task.soft[number]
            rough = rough + np.sqrt(slopes, out=slopes).sum(axis=1)
            bounds = total + roughness.of_sum(rough)
        near = np.flatnonzero(bounds <= limit)
        if near.size < alive.size:
            alive, total, rough, bounds = alive[near], total[near], rough[near], bounds[near]
        if not alive.size:
            break
    return alive, bounds


def _merge(sums: Sums, own: Sums, start: int) -> None:
    """Rows of a block into those of all."""
    whole = slice(start, start + own.first_count)
    sums.rebase(own.best)
    own.rebase(sums.best)
    sums.least_first[whole] = own.least_first
    sums.sum_first[whole] = own.sum_first
    np.minimum(sums.least_last, own.least_last, out=sums.least_last)
    sums.sum_last += own.sum_last


def _outcome(task: _Task, found: Best, sums: Sums, free: int, reach: float) -> Found:
    count = task.signs.size
    least, support = np.full((2, count), np.inf), np.zeros((2, count))
    for chosen, lowest, added in (
        (task.first, sums.least_first, sums.sum_first),
        (task.last, sums.least_last, sums.sum_last),
    ):
        table = sign_table(chosen.size)
        for side, sign in enumerate((-1, 1)):
            here = table == sign
            least[side, chosen] = np.where(here, lowest[:, None], np.inf).min(axis=0)
            support[side, chosen] = added @ here
    signs = np.tile(task.signs, (found.codes.size, 1))
    places = np.concatenate([task.first, task.last])
    bits = (found.codes[:, None] >> np.arange(free - 1, -1, -1)) & 1
    signs[:, places] = 1 - 2 * bits
    return Found(
        signs=signs,
        scores=found.scores,
        least=least,
        support=support,
        total=float(sums.sum_last.sum()),
        looked_at=1 << free,
        reach=reach,
        exhaustive=True,
    )
