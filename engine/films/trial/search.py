"""Ends of a least-squares search that begins at several places.

Only |F_o| is compared, so a trial with the wrong sign of one order can hold a search in a minimum of its own: to leave
it, that amplitude would have to pass through zero. Starts spread evenly about the model find the others, and those that
are left say which orders the choice hangs on.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from scipy import optimize

from engine.arrays import FloatArray
from engine.films.orders import FilmOrders
from engine.films.trial.stack import Stack, calculated

EVALUATIONS = 400
"""For each parameter, before the search ends."""
STARTS = 16
"""Places that the search begins at."""
REACH = 0.3
"""Of the places about the start without bounds, relative to the number's size or, if larger, to its usual size."""
USUAL = {"position": 2.0, "width": 0.5, "roughness": 0.5, "thickness": 2.0, "occupancy": 1.0, "B": 2.0}
"""Å, Å²; of a density, strength or scale its own size alone."""
RIVALS = 3
"""Other minima listed."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Minimum:
    """Another end of the search.

    Attributes
    ----------
    values : float64, shape (p,)
    chi_square : float
    sign_changes : tuple of int
        Orders l whose calculated amplitude turns by more than a right angle against the best.
    """

    values: FloatArray
    chi_square: float
    sign_changes: tuple[int, ...]


def places(names: tuple[str, ...], begin: FloatArray, low: FloatArray, high: FloatArray, count: int) -> FloatArray:
    """Where the search begins, shape (count, p): the start, then a low-discrepancy sequence (Halton, 1960)."""
    spread = [
        REACH * max(abs(value), USUAL.get(name.rpartition(".")[2], 0.0))
        for name, value in zip(names, begin, strict=True)
    ]
    room = np.where(np.array(spread) > 0, spread, 1.0)
    lower = np.where(np.isfinite(low) & np.isfinite(high), low, np.maximum(low, begin - room))
    upper = np.where(np.isfinite(low) & np.isfinite(high), high, np.minimum(high, begin + room))
    # Half a second of every process's start is too much for what is seldom wanted.
    from scipy.stats import qmc

    shares = qmc.Halton(len(names), scramble=False).random(count)
    made = lower + shares * (upper - lower)
    made[0] = begin
    return np.array([inside(place, low, high) for place in made])


def search(
    misfit: Callable[[FloatArray], FloatArray],
    place: FloatArray,
    low: FloatArray,
    high: FloatArray,
    steps: FloatArray,
    *,
    exact: bool,
) -> optimize.OptimizeResult:
    """One end; roughly, or to rounding."""
    tolerance = 1e-12 if exact else 1e-6
    return optimize.least_squares(
        misfit,
        # A search must begin strictly inside.
        inside(place, low, high) if exact else place,
        bounds=(low, high),
        jac="3-point" if exact else "2-point",
        x_scale=steps,
        xtol=tolerance,
        ftol=tolerance,
        gtol=tolerance,
        max_nfev=EVALUATIONS * place.size,
    )


def rivals(
    model: Stack,
    orders: FilmOrders,
    names: tuple[str, ...],
    values: FloatArray,
    ends: Sequence[optimize.OptimizeResult],
) -> tuple[Minimum, ...]:
    """Ends that differ from the best in the sign of some order, one for each set of signs."""
    best = calculated(model.with_values(names, values), orders.order)
    seen: set[tuple[int, ...]] = {()}
    made: list[Minimum] = []
    for end in ends:
        other = calculated(model.with_values(names, end.x), orders.order)
        turned = tuple(orders.order[(best * other.conj()).real < 0].tolist())
        if turned not in seen and len(made) < RIVALS:
            seen.add(turned)
            made.append(Minimum(values=np.asarray(end.x), chi_square=2 * float(end.cost), sign_changes=turned))
    return tuple(made)


def inside(begin: FloatArray, low: FloatArray, high: FloatArray) -> FloatArray:
    """The place, moved strictly inside the bounds."""
    room = np.where(np.isfinite(high - low), high - low, np.maximum(1.0, np.abs(begin)))
    return np.asarray(np.minimum(np.maximum(begin, low + 1e-4 * room), high - 1e-4 * room))
