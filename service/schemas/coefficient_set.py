"""A coefficient set in a request."""

from __future__ import annotations

from typing import Annotated, Any, Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, PrivateAttr

from engine.coefficients import CoefficientSet
from service.schemas.base import PRINTABLE, Strict
from service.schemas.columns import IndexColumn, NumberColumn, PhaseColumn
from service.schemas.preparation import PreparationIn, ReflectionsFile, SymmetryIn

INDEX_NAMES = ("h", "k", "l")
COLUMN_NAMES = (*INDEX_NAMES, "amplitude", "phase_deg", "real", "imag", "sigma", "phase_sigma_deg", "merit")
"""Columns of a set, in JSON, in a table and in an archive alike."""


STORED_ID = {"type": "string", "pattern": "^[0-9a-f]{64}$", "description": "id of a set of the store"}


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
    unit: str = Field(
        "arbitrary", min_length=1, max_length=40, pattern=PRINTABLE, description="unit of the density, for the answer"
    )


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


def or_stored(schema: dict[str, Any]) -> None:
    """A member's schema, with what stands for a set of the store beside the set itself."""
    named = {
        "type": "object",
        "description": "a set of the store",
        "properties": {"set_id": STORED_ID},
        "required": ["set_id"],
        "additionalProperties": False,
    }
    choices = schema.pop("anyOf", None) or [{"$ref": schema.pop("$ref")}]
    schema["anyOf"] = [*choices, named]


class StoredSetIn(CoefficientSetIn):
    """A set of the store, which stays the same, so that what is made of it can be kept with it."""

    _made: dict[str, CoefficientSet] = PrivateAttr(default_factory=dict)

    def kept(self, missing_phase: str) -> CoefficientSet | None:
        """What was made of the set before, under the same rule for phases that are missing."""
        return self._made.get(missing_phase)

    def keep(self, missing_phase: str, made: CoefficientSet) -> None:
        """Keep what was made of the set."""
        self._made[missing_phase] = made

    @property
    def bytes_held(self) -> int:
        """Bytes of the columns, and of what was made of them."""
        own = 0
        for name in COLUMN_NAMES:
            column: NDArray[np.float64] | None = getattr(self, name)
            own += 0 if column is None else column.nbytes
        for part in (self.reflections, self.reference):
            own += 0 if part is None else len(part.data)
        return own + sum(_size(made) for made in self._made.values())


def _size(made: CoefficientSet) -> int:
    held = (made.indices, made.values, made.phase_known, made.sigma, made.phase_sigma, made.merit)
    return sum(array.nbytes for array in held if array is not None)
