"""Phases for a prepared set: from Hendrickson–Lattman coefficients, or from a trial model."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from engine.arrays import FloatArray
from engine.phases import (
    Agreement,
    Model,
    compare,
    estimated_weights,
    hendrickson_lattman,
    map_reflections,
    structure_factors,
    summarize,
)
from engine.phases.maps import MapKind
from engine.reflections import Reflections
from engine.symmetry import Classification, Group, classify

REFLECTIONS_PER_SHELL = 200
MOST_SHELLS = 10


@dataclass(frozen=True, slots=True, kw_only=True)
class TrialModel:
    """Atoms of the asymmetric unit, and the map that is wanted of them.

    Attributes
    ----------
    elements : tuple of str
        Atoms or ions, such as ``O`` or ``Na1+``.
    positions : float64, shape (M, d)
        Fractional.
    occupancy : float64, shape (M,)
    b_iso : float64, shape (M,)
        Å².
    kind : {"observed", "calculated", "difference", "combination"}
        m|F_o|, D|F_c|, m|F_o| − D|F_c|, 2m|F_o| − D|F_c|, with the phases of the model.
    """

    elements: tuple[str, ...]
    positions: FloatArray
    occupancy: FloatArray
    b_iso: FloatArray
    kind: MapKind = "observed"


def with_distributions(reflections: Reflections, coefficients: FloatArray, group: Group) -> Reflections:
    """Phases and figures of merit from Hendrickson–Lattman coefficients, shape (N, 4).

    Reflections with an unknown coefficient stay without phase.

    Raises
    ------
    InputError
        As `engine.phases.hendrickson_lattman` and `summarize`.
    """
    known = np.asarray(~np.isnan(coefficients).any(axis=1))
    restricted = classify(reflections.indices, group).restricted_phase
    made = summarize(hendrickson_lattman(np.where(known[:, None], coefficients, 0.0), restricted)).applied(reflections)

    def part(column: FloatArray | None) -> FloatArray | None:
        return None if column is None else np.where(known, column, np.nan)

    return replace(made, phase=part(made.phase), phase_sigma=part(made.phase_sigma), merit=part(made.merit))


def with_model(
    unique: Reflections, kinds: Classification, group: Group, trial: TrialModel
) -> tuple[Reflections, Agreement, str]:
    """The map's reflections, how the model agrees with the amplitudes, and both in words.

    Raises
    ------
    InputError
        As `engine.phases.Model.from_atoms`, `compare` and `estimated_weights`.
    """
    model = Model.from_atoms(
        unique.lattice,
        trial.elements,
        trial.positions,
        occupancy=trial.occupancy,
        b_iso=trial.b_iso,
        rotations=group.rotations,
        translations=group.translations,
    )
    calculated = structure_factors(model, unique.indices)
    shells = max(1, min(MOST_SHELLS, unique.count // REFLECTIONS_PER_SHELL))
    agreement = compare(unique, calculated, shell_count=shells)
    weights = estimated_weights(unique, calculated, centric=kinds.centric, epsilon=kinds.epsilon, shell_count=shells)
    words = (
        f"phases of a trial model of {len(trial.elements)} atoms, R = {agreement.r:.3f}, mean figure of merit "
        f"{weights.merit.mean():.2f}; coefficients of its {trial.kind} map"
    )
    return map_reflections(unique, weights, trial.kind), agreement, words
