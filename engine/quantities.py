"""What is shown of a field: its values, their standard uncertainty, or the ratio of the two."""

from __future__ import annotations

from dataclasses import replace
from typing import Literal, get_args

import numpy as np

from engine.arrays import AnyArray, FloatArray, as_choice
from engine.errors import InputError
from engine.evaluate import Field
from engine.statistics import Tracker
from engine.uncertainty.sigma import significance

Quantity = Literal["value", "sigma", "significance"]
SIGNIFICANCE_UNIT = "σ"
FIRST_MULTIPLE = 3.0
"""Of σ, at which the first contour line is offered: what lies below it is noise for the most part."""
MOST_LEVELS = 7
"""Contour lines offered on either side of zero, each at twice the one before."""


def shown(field: Field, quantity: Quantity) -> Field:
    """The field with what is wanted as its values; the field itself for ``value``. Its ``sigma`` stays.

    Raises
    ------
    InputError
        The field was computed without its uncertainty.
    """
    as_choice(quantity, get_args(Quantity), "quantity")
    if quantity == "value":
        return field
    if field.sigma is None:
        raise InputError("quantity", f"{quantity} needs the uncertainty", "ask for it when the field is computed")
    if quantity == "sigma":
        return _with_values(field, field.sigma.values, field.unit, field.notes)
    values = significance(field.values, field.sigma)
    notes = field.notes
    undefined = int(np.count_nonzero(np.isnan(values)))
    if undefined:
        notes += (f"{undefined} values have the uncertainty 0 and no significance; they are not numbers.",)
    return _with_values(field, values, SIGNIFICANCE_UNIT, notes)


def contour_levels(field: Field) -> tuple[FloatArray, FloatArray]:
    """Levels of contour lines in σ: multiples of the rms σ, and the values they stand for.

    ±3σ and each twice the one before, as far as the values reach; shape (L,) both, ascending. Empty
    where the field has no uncertainty.
    """
    if field.sigma is None or not field.sigma.rms > 0:
        return np.zeros(0), np.zeros(0)
    multiples = FIRST_MULTIPLE * 2.0 ** np.arange(MOST_LEVELS)
    both = np.concatenate([-multiples[::-1], multiples])
    values = both * field.sigma.rms
    within = (values > field.statistics.minimum) & (values < field.statistics.maximum)
    return both[within], values[within]


def _with_values(field: Field, values: AnyArray, unit: str, notes: tuple[str, ...]) -> Field:
    tracker = Tracker()
    finite = values[np.isfinite(values)]
    tracker.add(finite if finite.size else np.zeros(1))
    return replace(field, values=values, unit=unit, statistics=tracker.statistics(), notes=notes)
