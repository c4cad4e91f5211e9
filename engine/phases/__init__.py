"""Phase information, and the phases, weights and maps that a trial model gives.

atoms = Model.from_atoms(lattice, ["Na1+", "Cl1-"], positions, b_iso=[1.0, 1.0])
calculated = structure_factors(atoms, reflections.indices)
weights = estimated_weights(reflections, calculated, centric=centric, epsilon=epsilon, shell_count=10)
coefficients = coefficient_set(map_reflections(reflections, weights, "difference"))
"""

from engine.phases.agreement import Agreement, Shells, compare, shells
from engine.phases.concentration import (
    SigmaMeaning,
    concentration_of_merit,
    concentration_of_sigma,
    merit_of_concentration,
    merit_of_sigma,
    sigma_of_merit,
)
from engine.phases.displacements import beta_from_b, beta_from_u, u_from_beta
from engine.phases.distributions import PhaseDistribution, combine, hendrickson_lattman, probabilities, von_mises
from engine.phases.maps import MapKind, coefficient_set, map_reflections
from engine.phases.model import FormFactor, Model, structure_factors
from engine.phases.summary import PhaseSummary, summarize, summarize_table
from engine.phases.weights import ModelWeights, estimated_weights, sim_weights

__all__ = [
    "Agreement",
    "FormFactor",
    "MapKind",
    "Model",
    "ModelWeights",
    "PhaseDistribution",
    "PhaseSummary",
    "Shells",
    "SigmaMeaning",
    "beta_from_b",
    "beta_from_u",
    "coefficient_set",
    "combine",
    "compare",
    "concentration_of_merit",
    "concentration_of_sigma",
    "estimated_weights",
    "hendrickson_lattman",
    "map_reflections",
    "merit_of_concentration",
    "merit_of_sigma",
    "probabilities",
    "shells",
    "sigma_of_merit",
    "sim_weights",
    "structure_factors",
    "summarize",
    "summarize_table",
    "u_from_beta",
    "von_mises",
]
