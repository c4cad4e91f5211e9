"""A film's analysis as a document and as tables."""

from __future__ import annotations

from typing import Any

from engine.films.analysis import FilmAnalysis
from engine.films.damping import Damping
from engine.films.scale import FilmScale
from engine.films.signs import RankedSigns
from engine.films.widths import WidthComparison, WidthFit
from service.analyses.common import finite, heading, rows, table_of, told
from service.analyses.layers import layer_columns, layers_members
from service.analyses.report import Column, Report

CITATIONS = {
    "amplitudes": "French & Wilson, Acta Cryst. A34 (1978) 517",
    "signs": "least structure as total variation: Rudin, Osher & Fatemi, Physica D 60 (1992) 259",
    "position uncertainties": "Cruickshank, Acta Cryst. 2 (1949) 65",
    "widths": "Scherrer, Nachr. Ges. Wiss. Göttingen (1918) 98; Hosemann & Bagchi, Direct Analysis of Diffraction by "
    "Matter (1962)",
    "refraction": "q′² = q² − q_c², q_c² = 16π times the scattering-length density",
}


def film_report(made: FilmAnalysis, table: str = "profile", product: str = "film") -> Report:
    """Every number of an analysis with its unit, assumptions and sources; `table` names the one for rows."""
    profile = made.profile
    sigma = profile.sigma
    document = heading(
        product,
        made.coefficients,
        unit=profile.unit,
        contains=() if sigma is None else sigma.contains,
        omits=() if sigma is None else sigma.omits,
        applied=(*made.applied, *profile.applied[len(made.orders.applied) :]),
        notes=made.notes,
    )
    columns = _tables(made)
    document |= {
        "spacing": _spacing(made),
        "numberings": [
            {
                "period": one.period,
                "period_sigma": one.period_sigma,
                "weight": one.weight,
                "chi_squared": one.chi_squared,
                "degrees": one.degrees,
                "indexed": one.indexed,
                "stray": one.stray,
                "missing": list(one.missing),
                "relation": one.relation,
            }
            for one in made.assignments
        ],
        "orders": rows(columns["orders"]),
        "scale": None if made.scale is None else _scale(made.scale),
        "signs": None if made.ranked is None else _signs(made.ranked, made.task.rank),
        "profile": columns["profile"],
        "point": None
        if made.response is None
        else {
            "width": finite(float(made.response.widths[0])),
            "ripple": made.response.ripple,
            "unit": "Å",
        },
        **layers_members(made.layers, made.spacings),
        "regions": _regions(made),
        "unmeasured": None
        if made.change is None
        else {
            "rms": made.change.rms,
            "largest_inside": made.change.largest_inside,
            "largest_beyond": made.change.largest_beyond,
            "assumed": list(made.change.words),
        },
        "widths": None if made.widths is None else _widths(made.widths),
        "damping": None if made.damping is None else _damping(made.damping),
        "sources": _sources(made),
    }
    # The terminal shows what a person reports; files hold the table asked for.
    others = tuple((name, table_of(columns[name])) for name in ("orders", "layers", "signs") if name != table)
    return Report(
        document=document,
        table=table_of(columns[table]),
        told=tuple(dict.fromkeys((f"{product}; unit: {profile.unit}", *_headlines(made), *told(document)[1:]))),
        further=tuple(one for one in others if one[1]),
    )


def _sources(made: FilmAnalysis) -> dict[str, str]:
    """Citations of the published methods that were used."""
    criteria = made.task.criteria
    used = {
        "amplitudes": made.task.rule == "bayesian",
        "signs": criteria is not None and (criteria.least_structure is not None or bool(made.task.facts)),
        "position uncertainties": made.profile.sigma is not None,
        "widths": made.widths is not None,
        "refraction": bool(made.spacing.critical_square),
    }
    return {name: text for name, text in CITATIONS.items() if used[name]}


def _tables(made: FilmAnalysis) -> dict[str, dict[str, Any]]:
    profile = made.profile
    along = profile.axes[0].coordinates()
    lines = made.table
    phase = dict(zip(made.orders.order.tolist(), made.phase_deg.tolist(), strict=True))
    scaled = dict(zip(made.orders.order.tolist(), made.orders.amplitude.tolist(), strict=True))
    sigma = made.orders.sigma
    errors = {} if sigma is None else dict(zip(made.orders.order.tolist(), sigma.tolist(), strict=True))
    used = [order if keep else 0 for order, keep in zip(lines.order.tolist(), lines.used.tolist(), strict=True)]
    ranked = made.ranked
    doubtful = set() if ranked is None or ranked.decided else set(ranked.in_doubt)
    return {
        "profile": {
            "distance_angstrom": along,
            "value": profile.values,
            "uncertainty": None if profile.sigma is None else profile.sigma.values,
            "unmeasured": None if made.change is None else made.change.values,
        },
        "orders": {
            "order": lines.order,
            "two_theta_deg": lines.two_theta_deg,
            "q": lines.q,
            "d": lines.spacing,
            "residual": lines.residual,
            "residual_in_sigma": lines.residual_in_sigma,
            "intensity": lines.intensity,
            "intensity_sigma": lines.intensity_sigma,
            "factor": lines.factor,
            "amplitude": [scaled.get(order) for order in used],
            "amplitude_sigma": [errors.get(order) for order in used] if errors else None,
            "phase_deg": [finite(phase[order]) if order in phase else None for order in used],
            "flags": [
                ", ".join((*flags, "sign in doubt") if order in doubtful else flags)
                for order, flags in zip(used, lines.flags, strict=True)
            ],
        },
        "layers": layer_columns(made.layers),
        "signs": {}
        if ranked is None
        else {
            "rank": list(range(1, len(ranked.scores) + 1)),
            "signs": ["".join("+" if sign > 0 else "−" if sign < 0 else "0" for sign in row) for row in ranked.signs],
            "score": ranked.scores,
            "margin": ranked.margins,
            "support": ranked.support,
            **{name: ranked.parts[:, place] for place, name in enumerate(ranked.names)},
        },
    }


def _spacing(made: FilmAnalysis) -> dict[str, Any]:
    one = made.spacing
    return {
        "period": one.period,
        "period_sigma": one.period_sigma,
        "unit": "Å",
        "zero_shift_deg": one.zero_shift_deg,
        "zero_shift_sigma_deg": one.zero_shift_sigma_deg,
        "displacement": one.displacement,
        "displacement_sigma": one.displacement_sigma,
        "displacement_unit": one.displacement_unit,
        "critical_square": one.critical_square,
        "chi_squared": one.chi_squared,
        "degrees": one.degrees,
        "probability": one.probability,
        "sigma_source": one.sigma_source,
    }


def _scale(scale: FilmScale) -> dict[str, Any]:
    return {
        "factor": scale.factor,
        "factor_sigma": scale.factor_sigma,
        "mean": scale.mean,
        "mean_sigma": scale.mean_sigma,
        "unit": scale.unit,
        "chi_squared": scale.chi_squared,
        "degrees": scale.degrees,
        "words": scale.words,
        "assumptions": list(scale.assumptions),
    }


def _signs(ranked: RankedSigns, rank: int) -> dict[str, Any]:
    return {
        "decided": ranked.decided,
        "verdict": ranked.verdict,
        "in_doubt": list(ranked.in_doubt),
        "used": rank + 1,
        "exhaustive": ranked.exhaustive,
        "looked_at": ranked.looked_at,
        "criteria": list(ranked.names),
        "orders": ranked.order.tolist(),
        "order_margin": [finite(value) for value in ranked.order_margin.tolist()],
        "order_support": [finite(value) for value in ranked.order_support.tolist()],
        "sets": [
            {
                "rank": number + 1,
                "signs": ranked.signs[number].tolist(),
                "score": float(ranked.scores[number]),
                "parts": ranked.parts[number].tolist(),
                "margin": finite(float(ranked.margins[number])),
                "support": float(ranked.support[number]),
                "profile": ranked.profiles[number].tolist() if number < len(ranked.profiles) else None,
            }
            for number in range(len(ranked.scores))
        ],
        "profile_distance": ranked.z.tolist(),
        "words": list(ranked.words),
    }


def _regions(made: FilmAnalysis) -> list[dict[str, Any]]:
    if made.integrals is None:
        return []
    found, area = made.integrals, made.task.area
    per_unit = None if area is None else found.values * area
    per_unit_sigma = None if area is None or found.sigma is None else found.sigma * area
    return rows(
        {
            "name": [region.name for region in made.task.regions],
            "from": [region.start for region in made.task.regions],
            "to": [region.end for region in made.task.regions],
            "integral": found.values,
            "sigma": found.sigma,
            "unit": list(found.units),
            "mean": found.means,
            "mean_sigma": found.mean_sigma,
            "per_repeat_unit": per_unit,
            "per_repeat_unit_sigma": per_unit_sigma,
        }
    )


def _widths(found: WidthComparison) -> dict[str, Any]:
    return {
        "preferred": found.preferred,
        "words": found.words,
        "notes": list(found.notes),
        "models": [_width_fit(one) for one in found.fits],
    }


def _damping(found: Damping) -> dict[str, Any]:
    return {
        "u_squared": found.u_squared,
        "u_squared_sigma": found.u_squared_sigma,
        "u": found.u,
        "u_sigma": found.u_sigma,
        "b": found.b,
        "b_sigma": found.b_sigma,
        "cumulative": found.cumulative,
        "orders": found.order.tolist(),
        "expected": found.calculated.tolist(),
        "assumptions": list(found.assumptions),
        "notes": list(found.notes),
    }


def _width_fit(one: WidthFit) -> dict[str, Any]:
    return {
        "model": one.model,
        "thickness": one.thickness,
        "thickness_sigma": one.thickness_sigma,
        "thickness_least": finite(one.thickness_least),
        "layers": one.layers,
        "layers_sigma": one.layers_sigma,
        "disorder": one.disorder,
        "disorder_sigma": one.disorder_sigma,
        "disorder_most": one.disorder_most,
        "chi_squared": one.chi_squared,
        "degrees": one.degrees,
        "assumptions": list(one.assumptions),
        "notes": list(one.notes),
    }


def _headlines(made: FilmAnalysis) -> list[str]:
    """What is said first."""
    spacing = made.spacing
    spread = "" if spacing.period_sigma is None else f" ± {spacing.period_sigma:.2g}"
    lines = [f"period {spacing.period:.6g}{spread} Å from {spacing.order.size} orders"]
    if spacing.chi_squared is not None:
        lines[0] += f", χ² {spacing.chi_squared:.3g} of {spacing.degrees}"
    if made.ranked is not None:
        lines.append(made.ranked.verdict)
    if made.scale is not None and made.scale.mean is not None:
        error = f" ± {made.scale.mean_sigma:.2g}" if made.scale.mean_sigma else ""
        lines.append(f"mean density {made.scale.mean:.4g}{error} {made.scale.unit}")
    lines.extend(
        f"{one['name']}: {one['integral']:.4g}"
        + ("" if one["sigma"] is None else f" ± {one['sigma']:.2g}")
        + f" {one['unit']}"
        for one in _regions(made)
    )
    if made.widths is not None:
        lines.append(made.widths.words)
    return lines


def profile_columns(made: FilmAnalysis) -> tuple[Column, ...]:
    """The profile as a table."""
    return table_of(_tables(made)["profile"])
