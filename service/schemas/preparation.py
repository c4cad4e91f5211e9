"""How a file of reflections becomes a coefficient set, in a request."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field, PlainValidator, WithJsonSchema
from pydantic_core import PydanticCustomError

from service.parts import Part
from service.schemas.base import Strict


def _part(value: Any) -> Part:  # noqa: ANN401
    if isinstance(value, Part):
        return value
    raise PydanticCustomError(
        "part", "is not a file", {"cure": "send the file as a part of a form (multipart/form-data)"}
    )


ReflectionsFile = Annotated[
    Part,
    PlainValidator(_part),
    WithJsonSchema({"type": "null", "description": "the file is sent as the part of this name of the form"}),
]


OmittedStatus = Literal[
    "below_cutoff",
    "absent_by_symmetry",
    "unreliable",
    "beyond_high_resolution",
    "beyond_low_resolution",
    "set_aside",
]


class SymmetryIn(Strict):
    """The symmetry, in one of five ways."""

    space_group: int | str | None = Field(None, description="number, Hermann–Mauguin or Hall symbol; a crystal's")
    hall: str | None = Field(None, max_length=60, description="Hall symbol; a crystal's")
    plane_group: int | str | None = Field(None, description="number or symbol; a planar lattice's")
    stack_group: Literal["1", "-1", "m"] | None = Field(None, description="a layer stack's")
    operations: list[Annotated[str, Field(max_length=100)]] | None = Field(
        None, min_length=1, max_length=192, description='generators or all operations, such as "-x+1/2,y,-z"'
    )
    columns: Literal["asymmetric", "full"] = Field(
        "asymmetric",
        description="asymmetric: one of each set of equivalents, to be expanded; full: all are there, and symmetry "
        "only relates their errors and the sites of extrema",
    )


class CorrectionIn(Strict):
    """One effect that recorded intensities are freed of; the members belong to the kinds as named."""

    kind: Literal["lorentz", "polarisation", "multiplicity", "film_absorption", "footprint"] = Field(
        description="multiplicity: of the file's column, else of the symmetry (powder)"
    )
    geometry: Literal["rotation", "powder", "film_whole_arc", "film_part_of_arc"] | None = Field(
        None, description="lorentz: how the sample is measured"
    )
    degree: float = Field(0.0, ge=-1, le=1, description="polarisation: of the source; 0 for a tube")
    monochromator_2theta_deg: float | None = Field(None, gt=0, lt=180, description="polarisation")
    perfect: bool = Field(False, description="polarisation: the monochromator diffracts as a perfect crystal")
    thickness_um: float | None = Field(None, gt=0, description="film_absorption: thickness, µm")
    mu_per_cm: float | None = Field(None, ge=0, description="film_absorption: linear coefficient, 1/cm")
    length_mm: float | None = Field(None, gt=0, description="footprint: sample along the beam, mm")
    width_mm: float | None = Field(None, gt=0, description="footprint: beam in the plane of diffraction, mm")
    profile: Literal["uniform", "gaussian"] = Field("uniform", description="footprint: of the beam")


class PlaceIn(Strict):
    """A place whose density is known."""

    position: Annotated[list[float], Field(min_length=1, max_length=3)] = Field(description="fractional")
    density: float
    sigma: float = Field(0.0, ge=0)


class ScaleIn(Strict):
    """What makes the scale absolute."""

    kind: Literal["none", "wilson", "factor", "zero_term", "two_densities", "reference"] = Field(
        "none",
        description="wilson: Wilson's plot against the content; factor: amplitudes times it; zero_term: the row of all "
        "indices zero against the content or the mean; two_densities: places whose densities are known; reference: "
        "the common reflections of a second file, sent as the part reference",
    )
    formula: str | None = Field(None, max_length=1000, description="composition of a formula unit, such as SiO2")
    units: float = Field(1.0, gt=0, description="formula units in the cell")
    probe: Literal["xray", "neutron"] = "xray"
    factor: float | None = Field(None, gt=0, description="absolute over given amplitude")
    mean: float | None = Field(None, description="zero_term: the mean density, in the unit of the density")
    places: list[PlaceIn] | None = Field(None, min_length=2, max_length=2, description="two_densities")
    displacement: bool = Field(False, description="reference: fit a Gaussian exp(−B s²) as well")
    robust: bool = Field(False, description="reference: bound the pull of outliers")


class AtomIn(Strict):
    """One atom of the asymmetric unit."""

    element: str = Field(max_length=10, description="atom or ion, such as O or Na1+")
    position: Annotated[list[float], Field(min_length=1, max_length=3)] = Field(description="fractional")
    occupancy: float = Field(1.0, ge=0, le=1)
    b_iso: float = Field(ge=0, description="isotropic displacement parameter B, Å²")


class ModelIn(Strict):
    """A trial model, whose phases are weighted by how well it agrees with the amplitudes."""

    atoms: list[AtomIn] = Field(min_length=1, max_length=20_000)
    map: Literal["observed", "calculated", "difference", "combination"] = Field(
        "observed", description="m|F_o|, D|F_c|, m|F_o| − D|F_c| or 2m|F_o| − D|F_c|"
    )


class PreparationIn(Strict):
    """How the file is read and what is done to its reflections, in this order. What is not asked for is not done."""

    block: str | None = Field(None, max_length=200, description="data block of a CIF that has several")
    observed: str | None = Field(
        None, max_length=40, description="quantity to take where the file has several, such as f_squared or f_calc"
    )
    phase: Literal["phase_deg", "phase_calc_deg", "hendrickson_lattman", "none"] | None = Field(
        None, description="phases to take of the file; left out, the ones it has"
    )
    model: ModelIn | None = Field(None, description="phases from a trial model instead of the file's")
    mapping: dict[str, str] | None = Field(
        None, max_length=100, description='column of the file: quantity, or "ignore"; "*" stands for all others'
    )
    missing_sigma: Literal["refuse", "omit_rows", "without"] = "refuse"
    omit: list[OmittedStatus] = Field(default=[], description="rows of these statuses are left out")
    wavelength: float | None = Field(None, gt=0, description="Å; by default the file's")
    corrections: list[CorrectionIn] = Field(default=[], max_length=5)
    amplitudes: Literal["bayesian", "root", "root_exclude"] = Field(
        "bayesian", description="intensities to amplitudes: French & Wilson's estimate, or square roots"
    )
    reject_outliers: bool = False
    scale: ScaleIn = ScaleIn()
