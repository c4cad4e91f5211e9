"""Several coefficient sets on one cell: differences, averages, any linear combination, and series of sets.

matching.py  which rows of two sets are the same term, and what symmetry they share
scales.py    the scale, and the relative B, that bring one set's amplitudes to another's
gathering.py all terms of several sets side by side
linear.py    Σ c_j n_j of coefficients with its errors in the complex plane
build.py     from terms and weights to a combined set and its account
combine.py   difference and combination of sets
average.py   weighted means of sets and how well they agree
modes.py     what the uncertainty of a scale does to a density
series.py    sets along a variable (time, temperature, dose) on one scale
stack.py     their fields on shared samples
"""

from engine.combination.average import Averaged, average
from engine.combination.build import Combined
from engine.combination.combine import combination, difference
from engine.combination.matching import CELL_TOLERANCE, Matched, common_group, match
from engine.combination.modes import scale_sigma_of, with_scale_errors
from engine.combination.scales import AS_GIVEN, Scale, ScaleChoice, find_scale, fitted_scale, given_scale
from engine.combination.series import Aligned, Variable, aligned
from engine.combination.stack import StackedField, evaluate_stack

__all__ = [
    "AS_GIVEN",
    "CELL_TOLERANCE",
    "Aligned",
    "Averaged",
    "Combined",
    "Matched",
    "Scale",
    "ScaleChoice",
    "StackedField",
    "Variable",
    "aligned",
    "average",
    "combination",
    "common_group",
    "difference",
    "evaluate_stack",
    "find_scale",
    "fitted_scale",
    "given_scale",
    "match",
    "scale_sigma_of",
    "with_scale_errors",
]
