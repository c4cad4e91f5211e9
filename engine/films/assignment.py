"""Which order is which line: the period that numbers the lines of a film's scan best.

Periods are compared by the evidence for them, as ``engine.films.numbering`` tells, which weighs the fit of
lines against the chance that orders of a long period meet any line.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import FloatArray, IntArray, as_count, as_positive, as_vector, refuse_rows
from engine.errors import InputError
from engine.films.numbering import MOST_ORDERS, Errors, Weighed, inverses, number, weigh
from engine.films.scans import Scan
from engine.lattice import LONGEST, SHORTEST

COMMON_SHIFT_DEG = 0.03
COMMON_SHIFT_Q = 0.002
"""Shift of all lines that is allowed for by default: 2θ in degrees, q in Å⁻¹."""
SHIFT_OF_GAP = 0.02
"""The shift allowed for is never more than this part of the usual distance of lines."""
CRITICAL_SQUARE = {"xray": 1.0e-3, "neutron": 3.0e-4}
"""Size of q_c² allowed for, Å⁻²: 1.0e-3 of 0.7 e/Å³, 3e-4 of 6·10⁻⁶ Å⁻²."""
SHARPEST = 1.0e-4
"""σ of a line alone is taken as at least this part of the shift and refraction allowed for."""
SAME_PERIOD = 0.01
"""Periods that differ by less, relative, are one alternative."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Assignment:
    """One way to number the lines.

    Attributes
    ----------
    period : float
        d, Å: of a first fit, for choosing alone. ``fit_spacing`` makes the one to report.
    period_sigma : float
        Å, the shift and the refraction allowed for included.
    order : int64, shape (n,)
        l of each line; 0 for a stray one.
    score : float
        Logarithm of the evidence relative to that of lines at random; natural.
    weight : float
        Share of the evidence of all periods tried, 0…1.
    chi_squared : float
        Of the lines numbered, with σ, shift and refraction as allowed for.
    degrees : int
        Lines numbered less one.
    indexed, stray : int
        Lines numbered, and lines that are no order.
    missing : tuple of int
        Orders below the highest without a line.
    relation : str
        How the period stands to the first one's, in words.
    notes : tuple of str
        What was assumed.
    """

    period: float
    period_sigma: float
    order: IntArray
    score: float
    weight: float
    chi_squared: float
    degrees: int
    indexed: int
    stray: int
    missing: tuple[int, ...]
    relation: str
    notes: tuple[str, ...]


def check_orders(scan: Scan, orders: ArrayLike) -> IntArray:
    """Orders given for the lines of a scan, 0 for a line that is none; int64, shape (n,).

    Raises
    ------
    InputError
        Not one a line, not whole or negative, one order on two lines, or orders that do not rise with
        the position.
    """
    given = as_vector(orders, scan.count, "orders")
    refuse_rows(
        (given < 0) | (given != np.rint(given)), "orders", "is no order", "give whole numbers, 0 for a stray line"
    )
    found = given.astype(np.int64)
    _check_sequence(scan, found, "orders")
    return found


def assign(
    scan: Scan,
    *,
    period_range: tuple[float, float] | None = None,
    most: int = 5,
    tolerance: float | None = None,
) -> tuple[Assignment, ...]:
    """Number the lines, the best way first, half and double of its period among the others.

    Orders that the scan carries are kept; the other lines are numbered with them.

    Parameters
    ----------
    scan : Scan
    period_range : (float, float), optional
        Shortest and longest period looked for, Å. By default within a tenth of the scan's own period
        where it carries one, near those of the orders it carries, else from the last line's own spacing
        to the period that makes it order 60.
    most : int
        At most so many are returned.
    tolerance : float, optional
        Standard deviation of a shift common to all lines, in the unit of the position. By default
        0.03° or 0.002 Å⁻¹, but not above 0.02 of the usual distance of lines, and refraction is allowed
        for; with 0 positions are right within their σ's. Where σ's are absent a default shift serves as
        σ of each line, and 0 is refused.

    Raises
    ------
    InputError
        A range that is none or that holds no period of two lines, a tolerance below zero, or 0 without
        σ's, orders of the scan that no period explains.
    """
    as_count(most, "most")
    _check_sequence(scan, scan.order, "order")
    place = np.argsort(scan.position)
    q, known = scan.q[place], scan.order[place]
    errors, notes = _errors(scan, q, place, tolerance)
    low, high = _range(scan, q, known, period_range)
    rows = number(inverses(q, known, errors, low, high), q, known, errors)
    found = weigh(rows, q, errors)
    found = found.select((found.period >= low) & (found.period <= high))
    if not found.score.size:
        raise InputError(
            "period_range",
            f"from {low:.4g} to {high:.4g} Å holds no period that numbers the lines",
            "widen the range, correct the orders given, or allow a larger tolerance",
        )
    best = float(found.period[np.argmax(found.score)])
    # Once the first is known its half and its double are weighed whether or not they are in the range.
    others = weigh(number(np.array([best / 2, best * 2]) / (2 * math.pi), q, known, errors), q, errors)
    score = np.concatenate([found.score, others.score])
    period = np.concatenate([found.period, others.period])
    chosen, weight = _choose(score, period, found.score.size, most)
    both = found.join(others)
    back = np.argsort(place)
    if not (np.abs(both.period[chosen] / best - 0.5) < SAME_PERIOD).any() and most > 1:
        notes = (*notes, "half the first period numbers fewer than two lines or is the same numbering")
    return tuple(
        _assignment(both, row, back, share, best, notes) for row, share in zip(chosen.tolist(), weight, strict=True)
    )


def _check_sequence(scan: Scan, orders: IntArray, name: str) -> None:
    numbered = np.flatnonzero(orders)
    numbered = numbered[np.argsort(scan.position[numbered])]
    steps = np.diff(orders[numbered])
    twice = np.flatnonzero(np.isin(orders, orders[numbered][1:][steps == 0]) & (orders > 0))
    if twice.size:
        raise InputError.for_rows(name, twice, "stands on two lines", "give each order once, and 0 to a stray line")
    falling = numbered[1:][steps < 0]
    if falling.size:
        raise InputError.for_rows(
            name, falling, "does not rise with the position", "exchange orders, or correct the positions"
        )


def _errors(scan: Scan, q: FloatArray, place: IntArray, tolerance: float | None) -> tuple[Errors, tuple[str, ...]]:
    size = COMMON_SHIFT_DEG if scan.kind == "two_theta" else COMMON_SHIFT_Q
    slope = np.ones(q.size)
    if scan.kind == "two_theta" and scan.wavelength is not None:
        slope = np.radians(2 * math.pi / scan.wavelength * np.cos(scan.theta()[place]))
    gap = float(np.median(np.diff(q, prepend=0.0)))
    usual = np.minimum(size * slope, SHIFT_OF_GAP * gap)
    if tolerance is not None and tolerance != 0:
        shift = as_positive(tolerance, "tolerance", scan.unit) * slope
    else:
        shift = usual if tolerance is None else np.zeros(q.size)
    if tolerance == 0:
        bend = np.zeros(q.size)
        words = "positions are taken as right within their σ's"
    else:
        bend = np.minimum(CRITICAL_SQUARE[scan.radiation] / (2 * q), 0.1 * gap)
        words = (
            "in numbering the lines, allowed for: a shift of all lines by "
            f"{float(np.median(shift / slope)):.2g} {scan.unit} and refraction with q_c² of "
            f"{CRITICAL_SQUARE[scan.radiation]:g} Å⁻² (standard deviations)"
        )
    sigma = scan.q_sigma
    if sigma is not None:
        # Sharper lines would leave covariances without digits.
        least = SHARPEST * np.hypot(shift, bend)
        each = np.maximum(sigma[place], least)
        raised = int(np.count_nonzero(each > sigma[place]))
        more = (f"σ of {raised} lines is taken as {SHARPEST:g} of what is allowed for all",) if raised else ()
        return Errors(each=each, shift=shift, bend=bend), (words, *more)
    if tolerance == 0:
        raise InputError("tolerance", "is 0 where no σ of the positions is known", "give σ's or a tolerance")
    own = f"positions have no σ: {float(np.median(usual / slope)):.2g} {scan.unit} is assumed for each"
    return Errors(each=usual, shift=shift, bend=bend), (own, words)


def _range(scan: Scan, q: FloatArray, known: IntArray, period_range: tuple[float, float] | None) -> tuple[float, float]:
    if period_range is not None:
        limits = as_vector(period_range, 2, "period_range")
        if not 0 < limits[0] < limits[1]:
            raise InputError(
                "period_range", "does not rise from above zero", "give the shortest period, then the longest"
            )
        return float(limits[0]), float(limits[1])
    if scan.period is not None:
        return 0.9 * scan.period, 1.1 * scan.period
    if known.any():
        periods = 2 * math.pi * known[known > 0] / q[known > 0]
        return 0.9 * float(periods.min()), 1.1 * float(periods.max())
    low, high = max(SHORTEST, 0.9 * 2 * math.pi / float(q[-1])), min(LONGEST, MOST_ORDERS * 2 * math.pi / float(q[-1]))
    if low >= high:
        raise InputError(
            "position",
            f"leads to no period from {SHORTEST:g} to {LONGEST:g} Å",
            "correct the wavelength or the positions, or give the range of the period",
        )
    return low, high


def _choose(score: FloatArray, period: FloatArray, ranked: int, most: int) -> tuple[IntArray, list[float]]:
    """Rows to show and their weights: the best of each period; half and double, from row ``ranked`` on, always."""
    first = int(np.argmax(score[:ranked]))
    share = np.where(np.arange(score.size) < ranked, np.exp(np.minimum(score - score[first], 0.0)), 0.0)
    share /= share.sum()
    free = np.ones(score.size, dtype=bool)
    chosen: list[tuple[int, float]] = []
    # What lies outside the range comes after the first, whatever its evidence.
    for row in [first, *np.argsort(-score, kind="stable").tolist()]:
        if free[row]:
            same = free & (np.abs(np.log(period / period[row])) < SAME_PERIOD)
            free &= ~same
            chosen.append((row, float(share[same].sum())))
    best = period[chosen[0][0]]
    always = [
        place
        for place, (row, _) in enumerate(chosen)
        if place and min(abs(period[row] / best - 0.5), abs(period[row] / best - 2) / 2) < SAME_PERIOD
    ][: max(0, most - 1)]
    usual = [place for place in range(len(chosen)) if place not in always][: most - len(always)]
    shown = [chosen[place] for place in sorted((*usual, *always))]
    return np.array([row for row, _ in shown]), [weight for _, weight in shown]


def _assignment(
    found: Weighed, row: int, back: IntArray, weight: float, best: float, notes: tuple[str, ...]
) -> Assignment:
    orders = found.orders[row]
    indexed = int(np.count_nonzero(orders))
    missing = np.setdiff1d(np.arange(1, int(orders.max()) + 1), orders)
    period = float(found.period[row])
    return Assignment(
        period=period,
        period_sigma=float(found.sigma[row]),
        order=orders[back],
        score=float(found.score[row]),
        weight=weight,
        chi_squared=float(found.chi_squared[row]),
        degrees=indexed - 1,
        indexed=indexed,
        stray=int(orders.size) - indexed,
        missing=tuple(int(order) for order in missing.tolist()),
        relation=_relation(period / best),
        notes=notes,
    )


def _relation(ratio: float) -> str:
    if abs(ratio - 1) < SAME_PERIOD / 10:
        return "the first"
    if abs(ratio - 2) < 2 * SAME_PERIOD:
        return "twice the first period"
    if abs(ratio - 0.5) < SAME_PERIOD / 2:
        return "half the first period"
    return f"{ratio:.4g} times the first period"
