"""The period of a layer stack from the positions of its orders, which ``engine.films.positions`` models."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from engine.arrays import FloatArray, IntArray, as_positive
from engine.errors import InputError
from engine.films.assignment import check_orders
from engine.films.positions import Model, covariance_of, critical_square, refine
from engine.films.scans import PositionKind, Scan

CORRELATED = 0.95
"""Correlation from which a reader is told."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Spacing:
    """A period and what was refined with it. n lines used, p parameters.

    Attributes
    ----------
    period : float
        d, Å.
    period_sigma : float or None
        Å; None where nothing tells it.
    zero_shift_deg, zero_shift_sigma_deg : float or None
        z, degrees of 2θ; None where not refined.
    displacement, displacement_sigma : float or None
        s in ``displacement_unit``; None where not refined.
    displacement_unit : {"mm", "s/R"}
    radius : float or None
        R, mm.
    critical_square : float
        q_c², Å⁻², taken as exact; negative for a negative scattering-length density.
    parameters : tuple of str
        ``period``, ``zero_shift_deg``, ``displacement``, as refined.
    covariance : float64, shape (p, p), or None
        In the units above.
    row, order : int64, shape (n,)
        Rows of the scan that were used, and their orders.
    residual : float64, shape (n,)
        Measured less calculated position, ``unit``.
    residual_in_sigma : float64, shape (n,), or None
        The same in σ of the position: given, or the scatter's.
    unit : str
    chi_squared, degrees : float or None, int
        None without σ's of the positions; degrees of freedom n − p.
    reduced : float or None
        χ²/(n − p), where degrees are left.
    probability : float or None
        Of a χ² at least so large.
    sigma_source : {"given", "given, scaled", "scatter", "none"}
        Where σ's come from.
    kind, wavelength
        Of the scan.
    applied, notes : tuple of str
        What was done, and what a reader must know.
    """

    period: float
    period_sigma: float | None
    zero_shift_deg: float | None
    zero_shift_sigma_deg: float | None
    displacement: float | None
    displacement_sigma: float | None
    displacement_unit: str
    radius: float | None
    critical_square: float
    parameters: tuple[str, ...]
    covariance: FloatArray | None
    row: IntArray
    order: IntArray
    residual: FloatArray
    residual_in_sigma: FloatArray | None
    unit: str
    chi_squared: float | None
    degrees: int
    reduced: float | None
    probability: float | None
    sigma_source: str
    kind: PositionKind
    wavelength: float | None
    applied: tuple[str, ...]
    notes: tuple[str, ...]

    @property
    def correlation(self) -> FloatArray | None:
        """Of the parameters, shape (p, p)."""
        if self.covariance is None:
            return None
        sigma = np.sqrt(np.diag(self.covariance))
        return np.asarray(self.covariance / np.outer(sigma, sigma))

    def outer_q(self, order: IntArray) -> FloatArray:
        """q of orders outside the film, Å⁻¹, free of zero shift and displacement; (m,) -> (m,).

        Raises
        ------
        InputError
            An order that has no line outside a film of negative density.
        """
        square = (2 * math.pi * order / self.period) ** 2 + self.critical_square
        if (square <= 0).any():
            raise InputError("order", "has no line outside the film", "give higher orders, or correct the density")
        return np.asarray(np.sqrt(square))

    def theta(self, order: IntArray) -> FloatArray:
        """Glancing angle of orders outside the film, radians, free of zero shift and displacement; (m,) -> (m,).

        Raises
        ------
        InputError
            The wavelength is not known, or cannot reach an order.
        """
        if self.wavelength is None:
            raise InputError("wavelength", "is absent, so that q tells no angle", "give the wavelength in Å")
        sine = self.outer_q(order) * self.wavelength / (4 * math.pi)
        if (sine > 1).any():
            raise InputError("order", "is out of reach of the wavelength (sin θ above 1)", "give smaller orders")
        return np.arcsin(sine)

    def positions(self, order: IntArray) -> FloatArray:
        """Where the scan should show orders, in its own unit; (m,) -> (m,)."""
        ratio = self.displacement or 0.0
        if self.radius is not None:
            ratio /= self.radius
        model = Model(self.kind, self.wavelength, order.astype(np.float64), self.critical_square)
        return model.positions(math.log(self.period), math.radians(self.zero_shift_deg or 0.0), ratio)[0]


def fit_spacing(
    scan: Scan,
    orders: ArrayLike,
    *,
    zero_shift: bool = False,
    displacement: bool = False,
    critical_q: float | None = None,
    mean_density: float | None = None,
    radius: float | None = None,
    scale_sigma: bool = False,
) -> Spacing:
    """Weighted least squares of the measured positions.

    Parameters
    ----------
    scan : Scan
    orders : array, shape (n,)
        l of each line, 0 for lines to leave out.
    zero_shift, displacement : bool
        Whether these are refined; both need the wavelength.
    critical_q : float, optional
        q_c, Å⁻¹, taken as exact. Refraction is left out without it and without ``mean_density``.
    mean_density : float, optional
        Of the film, e/Å³ or 10⁻⁶ Å⁻², from which q_c follows.
    radius : float, optional
        R of the goniometer, mm: the displacement is then in mm, without it in parts of R.
    scale_sigma : bool
        Whether σ's are multiplied by √(χ²/(n − p)) where that is above 1.

    Raises
    ------
    InputError
        Orders as ``check_orders`` refuses them, fewer orders than parameters, zero shift or displacement
        without a wavelength, both kinds of refraction given, a line at or below q_c, parameters that the
        orders do not tell apart, a refinement that does not converge.
    """
    given = check_orders(scan, orders)
    square, refraction = _refraction(scan, critical_q, mean_density)
    reach = None if radius is None else as_positive(radius, "radius", "mm")
    if (zero_shift or displacement) and scan.wavelength is None:
        raise InputError(
            "wavelength", "is absent, without which q tells no shift of an angle", "give it, or refine the period alone"
        )
    wanted = np.array([True, zero_shift, displacement])
    names = tuple(name for name, on in zip(("period", "zero_shift_deg", "displacement"), wanted, strict=True) if on)
    row = np.flatnonzero(given)
    if row.size < len(names):
        raise InputError(
            "orders",
            f"number {row.size} lines, too few for {len(names)} parameters ({', '.join(names)})",
            "number more lines, or refine fewer parameters",
        )
    used = scan.select(row)
    order = given[row]
    below = np.flatnonzero(used.q**2 <= square)
    if below.size:
        raise InputError.for_rows(
            "critical_q", row[below], "lies at or above a line, which then is no order", "correct q_c, or leave it out"
        )
    model = Model(scan.kind, scan.wavelength, order.astype(np.float64), square)
    # Inside, angles are in radians.
    unit = math.pi / 180 if scan.kind == "two_theta" else 1.0
    measured = used.position * unit
    spread = np.ones(row.size) if used.position_sigma is None else used.position_sigma * unit
    start = np.zeros(3)
    start[0] = math.log(float(np.median(2 * math.pi * order / np.sqrt(used.q**2 - square))))
    found, jacobian = refine(model, measured, spread, start, wanted)
    covariance = covariance_of(jacobian, names)
    residual = measured - model.radians(*found)[0]
    chi_squared = float(np.sum((residual / spread) ** 2))
    degrees = row.size - len(names)
    source, factor = _source(used.position_sigma is not None, chi_squared, degrees, scale_sigma)
    to_units = np.array([math.exp(found[0]), 180 / math.pi, reach or 1.0])[wanted]
    scaled = None if factor is None else covariance * factor**2 * np.outer(to_units, to_units)
    sigma = np.full(3, np.nan)
    if scaled is not None:
        sigma[wanted] = np.sqrt(np.diag(scaled))

    def error(place: int) -> float | None:
        return None if np.isnan(sigma[place]) else float(sigma[place])

    weighted = source.startswith("given")
    in_sigma = residual / spread if weighted else None if factor is None or factor == 0 else residual / factor
    return Spacing(
        period=math.exp(found[0]),
        period_sigma=error(0),
        zero_shift_deg=math.degrees(found[1]) if zero_shift else None,
        zero_shift_sigma_deg=error(1),
        displacement=float(found[2]) * (reach or 1.0) if displacement else None,
        displacement_sigma=error(2),
        displacement_unit="s/R" if reach is None else "mm",
        radius=reach,
        critical_square=square,
        parameters=names,
        covariance=scaled,
        row=row.astype(np.int64),
        order=order,
        residual=residual / unit,
        residual_in_sigma=in_sigma,
        unit=scan.unit,
        chi_squared=chi_squared if weighted else None,
        degrees=degrees,
        reduced=chi_squared / degrees if weighted and degrees else None,
        probability=float(special.gammaincc(degrees / 2, chi_squared / 2)) if weighted and degrees else None,
        sigma_source=source,
        kind=scan.kind,
        wavelength=scan.wavelength,
        applied=(_fitted(names, row.size, scan.count), refraction),
        notes=_notes(source, factor, degrees, names, scaled),
    )


def _refraction(scan: Scan, critical_q: float | None, mean_density: float | None) -> tuple[float, str]:
    if critical_q is not None and mean_density is not None:
        raise InputError("critical_q", "and mean_density both decide refraction", "give one of the two")
    if critical_q is not None:
        number = 0.0 if critical_q == 0 else as_positive(critical_q, "critical_q", "Å⁻¹")
        return number**2, f"refraction with q_c = {number:.4g} Å⁻¹, taken as exact: q′² = q² − q_c²"
    if mean_density is None:
        return 0.0, "refraction is left out: q = 2πl/d"
    density = float(mean_density)
    if not math.isfinite(density) or (scan.radiation == "xray" and density < 0):
        raise InputError("mean_density", "is not a mean density", "give e/Å³, or 10⁻⁶ Å⁻² for neutrons")
    unit = "e/Å³" if scan.radiation == "xray" else "10⁻⁶ Å⁻²"
    square = critical_square(density, scan.radiation)
    return square, f"refraction by a mean density of {density:.4g} {unit}, taken as exact: q_c² = {square:.4g} Å⁻²"


def _source(weighted: bool, chi_squared: float, degrees: int, scale: bool) -> tuple[str, float | None]:
    """Where σ's come from, and the factor on the covariance's root; None where nothing tells."""
    if weighted:
        reduced = chi_squared / degrees if degrees else 0.0
        return ("given, scaled", math.sqrt(reduced)) if scale and reduced > 1 else ("given", 1.0)
    return ("scatter", math.sqrt(chi_squared / degrees)) if degrees else ("none", None)


def _fitted(names: tuple[str, ...], used: int, count: int) -> str:
    words = {"period": "period", "zero_shift_deg": "zero shift", "displacement": "sample displacement"}
    left = f", {count - used} left out" if count > used else ""
    return f"{', '.join(words[name] for name in names)} by least squares of {used} positions{left}"


def _notes(
    source: str, factor: float | None, degrees: int, names: tuple[str, ...], covariance: FloatArray | None
) -> tuple[str, ...]:
    told = {
        "given": "σ's follow from those of the positions; the wavelength is taken as exact",
        "given, scaled": f"σ's of the positions are multiplied by √(χ²/(n − p)) = {factor or 0:.3g}",
        "scatter": f"positions have no σ: all weigh the same, and σ's follow from their scatter ({degrees} degrees "
        "of freedom)",
        "none": "positions have no σ and leave no degree of freedom: no σ is known",
    }
    found = [told[source]]
    if covariance is not None and len(names) > 1 and (np.diag(covariance) > 0).all():
        sigma = np.sqrt(np.diag(covariance))
        correlation = covariance / np.outer(sigma, sigma)
        for i in range(len(names)):
            found += [
                f"{names[i]} and {names[j]} are correlated by {correlation[i, j]:.3f}"
                for j in range(i + 1, len(names))
                if abs(correlation[i, j]) > CORRELATED
            ]
    return tuple(found)
