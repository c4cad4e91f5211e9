"""Signs of the orders of one layer measured at several periods, from the continuity of its transform.

A layer that takes up solvent between its repeats (humidity, dilution) keeps its own transform T(q) while the
orders sample it at other q: F_l = T(2πl/d). The layer fits the smallest period, so T is a series of few node
values (`transform`), every amplitude restricts them, and the choice of signs that they can follow best is
searched for (`branches`) and refined with the scales of the sets (`fit`). The layer is taken to be symmetric, rigid
and alone in a uniform solvent.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Literal, get_args

import numpy as np

from engine.arrays import FloatArray, IntArray, as_choice, as_count, as_positive
from engine.errors import InputError
from engine.films.orders import FilmOrders
from engine.films.swelling.branches import agreement, alternatives, branch, neighbours, whitened
from engine.films.swelling.fit import Fits, covariance_of, refine, scales_from_squares
from engine.films.swelling.observations import Observations, check_series, gather
from engine.films.swelling.orientation import UNDECIDED, Orientation, penalties
from engine.films.swelling.result import JointSigns, verdict
from engine.films.swelling.transform import LayerTransform

Scales = Literal["free", "common"]

WIDTH = 512
"""Choices of signs carried along q."""
CARRIED = 32
"""Best choices that are refined, beside the best alternative of each order."""
ROUNDS = 6
"""Of search and refinement; each search is made on the scales of the last refinement."""
SETTLED = 0.003
"""Relative change of the scales at which a round is the last."""
MODEL_ERROR = 0.005
"""Of the amplitudes, relative to their root mean square: a real layer is not quite rigid, symmetric and bounded."""
FIT_LIMIT = 3.0
"""Combined σ's by which the layer may be thicker than the smallest period."""


def joint_signs(
    orders: Sequence[FilmOrders],
    *,
    orientation: Orientation = UNDECIDED,
    thickness: float | None = None,
    scales: Scales | None = None,
    relative_sigma: float | None = None,
    model_error: float = MODEL_ERROR,
    width: int = WIDTH,
) -> JointSigns:
    """Signs of all orders of a swelling series, the layer's transform, and how far the signs are decided.

    Parameters
    ----------
    orders : sequence of FilmOrders
        The same symmetric layer at two or more periods.
    orientation : Orientation
        What fixes the common sign.
    thickness : float, optional
        D in Å, outside of which there is solvent alone; the smallest period where it is not given. A value that
        is sure and smaller makes the signs surer.
    scales : {"free", "common"}, optional
        Whether the scales of all sets but the first are refined. Common where the sets are absolute, free
        elsewhere.
    relative_sigma : float, optional
        σ/|F| to assume for sets without σ.
    model_error : float
        Added to each σ in quadrature, relative to the root mean square amplitude of the set.
    width : int
        Choices of signs that the search carries along q.

    Raises
    ------
    InputError
        One period only, periods equal within their σ, a layer thicker than the smallest period, sets that
        cannot be compared, absent or zero σ's, options out of range.
    """
    check_series(orders)
    carried = as_count(width, "width", least=2)
    if not 0 <= model_error < 1:
        raise InputError("model_error", "is not a fraction", "give a number from 0 to below 1")
    assumed = None if relative_sigma is None else as_positive(relative_sigma, "relative_sigma", "σ over |F|")
    free = _free(orders, scales)
    _check_orientation(orders, orientation)
    limit = _thickness(orders, thickness)
    seen = gather(orders, limit, relative_sigma=assumed, model_error=model_error)
    chosen, fits, start = _search(seen, free=free, width=carried)
    covariance, spent = covariance_of(seen, chosen[0], start, fits, free=free)
    freedom = seen.count - spent
    # Where the layer's model misses by more than the σ's, differences between choices count for less.
    excess = max(1.0, float(fits.chi_square[0]) / freedom) if freedom >= 1 else 1.0
    nodes = seen.weights.shape[1]
    layer = covariance[:nodes, :nodes] * excess
    signs, misfit, values = _listed(chosen, fits, orientation, orders, seen, layer, excess)
    # Choices that are nearly as good as the best are part of what is not known of the transform.
    shares = np.exp(-(misfit - misfit[0]) / 2)
    apart = values - values[0]
    transform = LayerTransform(
        thickness=limit,
        value=values[0],
        covariance=layer + (apart.T * shares) @ apart / shares.sum(),
        largest=float(seen.q[-1]),
    )
    relative = np.concatenate([[0.0], np.sqrt(excess * np.diag(covariance)[nodes:])]) if free else np.zeros(seen.sets)
    return verdict(
        tuple(orders),
        seen,
        signs=signs,
        misfit=misfit,
        transform=transform,
        scales=fits.scales[0],
        scale_sigma=fits.scales[0] * relative,
        chi_square=float(fits.chi_square[0]),
        freedom=freedom,
        oriented=orientation.kind != "undecided",
        notes=_notes(orders, seen, orientation, thickness, assumed, model_error, free=free, excess=excess),
    )


def _search(seen: Observations, *, free: bool, width: int) -> tuple[FloatArray, Fits, FloatArray]:
    """Choices of signs, ascending in misfit, their fits, and the scales that the fits started from."""
    start = scales_from_squares(seen) if free else np.ones(seen.sets)
    for _ in range(ROUNDS):
        root = whitened(seen, start)
        found, misfit = branch(root, width)
        near, other = neighbours(root, found[0])
        chosen, _ = alternatives(
            np.concatenate([found, near]), np.concatenate([misfit, other]), seen.power(start), CARRIED
        )
        fits = refine(seen, chosen, start, free=free)
        place = np.argsort(fits.misfit, kind="stable")
        chosen, fits = chosen[place], _taken(fits, place)
        if not free or np.allclose(fits.scales[0], start, rtol=SETTLED, atol=0):
            break
        start = fits.scales[0]
    return chosen, fits, start


def _listed(
    chosen: FloatArray,
    fits: Fits,
    orientation: Orientation,
    orders: Sequence[FilmOrders],
    seen: Observations,
    covariance: FloatArray,
    excess: float,
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Choices with their common sign, ascending in misfit over `excess`; their misfits, and T at the nodes."""
    misfit = fits.misfit / excess
    if orientation.kind == "undecided":
        # Compared up to a common sign: each turned to the best where their amplitudes agree.
        turn = agreement(chosen, seen.power(fits.scales[0])) * (-1.0 if fits.nodes[0, 0] < 0 else 1.0)
        return turn[:, None] * chosen, misfit, turn[:, None] * fits.nodes
    both, nodes = np.concatenate([chosen, -chosen]), np.concatenate([fits.nodes, -fits.nodes])
    if orientation.kind == "order":
        row = np.flatnonzero(orders[orientation.entry].order == orientation.order)[0]
        known = np.flatnonzero((seen.which == orientation.entry) & (seen.row == row))[0]
        kept = np.flatnonzero(both[:, known] == orientation.sign)
        both, nodes, costs = both[kept], nodes[kept], np.concatenate([misfit, misfit])[kept]
    else:
        added = penalties(orientation, fits.nodes, covariance, seen.thickness)
        costs = np.concatenate([misfit + added[:, 0], misfit + added[:, 1]])
    place = np.argsort(costs, kind="stable")
    return both[place], costs[place], nodes[place]


def _taken(fits: Fits, place: IntArray) -> Fits:
    return replace(
        fits,
        nodes=fits.nodes[place],
        scales=fits.scales[place],
        residual=fits.residual[place],
        chi_square=fits.chi_square[place],
        misfit=fits.misfit[place],
    )


def _free(orders: Sequence[FilmOrders], scales: Scales | None) -> bool:
    if scales is None:
        return orders[0].scale != "absolute"
    as_choice(scales, get_args(Scales), "scales")
    return scales == "free"


def _thickness(orders: Sequence[FilmOrders], thickness: float | None) -> float:
    least = min(orders, key=lambda entry: entry.period)
    if thickness is None:
        return least.period
    limit = as_positive(thickness, "thickness", "Å")
    if limit > least.period + FIT_LIMIT * least.period_sigma:
        raise InputError(
            "thickness",
            f"= {limit:g} Å exceeds the smallest period, {least.period:g} Å",
            "give a layer that fits all periods, or leave the set of the smallest out",
        )
    return limit


def _check_orientation(orders: Sequence[FilmOrders], known: Orientation) -> None:
    if known.kind == "density" and orders[0].scale != "absolute":
        raise InputError(
            "orientation", "needs densities, and the scale is arbitrary", "put the sets on the absolute scale first"
        )
    if known.kind == "order":
        if known.entry >= len(orders):
            raise InputError("orientation", f"names set {known.entry}", f"name a set from 0 to {len(orders) - 1}")
        if known.order not in orders[known.entry].order:
            raise InputError("orientation", f"names order {known.order}, which the set lacks", "name one it holds")


def _notes(
    orders: Sequence[FilmOrders],
    seen: Observations,
    known: Orientation,
    thickness: float | None,
    assumed: float | None,
    model_error: float,
    *,
    free: bool,
    excess: float,
) -> tuple[str, ...]:
    periods = [entry.period for entry in orders]
    made = [
        "layer taken as symmetric, unchanged over the series, and alone in a uniform solvent",
        f"layer no thicker than {seen.thickness:g} Å, " + ("the smallest period" if thickness is None else "as given"),
        f"{len(orders)} periods from {min(periods):g} to {max(periods):g} Å, {seen.count} orders",
        "scales of all sets but the first refined" if free else "one scale for all sets",
        f"{100 * model_error:g} % of the root mean square amplitude added to each σ in quadrature",
        known.words,
    ]
    if assumed is not None and any(entry.sigma is None for entry in orders):
        made.append(f"σ of {100 * assumed:g} % of the amplitude assumed where none was given")
    if any(entry.period_sigma for entry in orders):
        made.append("uncertainty of the periods added to the σ's, order by order")
    if excess > 1:
        made.append(f"χ² exceeds its expectation {excess:.2g} times: σ's and margins allow for it")
    return tuple(made)
