"""Amplitudes of the orders of a film, and the coefficient set that they and phases make."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import FloatArray, IntArray, as_positive, as_vector
from engine.assembly import Columns, assemble
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.lattice import Lattice


@dataclass(frozen=True, slots=True, kw_only=True)
class FilmOrders:
    """|F_l| of the 00l series of a layer stack, F_l = ∫ n(z) exp(2πi l z/d) dz over one period d.

    Attributes
    ----------
    period : float
        d, Å.
    period_sigma : float
        Å; 0 where it is not known.
    order : int64, shape (n,)
        l, positive, ascending, distinct.
    amplitude : float64, shape (n,)
        |F_l| ≥ 0; density times Å where the scale is absolute.
    sigma : float64, shape (n,), or None
        Standard uncertainty of |F_l|, the scale's aside.
    scale : {"arbitrary", "absolute"}
    scale_sigma : float
        Relative standard uncertainty of the scale.
    unit : str
        Of the density that absolute amplitudes belong to.
    applied : tuple of str
        What was done to the measurements, in words.
    """

    period: float
    period_sigma: float
    order: IntArray
    amplitude: FloatArray
    sigma: FloatArray | None
    scale: Literal["arbitrary", "absolute"] = "arbitrary"
    scale_sigma: float = 0.0
    unit: str = "arbitrary"
    applied: tuple[str, ...] = ()

    @classmethod
    def of(
        cls,
        period: float,
        order: ArrayLike,
        amplitude: ArrayLike,
        sigma: ArrayLike | None = None,
        *,
        period_sigma: float = 0.0,
        scale: Literal["arbitrary", "absolute"] = "arbitrary",
        unit: str = "arbitrary",
    ) -> FilmOrders:
        """Checked, and sorted by order.

        Raises
        ------
        InputError
            Orders that are not positive whole numbers or come twice, amplitudes or σ's that are negative
            or not finite, columns of unequal length, a period that is not a length.
        """
        length = as_positive(period, "period", "Å")
        given = np.asarray(order, dtype=np.float64)
        if given.ndim != 1 or not given.size:
            raise InputError("order", "is not a list of orders", "give one order a row")
        if (given != np.rint(given)).any() or (given < 1).any():
            raise InputError("order", "holds what is not a positive whole number", "give the orders l of 00l")
        values = as_vector(amplitude, given.size, "amplitude")
        if (values < 0).any():
            raise InputError("amplitude", "is negative", "give |F|; signs are found or given apart")
        errors = None if sigma is None else as_vector(sigma, given.size, "sigma")
        if errors is not None and (errors < 0).any():
            raise InputError("sigma", "is negative", "give standard uncertainties of 0 or more")
        place = np.argsort(given, kind="stable")
        sorted_orders = given[place].astype(np.int64)
        if (np.diff(sorted_orders) == 0).any():
            raise InputError("order", "comes twice", "merge repeated orders first")
        return cls(
            period=length,
            period_sigma=float(period_sigma),
            order=sorted_orders,
            amplitude=values[place],
            sigma=None if errors is None else errors[place],
            scale=scale,
            unit=unit,
        )

    @property
    def count(self) -> int:
        """Orders."""
        return int(self.order.size)

    def scaled(self, factor: float, *, scale_sigma: float = 0.0, unit: str, words: str) -> FilmOrders:
        """Amplitudes times a factor that makes them absolute."""
        return replace(
            self,
            amplitude=self.amplitude * factor,
            sigma=None if self.sigma is None else self.sigma * factor,
            scale="absolute",
            scale_sigma=scale_sigma,
            unit=unit,
            applied=(*self.applied, words),
        )

    def coefficients(
        self, phase_deg: ArrayLike, mean: float | None = None, *, merit: ArrayLike | None = None
    ) -> CoefficientSet:
        """The coefficient set with given phases (degrees, NaN where unknown; 0 and 180 of a symmetric stack).

        Parameters
        ----------
        mean : float, optional
            Mean density, in the density's unit.
        merit : float, shape (n,), optional
            Figures of merit of the phases, 0…1.

        Raises
        ------
        InputError
            As `engine.assembly.assemble`.
        """
        lattice = Lattice.from_period(self.period)
        made = assemble(
            lattice,
            Columns(
                indices=(self.order,),
                amplitude=self.amplitude,
                phase_deg=np.asarray(phase_deg, dtype=np.float64),
                sigma=self.sigma,
                merit=merit,
            ),
            values="structure_factor",
            mean=None if mean is None else mean * lattice.volume,
            unit=self.unit,
        )
        return replace(made, history=self.applied, scale_sigma=self.scale_sigma)
