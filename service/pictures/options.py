"""What a picture looks like: options, checked once."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal, get_args

from engine.arrays import as_choice, as_count, as_positive
from engine.errors import InputError
from service.pictures.palettes import PaletteKind, Theme

SMALLEST_INCHES = (3.0, 2.0)
LARGEST_PIXELS = 6000
DPI_RANGE = (50.0, 600.0)
LONGEST_TITLE = 200
LONGEST_LABEL = 40
MOST_MARKERS = 40
MOST_LEVELS = 60
"""Contour levels in one picture; beyond, lines are a colour."""
MOST_SECTIONS = 64


@dataclass(frozen=True, slots=True, kw_only=True)
class PictureOptions:
    """How a field is drawn.

    Attributes
    ----------
    title : str
    width, height : float
        In `size_unit`. A picture in pixels × `dpi` has exactly that many pixels as PNG.
    size_unit : "pixels" or "inches"
    dpi : float
        Pixels to the inch; of an SVG, of the image inside it.
    theme : "light" or "dark"
    palette : "auto", "sequential" or "diverging"
        auto: diverging where negative values reach deeper than a twentieth of the range.
    centre : "zero" or "mean"
        What the middle of a diverging palette stands for: 0, or the mean of the samples.
    low, high : float or None
        Ends of the colour scale, or of the value axis of a profile; by default those of the values.
    levels : tuple of float
        Contour lines at these values.
    level_step : float or None
        Contour lines at every whole multiple of it.
    level_sigmas : float or None
        Contour lines at every whole multiple of this many rms σ.
    zero_contour : bool
        Whether multiples include 0.
    band : float
        Half width of the band about a profile, in σ; 0 for none.
    markers : tuple of (float, str)
        Positions along a profile, Å, and what is there.
    part : str or None
        Which component of a vector, or "real", "imaginary" or "modulus" of a complex field; None: all
        that there are room for.
    cells : bool
        Whether the outlines of the unit cells are drawn.
    sections_along : str or None
        Label of the axis that a grid is cut along; None: the last.
    sections, columns : int or None
        Of a contact sheet: how many sections, and how many beside each other.

    Raises
    ------
    InputError
        An option is out of range, or two contradict each other.
    """

    title: str = ""
    width: float = 900.0
    height: float = 640.0
    size_unit: Literal["pixels", "inches"] = "pixels"
    dpi: float = 100.0
    theme: Theme = "light"
    palette: Literal["auto", "sequential", "diverging"] = "auto"
    centre: Literal["zero", "mean"] = "zero"
    low: float | None = None
    high: float | None = None
    levels: tuple[float, ...] = ()
    level_step: float | None = None
    level_sigmas: float | None = None
    zero_contour: bool = False
    band: float = 1.0
    markers: tuple[tuple[float, str], ...] = ()
    part: str | None = None
    cells: bool = True
    sections_along: str | None = None
    sections: int | None = None
    columns: int | None = None

    def __post_init__(self) -> None:
        as_choice(self.theme, get_args(Theme), "theme")
        as_choice(self.palette, ("auto", *get_args(PaletteKind)), "palette")
        as_choice(self.centre, ("zero", "mean"), "centre")
        self._check_size()
        self._check_values()
        _check_text(self.title, "title", LONGEST_TITLE)
        if len(self.markers) > MOST_MARKERS:
            raise InputError("markers", f"are {len(self.markers)}", f"give at most {MOST_MARKERS}")
        for number, (position, label) in enumerate(self.markers):
            _check_finite(position, ("markers", number))
            _check_text(label, ("markers", number), LONGEST_LABEL)
        if self.sections is not None and as_count(self.sections, "sections") > MOST_SECTIONS:
            raise InputError("sections", f"are {self.sections}", f"give at most {MOST_SECTIONS}")
        if self.columns is not None and as_count(self.columns, "columns") > MOST_SECTIONS:
            raise InputError("columns", f"are {self.columns}", f"give at most {MOST_SECTIONS}")

    @property
    def inches(self) -> tuple[float, float]:
        """Width and height."""
        if self.size_unit == "inches":
            return self.width, self.height
        # A hair more, that a product with the dpi never falls short of a whole number of pixels.
        return (self.width + 1e-6) / self.dpi, (self.height + 1e-6) / self.dpi

    def _check_size(self) -> None:
        as_choice(self.size_unit, ("pixels", "inches"), "size_unit")
        as_positive(self.dpi, "dpi", "pixels to the inch")
        if not DPI_RANGE[0] <= self.dpi <= DPI_RANGE[1]:
            raise InputError("dpi", f"is {self.dpi:g}", f"give a number from {DPI_RANGE[0]:g} to {DPI_RANGE[1]:g}")
        for name, length, least in (
            ("width", self.width, SMALLEST_INCHES[0]),
            ("height", self.height, SMALLEST_INCHES[1]),
        ):
            as_positive(length, name, self.size_unit)
            if self.size_unit == "pixels" and length != round(length):
                raise InputError(name, f"is {length:g} pixels", "give a whole number of pixels")
            inches = length if self.size_unit == "inches" else length / self.dpi
            if inches < least or inches * self.dpi > LARGEST_PIXELS:
                raise InputError(
                    name,
                    f"is {inches:.3g} inches, {inches * self.dpi:.0f} pixels at {self.dpi:g} to the inch",
                    f"give at least {least:g} inches and at most {LARGEST_PIXELS} pixels",
                )

    def _check_values(self) -> None:
        for name, limit in (("low", self.low), ("high", self.high)):
            if limit is not None:
                _check_finite(limit, (name,))
        if self.low is not None and self.high is not None and not self.low < self.high:
            raise InputError("low", f"= {self.low:g} is not below high = {self.high:g}", "exchange the two")
        ways = [bool(self.levels), self.level_step is not None, self.level_sigmas is not None]
        if sum(ways) > 1:
            raise InputError("levels", "are given in two ways", "give one of levels, level_step, level_sigmas")
        for number, level in enumerate(self.levels):
            _check_finite(level, ("levels", number))
        if len(self.levels) > MOST_LEVELS:
            raise InputError("levels", f"are {len(self.levels)}", f"give at most {MOST_LEVELS}")
        if self.level_step is not None:
            as_positive(self.level_step, "level_step", "the field's unit")
        if self.level_sigmas is not None:
            as_positive(self.level_sigmas, "level_sigmas", "σ")
        _check_finite(self.band, ("band",))
        if self.band < 0:
            raise InputError("band", f"is {self.band:g}", "give a number of σ, or 0 for no band")


def _check_finite(value: float, path: Sequence[str | int]) -> None:
    if isinstance(value, bool) or not math.isfinite(value):
        raise InputError(path, "is not a finite number", "give one")


def _check_text(value: str, path: str | Sequence[str | int], longest: int) -> None:
    if len(value) > longest:
        raise InputError(path, f"has {len(value)} characters", f"give at most {longest}")
