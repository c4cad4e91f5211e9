"""CoefficientSet: what a density is made from, checked once and then trusted.

Inside, every coefficient is n_m of n(r) = Σ n_m exp(+2πi m·x), in the unit of the density.
``engine.assembly`` makes a set from a laboratory's columns and resolves their sign convention.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from engine.arrays import BoolArray, ComplexArray, FloatArray, IntArray, as_positive
from engine.errors import InputError
from engine.lattice import Lattice
from engine.series import Series
from engine.symmetry.group import Group


@dataclass(frozen=True, slots=True, kw_only=True)
class Tally:
    """What became of the rows a set was made from; nothing leaves a set uncounted.

    Attributes
    ----------
    rows : int
        Rows read.
    repeats_joined : int
        Rows that repeated another row exactly.
    mates_joined : int
        Friedel pairs given on both sides and averaged.
    beyond_resolution : int
        Coefficients outside the resolution limits (pairs count once where the density is real).
    zero_term : str
        ``measured`` (a row), ``given`` (as the mean) or ``absent``.
    """

    rows: int
    repeats_joined: int = 0
    mates_joined: int = 0
    beyond_resolution: int = 0
    zero_term: str = "absent"


@dataclass(frozen=True, slots=True, kw_only=True)
class PlaneErrors:
    """Errors of coefficients as covariances in the complex plane.

    What a combination of sets needs: the errors of a difference lie neither along its phasor nor across it.

    Attributes
    ----------
    phasor : complex128, shape (N,)
        Unit phasors, the first axis of each covariance. Those of coefficients that symmetry relates are
        related as the coefficients are; so they stay where a coefficient itself vanishes.
    along, across : float64, shape (N,)
        Standard deviations along the phasor and at a right angle to it, in the density's unit.
    mixed : float64, shape (N,)
        Covariance of the two, in the unit's square; the right angle is counted anticlockwise.
    contains, omits : tuple of str
        Which errors are in them, and which are not.
    """

    phasor: ComplexArray
    along: FloatArray
    across: FloatArray
    mixed: FloatArray
    contains: tuple[str, ...] = ()
    omits: tuple[str, ...] = ()

    def select(self, kept: BoolArray | IntArray) -> PlaneErrors:
        """The chosen rows."""
        return replace(
            self,
            phasor=self.phasor[kept],
            along=self.along[kept],
            across=self.across[kept],
            mixed=self.mixed[kept],
        )

    def scaled(self, factors: FloatArray) -> PlaneErrors:
        """Those of the coefficients multiplied by real factors, shape (N,)."""
        size = np.abs(factors)
        return replace(self, along=size * self.along, across=size * self.across, mixed=np.asarray(size**2 * self.mixed))

    def towards(self, phasor: ComplexArray) -> PlaneErrors:
        """The same covariances in the axes of other unit phasors, shape (N,)."""
        turn = self.phasor * phasor.conj()
        c, s = turn.real, turn.imag
        square_along, square_across = self.along**2, self.across**2
        along = (c**2 * square_along - 2 * c * s * self.mixed) + s**2 * square_across
        across = (s**2 * square_along + 2 * c * s * self.mixed) + c**2 * square_across
        return replace(
            self,
            phasor=phasor,
            # A covariance of rank 1 may leave less than zero at a right angle by rounding.
            along=np.sqrt(np.maximum(along, 0.0)),
            across=np.sqrt(np.maximum(across, 0.0)),
            mixed=np.asarray(c * s * (square_along - square_across) + (c**2 - s**2) * self.mixed),
        )


@dataclass(frozen=True, slots=True, kw_only=True)
class CoefficientSet:
    """Fourier coefficients of a density on a lattice.

    Attributes
    ----------
    lattice : Lattice
    indices : int64, shape (N, d)
        Distinct, in lexical order. For a real density one of each Friedel pair, the one
        whose last index other than zero is positive; the other follows by
        n_{-m} = conj(n_m).
    values : complex128, shape (N,)
        n_m in the density's unit; where the phase is unknown, |n_m|.
    phase_known : bool, shape (N,)
    sigma : float64, shape (N,), or None
        Standard uncertainty of |n_m|, in the density's unit.
    phase_sigma : float64, shape (N,), or None
        Standard uncertainty of the phase, radians.
    merit : float64, shape (N,), or None
        Figure of merit, the mean resultant length of the phase's distribution, 0…1.
    real : bool
        Whether the density is real.
    unit : str
        Unit of the density.
    tally : Tally
    history : tuple of str
        What was done to the measurements before they were coefficients, in words.
    group : Group or None
        Operations under which the density is invariant. Coefficients that it relates are one
        measurement and share one error; None: each (each Friedel pair of a real density) is a
        measurement of its own.
    scale_sigma : float
        Relative standard uncertainty of the scale common to all coefficients.
    plane_errors : PlaneErrors or None
        Covariances in the complex plane, where they are known better than ``sigma`` and
        ``phase_sigma`` can tell: those of a combination of sets. ``sigma``, ``phase_sigma`` and ``merit``
        then describe, and uncertainties are made from these.
    common_errors : complex128, shape (N, E), or None
        Displacements of all coefficients by one standard deviation of each of E further errors, independent
        of each other and of those of the measurements: those of the scales of combined sets.
    """

    lattice: Lattice
    indices: IntArray
    values: ComplexArray
    phase_known: BoolArray
    sigma: FloatArray | None
    phase_sigma: FloatArray | None
    merit: FloatArray | None
    real: bool
    unit: str
    tally: Tally
    history: tuple[str, ...] = ()
    group: Group | None = None
    scale_sigma: float = 0.0
    plane_errors: PlaneErrors | None = None
    common_errors: ComplexArray | None = None

    @property
    def count(self) -> int:
        """Coefficients held (pairs count once where the density is real)."""
        return int(self.values.size)

    @property
    def unphased(self) -> int:
        """How many of them have no phase."""
        return int(np.count_nonzero(~self.phase_known))

    def phased(self) -> CoefficientSet:
        """Those with a phase."""
        return self.select(self.phase_known)

    def select(self, kept: BoolArray) -> CoefficientSet:
        """The rows where `kept` (bool, shape (N,)) is true."""

        def part(column: FloatArray | None) -> FloatArray | None:
            return None if column is None else column[kept]

        return replace(
            self,
            indices=np.asfortranarray(self.indices[kept]),
            values=self.values[kept],
            phase_known=self.phase_known[kept],
            sigma=part(self.sigma),
            phase_sigma=part(self.phase_sigma),
            merit=part(self.merit),
            plane_errors=None if self.plane_errors is None else self.plane_errors.select(kept),
            common_errors=None if self.common_errors is None else self.common_errors[kept],
        )

    def within(self, *, d_min: float | None = None, d_max: float | None = None) -> CoefficientSet:
        """Those with d_min ≤ d ≤ d_max (Å); the zero term always stays.

        Raises
        ------
        InputError
            A limit is not a positive length, or d_min exceeds d_max.
        """
        low = 0.0 if d_min is None else as_positive(d_min, "d_min", "Å")
        high = np.inf if d_max is None else as_positive(d_max, "d_max", "Å")
        if low > high:
            raise InputError("d_min", f"= {low:g} Å exceeds d_max = {high:g} Å", "exchange the two")
        spacing = self.lattice.spacings(self.indices)
        # A limit typed with a few digits must not cut the very reflection it was read from.
        margin = 1e-9
        kept = (spacing >= low * (1 - margin)) & (spacing <= high * (1 + margin))
        kept |= ~self.indices.any(axis=1)
        if kept.all():
            return self
        chosen = self.select(kept)
        beyond = self.tally.beyond_resolution + int(np.count_nonzero(~kept))
        return replace(chosen, tally=replace(self.tally, beyond_resolution=beyond))

    def trusting(self, *, least_merit: float | None = None, largest_sigma_deg: float | None = None) -> CoefficientSet:
        """With phases that are less certain taken as unknown; the zero term keeps its own.

        Parameters
        ----------
        least_merit : float, optional
            Figure of merit from which on a phase is trusted.
        largest_sigma_deg : float, optional
            Standard uncertainty up to which it is, degrees.

        Raises
        ------
        InputError
            The set has no such column, or no phase would be left.
        """
        doubted = np.zeros(self.count, dtype=bool)
        words = []
        if least_merit is not None:
            if self.merit is None:
                raise InputError("least_merit", "is given, and the set has no figures of merit", "leave it out")
            doubted |= self.merit < least_merit
            words.append(f"a figure of merit below {least_merit:g}")
        if largest_sigma_deg is not None:
            if self.phase_sigma is None:
                raise InputError(
                    "largest_sigma_deg", "is given, and the set has no uncertainties of phases", "leave it out"
                )
            doubted |= self.phase_sigma > np.deg2rad(largest_sigma_deg)
            words.append(f"an uncertainty above {largest_sigma_deg:g}°")
        doubted &= self.phase_known & self.indices.any(axis=1)
        if not doubted.any():
            return self
        known = self.phase_known & ~doubted
        if not known[self.indices.any(axis=1)].any():
            raise InputError((), f"leaves no phase: all have {' or '.join(words)}", "trust more of them")
        count = int(np.count_nonzero(doubted))
        told = f"phases of {count} coefficients taken as unknown for {' or '.join(words)}"
        return replace(
            self,
            values=np.where(doubted, np.abs(self.values), self.values),
            phase_known=known,
            history=(*self.history, told),
        )

    def resolution(self) -> tuple[float, float] | None:
        """Smallest and largest spacing d held (Å), the zero term aside; None without any."""
        others = self.indices[self.indices.any(axis=1)]
        if not others.size:
            return None
        magnitudes = self.lattice.magnitudes(others)
        return float(2 * np.pi / magnitudes.max()), float(2 * np.pi / magnitudes.min())

    def series(self) -> Series:
        """The sum of the coefficients whose phase is known."""
        known = self if self.unphased == 0 else self.phased()
        return Series(self.lattice, known.indices, known.values, self.real)
