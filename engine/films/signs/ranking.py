"""Sign sets of a symmetric stack in the order in which the criteria prefer them, and whether they decide."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from engine.arrays import BoolArray, FloatArray, IntArray, as_count, as_positive
from engine.errors import InputError, TooLargeError
from engine.films.orders import FilmOrders
from engine.films.signs import beam, exhaustive
from engine.films.signs.collecting import Found
from engine.films.signs.criteria import Criteria, check_criteria
from engine.films.signs.terms import PER_ELEMENT, Terms, build_terms, cosines
from engine.films.signs.tolerance import Stack, stack_of
from engine.films.signs.wording import CAUTION, Fit, Verdict, searched
from engine.synthesis import Progress

DECISIVE = 12.0
"""Default margin below which nothing is decided. A likelihood ratio of 400, were the errors all as expected; of 2400
invented stacks judged while it was chosen none had a wrong first answer by more than 11.4."""
MOST = 28
"""Free orders of which all sign sets can be asked for."""
PROFILES = 5
"""Best sign sets of which a profile is given."""


@dataclass(frozen=True, slots=True, kw_only=True)
class RankedSigns:
    """Sign sets, best first, of n orders. K sets, P criteria.

    Attributes
    ----------
    order : int64, shape (n,)
        l of the orders as given.
    signs : int64, shape (K, n)
        ±1; 0 where the amplitude is 0.
    equivalent : int64, shape (K, n), or None
        The same profiles seen from the other mirror, half a period away, where these are reported as one.
    scores : float64, shape (K,)
    names : tuple of str
    parts : float64, shape (K, P)
        Of each criterion, its weight applied; their sum is the score.
    margins : float64, shape (K,)
        To the next set; NaN of the last.
    support : float64, shape (K,)
        exp(−score/2) of a set relative to the sum over all sets looked at. Relative support under these criteria,
        not the probability of being true.
    order_margin : float64, shape (n,)
        How much the score of the best set with an order's sign turned, the others as they then fit best, is above
        the best of all; no more than `reach` is looked for. NaN where the sign is given, fixes the origin, or means
        nothing.
    order_support : float64, shape (n,)
        Relative support of all sets that share an order's sign with the best. NaN as above.
    reach : float
    in_doubt : tuple of int
        Orders l whose sign is not the same in all sets within the decisive margin.
    decided : bool
    verdict : str
        Whether the criteria decide, in words.
    decisive : float
        The margin asked for.
    exhaustive : bool
        Whether all sign sets were looked at.
    looked_at : int
    z : float64, shape (M,)
        From mirror to mirror, 0 to half a period, Å.
    profiles : float64, shape (min(K, 5), M)
        Of the best, in the density's unit; relative to the mean where that was not given.
    unit : str
    words : tuple of str
        What was done and assumed.
    """

    order: IntArray
    signs: IntArray
    equivalent: IntArray | None
    scores: FloatArray
    names: tuple[str, ...]
    parts: FloatArray
    margins: FloatArray
    support: FloatArray
    order_margin: FloatArray
    order_support: FloatArray
    reach: float
    in_doubt: tuple[int, ...]
    decided: bool
    verdict: str
    decisive: float
    exhaustive: bool
    looked_at: int
    z: FloatArray
    profiles: FloatArray
    unit: str
    words: tuple[str, ...]

    def phases_deg(self, rank: int = 0) -> FloatArray:
        """0 or 180 of each order of one sign set, for `FilmOrders.coefficients`; shape (n,)."""
        return np.where(self.signs[rank] < 0, 180.0, 0.0)


def rank_signs(
    orders: FilmOrders,
    criteria: Criteria,
    *,
    fixed: Mapping[int, int] | None = None,
    best: int = 10,
    decisive: float = DECISIVE,
    max_exhaustive: int = 20,
    beam_width: int = 2048,
    threads: int = 1,
    max_bytes: int | None = None,
    progress: Progress | None = None,
) -> RankedSigns:
    """Rank the sign sets of a stack with a mirror (or centre of inversion) at the origin.

    Parameters
    ----------
    orders : FilmOrders
    criteria : Criteria
        On the same scale as the amplitudes.
    fixed : mapping of int to ±1, optional
        Signs that are known, by order l.
    best : int
        Sign sets to report.
    decisive : float
        Margin in score from which on the best sign set counts as decided.
    max_exhaustive : int
        Up to so many free signs all sign sets are looked at; of more a beam search sees some.
    beam_width : int
        Partial sign sets that the beam search carries on.
    threads : int
    max_bytes : int, optional
        Bound of the memory for the search.
    progress : callable, optional
        Called with what is done and what is to be done.

    Raises
    ------
    InputError
        Amplitudes that are all zero, criteria that `check_criteria` refuses, known signs that are not ±1 or of no
        order given, counts out of range.
    TooLargeError
        The search does not fit into `max_bytes`.
    """
    check_criteria(criteria, orders.period)
    kept = as_count(best, "best")
    needed = as_positive(decisive, "decisive", "a difference of scores")
    limit = as_count(max_exhaustive, "max_exhaustive", least=0)
    if limit > MOST:
        raise InputError("max_exhaustive", f"is {limit}", f"give at most {MOST}, which takes minutes")
    width = as_count(beam_width, "beam_width")
    workers = as_count(threads, "threads")
    signs = _given(orders, fixed)[orders.amplitude > 0]
    used, words = _active(orders)
    stack = stack_of(used, criteria.envelope)
    stack = stack.only(stack.amplitude > 0)
    terms = build_terms(stack, criteria)
    pivot, origin = _origin(terms, stack, signs)
    problem = _Problem(orders, criteria, stack, terms, pivot, signs == 0)
    if pivot is not None:
        signs[pivot], problem.free[pivot] = 1, False
    free = int(np.count_nonzero(problem.free))
    whole = free <= limit
    sought = max(kept, 2)
    needs = exhaustive.work_bytes(terms, free, workers) if whole else beam.work_bytes(stack, free, width, sought)
    if max_bytes is not None and needs > max_bytes:
        raise TooLargeError(
            "orders",
            f"need about {needs / 2**20:,.1f} MiB, more than the limit of {max_bytes / 2**20:,.1f} MiB",
            "use fewer threads or a narrower beam, or raise the limit",
        )
    if whole:
        found = exhaustive.search(terms, signs, best=sought, threads=workers, progress=progress)
    else:
        found = beam.search(stack, criteria, signs, best=sought, width=width, progress=progress)
    told = (*searched(found, free, width), origin, *words, *stack.words, CAUTION)
    return _ranked(problem, found, kept, needed, told)


@dataclass(frozen=True, slots=True)
class _Problem:
    """What is asked; `pivot` is the order that fixes the origin, `free` (n,) those with a sign to be found."""

    orders: FilmOrders
    criteria: Criteria
    stack: Stack
    terms: Terms
    pivot: int | None
    free: BoolArray

    def half_turn(self) -> IntArray:
        """What a step to the other mirror multiplies the signs by; shape of `orders`."""
        active = self.orders.amplitude > 0
        factors = np.ones(self.orders.count, dtype=np.int64)
        factors[active] = np.where(self.stack.order % 2 == 1, -1, 1)
        return factors


def _active(orders: FilmOrders) -> tuple[FilmOrders, tuple[str, ...]]:
    """Orders of the shortest period that those with an amplitude have in common; words.

    Orders with amplitude 0 and σ are measured zeros: they stay, as errors, unless the shorter period forbids them.
    """
    active = orders.amplitude > 0
    if not active.any():
        raise InputError("amplitude", "is 0 throughout", "give the orders that were seen")
    words = []
    if not active.all():
        listed = ", ".join(map(str, orders.order[~active].tolist()))
        words.append(f"Orders of amplitude 0 have no sign: {listed}.")
    common = int(np.gcd.reduce(orders.order[active]))
    if common == 1:
        return orders, tuple(words)
    fits = orders.order % common == 0
    used = replace(
        orders,
        period=orders.period / common,
        order=orders.order[fits] // common,
        amplitude=orders.amplitude[fits],
        sigma=None if orders.sigma is None else orders.sigma[fits],
    )
    words.append(
        f"All orders seen are multiples of {common}: signs are judged with the period {used.period:.5g} Å, and other "
        "orders are taken as absent."
    )
    return used, tuple(words)


def _given(orders: FilmOrders, fixed: Mapping[int, int] | None) -> IntArray:
    """Signs that are known, 0 where none is; shape (n,)."""
    signs = np.zeros(orders.count, dtype=np.int64)
    for order, sign in (fixed or {}).items():
        place = np.flatnonzero(orders.order == order)
        if not place.size:
            raise InputError(("fixed", str(order)), "is not an order that was given", "name orders of the table")
        if isinstance(sign, bool) or sign not in (-1, 1):
            raise InputError(("fixed", str(order)), f"is {sign}", "give 1 or -1")
        signs[place] = sign
    return signs


def _origin(terms: Terms, stack: Stack, signs: IntArray) -> tuple[int | None, str]:
    """The order whose sign is a choice between the two mirrors, None where that is no choice; words."""
    odd = stack.order % 2 == 1
    if signs[odd].any():
        return None, "The known signs of odd orders say which mirror the origin is on."
    if not terms.blind_to_shift(odd.astype(np.float64)):
        return None, (
            "Criteria at fixed positions tell the two mirrors apart: sign sets that differ by half a period are not "
            "the same, and their rank depends on the positions being right."
        )
    pivot = int(np.argmax(np.where(odd, stack.amplitude, -1.0)))
    return pivot, (
        "No criterion tells the two mirrors apart: sign sets that differ by half a period, in the signs of all odd "
        f"orders, are reported as one, with the origin where order {int(stack.order[pivot])} is positive."
    )


def _ranked(problem: _Problem, found: Found, best: int, decisive: float, words: tuple[str, ...]) -> RankedSigns:
    orders, stack, terms = problem.orders, problem.stack, problem.terms
    parts = terms.parts(found.signs)
    scores = parts.sum(axis=1)
    # Rounding of the search aside, this is its order.
    rank = np.argsort(scores, kind="stable")
    reported, parts, scores = found.signs[rank], parts[rank], scores[rank]
    margins = np.append(np.diff(scores), np.nan)
    places = np.flatnonzero(orders.amplitude > 0)
    top = scores[0]
    judged = problem.free
    turned = np.where(reported[0] > 0, found.least[0], found.least[1])
    same = np.where(reported[0] > 0, found.support[1], found.support[0])
    order_margin, order_support = np.full(orders.count, np.nan), np.full(orders.count, np.nan)
    order_margin[places[judged]] = np.clip(turned[judged] - top, 0.0, found.reach)
    order_support[places[judged]] = same[judged] / found.total
    doubt = order_margin < decisive
    fit = Fit(
        misfit=float(parts[0].sum() - (parts[0, -1] if terms.roughness is not None else 0.0)),
        expected=terms.expected(),
    )
    sets = Verdict(
        margin=float(margins[0]),
        decisive=decisive,
        in_doubt=tuple(orders.order[doubt].tolist()),
        others=int(np.count_nonzero(judged) - np.count_nonzero(doubt)),
        exhaustive=found.exhaustive,
        fit=fit,
    )
    kept = slice(0, best)
    signs = np.zeros((min(best, len(reported)), orders.count), dtype=np.int64)
    signs[:, places] = reported[kept]
    z, profiles = _profiles(stack, reported[: min(best, PROFILES)], problem.criteria.mean)
    return RankedSigns(
        order=orders.order,
        signs=signs,
        equivalent=None if problem.pivot is None else signs * problem.half_turn(),
        scores=scores[kept],
        names=problem.criteria.names,
        parts=parts[kept],
        margins=margins[kept],
        support=np.exp(0.5 * (top - scores[kept])) / found.total,
        order_margin=order_margin,
        order_support=order_support,
        reach=found.reach,
        in_doubt=sets.in_doubt,
        decided=sets.decided,
        verdict=sets.words(),
        decisive=decisive,
        exhaustive=found.exhaustive,
        looked_at=found.looked_at,
        z=z,
        profiles=profiles,
        unit=orders.unit,
        words=words,
    )


def _profiles(stack: Stack, signs: IntArray, mean: float | None) -> tuple[FloatArray, FloatArray]:
    """z (M,) and n(z) of sign sets (K, n) -> (K, M), twice as fine as the criteria look."""
    position = np.linspace(0, 0.5, 2 * PER_ELEMENT * stack.top + 1)
    waves = (2 / stack.period) * stack.amplitude[:, None] * cosines(stack.order, position)
    return position * stack.period, np.asarray(signs @ waves + (mean or 0.0))
