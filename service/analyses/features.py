"""What stands out in a density, in one answer: extrema, moments, and the layers of a stack."""

from __future__ import annotations

from engine.coefficients import CoefficientSet
from service.analyses.common import told
from service.analyses.extrema import extrema
from service.analyses.layers import layers
from service.analyses.report import Column, Limits, Report
from service.analyses.statistics import statistics
from service.schemas.analyses import FeaturesIn, LayersIn, StatisticsIn
from service.schemas.treatment import TreatedIn


def features(request: FeaturesIn, coefficients: CoefficientSet, limits: Limits) -> Report:
    """The three analyses of one treatment.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    treated = {name: getattr(request, name) for name in TreatedIn.model_fields}
    found = extrema(request, coefficients, limits)
    moments = statistics(StatisticsIn.model_validate(treated), coefficients, limits)
    profile = None
    if coefficients.lattice.dimension == 1:
        profile = layers(LayersIn.model_validate({**treated, "normal_to": [1]}), coefficients, limits)
    shared = ("unit", "resolution", "uncertainty", "applied", "notes")
    document = {
        "product": "features",
        **{name: found.document[name] for name in shared},
        "extrema": found.document,
        "layers": None if profile is None else profile.document,
        "statistics": moments.document,
    }
    figures: tuple[Column, ...] = tuple((name, [value]) for name, value in moments.figures.items())
    further: list[tuple[str, tuple[Column, ...]]] = [("moments", figures)]
    if profile is not None:
        further += [("layers", profile.table), *profile.further]
    return Report(
        document=document,
        table=found.table,
        told=told(document),
        figures=found.figures,
        further=(*found.further, *further),
    )
