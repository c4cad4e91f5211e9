from __future__ import annotations

import pytest

from service.analyses import run
from service.schemas.analyses import ANALYSES
from service.schemas.reports import REPORTS
from tests.service.analyses import asked


def test_every_analysis_has_its_model_and_its_report():
    assert list(run._ANALYSERS) == list(ANALYSES) == list(REPORTS) == list(asked.GOOD)


@pytest.mark.parametrize("product", ANALYSES)
def test_each_is_answered_by_its_own(product):
    assert asked.report(product, asked.GOOD[product]).document["product"] == product


def test_a_combination_comes_before_the_analysis():
    """Layers of a difference: the higher of the two films less the other."""
    body = {
        **asked.GOOD["layers"],
        "combination": {"kind": "difference", "with": asked.LATER, "scale": {"kind": "as_given"}},
    }
    made = asked.report("layers", body).document
    assert "1 × first − 1 × second" in made["applied"]
    plain = asked.report("layers", asked.GOOD["layers"]).document
    assert max(one["height"] for one in made["layers"]) < max(one["height"] for one in plain["layers"])
