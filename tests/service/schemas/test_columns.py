from __future__ import annotations

import json

import numpy as np
import pytest
from pydantic import TypeAdapter, ValidationError

from service.schemas.base import FARTHEST
from service.schemas.columns import IndexColumn, NumberColumn, PhaseColumn, PositionRows

INDEX, NUMBER, PHASE, ROWS = (TypeAdapter(kind) for kind in (IndexColumn, NumberColumn, PhaseColumn, PositionRows))


def complaint(adapter, value):
    with pytest.raises(ValidationError) as caught:
        adapter.validate_python(value)
    (error,) = caught.value.errors()
    return error["ctx"].get("row"), error["msg"], error["ctx"]["cure"]


@pytest.mark.parametrize("adapter", [INDEX, NUMBER, PHASE])
def test_columns_become_arrays(adapter):
    column = adapter.validate_python([1, -2.5, 3])
    assert column.dtype == np.float64
    np.testing.assert_array_equal(column, [1, -2.5, 3])
    assert complaint(adapter, [])[:2] == (None, "is empty")


def test_null_is_a_phase_that_is_unknown():
    np.testing.assert_array_equal(PHASE.validate_python([None, 90, None]), [np.nan, 90, np.nan])
    assert complaint(NUMBER, [1, None])[0] == 1
    assert complaint(INDEX, [None])[0] == 0


@pytest.mark.parametrize("adapter", [INDEX, NUMBER, PHASE])
@pytest.mark.parametrize("element", [True, "1", [1], {}, 1j])
def test_first_row_at_fault_is_named(adapter, element):
    row, message, cure = complaint(adapter, [0, 1.5, element, element])
    assert row == 2
    assert message.startswith("is not one of ")
    assert cure.startswith("give ")


@pytest.mark.parametrize("value", [None, 1, "1,2", {"0": 1}, (1, 2), True])
def test_what_is_no_column(value):
    row, message, _ = complaint(NUMBER, value)
    assert row is None
    assert message == "is not an array"


def test_number_beyond_a_double():
    assert complaint(INDEX, [1, 10**400])[:2] == (1, "is too large")
    assert complaint(INDEX, [1, 2, -(10**400)])[0] == 2


def test_arrays_from_a_table_are_taken_as_they_are():
    column = np.array([1.0, np.nan])
    assert NUMBER.validate_python(column) is column


def test_rows():
    np.testing.assert_array_equal(ROWS.validate_python([[1, 2.5], [3, 4]]), [[1, 2.5], [3, 4]])
    assert ROWS.validate_python([[FARTHEST]]).shape == (1, 1)


@pytest.mark.parametrize(
    ("value", "row"),
    [
        ([], None),
        ({}, None),
        ("x", None),
        ([1, 2], 0),
        ([[]], 0),
        ([[1, 2], [3]], 1),
        ([[1, 2], 3], 1),
        ([[1, 2], [3, 4, 5]], 1),
        ([[1, 2], [3, True]], 1),
        ([[1, 2], [3, 4], [None, 5]], 2),
        ([[1, [2]], [3, 4]], 0),
        ([[1, 2], [3, 10**400]], 1),
        ([[1, 2], [3, -2 * FARTHEST]], 1),
    ],
)
def test_rows_at_fault_are_named(value, row):
    assert complaint(ROWS, value)[0] == row


@pytest.mark.parametrize("adapter", [INDEX, NUMBER, PHASE, ROWS])
def test_columns_are_described_to_clients(adapter):
    schema = adapter.json_schema()
    assert schema["type"] == "array"
    assert schema["minItems"] == 1
    assert json.dumps(schema)
