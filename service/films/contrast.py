"""One stack at several contrasts and one period: its signs and how its amplitudes go with the contrast."""

from __future__ import annotations

from typing import Any

import numpy as np

from engine.films.swelling import ContrastSigns, contrast_signs
from service.analyses.common import rows, table_of
from service.analyses.report import Report
from service.films.orders import orders_of
from service.problems import located
from service.schemas.film_models import ContrastIn

SOURCES = {
    "linear in the contrast": "Worcester & Franks, J. Mol. Biol. 100 (1976) 359; "
    "Franks & Lieb, J. Mol. Biol. 133 (1979) 469",
}


def contrast(request: ContrastIn) -> Report:
    """Fit a line to every order, and say which signs it decides.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    sets = [orders_of(one, ("sets", number)) for number, one in enumerate(request.sets)]
    with located(renamed={"orders": ("sets",), "contrast": ("sets",)}):
        found = contrast_signs(
            sets,
            [one.contrast for one in request.sets],
            exchange=request.exchange,
            slope_sign=request.slope_sign,
            relative_sigma=request.relative_sigma,
            model_error=request.model_error,
        )
    columns = _columns(found)
    verdict = _verdict(columns)
    document = {
        "product": "film_contrast",
        "period": found.orders[0].period,
        "settled": bool(columns["decided"].all()),
        "verdict": verdict,
        "orders": rows(columns),
        "lines": rows(_lines(found)),
        "unused": list(found.unused),
        "notes": list(found.notes),
        "sources": SOURCES,
    }
    return Report(document=document, table=table_of(columns), told=(verdict, *found.notes))


def _columns(found: ContrastSigns) -> dict[str, Any]:
    """A row for every order of every set that its line was fitted to, set after set."""
    entry, line = np.nonzero(found.signs.T)
    x = found.contrast[entry]
    amplitude = np.concatenate(
        [one.amplitude[np.isin(one.order, found.order[found.signs[:, j] != 0])] for j, one in enumerate(found.orders)]
    )
    signs = found.signs[line, entry]
    fitted = found.line[line, 0] + found.line[line, 1] * x
    return {
        "set": entry + 1,
        "contrast": x,
        "order": found.order[line],
        "amplitude": amplitude,
        "sign": signs,
        "decided": found.decided[line, entry],
        "margin": found.margin[line, entry],
        "fitted": fitted,
        "residual": signs * amplitude - fitted,
    }


def _lines(found: ContrastSigns) -> dict[str, Any]:
    sigma = np.sqrt(np.diagonal(found.line_covariance, axis1=1, axis2=2))
    return {
        "order": found.order,
        "constant": found.line[:, 0],
        "constant_sigma": sigma[:, 0],
        "slope": found.line[:, 1],
        "slope_sigma": sigma[:, 1],
        "correlation": found.line_covariance[:, 0, 1] / (sigma[:, 0] * sigma[:, 1]),
        "chi_squared": found.chi_square,
        "degrees": found.freedom,
        "relative_margin": found.relative_margin,
        "relative_decided": found.relative_decided,
    }


def _verdict(columns: dict[str, Any]) -> str:
    open_ones = np.unique(columns["order"][~columns["decided"]])
    if open_ones.size == 0:
        return "All signs are decided."
    if not columns["decided"].any():
        return "No sign is decided."
    return f"Signs are not decided at every contrast for order {', '.join(map(str, open_ones.tolist()))}."
