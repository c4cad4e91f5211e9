from __future__ import annotations

import copy
import typing

import numpy as np
import pytest
from pydantic import ValidationError

from engine.combination.series import Common
from service.schemas.series import SeriesIn
from tests.service.bodies import changed
from tests.service.series_bodies import MEMBERS, SERIES


def test_choices_are_those_of_the_engine():
    assert typing.get_args(SeriesIn.model_fields["common"].annotation) == typing.get_args(Common)


def test_members_are_completed_by_the_set_of_the_request():
    body = copy.deepcopy(SERIES)
    made = SeriesIn.model_validate(body)
    assert body == SERIES, "the caller's document was changed"
    for member, given in zip(made.members, MEMBERS, strict=True):
        np.testing.assert_array_equal(member.set.amplitude, given["amplitude"])
        np.testing.assert_array_equal(member.set.phase_deg, given["phase_deg"])
        assert member.set.unit == given["unit"]


def test_a_member_takes_a_column_away_with_null():
    made = SeriesIn.model_validate(changed(SERIES, "members/1/set/sigma", None))
    assert made.members[1].set.sigma is None
    assert made.members[0].set.sigma is not None


def test_cells_are_replaced_whole():
    """Not merged: half of one cell and half of another make none."""
    made = SeriesIn.model_validate(changed(SERIES, "members/1/set/cell", {"vectors": [[9.0]]}))
    assert made.members[1].set.cell.period is None


@pytest.mark.parametrize(
    ("path", "value", "place"),
    [
        ("set", 3, ("set",)),
        ("members", {}, ("members",)),
        ("members", [], ("members",)),
        ("members/1", 3, ("members", 1)),
        ("members/1/set", 3, ("members", 1, "set")),
        ("members/1/set", {"values": 1}, ("members", 1, "set", "values")),
        ("members/1/set", {"widow": 1}, ("members", 1, "set", "widow")),
        ("members/1/value", None, ("members", 1, "value")),
        ("members/1/note", "x", ("members", 1, "note")),
        ("samples", 3, ("samples",)),
        ("profile/shape", [3], ("profile", "shape")),
        ("variable", "x" * 81, ("variable",)),
        ("variable_unit", "x" * 41, ("variable_unit",)),
        ("tolerance", 1.0, ("tolerance",)),
    ],
)
def test_bad_members(path, value, place):
    with pytest.raises(ValidationError) as caught:
        SeriesIn.model_validate(changed(SERIES, path, value))
    assert caught.value.errors()[0]["loc"] == place
