"""Trial structures of a layer stack: amplitudes in closed form, refinement, and the sets that they give phases to.

parts.py   planes and slabs
stack.py   parts in one period, and F_l
search.py  ends of the least-squares search from several starts
refine.py  least squares against measured amplitudes
sets.py    observed amplitudes with model phases; what the model lacks
"""

from engine.films.trial.parts import Part, Plane, Slab
from engine.films.trial.refine import Refined, refine
from engine.films.trial.search import Minimum
from engine.films.trial.sets import calculated_set, observed_set, residual_set, sign_merit
from engine.films.trial.stack import Stack, calculated

__all__ = [
    "Minimum",
    "Part",
    "Plane",
    "Refined",
    "Slab",
    "Stack",
    "calculated",
    "calculated_set",
    "observed_set",
    "refine",
    "residual_set",
    "sign_merit",
]
