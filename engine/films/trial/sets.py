"""Coefficient sets from measured amplitudes and a trial stack: observed with the model's phases, and what it lacks.

The sign that a model gives is not certain. With |F_o| − |F_c| normally distributed about zero with the variance v,
the odds of the model's sign are exp(2|F_o||F_c|/v), so that its mean is m = tanh(|F_o||F_c|/v); of a phase
m = I₁(κ)/I₀(κ) with κ the same (Sim, Acta Cryst. 13 (1960) 511: Σ = 2v for a phase, v for a sign). v is that of
the measurement, or the mean square of the residuals where the model misses by more.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from engine.arrays import ComplexArray, FloatArray, as_count
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.films.orders import FilmOrders
from engine.films.trial.refine import Refined, in_period_of
from engine.films.trial.stack import Stack, calculated
from engine.phases.concentration import merit_of_concentration


def calculated_set(model: Stack, highest: int, *, zero_term: bool = True) -> CoefficientSet:
    """The model itself up to an order, on its own scale (scale 1).

    Raises
    ------
    InputError
        An order that is no positive whole number or beyond the reach of the form factors.
    """
    own = replace(model, scale=1.0)
    order = np.arange(1, as_count(highest, "highest") + 1)
    factors = calculated(own, order)
    made = FilmOrders.of(model.period, order, np.abs(factors), scale="absolute", unit=model.unit)
    made = replace(made, applied=("calculated from a trial stack",))
    return made.coefficients(np.rad2deg(np.angle(factors)), _mean(own) if zero_term else None)


def observed_set(
    model: Stack | Refined, orders: FilmOrders | None = None, *, merit: bool = True, mean: float | None = None
) -> CoefficientSet:
    """Observed amplitudes with the phases of the model.

    Parameters
    ----------
    model : Stack or Refined
        A refined one brings its orders, and the σ of its scale where that was refined.
    orders : FilmOrders, optional
        Wanted with a stack.
    merit : bool
        Whether figures of merit are given.
    mean : float, optional
        Mean density; that of the model where it is not given.

    Raises
    ------
    InputError
        Another period, orders beyond the reach of the form factors.
    """
    own, scaled, factors = _prepared(model, orders)
    weights = None
    if merit:
        freedom = model.freedom if isinstance(model, Refined) else scaled.count
        weights = sign_merit(scaled, factors, symmetric=own.symmetric, freedom=freedom)
    made = replace(scaled, applied=(*scaled.applied, "phases of a trial stack"))
    return made.coefficients(np.rad2deg(np.angle(factors)), _mean(own) if mean is None else mean, merit=weights)


def residual_set(model: Stack | Refined, orders: FilmOrders | None = None) -> CoefficientSet:
    """(|F_o| − |F_c|) exp(iφ_c): what the model lacks, without a zero term.

    A missing part shows at about half its height where phases are free, at its full height where they are
    signs and right.

    Raises
    ------
    InputError
        As `observed_set`.
    """
    _, scaled, factors = _prepared(model, orders)
    difference = scaled.amplitude - np.abs(factors)
    phase = np.angle(factors) + np.where(difference < 0, np.pi, 0.0)
    words = "amplitudes of a trial stack subtracted, with its phases"
    lacking = replace(scaled, amplitude=np.abs(difference), applied=(*scaled.applied, words))
    return lacking.coefficients(np.rad2deg(phase))


def sign_merit(orders: FilmOrders, factors: ComplexArray, *, symmetric: bool, freedom: int | None = None) -> FloatArray:
    """Figure of merit of a model's signs (symmetric) or phases, shape (n,); 1 where nothing is uncertain.

    Parameters
    ----------
    orders : FilmOrders
        On the model's scale.
    factors : complex128, shape (n,)
        F_c.
    freedom : int, optional
        Orders less parameters of the model; the number of orders where it is not given.
    """
    size = np.abs(factors)
    free = max(1, orders.count if freedom is None else freedom)
    misses = float(np.sum((orders.amplitude - size) ** 2)) / free
    variance = np.maximum(np.zeros(orders.count) if orders.sigma is None else orders.sigma**2, misses)
    product = orders.amplitude * size
    certain = (variance == 0) & (product > 0)
    concentration = np.where(certain, np.inf, product / np.where(variance > 0, variance, 1.0))
    return merit_of_concentration(concentration, np.full(orders.count, symmetric))


def _prepared(model: Stack | Refined, orders: FilmOrders | None) -> tuple[Stack, FilmOrders, ComplexArray]:
    """The model on its own scale, the orders on it too, and F_c."""
    given = model.orders if isinstance(model, Refined) and orders is None else orders
    if given is None:
        raise InputError("orders", "is absent", "give the orders that were measured")
    stack = in_period_of(model.stack if isinstance(model, Refined) else model, given)
    own = replace(stack, scale=1.0)
    if stack.scale == 1 and (given.scale == "absolute" or stack.unit == "arbitrary"):
        return own, given, calculated(own, given.order)
    relative = model.sigma_of("scale") / stack.scale if isinstance(model, Refined) else 0.0
    scaled = given.scaled(
        1 / stack.scale,
        scale_sigma=relative if np.isfinite(relative) else 0.0,
        unit=stack.unit,
        words=f"divided by {stack.scale:.6g}, the scale of a trial stack",
    )
    if stack.unit == "arbitrary" and given.scale != "absolute":
        # On the scale of the stack, whatever that is.
        scaled = replace(scaled, scale="arbitrary")
    return own, scaled, calculated(own, given.order)


def _mean(own: Stack) -> float:
    return float(calculated(own, [0])[0].real) / own.period
