"""Signs judged on the absolute scale, where each sign set has a scale of its own.

What is known of a film (two densities, a density and the mean, a total) fixes scale and mean only once the signs
are chosen. So the sets that need no scale to be judged best are each put on their own scale and judged again, by
all criteria, non-negativity among them; facts beyond the two that fix the scale add their χ².
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from engine.arrays import FloatArray, IntArray
from engine.errors import InputError
from engine.films.facts import Fact, KnownAmplitude, KnownDensity, KnownFactor, KnownTotal, check
from engine.films.orders import FilmOrders
from engine.films.scale import scale_by_facts
from engine.films.signs import DECISIVE, Criteria, LeastStructure, RankedSigns, rank_signs
from engine.films.signs.ranking import PROFILES
from engine.synthesis import Progress

CANDIDATES = 256
"""Sign sets that are put on their own scale."""


@dataclass(frozen=True, slots=True)
class _Judged:
    """A sign set on its own scale."""

    signs: IntArray
    score: float
    parts: FloatArray
    profile: FloatArray
    admitted: bool
    """Whether the criteria do not contradict it."""


def rank_scaled(
    raw: FilmOrders,
    criteria: Criteria,
    facts: Sequence[Fact],
    unit: str,
    *,
    fixed: Mapping[int, int] | None = None,
    best: int = 10,
    decisive: float = DECISIVE,
    threads: int = 1,
    max_bytes: int | None = None,
    progress: Progress | None = None,
) -> RankedSigns:
    """Rank sign sets, each on the scale that the facts give it.

    Parameters
    ----------
    raw : FilmOrders
        On any scale.
    criteria : Criteria
        On the absolute scale; its mean is that of the facts where they give one.
    facts : sequence of Fact

    Other parameters, what is raised and what comes back: as `engine.films.signs.rank_signs`; the scores are those on
    the absolute scale.

    Raises
    ------
    InputError
        No sign set can be put on a scale; facts that do not fix one.
    """
    check(facts, raw)
    free = all(isinstance(fact, KnownFactor | KnownAmplitude) or not _needs_phases(fact) for fact in facts)
    if free and any(isinstance(fact, KnownFactor | KnownAmplitude) for fact in facts):
        scale = scale_by_facts(raw, np.zeros(raw.count), facts, unit=unit)
        asked = criteria
        if scale.mean is not None:
            asked = replace(criteria, mean=scale.mean, mean_sigma=scale.mean_sigma or 0.0)
        return rank_signs(
            scale.apply(raw),
            asked,
            fixed=fixed,
            best=best,
            decisive=decisive,
            threads=threads,
            max_bytes=max_bytes,
            progress=progress,
        )
    # The unevenness allowed is a density, which says nothing of amplitudes on a scale of their own.
    flat = criteria.flat if raw.scale == "absolute" else tuple(replace(one, sigma=0.0) for one in criteria.flat)
    first = rank_signs(
        raw,
        Criteria(flat=flat, least_structure=criteria.least_structure or LeastStructure()),
        fixed=fixed,
        best=CANDIDATES,
        decisive=decisive,
        threads=threads,
        max_bytes=max_bytes,
        progress=progress,
    )
    # Known signs of odd orders leave no equivalent, those of even ones are the same in it.
    sets = first.signs if first.equivalent is None else np.concatenate([first.signs, first.equivalent])
    judged, refused = _judge(raw, criteria, facts, unit, np.unique(sets, axis=0), decisive)
    if not judged:
        raise InputError(
            "facts",
            f"put none of {len(sets)} sign sets on a scale: they {refused}",
            "check the facts, or give the signs",
        )
    judged.sort(key=lambda one: one.score)
    return _combined(first, judged, criteria, fixed, best, decisive, len(sets), unit)


def _needs_phases(fact: Fact) -> bool:
    return isinstance(fact, KnownDensity | KnownTotal)


def _judge(
    raw: FilmOrders, criteria: Criteria, facts: Sequence[Fact], unit: str, sets: IntArray, decisive: float
) -> tuple[list[_Judged], str]:
    """Each set's score on its own scale, and why the last one refused could not be scaled."""
    made: list[_Judged] = []
    refused = ""
    for signs in sets:
        phases = np.where(signs < 0, 180.0, 0.0)
        try:
            scale = scale_by_facts(raw, phases, facts, unit=unit)
        except InputError as fault:
            refused = fault.reason
            continue
        known = {int(order): int(sign) for order, sign in zip(raw.order, signs, strict=True) if sign}
        asked = replace(criteria, mean=scale.mean, mean_sigma=scale.mean_sigma or 0.0)
        one = rank_signs(scale.apply(raw), asked, fixed=known, best=1, decisive=decisive)
        parts = np.append(one.parts[0], scale.chi_squared)
        made.append(_Judged(signs, float(parts.sum()), parts, one.profiles[0], one.decided))
    return made, refused


def _combined(
    first: RankedSigns,
    judged: list[_Judged],
    criteria: Criteria,
    fixed: Mapping[int, int] | None,
    best: int,
    decisive: float,
    looked_at: int,
    unit: str,
) -> RankedSigns:
    scores = np.array([one.score for one in judged])
    signs = np.stack([one.signs for one in judged])
    kept = min(best, len(judged))
    gaps = np.append(np.diff(scores), np.nan)
    weight = np.exp(-0.5 * (scores - scores[0]))
    other = signs * signs[0] < 0
    above = np.where(other, (scores - scores[0])[:, None], np.inf).min(axis=0)
    reach = float(scores[-1] - scores[0])
    meant = (signs[0] != 0) & ~np.isin(first.order, list(fixed or {}))
    order_margin = np.where(meant, np.minimum(above, reach), np.nan)
    order_support = np.where(meant, 1 - (weight[:, None] * other).sum(axis=0) / weight.sum(), np.nan)
    close = scores - scores[0] < decisive
    doubtful = first.order[other[close].any(axis=0)]
    clear = bool(len(judged) > 1 and gaps[0] >= decisive)
    if clear:
        verdict = f"The criteria decide: the next sign set is worse by {gaps[0]:.3g}, more than {decisive:g}."
    elif len(judged) == 1:
        verdict = "One sign set alone could be put on a scale by the facts; nothing else was compared."
    else:
        named = ", ".join(map(str, doubtful.tolist())) or "none"
        verdict = (
            f"The criteria do not decide: the next sign set is worse by only {gaps[0]:.3g}, less than {decisive:g}. "
            f"Orders in doubt: {named}."
        )
    if not judged[0].admitted:
        verdict += (
            " But even the best set contradicts the criteria: facts, positions or the mirror symmetry may be wrong; "
            "nothing is decided."
        )
    words = (
        f"each of {looked_at} sign sets, the best by criteria that need no scale, was put on the scale that the facts "
        f"give it and judged there; {looked_at - len(judged)} of them have no scale",
        # Both mirrors were judged, each for itself.
        *(one for one in first.words if not one.startswith("No criterion tells the two mirrors apart")),
    )
    return replace(
        first,
        signs=signs[:kept],
        equivalent=None,
        scores=scores[:kept],
        names=(*criteria.names, "facts beyond two"),
        parts=np.stack([one.parts for one in judged[:kept]]),
        margins=gaps[:kept],
        support=(weight / weight.sum())[:kept],
        order_margin=order_margin,
        order_support=order_support,
        reach=reach,
        in_doubt=tuple(int(order) for order in doubtful),
        decided=clear and judged[0].admitted,
        verdict=verdict,
        decisive=decisive,
        exhaustive=first.exhaustive and first.looked_at <= CANDIDATES,
        looked_at=looked_at,
        profiles=np.stack([one.profile for one in judged[: min(kept, PROFILES)]]),
        unit=unit,
        words=words,
    )
