"""Signs of the orders of a mirror-symmetric stack, ranked by what is known of its density."""

from engine.films.signs.criteria import (
    Criteria,
    Flat,
    KnownDensity,
    KnownTotal,
    LeastStructure,
    NonNegative,
)
from engine.films.signs.ranking import DECISIVE, RankedSigns, rank_signs

__all__ = [
    "DECISIVE",
    "Criteria",
    "Flat",
    "KnownDensity",
    "KnownTotal",
    "LeastStructure",
    "NonNegative",
    "RankedSigns",
    "rank_signs",
]
