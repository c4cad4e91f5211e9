"""What a scan of a layered film yields: a table of lines with position, intensity, width and order."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import BoolArray, FloatArray, IntArray, as_choice, as_positive, as_vector, refuse_rows
from engine.errors import InputError
from engine.scattering import Probe

PositionKind = Literal["two_theta", "q"]

SAME_POSITION = 1e-9
"""Positions that differ by less, relative to the larger, are one position."""
HIGHEST_ORDER = 10_000
"""Orders beyond are believed to be something else, such as a position in the wrong column."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Scan:
    """Lines of a scan in symmetric reflection, one a row, in the caller's sequence; make one with ``Scan.of``.

    Attributes
    ----------
    kind : {"two_theta", "q"}
        What ``position`` is.
    position : float64, shape (n,)
        2θ in degrees, or q in Å⁻¹; distinct, above zero.
    position_sigma : float64, shape (n,), or None
        Its standard uncertainty, above zero, same unit.
    intensity : float64, shape (n,), or None
        Integrated; may be negative by noise.
    intensity_sigma : float64, shape (n,), or None
    width : float64, shape (n,), or None
        Full width at half maximum, unit of the position.
    width_sigma : float64, shape (n,), or None
    order : int64, shape (n,)
        l as the laboratory numbered the lines; 0 where unknown.
    saturated : bool, shape (n,)
        Lines that the detector could not count.
    wavelength : float or None
        Å; known wherever positions are angles.
    radiation : {"xray", "neutron"}
    period : float or None
        Å, where it is known beforehand; it helps to number lines and is not fitted.
    notes : tuple of str
        What a reader must know.
    """

    kind: PositionKind
    position: FloatArray
    position_sigma: FloatArray | None
    intensity: FloatArray | None
    intensity_sigma: FloatArray | None
    width: FloatArray | None
    width_sigma: FloatArray | None
    order: IntArray
    saturated: BoolArray
    wavelength: float | None
    radiation: Probe = "xray"
    period: float | None = None
    notes: tuple[str, ...] = ()

    @classmethod
    def of(
        cls,
        *,
        two_theta_deg: ArrayLike | None = None,
        q: ArrayLike | None = None,
        position_sigma: ArrayLike | None = None,
        intensity: ArrayLike | None = None,
        intensity_sigma: ArrayLike | None = None,
        width: ArrayLike | None = None,
        width_sigma: ArrayLike | None = None,
        order: ArrayLike | None = None,
        saturated: ArrayLike | None = None,
        wavelength: float | None = None,
        radiation: Probe = "xray",
        period: float | None = None,
    ) -> Scan:
        """Checked once; orders are unknown where they are NaN or 0.

        Raises
        ------
        InputError
            Positions of both kinds or none, an empty table, angles outside 0…180°, angles without a
            wavelength, sin θ above 1, two rows on one position, σ's of positions or widths not above
            zero, negative σ's, orders that are not whole, one line with neither order nor period,
            columns of unequal length, or what is not a finite number.
        """
        if (two_theta_deg is None) == (q is None):
            raise InputError("position", "is wanted once, as 2θ or as q", "give one of two_theta_deg and q")
        as_choice(radiation, get_args(Probe), "radiation")
        kind: PositionKind = "q" if two_theta_deg is None else "two_theta"
        name = "q" if two_theta_deg is None else "two_theta_deg"
        given = q if two_theta_deg is None else two_theta_deg
        if isinstance(given, list | tuple | np.ndarray) and not len(given):
            raise InputError(name, "holds no line", "give at least one line of the scan")
        position = as_vector([] if given is None else given, -1, name).copy()
        size = position.size
        length = None if wavelength is None else as_positive(wavelength, "wavelength", "Å")
        _check_positions(kind, name, position, length)
        spread = _column(position_sigma, size, "position_sigma", above_zero=True)
        counts = None if intensity is None else as_vector(intensity, size, "intensity").copy()
        counts_sigma = _column(intensity_sigma, size, "intensity_sigma")
        if counts is None and counts_sigma is not None:
            raise InputError("intensity_sigma", "has no intensity to belong to", "give the intensities as well")
        widths = _column(width, size, "width", above_zero=True)
        widths_sigma = _column(width_sigma, size, "width_sigma")
        if widths is None and widths_sigma is not None:
            raise InputError("width_sigma", "has no width to belong to", "give the widths as well")
        orders = _orders(order, size)
        known = None if period is None else as_positive(period, "period", "Å")
        if size == 1 and known is None and not orders.any():
            raise InputError(
                name,
                "holds one line without an order, from which no period follows",
                "give its order, the period, or further lines",
            )
        return cls(
            kind=kind,
            position=position,
            position_sigma=spread,
            intensity=counts,
            intensity_sigma=counts_sigma,
            width=widths,
            width_sigma=widths_sigma,
            order=orders,
            saturated=_flags(saturated, size),
            wavelength=length,
            radiation=radiation,
            period=known,
            notes=(*_notes(counts), *_doubts(kind, position, length, radiation)),
        )

    @property
    def count(self) -> int:
        """Lines."""
        return int(self.position.size)

    @property
    def unit(self) -> str:
        """Of positions, their σ and widths."""
        return "° 2θ" if self.kind == "two_theta" else "Å⁻¹"

    @property
    def q(self) -> FloatArray:
        """q = (4π/λ) sin θ as measured, Å⁻¹, shape (n,)."""
        if self.kind == "q":
            return self.position
        return 4 * math.pi / self._length() * np.sin(np.radians(self.position) / 2)

    @property
    def q_sigma(self) -> FloatArray | None:
        """σ_q = (2π/λ) cos θ σ_2θ, Å⁻¹, shape (n,); the wavelength is taken as exact."""
        return None if self.position_sigma is None else self._to_q(self.position_sigma)

    @property
    def q_width(self) -> FloatArray | None:
        """Full widths at half maximum in q, Å⁻¹, shape (n,), to first order in the width."""
        return None if self.width is None else self._to_q(self.width)

    def theta(self) -> FloatArray:
        """Glancing angle θ as measured, radians, shape (n,).

        Raises
        ------
        InputError
            Positions in q without a wavelength.
        """
        if self.kind == "two_theta":
            return np.radians(self.position) / 2
        # Rounding may lift the limit, sin θ = 1, above itself.
        return np.arcsin(np.minimum(self.position * self._length() / (4 * math.pi), 1.0))

    def select(self, kept: BoolArray | IntArray) -> Scan:
        """The chosen rows."""

        def part(column: FloatArray | None) -> FloatArray | None:
            return None if column is None else column[kept]

        return replace(
            self,
            position=self.position[kept],
            position_sigma=part(self.position_sigma),
            intensity=part(self.intensity),
            intensity_sigma=part(self.intensity_sigma),
            width=part(self.width),
            width_sigma=part(self.width_sigma),
            order=self.order[kept],
            saturated=self.saturated[kept],
        )

    def _to_q(self, small: FloatArray) -> FloatArray:
        """A small difference in the unit of the position, as one in q."""
        if self.kind == "q":
            return small
        return np.asarray(2 * math.pi / self._length() * np.cos(self.theta()) * np.radians(small))

    def _length(self) -> float:
        if self.wavelength is None:
            raise InputError("wavelength", "is absent, so that q tells no angle", "give the wavelength in Å")
        return self.wavelength


def _check_positions(kind: PositionKind, name: str, position: FloatArray, wavelength: float | None) -> None:
    refuse_rows(position <= 0, name, "is not above zero", "give positions of lines away from the primary beam")
    if kind == "two_theta":
        refuse_rows(position >= 180, name, "is not below 180°", "give 2θ in degrees, below 180")
        if wavelength is None:
            raise InputError("wavelength", "is absent, so that angles tell no spacing", "give the wavelength in Å")
    elif wavelength is not None:
        refuse_rows(
            position * wavelength > 4 * math.pi,
            name,
            f"is out of reach of a wavelength of {wavelength:g} Å (sin θ = qλ/4π above 1)",
            "give q = (4π/λ) sin θ in Å⁻¹ and the wavelength in Å",
        )
    ascending = np.argsort(position, kind="stable")
    steps = np.diff(position[ascending])
    twice = np.flatnonzero(steps <= SAME_POSITION * position[ascending][1:])
    if twice.size:
        rows = np.sort(np.concatenate([ascending[twice], ascending[twice + 1]]))
        raise InputError.for_rows(
            name, np.unique(rows), "is the same in two rows", "merge repeated lines, or correct a position"
        )


def _column(values: ArrayLike | None, size: int, name: str, *, above_zero: bool = False) -> FloatArray | None:
    if values is None:
        return None
    vector = as_vector(values, size, name).copy()
    if above_zero:
        refuse_rows(vector <= 0, name, "is not above zero", "give numbers above zero, or leave the column out")
    else:
        refuse_rows(vector < 0, name, "is negative", "give standard uncertainties of 0 or more")
    return vector


def _orders(values: ArrayLike | None, size: int) -> IntArray:
    if values is None:
        return np.zeros(size, dtype=np.int64)
    try:
        given = np.asarray(values, dtype=np.float64)
    except (TypeError, ValueError) as fault:
        raise InputError("order", "is not numeric", "give whole numbers, 0 where unknown") from fault
    if given.shape != (size,):
        raise InputError("order", f"does not hold {size} orders", "give one order a line, 0 where unknown")
    given = np.where(np.isnan(given), 0.0, given)
    refuse_rows(
        (given < 0) | (given != np.rint(given)) | (given > HIGHEST_ORDER),
        "order",
        f"is not a whole number from 1 to {HIGHEST_ORDER}",
        "give the order l of 00l, or 0 where unknown",
    )
    return given.astype(np.int64)


def _flags(values: ArrayLike | None, size: int) -> BoolArray:
    if values is None:
        return np.zeros(size, dtype=bool)
    flags = np.asarray(values)
    if flags.dtype != np.bool_ or flags.shape != (size,):
        raise InputError("saturated", "is not one truth value a line", f"give {size} of true or false")
    return flags.copy()


def _doubts(kind: PositionKind, position: FloatArray, wavelength: float | None, radiation: Probe) -> tuple[str, ...]:
    """Units that may have been mistaken; nothing is refused for it."""
    found = []
    if kind == "two_theta" and position.size > 1 and float(position.max()) < 1.0:
        found.append("All 2θ lie below 1°: if they are radians, give degrees.")
    if wavelength is not None and radiation == "xray" and wavelength < 0.2:
        found.append(f"A wavelength of {wavelength:g} Å is unusually short: if it is in nm, give Å.")
    return tuple(found)


def _notes(intensity: FloatArray | None) -> tuple[str, ...]:
    if intensity is None:
        return ("no intensities: the scan tells a period and no amplitudes",)
    negative = int(np.count_nonzero(intensity < 0))
    if negative:
        return (f"{negative} of {intensity.size} intensities are negative, as noise makes weak orders; they are kept",)
    return ()
