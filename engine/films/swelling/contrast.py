"""Signs of orders measured at several contrasts of the solvent, one period and one structure throughout.

Where a share x of the exchangeable matter scatters differently (heavy water for light, a heavier counter-ion), the
amplitude of each order is linear in x: F_l(x) = A_l + x B_l, B_l the transform of the exchange alone. Only |F| is
measured; a straight line crosses zero at most once, so with the contrasts in ascending x the signs of an order
change at most once, and all choices are tried. The common sign of an order stays open but for what is known of B_l:
exchange in one sheet about the centre of the cell makes every low order's B_l positive, about its edge (−1)^l
(Worcester & Franks, J. Mol. Biol. 100 (1976) 359; Franks & Lieb, J. Mol. Biol. 133 (1979) 469).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import BoolArray, FloatArray, IntArray, as_choice, as_count, as_positive, as_vector, refuse_rows
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.films.orders import FilmOrders
from engine.films.swelling.result import DECISIVE

Exchange = Literal["centre", "edge"]

FEWEST = 3
"""Contrasts; through two points a line can be drawn with any signs."""
PERIOD_TOLERANCE = 0.005
"""Relative difference of periods that are taken as one."""
MODEL_ERROR = 0.005
"""Added to each σ, relative to the root mean square amplitude of the set."""


@dataclass(frozen=True, slots=True, kw_only=True)
class ContrastSigns:
    """Signs of a contrast series; L orders that at least three sets hold, J contrasts in the order given.

    Attributes
    ----------
    orders : tuple of FilmOrders
    contrast : float64, shape (J,)
    order : int64, shape (L,)
    signs : int64, shape (L, J)
        ±1; 0 where the set lacks the order.
    relative_margin : float64, shape (L,)
        Rise of χ² with the best other place for the change of sign.
    relative_decided : bool, shape (L,)
        `relative_margin` of 9 or more.
    margin : float64, shape (L, J)
        Rise of χ² with the best choice that has this sign reversed; 0 where nothing tells the common sign of
        the order.
    decided : bool, shape (L, J)
        `margin` of 9 or more.
    line : float64, shape (L, 2)
        A and B.
    line_covariance : float64, shape (L, 2, 2)
    chi_square : float64, shape (L,)
    freedom : int64, shape (L,)
        Contrasts less 2.
    unused : tuple of int
        Orders that fewer than three sets hold.
    notes : tuple of str
    """

    orders: tuple[FilmOrders, ...]
    contrast: FloatArray
    order: IntArray
    signs: IntArray
    relative_margin: FloatArray
    relative_decided: BoolArray
    margin: FloatArray
    decided: BoolArray
    line: FloatArray
    line_covariance: FloatArray
    chi_square: FloatArray
    freedom: IntArray
    unused: tuple[int, ...]
    notes: tuple[str, ...]

    def coefficients(self, entry: int, *, mean: float | None = None) -> CoefficientSet:
        """Coefficients of one set (counted from 0); orders with an undecided sign have no phase.

        Raises
        ------
        InputError
            No such set.
        """
        if as_count(entry, "entry", least=0) >= len(self.orders):
            raise InputError("entry", f"= {entry} is beyond the sets", f"give 0 to {len(self.orders) - 1}")
        given = self.orders[entry]
        phase, merit = np.full(given.count, np.nan), np.zeros(given.count)
        held = np.isin(self.order, given.order)
        row = np.searchsorted(given.order, self.order[held])
        known = self.decided[held, entry]
        phase[row[known]] = np.where(self.signs[held, entry][known] < 0, 180.0, 0.0)
        merit[row] = np.tanh(self.margin[held, entry] / 4)
        words = "signs from amplitudes linear in the contrast"
        return replace(given, applied=(*given.applied, words)).coefficients(phase, mean, merit=merit)


def contrast_signs(
    orders: Sequence[FilmOrders],
    contrast: ArrayLike,
    *,
    exchange: Exchange | None = None,
    slope_sign: ArrayLike | None = None,
    relative_sigma: float | None = None,
    model_error: float = MODEL_ERROR,
) -> ContrastSigns:
    """Signs of each order at each contrast, on one common scale of the sets.

    Parameters
    ----------
    orders : sequence of FilmOrders
        The same stack at three or more contrasts.
    contrast : float, shape (J,)
        x of each, such as the share of heavy water.
    exchange : {"centre", "edge"}, optional
        Where the matter whose scattering rises with x sits: about z = 0, or about z = d/2.
    slope_sign : float, shape (H,), optional
        In its stead, the sign of B_l of the orders l = 1 … H, the highest; 0 where it is not known.
    relative_sigma : float, optional
        σ/|F| to assume for sets without σ.
    model_error : float
        Added to each σ in quadrature, relative to the root mean square amplitude of the set.

    Raises
    ------
    InputError
        Fewer than three sets or distinct contrasts, different periods, scales or units, no order in three sets,
        absent or zero σ's, options out of range.
    """
    x = _checked(orders, contrast)
    highest = max(int(entry.order[-1]) for entry in orders)
    known = _slopes(highest, exchange, slope_sign)
    amplitude, sigma = _table(orders, highest, relative_sigma, model_error)
    count = np.isfinite(amplitude).sum(axis=1)
    enough = [row for row in range(highest) if np.unique(x[np.isfinite(amplitude[row])]).size >= FEWEST]
    if not enough:
        raise InputError("orders", "share no order at three contrasts", "give the same orders at three contrasts")
    made = [_order(amplitude[row], sigma[row], x, known[row]) for row in enough]
    return ContrastSigns(
        orders=tuple(orders),
        contrast=x,
        order=np.array(enough) + 1,
        signs=np.array([entry.signs for entry in made]),
        relative_margin=np.array([entry.relative for entry in made]),
        relative_decided=np.array([entry.relative >= DECISIVE for entry in made]),
        margin=np.array([entry.margin for entry in made]),
        decided=np.array([entry.margin >= DECISIVE for entry in made]),
        line=np.array([entry.line for entry in made]),
        line_covariance=np.array([entry.covariance for entry in made]),
        chi_square=np.array([entry.chi_square for entry in made]),
        freedom=count[enough] - 2,
        unused=tuple(row + 1 for row in range(highest) if count[row] and row not in enough),
        notes=_notes(orders, exchange, slope_sign, relative_sigma, model_error),
    )


@dataclass(frozen=True, slots=True)
class _Order:
    signs: IntArray
    relative: float
    margin: FloatArray
    line: FloatArray
    covariance: FloatArray
    chi_square: float


def _order(amplitude: FloatArray, sigma: FloatArray, x: FloatArray, slope: float) -> _Order:
    """One order at all contrasts, NaN where it was not measured."""
    held = np.flatnonzero(np.isfinite(amplitude))
    held = held[np.argsort(x[held], kind="stable")]
    place, size, error = x[held], amplitude[held], sigma[held]
    # Equal contrasts share a sign: the line has one value there.
    breaks = np.concatenate([np.flatnonzero(np.diff(place) > 0) + 1, [place.size]])
    patterns = np.where(np.arange(place.size) < breaks[:, None], 1.0, -1.0)
    design = np.column_stack([np.ones(place.size), place]) / error[:, None]
    covariance = np.asarray(np.linalg.inv(design.T @ design), dtype=np.float64)
    signed = patterns * size / error
    lines = signed @ design @ covariance
    chi_square = np.sum((signed - lines @ design.T) ** 2, axis=1)
    excess = max(1.0, float(chi_square.min()) / (place.size - 2)) if place.size > 2 else 1.0
    ranked = np.sort(chi_square) / excess
    both = np.concatenate([patterns, -patterns])
    # The least that the fit must be worse by for a slope of the known sign.
    against = np.minimum(slope * np.concatenate([lines[:, 1], -lines[:, 1]]), 0.0) ** 2 / covariance[1, 1]
    costs = (np.concatenate([chi_square, chi_square]) + against) / excess
    best = int(np.argmin(costs))
    differs = both != both[best]
    rise = np.where(differs, (costs - costs[best])[:, None], np.inf).min(axis=0)
    signs, margin = np.zeros(x.size, dtype=np.int64), np.zeros(x.size)
    signs[held], margin[held] = both[best].astype(np.int64), rise
    row = best % patterns.shape[0]
    return _Order(
        signs=signs,
        relative=float(ranked[1] - ranked[0]),
        margin=margin,
        line=lines[row] if best == row else -lines[row],
        covariance=covariance * excess,
        chi_square=float(chi_square[row]),
    )


def _checked(orders: Sequence[FilmOrders], contrast: ArrayLike) -> FloatArray:
    if len(orders) < FEWEST:
        raise InputError("orders", f"holds {len(orders)} contrasts", f"give at least {FEWEST}")
    x = as_vector(contrast, len(orders), "contrast")
    if np.unique(x).size < FEWEST:
        raise InputError("contrast", "holds fewer than three distinct values", "give three or more contrasts")
    if len({entry.scale for entry in orders}) > 1 or len({entry.unit for entry in orders}) > 1:
        raise InputError("orders", "differ in scale or unit", "bring all sets to one scale")
    periods = np.array([entry.period for entry in orders])
    errors = np.array([entry.period_sigma for entry in orders])
    apart = np.abs(periods - periods[0])
    refuse_rows(
        apart > np.maximum(PERIOD_TOLERANCE * periods[0], 3 * np.hypot(errors, errors[0])),
        "orders",
        "have another period than the first",
        "give contrasts of one and the same stack",
    )
    return x


def _slopes(highest: int, exchange: Exchange | None, slope_sign: ArrayLike | None) -> FloatArray:
    if exchange is not None and slope_sign is not None:
        raise InputError("slope_sign", "and exchange say the same thing twice", "give one of the two")
    if exchange is not None:
        as_choice(exchange, get_args(Exchange), "exchange")
        odd = np.arange(1, highest + 1) % 2 == 1
        return np.where(odd & (exchange == "edge"), -1.0, 1.0)
    if slope_sign is None:
        return np.zeros(highest)
    made = as_vector(slope_sign, highest, "slope_sign")
    refuse_rows(~np.isin(made, (-1, 0, 1)), "slope_sign", "is not −1, 0 or 1", "give signs, 0 where unknown")
    return made


def _table(
    orders: Sequence[FilmOrders], highest: int, relative_sigma: float | None, model_error: float
) -> tuple[FloatArray, FloatArray]:
    """|F| and σ, shape (H, J), NaN where not measured."""
    if not 0 <= model_error < 1:
        raise InputError("model_error", "is not a fraction", "give a number from 0 to below 1")
    amplitude, sigma = np.full((highest, len(orders)), np.nan), np.full((highest, len(orders)), np.nan)
    for column, entry in enumerate(orders):
        given = entry.sigma
        if given is None:
            if relative_sigma is None:
                raise InputError(
                    ("orders", column, "sigma"), "is absent", "give standard uncertainties, or a relative σ to assume"
                )
            given = as_positive(relative_sigma, "relative_sigma", "σ over |F|") * entry.amplitude
        total = np.hypot(given, model_error * np.sqrt(np.mean(entry.amplitude**2)))
        if (total == 0).any():
            raise InputError(("orders", column, "sigma"), "is zero", "give uncertainties above zero")
        amplitude[entry.order - 1, column] = entry.amplitude
        sigma[entry.order - 1, column] = total
    return amplitude, sigma


def _notes(
    orders: Sequence[FilmOrders],
    exchange: Exchange | None,
    slope_sign: ArrayLike | None,
    relative_sigma: float | None,
    model_error: float,
) -> tuple[str, ...]:
    made = [
        "amplitudes taken as linear in the contrast: the structure does not change with it",
        "one scale for all sets",
        f"{100 * model_error:g} % of the root mean square amplitude added to each σ in quadrature",
    ]
    if exchange is not None:
        place = "z = 0" if exchange == "centre" else "z = d/2"
        made.append(f"the exchanged matter taken as one sheet about {place}, narrow against d over the highest order")
    elif slope_sign is None:
        made.append("the common sign of each order is open: signs are relative between contrasts")
    if relative_sigma is not None and any(entry.sigma is None for entry in orders):
        made.append(f"σ of {100 * relative_sigma:g} % of the amplitude assumed where none was given")
    return tuple(made)
