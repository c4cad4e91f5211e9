"""From a set that is to be kept to all that is kept of it."""

from __future__ import annotations

from typing import Any

import numpy as np
import orjson

from engine.coefficients import CoefficientSet
from engine.lattice import Lattice
from engine.preparation import summarize_set
from engine.resolution.coverage import Coverage, coverage
from service import interpret_set
from service.encoders.describe import described_coverage
from service.encoders.summary import summary_document
from service.problems import located
from service.schemas.store import KeepIn
from service.settings import Settings
from service.store.content import Content, content_of
from service.store.parcel import Parcel
from service.store.records import Facts, Labels

SPARSE = 0.8
"""Share of the possible terms below which a warning is given."""


def parcel(request: KeepIn, settings: Settings) -> Parcel:
    """Interpret a set, so that one that cannot be summed is refused now, and describe it.

    Raises
    ------
    Problem
        The set cannot be used.
    """
    given = request.set
    content = content_of(given)
    most = settings.max_coefficients
    if given.reflections is None:
        made = interpret_set.whole_set(given, "omit", max_coefficients=most)
        inspection = None
    else:
        (table, left), file = interpret_set.prepared_file(given, max_coefficients=most)
        made = interpret_set.whole_set(given, "omit", max_coefficients=most, file=file)
        with located("set", "reflections"):
            inspection = summary_document(table, left, summarize_set(file))
    limits = made.resolution()
    facts = Facts(
        kind=content.kind,
        file=content.file,
        dimension=made.lattice.dimension,
        rows=made.tally.rows,
        coefficients=made.count,
        d_min=None if limits is None else limits[0],
        d_max=None if limits is None else limits[1],
        unit=made.unit,
    )
    labels = Labels(name=request.name or _name(content, made.lattice), tags=tuple(request.tags))
    return Parcel(content, labels, facts, orjson.dumps(_summary(made, facts, inspection)))


def _name(content: Content, lattice: Lattice) -> str:
    """What a set is called that nobody gave a name."""
    if content.file:
        return "".join(letter for letter in content.file if letter.isprintable())[:200] or "file"
    lengths = " × ".join(f"{length:.4g}" for length in lattice.lengths)
    kind = {1: "layer stack", 2: "planar lattice", 3: "crystal"}[lattice.dimension]
    return f"{kind} {lengths} Å"


def _summary(made: CoefficientSet, facts: Facts, inspection: dict[str, Any] | None) -> dict[str, Any]:
    lattice, tally = made.lattice, made.tally
    covered = coverage(made)
    columns = {"sigma": made.sigma, "phase_sigma": made.phase_sigma, "merit": made.merit}
    return {
        "cell": {
            "dimension": lattice.dimension,
            "vectors": lattice.vectors.tolist(),
            "lengths": lattice.lengths.tolist(),
            "angles": _angles(lattice),
            "volume": lattice.volume,
        },
        "group": None if made.group is None else made.group.name,
        "density": "real" if made.real else "complex",
        "unit": made.unit,
        "coefficients": {
            "rows": tally.rows,
            "held": made.count,
            "without_phase": made.unphased,
            "repeats_joined": tally.repeats_joined,
            "friedel_pairs_averaged": tally.mates_joined,
            "zero_term": tally.zero_term,
        },
        "d_min": facts.d_min,
        "d_max": facts.d_max,
        "coverage": None if covered is None else described_coverage(covered),
        "columns": [name for name, column in columns.items() if column is not None],
        "history": list(made.history),
        "warnings": [
            *_warnings(made, covered, inspection is not None),
            *([] if inspection is None else inspection["warnings"]),
        ],
        "inspection": inspection,
    }


def _angles(lattice: Lattice) -> list[float]:
    pairs = {1: [], 2: [(0, 1)], 3: [(1, 2), (0, 2), (0, 1)]}[lattice.dimension]
    unit = lattice.vectors / lattice.lengths[:, None]
    return [float(np.degrees(np.arccos(np.clip(unit[i] @ unit[j], -1, 1)))) for i, j in pairs]


def _warnings(made: CoefficientSet, covered: Coverage | None, inspected: bool) -> list[str]:
    """What a reader must know before looking at a density of the set."""
    found = []
    others = made.indices.any(axis=1)
    unknown = int(np.count_nonzero(~made.phase_known & others))
    total = int(np.count_nonzero(others))
    if unknown and unknown == total:
        found.append("No coefficient has a phase: only an autocorrelation can be made of the set.")
    elif unknown:
        found.append(f"{unknown} of {total} coefficients have no phase and are left out of a density.")
    if made.tally.zero_term == "absent":
        found.append("The zero term is absent: values are differences from the mean density of the cell.")
    if made.sigma is None:
        found.append("The set has no standard uncertainties: no error can be given for its densities.")
    elif made.phase_sigma is None and made.merit is None:
        found.append("Phases are taken as exact: the set has neither their uncertainties nor figures of merit.")
    if covered is not None and covered.fraction < SPARSE:
        found.append(
            f"Only {covered.present} of the {covered.possible} terms possible down to {covered.d_min:.3g} Å "
            f"({100 * covered.fraction:.0f} %) are there with a phase."
        )
    if made.unit == "arbitrary" and not inspected:
        # What is said of a file names the scale already.
        found.append("The scale is arbitrary: shapes can be compared, values with other sets cannot.")
    return found
