"""What a table checks of its columns, whichever reader they come from."""

import dataclasses

import numpy as np
import pytest

from engine.errors import InputError
from engine.readers.table import Crystal, LeftOut, Remark, Symmetry, make_table


def table_of(lines=None, **columns):
    arrays = {name: np.array(column, dtype=np.float64) for name, column in columns.items()}
    at = None if lines is None else np.array(lines)
    return make_table(arrays, {name: name.upper() for name in arrays}, kind="npz", source="a.npz", lines=at)


def test_columns_status_and_defaults():
    table = table_of(h=[1, -2], intensity=[-3.5, np.nan], status=[1, np.nan])
    assert set(table.columns) == {"h", "intensity"}
    np.testing.assert_array_equal(table.status, [1, 0])
    assert table.status.dtype == np.uint8
    assert table.crystal == Crystal()
    assert (table.lattice, table.crystal.wavelength, table.crystal.symmetry) == (None, None, Symmetry())
    assert (table.rows_read, table.count, table.index_names) == (2, 2, ("h",))


def test_it_cannot_be_changed():
    table = table_of(h=[1])
    with pytest.raises(dataclasses.FrozenInstanceError):
        table.source = "b"
    with pytest.raises(TypeError):
        table.columns["h"] = np.zeros(1)
    with pytest.raises(ValueError, match="read-only"):
        table.columns["h"][0] = 2


def test_a_row_with_an_unknown_index_is_rejected():
    table = table_of(h=[1, np.nan, 3], k=[0, 0, 0], amplitude=[1, 2, 3], status=[1, 2, 3], lines=[5, 6, 8])
    assert [(part.reason, part.count) for part in table.rejected] == [("an index is unknown", 1)]
    np.testing.assert_array_equal(table.rejected[0].rows, [1])
    np.testing.assert_array_equal(table.columns["amplitude"], [1, 3])
    np.testing.assert_array_equal(table.row, [0, 2])
    np.testing.assert_array_equal(table.lines, [5, 8])
    np.testing.assert_array_equal(table.status, [1, 3])
    assert (table.rows_read, table.count) == (3, 2)


def test_a_profile_needs_no_indices():
    table = table_of(q=[0.1, 0.2], intensity=[5, 6])
    assert (table.index_names, table.count) == ((), 2)


def test_words_of_a_remark():
    assert str(Remark("absent", ("_x",), "x is absent")) == "x is absent"
    assert LeftOut("gone", np.arange(3)).count == 3


@pytest.mark.parametrize(
    ("columns", "reason", "rows"),
    [
        ({"h": [1, 1.5]}, "is not a whole number", (1,)),
        ({"l": [2.0**20 + 1]}, "lies beyond", (0,)),
        ({"k": [np.inf]}, "is infinite", (0,)),
        ({"intensity": [1, -np.inf]}, "is infinite", (1,)),
        ({"amplitude": [1, -1, -2]}, "is negative", (1, 2)),
        ({"f_calc": [-1]}, "is negative", (0,)),
        ({"intensity_sigma": [-0.5]}, "is negative", (0,)),
        ({"phase_sigma_deg": [-0.5]}, "is negative", (0,)),
        ({"merit": [1.01]}, "lies outside 0…1", (0,)),
        ({"merit": [-0.01]}, "lies outside 0…1", (0,)),
        ({"status": [8]}, "is not a status", (0,)),
        ({"status": [0.5]}, "is not a status", (0,)),
    ],
)
def test_impossible_values(columns, reason, rows):
    (name,) = columns
    with pytest.raises(InputError, match=reason) as caught:
        table_of(**columns)
    assert caught.value.path == ("a.npz", name.upper())
    assert caught.value.rows == rows
    with pytest.raises(InputError, match=rf"lines? {101 + rows[0]}"):
        table_of(lines=101 + np.arange(len(columns[name])), **columns)


def test_limits_themselves_are_possible():
    table_of(
        h=[2**20, -(2**20)], amplitude=[0, 1], amplitude_sigma=[0, 1], merit=[0, 1], intensity=[-1, 0], status=[0, 7]
    )


def test_many_rows_are_counted_and_few_named():
    with pytest.raises(InputError, match="lines 1, 2, 3, 4, 5, 6, 7, 8, 9, 10 and 15 more"):
        table_of(lines=np.arange(1, 26), h=np.full(25, 0.5))


@pytest.mark.parametrize(
    ("columns", "reason"),
    [
        ({}, "no rows"),
        ({"h": []}, "no rows"),
        ({"h": [1, 2], "k": [1]}, r"differ in length \(H 2, K 1\)"),
        ({"h": [np.nan], "k": [1]}, "no row has all its indices"),
    ],
)
def test_no_table(columns, reason):
    with pytest.raises(InputError, match=reason):
        table_of(**columns)
