from __future__ import annotations

import dataclasses

import pytest
from pydantic import ValidationError

from engine import Columns
from service.schemas.coefficient_set import COLUMN_NAMES, INDEX_NAMES, Cell, CoefficientSetIn
from tests.service import bodies


def test_columns_are_those_of_the_engine():
    engine = {field.name for field in dataclasses.fields(Columns)} - {"indices"}
    assert set(COLUMN_NAMES) == engine | set(INDEX_NAMES)
    assert set(COLUMN_NAMES) <= set(CoefficientSetIn.model_fields)
    assert len(set(COLUMN_NAMES)) == len(COLUMN_NAMES)


@pytest.mark.parametrize("given", [bodies.FILM, bodies.SHEET, bodies.CRYSTAL, bodies.ABSORBING])
def test_good_sets(given):
    made = CoefficientSetIn.model_validate(given)
    assert made.density == given.get("density", "real")
    assert made.unit == given.get("unit", "arbitrary")
    assert made.mean == given.get("mean")


@pytest.mark.parametrize(
    "members",
    [
        {"values": "F"},
        {"values": None},
        {"density": "imaginary"},
        {"unit": ""},
        {"unit": "x" * 41},
        {"unit": None},
        {"mean": "0"},
        {"mean": [0]},
        {"cell": [1]},
        {"symmetry": "P 1"},
        {"symmetry": {"number": 2}},
        {"preparation": []},
        {"preparation": {"widow": 1}},
        {"reflections": "h,k,l"},
        {"wavelength": 1.54},
    ],
)
def test_bad_members(members):
    with pytest.raises(ValidationError):
        CoefficientSetIn.model_validate({**bodies.FILM, **members})


def test_meaning_of_the_columns_is_never_guessed():
    with pytest.raises(ValidationError, match="values"):
        CoefficientSetIn.model_validate(bodies.without({"set": bodies.FILM}, "set/values")["set"])


@pytest.mark.parametrize(
    "parameters",
    [
        {"a": 0},
        {"b": -1},
        {"c": "5"},
        {"alpha": 180},
        {"beta": 0},
        {"gamma": -90},
        {"period": 0},
        {"vectors": []},
        {"vectors": [[]]},
        {"vectors": [[1, 0, 0, 0]]},
        {"vectors": [[1]] * 4},
        {"vectors": [[True]]},
        {"vectors": [1]},
        {"A": 1},
    ],
)
def test_bad_cells(parameters):
    with pytest.raises(ValidationError):
        Cell.model_validate(parameters)
