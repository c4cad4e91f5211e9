"""Widths of a film's lines as they were measured, in q, with the instrument's own."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import FloatArray, IntArray, as_choice, as_matrix, as_positive, as_vector, refuse_rows
from engine.errors import InputError

Rule = Literal["gaussian", "lorentzian"]
Measure = Literal["fwhm", "integral"]


@dataclass(frozen=True, slots=True, kw_only=True)
class LineWidths:
    """Widths of the lines of one period, in q; make one with `of` or `from_two_theta`.

    Attributes
    ----------
    order : int64, shape (n,)
    position : float64, shape (n,)
        q, Å⁻¹.
    width : float64, shape (n,)
        As measured, Å⁻¹.
    sigma : float64, shape (n,), or None
    instrument, instrument_sigma : float64, shape (n,)
        The instrument's own width at each line, and its uncertainty, one error common to all lines.
    rule : {"gaussian", "lorentzian"}
        How the instrument adds: as the root of the sum of squares, or by plain sum.
    measure : {"fwhm", "integral"}
    words : tuple of str
    """

    order: IntArray
    position: FloatArray
    width: FloatArray
    sigma: FloatArray | None
    instrument: FloatArray
    instrument_sigma: FloatArray
    rule: Rule
    measure: Measure
    words: tuple[str, ...]

    @classmethod
    def of(
        cls,
        order: ArrayLike,
        q: ArrayLike,
        width: ArrayLike,
        sigma: ArrayLike | None = None,
        *,
        instrument: ArrayLike = 0.0,
        instrument_sigma: ArrayLike = 0.0,
        rule: Rule = "gaussian",
        measure: Measure = "fwhm",
    ) -> LineWidths:
        """From q and widths in Å⁻¹; the instrument's width a number or one a line.

        Raises
        ------
        InputError
            Columns of unequal length or not finite, orders not positive whole numbers or repeated, widths,
            positions or σ's not above zero, an instrument's width below zero.
        """
        as_choice(rule, get_args(Rule), "rule")
        as_choice(measure, get_args(Measure), "measure")
        given = as_vector(order, np.size(np.asarray(order)), "order")
        refuse_rows((given != np.rint(given)) | (given < 1), "order", "is not a positive whole number", "give l of 00l")
        if np.unique(given).size != given.size:
            raise InputError("order", "comes twice", "give the mean width of repeated lines")
        n = given.size
        position, measured = as_vector(q, n, "q"), as_vector(width, n, "width")
        errors = None if sigma is None else as_vector(sigma, n, "sigma")
        for name, column in (("q", position), ("width", measured), ("sigma", errors)):
            if column is not None:
                refuse_rows(column <= 0, name, "is not above zero", "give numbers above zero, or leave the line out")
        own = _spread(instrument, n, "instrument")
        return cls(
            order=given.astype(np.int64),
            position=position,
            width=measured,
            sigma=errors,
            instrument=own,
            instrument_sigma=_spread(instrument_sigma, n, "instrument_sigma"),
            rule=rule,
            measure=measure,
            words=(
                "the instrument's width is taken as none"
                if not own.any()
                else "the instrument's width adds "
                + ("as the root of the sum of squares" if rule == "gaussian" else "linearly"),
            ),
        )

    @classmethod
    def from_two_theta(
        cls,
        order: ArrayLike,
        two_theta: ArrayLike,
        width: ArrayLike,
        sigma: ArrayLike | None = None,
        *,
        wavelength: float,
        instrument: ArrayLike = 0.0,
        instrument_sigma: ArrayLike = 0.0,
        rule: Rule = "gaussian",
        measure: Measure = "fwhm",
    ) -> LineWidths:
        """From 2θ and widths in degrees of 2θ: δq = (2π/λ) cos θ δ(2θ), good to 10⁻⁵ below 2°.

        Raises
        ------
        InputError
            As `of`; 2θ outside 0…180°, a wavelength (Å) that is not a length.
        """
        size = np.size(np.asarray(order))
        length, angle = as_positive(wavelength, "wavelength", "Å"), as_vector(two_theta, size, "two_theta")
        refuse_rows((angle <= 0) | (angle >= 180), "two_theta", "is not between 0 and 180°", "give degrees of 2θ")
        theta = np.radians(angle) / 2
        factor = 2 * np.pi / length * np.cos(theta) * np.pi / 180

        return cls.of(
            order,
            4 * np.pi / length * np.sin(theta),
            as_vector(width, size, "width") * factor,
            None if sigma is None else as_vector(sigma, size, "sigma") * factor,
            instrument=_spread(instrument, size, "instrument") * factor,
            instrument_sigma=_spread(instrument_sigma, size, "instrument_sigma") * factor,
            rule=rule,
            measure=measure,
        )


def _spread(value: ArrayLike, size: int, name: str) -> FloatArray:
    """One number for all lines, or one a line; 0 or more."""
    given = as_matrix(np.atleast_2d(np.asarray(value)), (1, -1), name)[0]
    column = as_vector(np.repeat(given, size) if given.size == 1 else given, size, name)
    refuse_rows(column < 0, name, "is negative", "give 0 or more")
    return column
