"""What a joint fit of a swelling series says: signs, how sure they are, and what was fitted."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from engine.arrays import BoolArray, FloatArray, IntArray, as_choice, as_count
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.films.orders import FilmOrders
from engine.films.swelling.observations import Observations
from engine.films.swelling.transform import LayerTransform

DECISIVE = 9.0
"""Difference of misfit (χ²) that decides a sign: odds of exp(9/2), 90 to 1."""
SIGNIFICANT = 2.0
"""|F|/σ from which on two solutions that differ in an order's sign are different solutions."""
LISTED = 8
"""Solutions listed."""
NEGLIGIBLE = 0.01
"""Share of the power Σ|F|² whose signs may be open in a series that is called decided."""
POOR = 4.0
"""χ² over its expectation from which on the model, or the σ's, are wrong and nothing is called decided."""


@dataclass(frozen=True, slots=True, kw_only=True)
class SignSolution:
    """One choice of signs.

    Attributes
    ----------
    signs : tuple of int64, one array a set
        ±1.
    behind : float
        Misfit above that of the best, in χ².
    reversed_orders : tuple of (int, int)
        Set and order of the significant orders (|F| > 2σ) whose sign differs from the best solution's.
    """

    signs: tuple[IntArray, ...]
    behind: float
    reversed_orders: tuple[tuple[int, int], ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class JointSigns:
    """Signs of a swelling series; the tuples hold one array a set, in the order of its rows.

    Attributes
    ----------
    orders : tuple of FilmOrders
    signs : tuple of int64
        ±1.
    margin : tuple of float64
        By how much χ² rises with the best solution that has this sign reversed. Infinite where the sign was
        given, and, without an orientation, of an order that holds more than half of Σ|F|².
    decided : tuple of bool
        Margins of 9 or more, odds of 90 to 1; none where χ² exceeds 4 times its expectation or no degree of
        freedom is left. Without an orientation: up to one common sign.
    merit : tuple of float64
        Mean of the sign over the solutions, weighted with exp(−χ²/2), 0…1; 1 is certain.
    settled : bool
        The undecided orders hold no more than 1 % of Σ|F|².
    oriented : bool
        Whether something fixed the common sign.
    verdict : str
        The same in words.
    scales, scale_sigma : float64, shape (J,)
        Amplitudes of each set over those of the first.
    transform : LayerTransform
        T(q) on the scale of the first set; its covariance counts the other choices of signs with their weights.
    fitted : tuple of float64
        T at each order, on the scale of the set.
    residual : tuple of float64
        (|F| − |fitted|)/σ with the sign of the fit taken into account.
    chi_square : float
        Σ residual².
    freedom : float
        Orders less the parameters that the data decide.
    solutions : tuple of SignSolution
        Distinct in the significant orders, the best first, at most 8.
    notes : tuple of str
    """

    orders: tuple[FilmOrders, ...]
    signs: tuple[IntArray, ...]
    margin: tuple[FloatArray, ...]
    decided: tuple[BoolArray, ...]
    merit: tuple[FloatArray, ...]
    settled: bool
    oriented: bool
    verdict: str
    scales: FloatArray
    scale_sigma: FloatArray
    transform: LayerTransform
    fitted: tuple[FloatArray, ...]
    residual: tuple[FloatArray, ...]
    chi_square: float
    freedom: float
    solutions: tuple[SignSolution, ...]
    notes: tuple[str, ...]

    def coefficients(
        self, entry: int, *, mean: float | None = None, undecided: Literal["keep", "omit"] = "keep"
    ) -> CoefficientSet:
        """Coefficients of one set (counted from 0) with its signs and their figures of merit.

        On the scale of the first set. The origin is the layer's centre.

        Parameters
        ----------
        mean : float, optional
            Mean density.
        undecided : {"keep", "omit"}
            Whether orders with an undecided sign keep the likelier one or have no phase.

        Raises
        ------
        InputError
            No such set, or not one of the two words.
        """
        as_choice(undecided, ("keep", "omit"), "undecided")
        if as_count(entry, "entry", least=0) >= len(self.orders):
            raise InputError("entry", f"= {entry} is beyond the sets", f"give 0 to {len(self.orders) - 1}")
        given, scale = self.orders[entry], float(self.scales[entry])
        phase = np.where(self.signs[entry] < 0, 180.0, 0.0)
        if undecided == "omit":
            phase[~self.decided[entry]] = np.nan
        scaled = replace(
            given,
            amplitude=given.amplitude / scale,
            sigma=None if given.sigma is None else given.sigma / scale,
            applied=(
                *given.applied,
                *((f"amplitudes divided by {scale:.6g}, to the scale of the first set",) if entry else ()),
                "signs from the continuity of the layer's transform over a swelling series",
            ),
        )
        return scaled.coefficients(phase, mean, merit=self.merit[entry])


def verdict(
    orders: tuple[FilmOrders, ...],
    seen: Observations,
    *,
    signs: FloatArray,
    misfit: FloatArray,
    transform: LayerTransform,
    scales: FloatArray,
    scale_sigma: FloatArray,
    chi_square: float,
    freedom: float,
    oriented: bool,
    notes: tuple[str, ...],
) -> JointSigns:
    """The result from choices of signs (B, N), ascending in misfit (B,)."""
    best, behind = signs[0], misfit - misfit[0]
    reversed_in = signs != best
    margin = np.where(reversed_in, behind[:, None], np.inf).min(axis=0)
    weights = np.exp(-behind / 2)
    merit = np.clip(weights @ (signs * best) / weights.sum(), 0.0, 1.0)
    poor = freedom >= 1 and chi_square > POOR * freedom
    decided = (margin >= DECISIVE) & (freedom >= 1) & (not poor)
    power = seen.power(scales)
    open_share = float(power[~decided].sum() / power.sum())
    settled = open_share <= NEGLIGIBLE
    own = scales[seen.which]
    fitted = own * (seen.weights @ transform.value)
    residual = (seen.amplitude - best * fitted) / seen.sigma

    def split(values: FloatArray) -> tuple[FloatArray, ...]:
        return tuple(np.asarray(part, dtype=np.float64) for part in seen.by_set(values))

    return JointSigns(
        orders=orders,
        signs=_whole(seen, best),
        margin=split(margin),
        decided=tuple(part > 0 for part in split(decided.astype(np.float64))),
        merit=split(merit),
        settled=settled,
        oriented=oriented,
        verdict=_words(decided, open_share, chi_square, freedom, poor=poor, oriented=oriented),
        scales=scales,
        scale_sigma=scale_sigma,
        transform=transform,
        fitted=split(fitted),
        residual=split(residual),
        chi_square=chi_square,
        freedom=freedom,
        solutions=_solutions(orders, seen, signs, behind),
        notes=notes,
    )


def _whole(seen: Observations, signs: FloatArray) -> tuple[IntArray, ...]:
    return tuple(np.asarray(part, dtype=np.int64) for part in seen.by_set(signs))


def _solutions(
    orders: tuple[FilmOrders, ...], seen: Observations, signs: FloatArray, behind: FloatArray
) -> tuple[SignSolution, ...]:
    strong = seen.amplitude > SIGNIFICANT * seen.sigma
    _, first = np.unique(signs[:, strong], axis=0, return_index=True)
    made = []
    for row in np.sort(first)[:LISTED]:
        other = np.flatnonzero(strong & (signs[row] != signs[0]))
        differing = [(int(seen.which[n]), int(orders[seen.which[n]].order[seen.row[n]])) for n in other]
        made.append(
            SignSolution(
                signs=_whole(seen, signs[row]), behind=float(behind[row]), reversed_orders=tuple(sorted(differing))
            )
        )
    return tuple(made)


def _words(decided: BoolArray, share: float, chi_square: float, freedom: float, *, poor: bool, oriented: bool) -> str:
    known, count = int(np.count_nonzero(decided)), decided.size
    common = "" if oriented else ", up to one common sign, which nothing given fixes"
    if freedom < 1:
        return f"Undecided: the {count} orders leave the layer's transform no degree of freedom."
    if poor:
        return (
            f"Undecided: no choice of signs fits (χ² = {chi_square:.3g} with {freedom:.3g} degrees of freedom). "
            "The layer changes over the series or is thicker than assumed, or the σ's are too small."
        )
    rest = "" if known == count else f"{known} of {count}; the others hold {100 * share:.2g} % of Σ|F|²"
    if share <= NEGLIGIBLE:
        return f"Signs decided{f' ({rest})' if rest else ''}{common}."
    return f"Undecided: {rest}{common}."
