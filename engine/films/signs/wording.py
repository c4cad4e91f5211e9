"""What a ranking of sign sets says in words."""

from __future__ import annotations

import math
from dataclasses import dataclass

from engine.films.signs.collecting import Found

CAUTION = (
    "Scores are as good as the criteria, the scale and the mean density are right; relative support is not the "
    "probability that a sign set is true."
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Fit:
    """What the parts of the best set come to, least structure aside, and what right signs would come to."""

    misfit: float
    expected: float

    @property
    def contradicts(self) -> bool:
        """Whether the misfit is beyond its expected value by four of its standard deviations, and more."""
        return self.misfit > self.expected + 4 * math.sqrt(2 * self.expected) + 9


@dataclass(frozen=True, slots=True, kw_only=True)
class Verdict:
    """Whether one sign set is preferred clearly enough.

    Attributes
    ----------
    margin : float
        Of the best set to the next; NaN where there is no other.
    decisive : float
    in_doubt : tuple of int
    others : int
        Free signs that are not in doubt.
    exhaustive : bool
    fit : Fit
    """

    margin: float
    decisive: float
    in_doubt: tuple[int, ...]
    others: int
    exhaustive: bool
    fit: Fit

    @property
    def decided(self) -> bool:
        """A clear margin, or no other sign set, and a best set that the criteria admit."""
        return not self.margin < self.decisive and not self.fit.contradicts

    def words(self) -> str:
        """The verdict in full."""
        among = "" if self.exhaustive else " among those looked at, which are not all"
        if math.isnan(self.margin):
            said = "There is only one sign set: the signs are given, or are a matter of the origin."
        elif self.margin >= self.decisive:
            said = (
                f"The criteria prefer one sign set{among}: the next scores {self.margin:.1f} more, "
                f"{self.decisive:g} being enough."
            )
        else:
            rest = "No sign is the same in all sets within that margin."
            if self.others:
                rest = f"The other {self.others} are the same in all sets within that margin."
            noun = "order" if len(self.in_doubt) == 1 else "orders"
            said = (
                f"The data do not decide: the next sign set{among} scores only {self.margin:.1f} more, less than "
                f"{self.decisive:g}. In doubt is the sign of {noun} {', '.join(map(str, self.in_doubt))}. {rest}"
            )
        if self.fit.contradicts:
            said += (
                f" But even the best set contradicts the criteria: they come to {self.fit.misfit:.0f} where right "
                f"signs would come to about {self.fit.expected:.0f} at the most. Scale, mean density, positions or the "
                "mirror symmetry may be wrong; nothing is decided."
            )
        return said


def searched(found: Found, free: int, width: int) -> tuple[str, ...]:
    """How the sign sets were looked at."""
    if found.exhaustive:
        return (f"All {found.looked_at:,d} sign sets of {free} free signs were looked at.",)
    return (
        f"Not exhaustive: of 2^{free} sign sets a beam search, {width:,d} wide, from the strongest order to the "
        f"weakest looked at {found.looked_at:,d}, whole or in part; a better one may have been missed, and support is "
        "relative to those found.",
    )
