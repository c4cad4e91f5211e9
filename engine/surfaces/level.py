"""The value that a surface is drawn at: plain, or counted from what the field is like."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np

from engine.arrays import as_choice
from engine.errors import InputError
from engine.evaluate import Field, Work
from engine.quantities import Quantity

LevelKind = Literal["level", "level_rms", "level_sigmas"]


@dataclass(frozen=True, slots=True)
class Level:
    """A level, and what it is counted in.

    Attributes
    ----------
    kind : LevelKind
        ``level``: a value in the field's unit. ``level_rms``: multiples of the rms deviation from the mean,
        counted from the mean. ``level_sigmas``: multiples of the rms standard uncertainty, counted from zero.
    number : float

    Raises
    ------
    InputError
        Not a known kind, or not a finite number.
    """

    kind: LevelKind
    number: float

    def __post_init__(self) -> None:
        as_choice(self.kind, get_args(LevelKind), "kind")
        if not math.isfinite(self.number):
            raise InputError(self.kind, "is not a finite number", "give a finite number")

    def words(self, unit: str) -> str:
        """What the number is."""
        number = f"{self.number:g}"
        if self.kind == "level":
            return number if unit == "1" else f"{number} {unit}"
        if self.kind == "level_sigmas":
            return f"{number} times the rms standard uncertainty"
        return f"the mean {'-' if self.number < 0 else '+'} {abs(self.number):g} times the rms deviation from it"


@dataclass(frozen=True, slots=True)
class Scale:
    """What levels of a field are counted in.

    Attributes
    ----------
    mean, deviation : float
        Mean and rms deviation from it.
    sigma : float or None
        rms standard uncertainty, where the field has one.
    whole_cell : bool
        Whether mean and deviation are those of the whole cell, by the sum of the squares of the coefficients
        (Parseval), whatever the samples; else they are those of the samples.
    """

    mean: float
    deviation: float
    sigma: float | None
    whole_cell: bool

    def value(self, level: Level) -> float:
        """The level in the field's unit.

        Raises
        ------
        InputError
            A level in uncertainties of a field without any.
        """
        if level.kind == "level":
            return level.number
        if level.kind == "level_rms":
            return self.mean + level.number * self.deviation
        if self.sigma is None:
            raise InputError(level.kind, "is asked of a field without uncertainties", "give level or level_rms")
        return level.number * self.sigma


def scale_of(work: Work, shown: Field, quantity: Quantity) -> Scale:
    """What levels of a field are counted in.

    Parameters
    ----------
    work : Work
        That the field was computed by.
    shown : Field
        With the quantity that the surface is drawn of as its values.
    """
    sigma = None if shown.sigma is None else shown.sigma.rms
    if quantity == "value" and not work.parts.magnitude:
        series = work.parts.series[0]
        others = series.indices.any(axis=1)
        squares = float(np.sum(np.abs(series.values[others]) ** 2))
        return Scale(series.zero_term.real, math.sqrt(2 * squares), sigma, whole_cell=True)
    statistics = shown.statistics
    mean = float(statistics.mean.real)
    return Scale(mean, math.sqrt(max(statistics.rms**2 - mean**2, 0.0)), sigma, whole_cell=False)
