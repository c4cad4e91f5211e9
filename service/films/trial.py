"""A trial stack against measured amplitudes."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal

import numpy as np

from engine.coefficients import CoefficientSet
from engine.evaluate import Field, evaluate
from engine.features.integrals import integrated_unit
from engine.films.orders import FilmOrders
from engine.films.trial import (
    Part,
    Plane,
    Refined,
    Slab,
    Stack,
    calculated,
    observed_set,
    refine,
    residual_set,
)
from engine.sampling import lattice_line
from service.analyses.common import finite, rows, table_of
from service.analyses.report import Limits, Report
from service.encoders.picture import require_drawing
from service.films.orders import orders_of
from service.interpret_picture import picture_options
from service.problems import located
from service.schemas.film_models import PlaneIn, SlabIn, TrialIn

SOURCES = {
    "merit of signs": "Sim, Acta Cryst. 12 (1959) 813; Woolfson, Acta Cryst. 9 (1956) 804",
}


@dataclass(frozen=True, slots=True, kw_only=True)
class _Done:
    """A stack against its orders."""

    orders: FilmOrders
    stack: Stack
    found: Refined | None
    observed: CoefficientSet
    profile: Field
    rest: Field


def trial(request: TrialIn, limits: Limits) -> Report:
    """Calculate, refine on request, and give the observed profile its phases.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    done = _done(request)
    orders, stack, found, observed = done.orders, done.stack, done.found, done.observed
    profile, rest = done.profile, done.rest
    tables = {
        "parameters": _parameters(found),
        "orders": _orders(stack, orders, observed),
        "profile": {
            "distance_angstrom": profile.axes[0].coordinates(),
            "observed": profile.values,
            "uncertainty": None if profile.sigma is None else profile.sigma.values,
            "residual": rest.values,
        },
    }
    notes = [*(() if found is None else found.notes), *profile.notes]
    document: dict[str, Any] = {
        "product": "film_trial",
        "unit": stack.unit,
        "period": stack.period,
        "refined": None if found is None else _refined(found),
        "parameters": rows(tables["parameters"]) if found is not None else [],
        "orders": rows(tables["orders"]),
        "profile": tables["profile"],
        "applied": list(profile.applied),
        "notes": notes,
        "sources": SOURCES,
    }
    chosen = request.table if found is not None or request.table != "parameters" else "orders"
    return Report(
        document=document,
        table=table_of(tables[chosen]),
        told=(*_figures(found), *document["applied"], *document["notes"]),
        further=(("orders", table_of(tables["orders"])),) if chosen != "orders" else (),
    )


def trial_picture(request: TrialIn, limits: Limits, form: Literal["png", "svg"]) -> bytes:
    """Measured against calculated amplitudes and both profiles on a page.

    Raises
    ------
    Problem
        501 where pictures cannot be drawn; else pointing to the place in the body.
    """
    require_drawing()
    from service.pictures.trial import Trial, draw_trial

    options = picture_options(request.picture)
    done = _done(request)
    orders = done.orders
    page = Trial(
        order=orders.order.astype(np.float64),
        measured=orders.amplitude,
        calculated=np.abs(calculated(done.stack, orders.order)),
        sigma=orders.sigma,
        unit=integrated_unit(orders.unit, 1) if orders.scale == "absolute" else "arbitrary",
        observed=done.profile,
        residual=done.rest,
        words=_figures(done.found),
    )
    with located("picture"):
        return draw_trial(page, options, form)


def _figures(found: Refined | None) -> tuple[str, ...]:
    if found is None:
        return ()
    return (f"R = {found.r_factor:.4g}, χ² {found.chi_square:.4g} of {found.freedom}.",)


def _done(request: TrialIn) -> _Done:
    orders = orders_of(request.orders, ("orders",))
    renamed: dict[str, tuple[str | int, ...]] = {"parameters": ("refine",), "B": ("b_iso",), "orders": ("orders",)}
    parts = [_part(one, ("parts", place)) for place, one in enumerate(request.parts)]
    with located(renamed=renamed):
        stack = Stack.of(
            orders.period,
            parts,
            symmetry=request.symmetry,
            probe=request.probe,
            background=request.background,
            B=request.b_iso,
            scale=request.scale,
            unit=None if request.orders.unit == "arbitrary" else request.orders.unit,
        )
        found: Refined | None = None
        if request.refine:
            bounds = {name: (pair[0], pair[1]) for name, pair in request.bounds.items()}
            found = refine(stack, orders, request.refine, bounds=bounds)
            stack = found.stack
        observed = observed_set(found or stack, None if found else orders)
        lacking = residual_set(found or stack, None if found else orders)
    profile, rest = (_profile(one, request.samples) for one in (observed, lacking))
    return _Done(orders=orders, stack=stack, found=found, observed=observed, profile=profile, rest=rest)


def _part(given: PlaneIn | SlabIn, place: tuple[str | int, ...]) -> Part:
    renamed: dict[str, tuple[str | int, ...]] = {"parts": place}
    with located(renamed=renamed):
        if isinstance(given, SlabIn):
            return Slab.between(given.name, given.lower, given.upper, density=given.density, roughness=given.roughness)
        return Plane.of(
            given.name,
            given.position,
            width=given.width,
            occupancy=given.occupancy,
            formula=given.formula,
            area=given.area,
            strength=given.strength,
            displaced=given.displaced,
        )


def _profile(coefficients: CoefficientSet, samples: int) -> Field:
    line = lattice_line(coefficients.lattice, [1], samples)
    return evaluate(coefficients, line, uncertainty=coefficients.sigma is not None)


def _parameters(found: Refined | None) -> dict[str, Any]:
    if found is None:
        return {}
    return {
        "parameter": list(found.names),
        "value": found.values,
        "sigma": [finite(value) for value in found.sigma.tolist()],
        "at_bound": found.at_bound,
    }


def _orders(stack: Stack, orders: FilmOrders, observed: CoefficientSet) -> dict[str, Any]:
    model = calculated(stack, orders.order)
    merit = observed.merit
    return {
        "order": orders.order,
        "measured": orders.amplitude,
        "measured_sigma": orders.sigma,
        "calculated": np.abs(model),
        "phase_deg": np.rad2deg(np.angle(model)),
        "difference": orders.amplitude - np.abs(model),
        "merit": None if merit is None else _merit_by_order(observed, orders),
    }


def _merit_by_order(observed: CoefficientSet, orders: FilmOrders) -> list[float | None]:
    if observed.merit is None:
        return [None] * orders.count
    by_order = dict(zip(np.abs(observed.indices[:, 0]).tolist(), observed.merit.tolist(), strict=True))
    return [by_order.get(order) for order in orders.order.tolist()]


def _refined(found: Refined) -> dict[str, Any]:
    return {
        "r_factor": found.r_factor,
        "chi_squared": found.chi_square,
        "degrees": found.freedom,
        "weights": found.weights,
        "converged": found.converged,
        "covariance": _table(found.covariance),
        "correlation": _table(found.correlation),
        "undetermined": [list(names) for names in found.undetermined],
    }


def _table(values: np.ndarray[tuple[int, ...], np.dtype[np.float64]]) -> list[list[float | None]]:
    return [[finite(value) for value in row] for row in values.tolist()]
