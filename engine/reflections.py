"""Reflections: measured strengths before they are a density's coefficients.

What readers make and what corrections, merging, scaling and phasing turn into other Reflections;
``engine.assembly`` makes the CoefficientSet of the last of them.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from engine.arrays import BoolArray, FloatArray, IntArray
from engine.lattice import Lattice

Quantity = Literal["intensity", "amplitude"]
"""``intensity`` is |F|² up to a scale and may be negative by noise; ``amplitude`` is |F|."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Reflections:
    """Strengths of reflections, one row each, in the trade's convention F(h) = ∫ρ exp(+2πi h·x) dV.

    Attributes
    ----------
    lattice : Lattice
    indices : int64, shape (N, d)
        Not necessarily distinct: equivalents and repeated measurements stand side by side.
    quantity : {"intensity", "amplitude"}
        What ``observed`` is.
    observed : float64, shape (N,)
        Finite.
    sigma : float64, shape (N,), or None
        Standard uncertainty of ``observed``.
    phase : float64, shape (N,), or None
        Radians; NaN where unknown.
    phase_sigma : float64, shape (N,), or None
        Radians; NaN where unknown.
    merit : float64, shape (N,), or None
        Figure of merit 0…1; NaN where unknown.
    row : int64, shape (N,)
        Row of the source each came from, counted from 0.
    scale : str
        ``absolute`` (electrons, or fm for neutrons; their squares for intensities) or
        ``arbitrary``.
    """

    lattice: Lattice
    indices: IntArray
    quantity: Quantity
    observed: FloatArray
    sigma: FloatArray | None
    phase: FloatArray | None
    phase_sigma: FloatArray | None
    merit: FloatArray | None
    row: IntArray
    scale: Literal["absolute", "arbitrary"]

    @property
    def count(self) -> int:
        """Rows."""
        return int(self.observed.size)

    def select(self, kept: BoolArray | IntArray) -> Reflections:
        """The chosen rows, in the order chosen."""

        def part(column: FloatArray | None) -> FloatArray | None:
            return None if column is None else column[kept]

        return replace(
            self,
            indices=np.asfortranarray(self.indices[kept]),
            observed=self.observed[kept],
            sigma=part(self.sigma),
            phase=part(self.phase),
            phase_sigma=part(self.phase_sigma),
            merit=part(self.merit),
            row=self.row[kept],
        )

    def scaled(self, factors: FloatArray | float) -> Reflections:
        """``observed`` and its σ multiplied by positive factors (scalar or shape (N,))."""
        return replace(
            self,
            observed=self.observed * factors,
            sigma=None if self.sigma is None else self.sigma * factors,
        )
