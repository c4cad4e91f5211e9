"""Termination windows side by side."""

from __future__ import annotations

from engine.coefficients import CoefficientSet
from engine.resolution.windows import compare_windows
from engine.windows import Window
from service.analyses.common import heading, rows, table_of, told
from service.analyses.report import Limits, Report
from service.problems import located
from service.schemas.analyses import WindowsIn

HOW = (
    "each window was applied to the same coefficients; widths are full widths at half maximum of a point, the "
    "sharpest direction first; the ripple is the most negative value of a point of height 1; the overshoot is that of "
    "a plane step, as a fraction of its jump"
)


def windows(request: WindowsIn, coefficients: CoefficientSet, limits: Limits) -> Report:
    """What each window does to a point and to a step.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    chosen = None
    if request.windows is not None:
        chosen = []
        for number, window in enumerate(request.windows):
            with located("windows", number):
                chosen.append(Window(window.kind, window.b))
    with located(renamed={"phase_deg": ("set", "phase_deg")}):
        made = compare_windows(coefficients, windows=chosen)
    document = heading("windows", coefficients, unit="1", contains=(), omits=(), applied=(HOW,), notes=())
    columns = {
        "kind": [one.window.kind for one in made],
        "b": [one.window.b for one in made],
        "peak": [one.peak for one in made],
        "widths": [one.widths.tolist() for one in made],
        "directions": [one.directions.tolist() for one in made],
        "ripple": [one.ripple for one in made],
        "ripple_at": [one.ripple_at for one in made],
        "overshoot": [one.overshoot for one in made],
        "step_normal": [list(one.step_normal) for one in made],
        "step_orders": [one.step_orders for one in made],
    }
    document["windows"] = rows(columns)
    flat = {name: columns[name] for name in ("kind", "b", "peak")}
    for axis in range(made[0].widths.size):
        flat[f"width_{axis + 1}_angstrom"] = [float(one.widths[axis]) for one in made]
    flat |= {name: columns[name] for name in ("ripple", "ripple_at", "overshoot", "step_orders")}
    return Report(document=document, table=table_of(flat), told=told(document))
