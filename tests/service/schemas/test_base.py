from __future__ import annotations

import math

import pytest
from pydantic import TypeAdapter, ValidationError

from service.schemas.base import FARTHEST, Counts, IndexVector, Length, Strict, Vector


class Model(Strict):
    number: float = 0.0
    count: int = 0
    flag: bool = False
    word: str = ""


@pytest.mark.parametrize(
    "members",
    [
        {"number": "1.5"},
        {"number": True},
        {"number": math.nan},
        {"number": math.inf},
        {"number": None},
        {"count": 1.0},
        {"count": True},
        {"count": "1"},
        {"flag": 1},
        {"flag": "true"},
        {"word": 1},
        {"word": None},
        {"other": 1},
    ],
)
def test_nothing_passes_in_disguise(members):
    with pytest.raises(ValidationError):
        Model.model_validate(members)


def test_whole_numbers_are_numbers():
    assert Model.model_validate({"number": 3}).number == 3.0


def test_models_do_not_change():
    with pytest.raises(ValidationError):
        Model().number = 1.0


@pytest.mark.parametrize(
    ("kind", "good", "bad"),
    [
        (Vector, [[1.5], [0, 0, 0], [FARTHEST, -FARTHEST]], [[], [1] * 4, [True], ["1"], [[1]], [2 * FARTHEST], None]),
        (IndexVector, [[1], [0, -2, 3]], [[], [0.5], [1] * 4, [True]]),
        (Counts, [[1], [2, 3, 4]], [[], [0], [-1], [1.0], [1] * 4]),
        (Length, [1e-9, FARTHEST], [0.0, -1.0, 2 * FARTHEST]),
    ],
)
def test_vectors_and_lengths(kind, good, bad):
    adapter = TypeAdapter(kind, config=None)
    for value in good:
        assert adapter.validate_python(value, strict=True) == value
    for value in bad:
        with pytest.raises(ValidationError):
            adapter.validate_python(value, strict=True)
