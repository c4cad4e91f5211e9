"""Coefficients of the maps that a model and measured amplitudes give.

observed     |F_o| exp(iφ_c), its figure of merit beside it
calculated   D|F_c| exp(iφ_c)
difference   (m|F_o| − D|F_c|) exp(iφ_c): what the model lacks, at half its height where phases are
             acentric, and what it has too much
combination  (2m|F_o| − D|F_c|) exp(iφ_c): the structure with missing atoms at full height; for a
             centric reflection m|F_o| exp(iφ_c), whose phase is right or wrong but never in between

Main, Acta Cryst. A35 (1979) 779; Read, Acta Cryst. A42 (1986) 140.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Literal, get_args

import numpy as np

from engine.arrays import FloatArray, as_choice, refuse_rows
from engine.assembly import Columns, assemble
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.phases.border import amplitudes
from engine.phases.weights import ModelWeights
from engine.reflections import Reflections

MapKind = Literal["observed", "calculated", "difference", "combination"]


def map_reflections(reflections: Reflections, weights: ModelWeights, kind: MapKind) -> Reflections:
    """Amplitudes and phases of one kind of map, as Reflections on the scale of those measured.

    Parameters
    ----------
    reflections : Reflections
        Amplitudes, those that the weights were made from.
    weights : ModelWeights
    kind : {"observed", "calculated", "difference", "combination"}
        See the module.

    Returns
    -------
    Reflections
        A negative coefficient has its phase turned by π. σ is that of |F_o| times its factor, m
        taken as exact; None for the calculated map. ``merit`` is that of the observed map and
        None for the others, whose coefficients are weighted already.

    Raises
    ------
    InputError
        Intensities, weights of other reflections, an unknown kind.
    """
    as_choice(kind, get_args(MapKind), "kind")
    observed = amplitudes(reflections)
    if weights.merit.size != observed.size:
        raise InputError(
            "weights", f"are {weights.merit.size} for {observed.size} reflections", "make them from these reflections"
        )
    factor: FloatArray
    if kind == "observed":
        return replace(reflections, phase=weights.phase, phase_sigma=None, merit=weights.merit)
    if kind == "calculated":
        factor, taken = np.zeros(observed.size), -weights.scaled_model
    elif kind == "difference":
        factor, taken = weights.merit, weights.scaled_model
    else:
        factor = np.where(weights.centric, 1, 2) * weights.merit
        taken = np.where(weights.centric, 0.0, weights.scaled_model)
    signed = factor * observed - taken
    measured = kind != "calculated" and reflections.sigma is not None
    return replace(
        reflections,
        observed=np.abs(signed),
        sigma=factor * reflections.sigma if measured and reflections.sigma is not None else None,
        phase=np.where(signed < 0, weights.phase + np.pi, weights.phase),
        phase_sigma=None,
        merit=None,
    )


def coefficient_set(
    reflections: Reflections,
    *,
    unit: str = "arbitrary",
    mean: float | complex | None = None,
    density: Literal["real", "complex"] = "real",
) -> CoefficientSet:
    """The coefficients of the density that phased amplitudes belong to.

    Parameters
    ----------
    reflections : Reflections
        Amplitudes with phases (NaN where unknown). All that the symmetry makes of each must be
        present, Friedel mates of a real density aside.
    unit : str
        Of the density.
    mean : float or complex, optional
        F(000), where no reflection carries it.
    density : {"real", "complex"}
        See `engine.assembly.assemble`.

    Raises
    ------
    InputError
        Intensities, no phases, a phase without its figure of merit or σ in a column that has
        others, and all that `engine.assembly.assemble` refuses.
    """
    observed = amplitudes(reflections)
    phase = reflections.phase
    if phase is None:
        raise InputError("phase", "is absent", "give the reflections phases first")
    phased = ~np.isnan(phase)

    def known(column: FloatArray | None, name: str) -> FloatArray | None:
        if column is None:
            return None
        refuse_rows(phased & np.isnan(column), name, "is unknown where the phase is known", "give it, or no column")
        # Without its phase a coefficient is not summed, and nothing is said of a phase there.
        return np.where(phased, column, 0.0)

    phase_sigma = known(reflections.phase_sigma, "phase_sigma")
    return assemble(
        reflections.lattice,
        Columns(
            indices=tuple(reflections.indices.T),
            amplitude=observed,
            phase_deg=np.rad2deg(phase),
            sigma=reflections.sigma,
            phase_sigma_deg=None if phase_sigma is None else np.rad2deg(phase_sigma),
            merit=known(reflections.merit, "merit"),
        ),
        values="structure_factor",
        density=density,
        mean=mean,
        unit=unit,
    )
