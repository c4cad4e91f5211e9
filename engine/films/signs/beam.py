"""A search that does not look at all sign sets, for stacks of many orders.

Signs are given from the strongest order to the weakest. Orders that have none yet are what unmeasured orders
are: of known strength, of either sign, so that a partial sign set is judged with what the rest could still do. The
`width` best partial sets are kept. What comes out is improved by turning one or two signs while that helps.
"""

from __future__ import annotations

import math

import numpy as np

from engine.arrays import FloatArray, IntArray
from engine.films.signs.collecting import Found
from engine.films.signs.criteria import Criteria
from engine.films.signs.terms import Terms, build_terms
from engine.films.signs.tolerance import Stack
from engine.synthesis import Progress

POLISHED = 32
"""Of the best sets, neighbours are looked at."""
ROUNDS = 50
CHUNK = 1 << 22
"""Samples of profiles held at a time."""


def search(
    stack: Stack,
    criteria: Criteria,
    signs: IntArray,
    *,
    best: int,
    width: int,
    progress: Progress | None = None,
) -> Found:
    """Look at the sign sets that promise most.

    Parameters
    ----------
    stack : Stack
    criteria : Criteria
    signs : int64, shape (n,)
        ±1 where the sign is given, 0 where it is free.
    best : int
        How many are kept.
    width : int
        Partial sign sets carried on.
    progress : callable, optional
        Called with the orders done and in all.
    """
    free = np.flatnonzero(signs == 0)
    free = free[np.argsort(-stack.amplitude[free], kind="stable")]
    states, chosen, looked_at = signs[None], signs != 0, 1
    scores = np.zeros(1)
    for number, order in enumerate(free.tolist()):
        states = np.repeat(states, 2, axis=0)
        states[0::2, order], states[1::2, order] = 1, -1
        chosen[order] = True
        scores = _scores(build_terms(stack.only(chosen), criteria), states[:, chosen])
        looked_at += scores.size
        kept = np.argsort(scores, kind="stable")[:width]
        states, scores = states[kept], scores[kept]
        if progress is not None:
            progress(number + 1, free.size)
    terms = build_terms(stack, criteria)
    scores = _scores(terms, states)
    for _ in range(ROUNDS):
        front = states[np.argsort(scores, kind="stable")[: max(POLISHED, best)]]
        others = _unseen(_neighbours(front, free), states)
        if not len(others):
            break
        lowest, values = scores.min(), _scores(terms, others)
        looked_at += values.size
        states, scores = np.concatenate([states, others]), np.concatenate([scores, values])
        if values.min() >= lowest:
            break
    return _outcome(states, scores, free, best, looked_at)


def work_bytes(stack: Stack, free: int, width: int, best: int) -> int:
    """Bytes held at the peak, roughly."""
    neighbours = max(POLISHED, best) * free * (free + 1) // 2
    return 8 * (4 * CHUNK + 4 * stack.count * (2 * width + neighbours))


def _scores(terms: Terms, signs: IntArray) -> FloatArray:
    samples = sum(term.design.shape[1] for term in (terms.below, terms.roughness) if term is not None)
    step = max(1, CHUNK // (samples + terms.count))
    return np.concatenate([terms.scores(signs[start : start + step]) for start in range(0, len(signs), step)])


def _neighbours(states: IntArray, free: IntArray) -> IntArray:
    """All sets that differ in one sign or two; (S, n) -> (S·f(f+1)/2, n)."""
    one, other = np.triu_indices(free.size)
    turned = np.ones((one.size, states.shape[1]), dtype=np.int64)
    rows = np.arange(one.size)
    turned[rows, free[one]] = -1
    # On the diagonal both are the same.
    turned[rows, free[other]] = -1
    return (states[:, None] * turned[None]).reshape(-1, states.shape[1])


def _unseen(candidates: IntArray, seen: IntArray) -> IntArray:
    packed = np.packbits(np.concatenate([seen, candidates]) < 0, axis=1)
    _, first = np.unique(packed, axis=0, return_index=True)
    return candidates[np.sort(first[first >= len(seen)]) - len(seen)]


def _outcome(states: IntArray, scores: FloatArray, free: IntArray, best: int, looked_at: int) -> Found:
    share = np.exp(0.5 * (scores.min() - scores))
    count = states.shape[1]
    least, support = np.full((2, count), np.inf), np.zeros((2, count))
    for side, sign in enumerate((-1, 1)):
        here = states[:, free] == sign
        least[side, free] = np.where(here, scores[:, None], np.inf).min(axis=0)
        support[side, free] = share @ here
    order = np.lexsort((*(-states.T[::-1]), scores))[:best]
    return Found(
        signs=states[order],
        scores=scores[order],
        least=least,
        support=support,
        total=float(share.sum()),
        looked_at=looked_at,
        reach=math.inf,
        exhaustive=False,
    )
