"""Requests about one layer at several periods, and about trial stacks."""

from __future__ import annotations

import pytest
from pydantic import ValidationError

from service.openapi import EXAMPLES
from service.schemas.film_models import MODELS, ContrastIn, PlaneIn, SlabIn, SwellingIn, TrialIn


@pytest.mark.parametrize("product", sorted(MODELS))
def test_examples_are_taken(product):
    assert isinstance(MODELS[product].model_validate(EXAMPLES[product]), MODELS[product])


def test_parts_are_told_apart_by_their_kind():
    made = TrialIn.model_validate(EXAMPLES["film_trial"])
    assert all(isinstance(part, PlaneIn) for part in made.parts)
    slab = {"kind": "slab", "name": "s", "lower": 0.0, "upper": 1.0, "density": 0.4}
    again = TrialIn.model_validate({**EXAMPLES["film_trial"], "parts": [slab]})
    assert isinstance(again.parts[0], SlabIn)


@pytest.mark.parametrize(
    "members",
    [
        {"sets": []},
        {"sets": [{"period": 16.0, "order": [1]}]},
        {"orientation": {"kind": "guess"}},
        {"thickness": -1.0},
        {"samples": 3},
        {"colour": 1},
    ],
)
def test_bad_series(members):
    with pytest.raises(ValidationError):
        SwellingIn.model_validate({**EXAMPLES["film_swelling"], **members})


@pytest.mark.parametrize(
    "members",
    [
        {"sets": []},
        {"sets": [{"period": 16.0, "order": [1], "amplitude": [1.0]}]},
        {"exchange": "side"},
        {"model_error": 1.0},
        {"relative_sigma": 0.0},
        {"colour": 1},
    ],
)
def test_bad_contrasts(members):
    with pytest.raises(ValidationError):
        ContrastIn.model_validate({**EXAMPLES["film_contrast"], **members})


@pytest.mark.parametrize(
    "members",
    [
        {"parts": []},
        {"parts": [{"kind": "sphere", "name": "x"}]},
        {"parts": [{"kind": "plane", "name": ""}]},
        {"symmetry": "2"},
        {"scale": 0},
        {"bounds": {"scale": [1.0]}},
    ],
)
def test_bad_trials(members):
    with pytest.raises(ValidationError):
        TrialIn.model_validate({**EXAMPLES["film_trial"], **members})
