from __future__ import annotations

import typing

import pytest
from pydantic import ValidationError

from engine.fields import FieldKind
from engine.windows import WindowKind
from service.schemas.treatment import AverageIn, ResolutionIn, SetRequestIn, TreatedIn, WindowIn
from tests.service import bodies

GOOD = {"set": bodies.FILM}


def test_choices_are_those_of_the_engine():
    assert typing.get_args(TreatedIn.model_fields["field"].annotation) == typing.get_args(FieldKind)
    assert typing.get_args(WindowIn.model_fields["kind"].annotation) == typing.get_args(WindowKind)


def test_nothing_is_treated_unasked():
    made = TreatedIn.model_validate(GOOD)
    assert (made.combination, made.average, made.sharpen, made.self_term, made.apply_merit) == (None, None, 0, 0, False)
    assert made.window == WindowIn(kind="none", b=None)
    assert made.resolution == ResolutionIn(d_min=None, d_max=None)
    assert (made.field, made.coordinates, made.missing_phase) == ("density", "fractional", "omit")


def test_lateral_average_in_short():
    made = TreatedIn.model_validate({**GOOD, "average": "lateral"})
    assert made.average == AverageIn.model_validate({"kind": "lateral"})
    assert made.average.model_fields_set == {"kind"}


@pytest.mark.parametrize(
    "members",
    [
        {"average": "slab"},
        {"average": {}},
        {"average": {"kind": "slab", "thickness": 0}},
        {"average": {"kind": "box", "edges": []}},
        {"window": "lanczos"},
        {"window": {"kind": "gaussian", "b": 0}},
        {"resolution": {"d_min": 0}},
        {"resolution": {"dmin": 1}},
        {"missing_phase": "guess"},
        {"coordinates": "polar"},
        {"field": "curl"},
        {"apply_merit": 1},
        {"remark": "x" * 2001},
        {"combination": {"kind": "difference"}},
        {"samples": 3},
    ],
)
def test_bad_members(members):
    with pytest.raises(ValidationError):
        TreatedIn.model_validate({**GOOD, **members})


def test_requests_without_samples_know_no_treatment():
    with pytest.raises(ValidationError):
        SetRequestIn.model_validate({**GOOD, "window": {"kind": "lanczos"}})
