"""From the intensities of a film's lines to |F_l|, with a table of what became of every line."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike

from engine.amplitudes.corrections import Correction, Multiplicity
from engine.amplitudes.negatives import NegativeRule, bayesian_amplitudes, root_amplitudes
from engine.arrays import BoolArray, FloatArray, IntArray, as_choice
from engine.errors import InputError
from engine.films.assignment import check_orders
from engine.films.orders import FilmOrders
from engine.films.scans import Scan
from engine.films.spacing import Spacing
from engine.lattice import Lattice
from engine.reflections import Reflections

AmplitudeRule = Literal["bayesian", "root"]

OVERLAP = 1.5
"""Lines closer than so many mean full widths at half maximum overlap."""
WEAK = 3.0
"""Intensities below so many σ are weak."""


@dataclass(frozen=True, slots=True, kw_only=True)
class OrderTable:
    """Every line of a scan, in its sequence, and what was made of it. n lines.

    Attributes
    ----------
    order : int64, shape (n,)
        l; 0 for a stray line.
    two_theta_deg : float64, shape (n,), or None
        As measured, degrees; None without a wavelength.
    q, spacing : float64, shape (n,)
        As measured, Å⁻¹, and 2π/q, Å.
    residual : float64, shape (n,)
        Measured less calculated position, ``unit``; NaN for stray lines.
    residual_in_sigma : float64, shape (n,)
        In σ of the position; NaN where that or the order is not known.
    unit : str
    intensity, intensity_sigma : float64, shape (n,), and the same or None
        As measured.
    factor : float64, shape (n,)
        By which the intensity was divided; NaN for stray lines.
    amplitude, amplitude_sigma : float64, shape (n,), and the same or None
        |F_l|, arbitrary scale; NaN where none was made.
    used : bool, shape (n,)
        Lines that have become amplitudes.
    flags : tuple of tuple of str, length n
        Among ``stray``, ``saturated``, ``overlapping``, ``negative``, ``weak`` (below 3σ), ``excluded``.
    missing : tuple of int
        Orders below the highest that was numbered which have no line.
    unused : tuple of int
        Orders that have a line but no amplitude.
    period, period_sigma : float, and float or None
    applied : tuple of str
        What was done, in words.
    """

    order: IntArray
    two_theta_deg: FloatArray | None
    q: FloatArray
    spacing: FloatArray
    residual: FloatArray
    residual_in_sigma: FloatArray
    unit: str
    intensity: FloatArray
    intensity_sigma: FloatArray | None
    factor: FloatArray
    amplitude: FloatArray
    amplitude_sigma: FloatArray | None
    used: BoolArray
    flags: tuple[tuple[str, ...], ...]
    missing: tuple[int, ...]
    unused: tuple[int, ...]
    period: float
    period_sigma: float | None
    applied: tuple[str, ...]

    def film(self) -> FilmOrders:
        """The amplitudes of the lines used, sorted by order."""
        made = FilmOrders.of(
            self.period,
            self.order[self.used],
            self.amplitude[self.used],
            None if self.amplitude_sigma is None else self.amplitude_sigma[self.used],
            period_sigma=self.period_sigma or 0.0,
        )
        return replace(made, applied=self.applied)


def order_table(
    scan: Scan,
    orders: ArrayLike,
    spacing: Spacing,
    *,
    corrections: Sequence[Correction] = (),
    rule: AmplitudeRule = "bayesian",
    negative: NegativeRule = "exclude",
    symmetric: bool = True,
    keep_saturated: bool = False,
) -> OrderTable:
    """All lines with order, position, intensity, correction and amplitude.

    ``bayesian``: posterior means (French & Wilson, Acta Cryst. A34 (1978) 517), in which no weak order is
    lost; with the centric prior for a mirror-symmetric stack, whose F_l are real, about the mean of the
    corrected intensities. The few orders of a film do not obey Wilson's statistics; the prior is nearly
    that of a flat F (of a flat |F|² where the stack is not symmetric) wherever σ is well below the mean.
    ``root``: |F| = √I, which has no answer to negative intensities.

    Parameters
    ----------
    scan : Scan
        With intensities, and with their σ for ``bayesian``.
    orders : array, shape (n,)
        l of each line, 0 for stray ones.
    spacing : Spacing
        Of the same scan.
    corrections : sequence of Lorentz, Polarisation, FilmAbsorption, Footprint
        Each kind at most once; at the fitted angles outside the film.
    rule : {"bayesian", "root"}
    negative : {"refuse", "exclude"}
        What ``root`` does with intensities without a root.
    symmetric : bool
        Whether the stack has a mirror.
    keep_saturated : bool
        Whether saturated lines, whose intensities are too low, become amplitudes all the same.

    Raises
    ------
    InputError
        Orders as ``check_orders`` refuses them, a spacing of another scan, no intensities, no line left,
        σ's absent or not above zero or a mean intensity not above zero with ``bayesian``, rows without a
        root where these are refused, corrections without a wavelength, twice, as multiplicities, or
        without bound at an order.
    """
    as_choice(rule, get_args(AmplitudeRule), "rule")
    given = check_orders(scan, orders)
    if scan.intensity is None:
        raise InputError("intensity", "is absent", "give the integrated intensity of every line")
    if spacing.kind != scan.kind or spacing.wavelength != scan.wavelength:
        raise InputError("spacing", "is that of another scan", "fit the period to this scan's positions")
    numbered = given > 0
    chosen = numbered if keep_saturated else numbered & ~scan.saturated
    if not chosen.any():
        raise InputError(
            "orders", "leave no line for an amplitude", "number a line that is not saturated, or keep saturated ones"
        )
    product, words = _factors(spacing, given[numbered], corrections)
    factor = np.full(scan.count, np.nan)
    factor[numbered] = product
    made, said = _amplitudes(scan, given, factor, chosen, spacing.period, rule, negative, symmetric)
    used = np.zeros(scan.count, dtype=bool)
    used[made.row] = True
    residual = np.full(scan.count, np.nan)
    residual[numbered] = scan.position[numbered] - spacing.positions(given[numbered])
    in_sigma = np.full(scan.count, np.nan)
    if scan.position_sigma is not None:
        in_sigma = residual / scan.position_sigma
    elif spacing.residual_in_sigma is not None:
        in_sigma[spacing.row] = spacing.residual_in_sigma
    flags = _flags(scan, numbered, used)
    missing = np.setdiff1d(np.arange(1, int(given.max()) + 1), given)
    unused = np.sort(given[numbered & ~used])
    return OrderTable(
        order=given,
        two_theta_deg=None if scan.wavelength is None else np.degrees(2 * scan.theta()),
        q=scan.q,
        spacing=2 * np.pi / scan.q,
        residual=residual,
        residual_in_sigma=in_sigma,
        unit=scan.unit,
        intensity=scan.intensity,
        intensity_sigma=scan.intensity_sigma,
        factor=factor,
        amplitude=_spread(made.observed, made.row, scan.count),
        amplitude_sigma=None if made.sigma is None else _spread(made.sigma, made.row, scan.count),
        used=used,
        flags=flags,
        missing=tuple(missing.tolist()),
        unused=tuple(unused.tolist()),
        period=spacing.period,
        period_sigma=spacing.period_sigma,
        applied=(*spacing.applied, *words, *said, *_told(given, flags, missing, unused, keep_saturated)),
    )


def _factors(
    spacing: Spacing, order: IntArray, corrections: Sequence[Correction]
) -> tuple[FloatArray, tuple[str, ...]]:
    """The product of all factors at the orders, (m,), and its words."""
    product = np.ones(order.size)
    if not corrections:
        return product, ("no correction: |F|² is taken as proportional to the intensity",)
    theta = spacing.theta(order)
    kinds = [type(correction) for correction in corrections]
    for place, correction in enumerate(corrections):
        if kinds[place] in kinds[:place]:
            raise InputError(
                ("corrections", place), f"is the second {kinds[place].__name__}", "name each correction once"
            )
        if isinstance(correction, Multiplicity):
            raise InputError(
                ("corrections", place), "is a multiplicity, and orders of a film have none", "leave it out"
            )
        with np.errstate(divide="ignore"):
            factors = correction.factors(theta)
        # Backscattering: rounding leaves sin 2θ at 1e-16 instead of zero.
        bad = np.flatnonzero(~((factors > 1e-12) & (factors < 1e12)))
        if bad.size:
            raise InputError(
                ("corrections", place),
                f"cannot be undone at order {order[bad[0]]}: {correction.describe()} is zero or without bound there",
                "leave this order out",
            )
        product *= factors
    return product, tuple(f"intensities divided by: {correction.describe()}" for correction in corrections)


def _amplitudes(
    scan: Scan,
    given: IntArray,
    factor: FloatArray,
    chosen: BoolArray,
    period: float,
    rule: AmplitudeRule,
    negative: NegativeRule,
    symmetric: bool,
) -> tuple[Reflections, tuple[str, ...]]:
    """Amplitudes with their rows in the scan, and what was done."""
    row = np.flatnonzero(chosen)
    counts = scan.intensity if scan.intensity is not None else np.empty(0)
    reflections = Reflections(
        lattice=Lattice.from_period(period),
        indices=np.asfortranarray(given[row, None]),
        quantity="intensity",
        observed=counts[row] / factor[row],
        sigma=None if scan.intensity_sigma is None else scan.intensity_sigma[row] / factor[row],
        phase=None,
        phase_sigma=None,
        merit=None,
        row=row.astype(np.int64),
        scale="arbitrary",
    )
    if rule == "root":
        rooted = root_amplitudes(reflections, negative=negative)
        return rooted.reflections, rooted.notes
    if reflections.sigma is None:
        raise InputError(
            "intensity_sigma", "is absent, which the Bayesian estimate needs", "give it, or use the rule root"
        )
    mean = float(reflections.observed.mean())
    if mean <= 0:
        raise InputError(
            "intensity", "is not above zero on average", "leave orders without signal out, or correct the background"
        )
    expected = np.full(row.size, mean)
    found = bayesian_amplitudes(reflections, expected=expected, centric=np.full(row.size, symmetric))
    prior = "centric prior, of a mirror-symmetric stack," if symmetric else "acentric prior, of a stack without mirror,"
    return found.reflections, (*found.notes, f"{prior} about the mean of {row.size} corrected intensities, {mean:.4g}")


def _spread(values: FloatArray, row: IntArray, count: int) -> FloatArray:
    full = np.full(count, np.nan)
    full[row] = values
    return full


def _flags(scan: Scan, numbered: BoolArray, used: BoolArray) -> tuple[tuple[str, ...], ...]:
    counts = scan.intensity if scan.intensity is not None else np.empty(0)
    weak = np.zeros(scan.count, dtype=bool)
    if scan.intensity_sigma is not None:
        weak = counts < WEAK * scan.intensity_sigma
    marks = {
        "stray": ~numbered,
        "saturated": scan.saturated,
        "overlapping": overlapping(scan),
        "negative": counts < 0,
        "weak": weak,
        "excluded": numbered & ~used,
    }
    return tuple(tuple(name for name, mark in marks.items() if mark[row]) for row in range(scan.count))


def overlapping(scan: Scan) -> BoolArray:
    """Lines closer to a neighbour than 1.5 times the mean of their widths; none without widths; (n,)."""
    close = np.zeros(scan.count, dtype=bool)
    if scan.width is None:
        return close
    place = np.argsort(scan.position)
    width = scan.width[place]
    near = np.diff(scan.position[place]) < OVERLAP * (width[1:] + width[:-1]) / 2
    close[place[1:][near]] = True
    close[place[:-1][near]] = True
    return close


def _told(
    given: IntArray, flags: tuple[tuple[str, ...], ...], missing: IntArray, unused: IntArray, keep_saturated: bool
) -> tuple[str, ...]:
    def orders(name: str) -> list[int]:
        return sorted(int(order) for order, marks in zip(given, flags, strict=True) if name in marks and order)

    def listed(numbers: Sequence[int]) -> str:
        return ", ".join(str(number) for number in numbers)

    found = []
    stray = sum("stray" in marks for marks in flags)
    if stray:
        found.append(f"{stray} stray lines are left out" if stray > 1 else "1 stray line is left out")
    saturated = orders("saturated")
    if saturated:
        fate = "kept, though their amplitudes are too small" if keep_saturated else "left out of the amplitudes"
        found.append(f"saturated orders {fate}: {listed(saturated)}")
    if orders("overlapping"):
        found.append(f"orders that overlap a neighbour and are kept: {listed(orders('overlapping'))}")
    if missing.size:
        found.append(f"orders without a line, which are not measured rather than zero: {listed(missing.tolist())}")
    if unused.size:
        found.append(f"orders with a line but without an amplitude: {listed(unused.tolist())}")
    return tuple(found)
