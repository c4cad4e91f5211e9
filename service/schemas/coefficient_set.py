"""A coefficient set in a request."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from service.schemas.base import Strict
from service.schemas.columns import IndexColumn, NumberColumn, PhaseColumn
from service.schemas.preparation import PreparationIn, ReflectionsFile, SymmetryIn

INDEX_NAMES = ("h", "k", "l")
COLUMN_NAMES = (*INDEX_NAMES, "amplitude", "phase_deg", "real", "imag", "sigma", "phase_sigma_deg", "merit")
"""Columns of a set, in JSON, in a table and in an archive alike."""


class Cell(Strict):
    """The lattice, in one of four ways: six parameters of a crystal; a, b and gamma of a planar lattice; the
    direct vectors as rows; the period of a layer stack. Lengths in Å, angles in degrees."""

    a: float | None = Field(None, gt=0, description="Å")
    b: float | None = Field(None, gt=0, description="Å")
    c: float | None = Field(None, gt=0, description="Å")
    alpha: float | None = Field(None, gt=0, lt=180, description="degrees, between b and c")
    beta: float | None = Field(None, gt=0, lt=180, description="degrees, between a and c")
    gamma: float | None = Field(None, gt=0, lt=180, description="degrees, between a and b")
    vectors: list[Annotated[list[float], Field(min_length=1, max_length=3)]] | None = Field(
        None, min_length=1, max_length=3, description="direct vectors as rows of a 1×1, 2×2 or 3×3 matrix, Å"
    )
    period: float | None = Field(None, gt=0, description="period of a layer stack, Å")


class ReflectionSetIn(Strict):
    """Where a set lies, what symmetry it has, and how a file of reflections becomes it."""

    cell: Cell | None = Field(None, description="the lattice; left out, that of the file of reflections")
    symmetry: SymmetryIn | None = Field(
        None, description="expands an asymmetric set; left out, that of the file of reflections, or none"
    )
    preparation: PreparationIn | None = Field(None, description="how the file of reflections is read and treated")
    reflections: ReflectionsFile | None = None
    reference: ReflectionsFile | None = None
    density: Literal["real", "complex"] = Field(
        "real", description="a real density obeys Friedel's law, and one of each pair suffices"
    )
    unit: str = Field("arbitrary", min_length=1, max_length=40, description="unit of the density, for the answer")


class CoefficientSetIn(ReflectionSetIn):
    """Fourier coefficients of a density, as columns of equal length.

    A crystal has the index columns h, k, l; a planar lattice h, k; a layer stack l. Strengths are
    ``amplitude`` with ``phase_deg`` (null: unknown), or ``real`` with ``imag``."""

    values: Literal["structure_factor", "density_coefficient"] = Field(
        description="structure_factor: F(hkl) = ∫ρ exp(+2πi h·x) dV over one cell, so ρ(r) = (1/V) Σ F exp(−2πi h·x); "
        "density_coefficient: n of n(r) = Σ n exp(+2πi h·x). Never guessed."
    )
    h: IndexColumn | None = None
    k: IndexColumn | None = None
    l: IndexColumn | None = None
    amplitude: NumberColumn | None = Field(None, description="|F| or |n|")
    phase_deg: PhaseColumn | None = Field(None, description="degrees; null where unknown")
    real: NumberColumn | None = None
    imag: NumberColumn | None = None
    sigma: NumberColumn | None = Field(None, description="standard uncertainty of the amplitude")
    phase_sigma_deg: NumberColumn | None = Field(None, description="standard uncertainty of the phase, degrees")
    merit: NumberColumn | None = Field(None, description="figure of merit of the phase, 0 to 1")
    mean: float | None = Field(None, description="the zero term, F(000) or n_0 by `values`, where no row carries it")
    mean_imag: float | None = Field(None, description="its imaginary part, for a complex density")
    scale_sigma: float = Field(
        0.0, ge=0, le=1, description="relative standard uncertainty of the scale that all columns share"
    )
