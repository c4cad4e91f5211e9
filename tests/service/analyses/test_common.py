from __future__ import annotations

import numpy as np
import pytest

from service.analyses.common import finite, heading, rows, table_of, told
from tests.service import bodies

SET = bodies.coefficients(bodies.FILM)


def test_rows_keep_none_and_make_plain_numbers():
    made = rows({"a": np.array([1.5, 2.5]), "b": None, "c": ["x", None], "d": np.array([True, False])})
    assert made == [{"a": 1.5, "b": None, "c": "x", "d": True}, {"a": 2.5, "b": None, "c": None, "d": False}]
    assert type(made[0]["d"]) is bool


def test_rows_of_nothing():
    assert rows({"a": np.zeros((0, 3)), "b": None}) == []


def test_columns_of_unequal_length_are_a_fault():
    with pytest.raises(ValueError, match="zip"):
        rows({"a": [1, 2], "b": [1]})


def test_tables_leave_out_what_does_not_exist():
    assert table_of({"a": [1], "b": None, "c": [2]}) == (("a", [1]), ("c", [2]))


def of(contains):
    return heading("layers", SET, unit="e/Å³", contains=contains, omits=["o"], applied=["window"], notes=["careful"])


def test_heading_and_lines():
    document = of(["c", "d"])
    assert document["resolution"] == {"d_min": bodies.PERIOD / 4, "d_max": pytest.approx(bodies.PERIOD), "unit": "Å"}
    assert told(document) == (
        "layers; unit: e/Å³",
        "uncertainty contains: c; d",
        "uncertainty omits: o",
        "window",
        "careful",
    )


def test_without_uncertainties_nothing_is_said_of_them():
    document = of([])
    assert document["uncertainty"] is None
    assert told(document) == ("layers; unit: e/Å³", "window", "careful")


def test_resolution_is_that_of_the_terms_with_a_phase():
    given = bodies.coefficients({**bodies.FILM, "phase_deg": [0, 180, 0, None]})
    document = heading("x", given, unit="", contains=(), omits=(), applied=(), notes=())
    assert document["resolution"]["d_min"] == pytest.approx(bodies.PERIOD / 3)


@pytest.mark.parametrize(
    ("value", "told"), [(None, None), (float("inf"), None), (-float("inf"), None), (float("nan"), None), (-2.5, -2.5)]
)
def test_what_json_cannot_write_is_null(value, told):
    assert finite(value) == told
