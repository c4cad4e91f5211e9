"""From a laboratory's reflections to a coefficient set, every step stated and counted."""

from engine.preparation.chain import Prepared, Recipe, prepare_reflections
from engine.preparation.phasing import TrialModel, with_distributions
from engine.preparation.scales import KnownDensities, ReferenceSet
from engine.preparation.summary import Shell, Summary, summarize_set

__all__ = [
    "KnownDensities",
    "Prepared",
    "Recipe",
    "ReferenceSet",
    "Shell",
    "Summary",
    "TrialModel",
    "prepare_reflections",
    "summarize_set",
    "with_distributions",
]
