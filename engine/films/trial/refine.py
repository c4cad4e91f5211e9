"""Refinement of a trial stack against measured amplitudes.

Least squares of (|F_o| − |F_c|)/σ over the numbers named, from several starts (`search`). The covariance is that of
the linearised problem at the end, (JᵀJ)⁻¹ with J the derivatives over σ; with unit weights it is multiplied by
χ²/(n − p).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from engine.arrays import BoolArray, FloatArray, as_count
from engine.errors import InputError, TransformError
from engine.films.orders import FilmOrders
from engine.films.trial.parts import NEVER_NEGATIVE, Plane
from engine.films.trial.search import STARTS, Minimum, places, rivals, search
from engine.films.trial.stack import Stack, across_mirror, calculated

PERIOD_TOLERANCE = 0.01
"""Relative difference of the stack's period and the measured one that is taken for rounding."""
DEGENERATE = 1e-6
"""Singular value, over the largest, of derivatives of unit length, below which a direction is undetermined."""
NAMED = 0.1
"""Share of a direction from which on a parameter is named in it."""
AT_BOUND = 1e-6
"""Distance from a bound, relative to its size or 1, at which a parameter counts as at it."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Refined:
    """A refined stack; p parameters in the order of `names`.

    Attributes
    ----------
    stack : Stack
        In the period of the orders.
    orders : FilmOrders
    names : tuple of str
    values, sigma : float64, shape (p,)
        σ is NaN at a bound and infinite in an undetermined direction.
    covariance, correlation : float64, shape (p, p)
        Of the parameters that are determined and not at a bound; NaN elsewhere.
    at_bound : bool, shape (p,)
    undetermined : tuple of tuple of str
        Parameters that can be changed together without a change of any amplitude; one entry a direction.
    chi_square : float
        Σ ((|F_o| − |F_c|)/σ)²; of unit weights Σ (|F_o| − |F_c|)².
    freedom : int
        Orders less parameters.
    r_factor : float
        Σ ||F_o| − |F_c|| / Σ |F_o|.
    residual : float64, shape (n,)
        (|F_o| − |F_c|)/σ.
    weights : {"sigma", "unit"}
    converged : bool
    rivals : tuple of Minimum
        Other ends of the search that differ in the sign of some order, the best first, at most 3.
    notes : tuple of str
    """

    stack: Stack
    orders: FilmOrders
    names: tuple[str, ...]
    values: FloatArray
    sigma: FloatArray
    covariance: FloatArray
    correlation: FloatArray
    at_bound: BoolArray
    undetermined: tuple[tuple[str, ...], ...]
    chi_square: float
    freedom: int
    r_factor: float
    residual: FloatArray
    weights: str
    converged: bool
    rivals: tuple[Minimum, ...]
    notes: tuple[str, ...]

    def sigma_of(self, name: str) -> float:
        """Standard uncertainty of one parameter; 0 of a number that was not refined."""
        return float(self.sigma[self.names.index(name)]) if name in self.names else 0.0


def refine(
    model: Stack,
    orders: FilmOrders,
    parameters: Sequence[str],
    *,
    bounds: Mapping[str, tuple[float, float]] | None = None,
    starts: int = STARTS,
) -> Refined:
    """Refine the numbers named, such as ``sheet.position``, ``gallery.density``, ``scale`` or ``B``.

    Parameters
    ----------
    model : Stack
        The start; its period may differ from that of the orders by rounding.
    orders : FilmOrders
        Weighted with their σ, or all alike where they have none.
    bounds : mapping of str to (float, float), optional
        Lower and upper; widths, occupancies, thicknesses, roughnesses and the scale are never below zero.
    starts : int
        Places that the search begins at, the first the model itself, the others evenly spread over the bounds,
        or about the start where there are none; always the same.

    Raises
    ------
    InputError
        No parameter, more parameters than orders, one that is named twice, unknown, held by symmetry or without
        effect, bounds that exclude the start, another period, a σ of zero.
    """
    names = tuple(parameters)
    start, notes = _fitted_to(model, orders)
    _check_names(start, orders, names)
    low, high = _bounds(start, names, bounds or {})
    sigma, weights = _weights(orders)
    begin = np.array([start.value(name) for name in names])
    outside = [name for name, value, a, b in zip(names, begin, low, high, strict=True) if not a <= value <= b]
    if outside:
        raise InputError(("bounds", outside[0]), "exclude the start", "start within the bounds")

    def misfit(values: FloatArray) -> FloatArray:
        size = np.abs(calculated(start.with_values(names, values), orders.order))
        return np.asarray((orders.amplitude - size) / sigma)

    begins = places(names, begin, low, high, as_count(starts, "starts"))
    steps = np.maximum(np.abs(begin), 0.1)
    ends = [search(misfit, place, low, high, steps, exact=False) for place in begins]
    ends.sort(key=lambda end: float(end.cost))
    found = search(misfit, ends[0].x, low, high, steps, exact=True)
    if not np.isfinite(found.x).all():
        raise TransformError("the least-squares search of a trial stack did not return finite numbers")
    values = np.asarray(found.x, dtype=np.float64)
    reach = AT_BOUND * np.maximum(1.0, np.abs(values))
    at_bound = (values - low <= reach) | (high - values <= reach)
    residual = misfit(values)
    chi_square, freedom = float(residual @ residual), orders.count - len(names)
    factor = 1.0 if weights == "sigma" else (chi_square / freedom if freedom else np.nan)
    covariance, undetermined = _covariance(np.asarray(found.jac, dtype=np.float64), at_bound, names)
    covariance = covariance * factor
    error = np.sqrt(np.diag(covariance))
    spread = np.outer(error, error)
    # A perfect fit of unit weights leaves no spread to compare with.
    correlation = np.where(spread > 0, covariance / np.where(spread > 0, spread, 1.0), np.nan)
    loose = [name in direction for name in names for direction in undetermined]
    if loose:
        error[np.array(loose).reshape(len(names), -1).any(axis=1)] = np.inf
    final = start.with_values(names, values)
    notes += tuple(
        f"{part.name} has come to overlap its own image" for part in final.parts if across_mirror(final, part)
    )
    return Refined(
        stack=final,
        orders=orders,
        names=names,
        values=values,
        sigma=error,
        covariance=covariance,
        correlation=correlation,
        at_bound=at_bound,
        undetermined=undetermined,
        chi_square=chi_square,
        freedom=freedom,
        r_factor=float(np.abs(residual * sigma).sum() / orders.amplitude.sum()),
        residual=residual,
        weights=weights,
        converged=bool(found.status > 0),
        rivals=rivals(start, orders, names, values, ends),
        notes=(*notes, *_notes(names, at_bound, undetermined, weights, freedom, converged=found.status > 0)),
    )


def _fitted_to(model: Stack, orders: FilmOrders) -> tuple[Stack, tuple[str, ...]]:
    apart = abs(model.period - orders.period)
    if apart > max(PERIOD_TOLERANCE * orders.period, 3 * orders.period_sigma):
        raise InputError(
            "period", f"of the stack is {model.period:g} Å, that of the orders {orders.period:g} Å", "give one period"
        )
    if not orders.amplitude.any():
        raise InputError("orders", "have amplitudes of zero alone", "give amplitudes")
    if apart == 0:
        return model, ()
    words = f"stack put into the measured period, {orders.period:.6g} Å instead of {model.period:.6g} Å"
    return model.with_period(orders.period), (words,)


def _check_names(model: Stack, orders: FilmOrders, names: tuple[str, ...]) -> None:
    if not names:
        raise InputError("parameters", "is empty", "name at least one number to refine")
    if len(set(names)) < len(names):
        raise InputError("parameters", "holds a name twice", "name each number once")
    if len(names) > orders.count:
        raise InputError(
            "parameters",
            f"are {len(names)}, more than the {orders.count} orders that were measured",
            "refine fewer, or measure more orders",
        )
    for name in names:
        model.value(name)
        part = next((entry for entry in model.parts if name.rpartition(".")[0] == entry.name), None)
        if part is None:
            continue
        member = name.rpartition(".")[2]
        if member == "position" and part.central:
            raise InputError("parameters", f"holds {name}, which a mirror holds", "refine other numbers")
        if member == "strength" and isinstance(part, Plane) and part.content is not None:
            raise InputError("parameters", f"holds {name}, but the plane has a formula", "refine its occupancy")


def _bounds(
    model: Stack, names: tuple[str, ...], bounds: Mapping[str, tuple[float, float]]
) -> tuple[FloatArray, FloatArray]:
    for name in bounds:
        if name not in names:
            raise InputError(("bounds", name), "belong to no parameter that is refined", "refine it or leave it out")
    low, high = np.full(len(names), -np.inf), np.full(len(names), np.inf)
    for row, name in enumerate(names):
        member = name.rpartition(".")[2]
        if member in NEVER_NEGATIVE:
            low[row] = 0.0
        if member == "thickness":
            high[row] = model.period
        if name in bounds:
            lower, upper = bounds[name]
            if not lower < upper:
                raise InputError(("bounds", name), "have no room between them", "give lower, then upper")
            low[row], high[row] = max(low[row], lower), min(high[row], upper)
            if not low[row] < high[row]:
                raise InputError(("bounds", name), "leave out all that the number can be", "give other bounds")
    return low, high


def _weights(orders: FilmOrders) -> tuple[FloatArray, str]:
    if orders.sigma is None:
        return np.ones(orders.count), "unit"
    rows = np.flatnonzero(orders.sigma == 0)
    if rows.size:
        raise InputError.for_rows("sigma", rows, "is zero, an infinite weight", "give σ above zero, or none at all")
    return orders.sigma, "sigma"


def _covariance(
    jacobian: FloatArray, at_bound: BoolArray, names: tuple[str, ...]
) -> tuple[FloatArray, tuple[tuple[str, ...], ...]]:
    """(JᵀJ)⁻¹ of the parameters that are not at a bound, and the directions that it does not know."""
    made = np.full((len(names), len(names)), np.nan)
    free = np.flatnonzero(~at_bound)
    if not free.size:
        return made, ()
    part = jacobian[:, free]
    length = np.linalg.norm(part, axis=0)
    # A parameter without any effect is a direction of its own.
    unit = np.where(length > 0, length, 1.0)
    _, singular, directions = np.linalg.svd(part / unit, full_matrices=True)
    singular = np.concatenate([singular, np.zeros(free.size - singular.size)])
    lost = singular <= DEGENERATE * max(float(singular.max()), 1e-300)
    inverse = np.where(lost, 0.0, 1 / np.where(lost, 1.0, singular) ** 2)
    made[np.ix_(free, free)] = (directions.T * inverse) @ directions / np.outer(unit, unit)
    undetermined = tuple(
        tuple(names[free[n]] for n in np.flatnonzero(np.abs(row) >= NAMED * np.abs(row).max()))
        for row in directions[lost]
    )
    loose = np.flatnonzero([any(name in direction for direction in undetermined) for name in names])
    made[loose, :] = np.nan
    made[:, loose] = np.nan
    return made, undetermined


def _notes(
    names: tuple[str, ...],
    at_bound: BoolArray,
    undetermined: tuple[tuple[str, ...], ...],
    weights: str,
    freedom: int,
    *,
    converged: bool,
) -> tuple[str, ...]:
    made = []
    if weights == "unit":
        made.append("unit weights, because the orders have no σ; uncertainties from the spread of the residuals")
    if freedom == 0:
        made.append("as many parameters as orders: the fit tests nothing")
    held = [name for name, at in zip(names, at_bound, strict=True) if at]
    if held:
        made.append(f"at a bound, and held there for the uncertainties of the others: {', '.join(held)}")
    made += [f"not determined by these orders: {' with '.join(direction)}" for direction in undetermined]
    if not converged:
        made.append("the search ended before it had converged")
    return tuple(made)


def in_period_of(model: Stack, orders: FilmOrders) -> Stack:
    """The stack in the measured period.

    Raises
    ------
    InputError
        The periods differ by more than rounding, or the amplitudes are all zero.
    """
    return _fitted_to(model, orders)[0]
