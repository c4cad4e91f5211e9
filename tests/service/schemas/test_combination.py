from __future__ import annotations

import typing

import pytest
from pydantic import ValidationError

from engine.combination.combine import Missing, Phases
from engine.combination.scales import ScaleKind
from service.schemas.combination import CombinationIn, RelativeScaleIn
from tests.service import bodies

GOOD = {"kind": "difference", "with": bodies.FILM, "scale": {"kind": "as_given"}}


def choices(model, member):
    return typing.get_args(model.model_fields[member].annotation)


def test_choices_are_those_of_the_engine():
    assert choices(RelativeScaleIn, "kind") == typing.get_args(ScaleKind)
    assert choices(CombinationIn, "missing") == typing.get_args(Missing)
    assert choices(CombinationIn, "phases") == (*typing.get_args(Phases), "third")


def test_what_is_not_said():
    made = CombinationIn.model_validate(GOOD)
    assert (made.phases, made.third, made.missing, made.weights) == ("own", None, "omit", "sigma")
    scale = made.scale
    assert (scale.k, scale.k_sigma, scale.b, scale.displacement, scale.robust) == (None, None, None, False, False)


@pytest.mark.parametrize("member", GOOD)
def test_nothing_is_guessed(member):
    with pytest.raises(ValidationError):
        CombinationIn.model_validate({name: value for name, value in GOOD.items() if name != member})


@pytest.mark.parametrize(
    "members",
    [
        {"kind": "sum"},
        {"with": {**bodies.FILM, "values": "F"}},
        {"other": bodies.FILM},
        {"scale": {}},
        {"scale": {"kind": "given", "k": 0}},
        {"scale": {"kind": "given", "k": 1e31}},
        {"scale": {"kind": "given", "k": 1.0, "k_sigma": -1}},
        {"scale": {"kind": "given", "k": 1.0, "b": "2"}},
        {"phases": "reference"},
        {"third": 3},
        {"missing": "zero"},
        {"weights": [1, 1]},
    ],
)
def test_bad_members(members):
    with pytest.raises(ValidationError):
        CombinationIn.model_validate({**GOOD, **members})
