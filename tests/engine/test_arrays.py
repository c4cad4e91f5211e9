"""Border checks that turn what a caller gives into arrays."""

from __future__ import annotations

import numpy as np
import pytest

from engine.arrays import (
    MAX_INDEX,
    as_choice,
    as_count,
    as_indices,
    as_matrix,
    as_positive,
    as_vector,
)
from tests.strategies import refusal_of


@pytest.mark.parametrize("value", [[1, 2, 3], (1.0, 2.0, 3.0), np.array([1, 2, 3], dtype=">f4")])
def test_a_vector_is_contiguous_native_and_double(value):
    vector = as_vector(value, 3, "origin")
    assert vector.dtype == np.dtype(np.float64)
    assert vector.dtype.isnative
    assert vector.flags.c_contiguous
    np.testing.assert_array_equal(vector, [1, 2, 3])


def test_a_matrix_may_have_any_number_of_rows():
    assert as_matrix(np.ones((7, 3))[::2], (-1, 3), "positions").shape == (4, 3)


VECTORS = [
    ("short", [1, 2], ("origin",)),
    ("long", [1, 2, 3, 4], ("origin",)),
    ("a number", 1.0, ("origin",)),
    ("a matrix", [[1, 2, 3]], ("origin",)),
    ("words", ["a", "b", "c"], ("origin",)),
    ("complex", [1j, 2, 3], ("origin",)),
    ("truth values", [True, False, True], ("origin",)),
    ("nothing", None, ("origin",)),
    ("ragged", [[1], [2, 3], 4], ("origin",)),
    ("not finite", [1, np.nan, 3], ("origin", 1)),
    ("infinite", [1, 2, -np.inf], ("origin", 2)),
]


@pytest.mark.parametrize(("value", "path"), [case[1:] for case in VECTORS], ids=[case[0] for case in VECTORS])
def test_vectors_that_are_refused(value, path):
    assert refusal_of(lambda: as_vector(value, 3, "origin")).path == path


def test_a_fault_in_a_matrix_names_row_and_column():
    rows = np.zeros((5, 3))
    rows[3, 2] = np.inf
    assert refusal_of(lambda: as_matrix(rows, (-1, 3), ("grid", "edges"))).path == ("grid", "edges", 3, 2)


def test_an_empty_matrix_is_refused():
    assert refusal_of(lambda: as_matrix(np.empty((0, 3)), (-1, 3), "positions")).path == ("positions",)


def test_shapes_are_given_back_in_words():
    refusal = refusal_of(lambda: as_matrix(np.ones((4, 2)), (-1, 3), "positions"))
    assert "4 × 2" in refusal.reason
    assert "n × 3" in refusal.cure


@pytest.mark.parametrize("value", [1, np.int64(1), 10**20])
def test_counts(value):
    assert as_count(value, "samples") == value
    assert type(as_count(value, "samples")) is int


@pytest.mark.parametrize("value", [0, -1, 2.0, True, "3", None])
def test_counts_that_are_refused(value):
    assert refusal_of(lambda: as_count(value, "samples")).path == ("samples",)


def test_the_least_count_can_be_raised():
    assert as_count(2, "samples", least=2) == 2
    assert "at least 2" in refusal_of(lambda: as_count(1, "samples", least=2)).cure


@pytest.mark.parametrize("value", [1, 0.5, np.float32(2), np.int32(3), 10**300])
def test_positive_numbers(value):
    assert as_positive(value, "spacing", "Å") == float(value)
    assert type(as_positive(value, "spacing", "Å")) is float


@pytest.mark.parametrize("value", [0, -1, np.nan, np.inf, -np.inf, 10**400, -(10**400), True, "1", None, 1j])
def test_numbers_that_are_not_positive_are_refused(value):
    assert refusal_of(lambda: as_positive(value, "spacing", "Å")).path == ("spacing",)


def test_indices():
    indices = as_indices([1.0, -2.0, 0.0], 3, "normal")
    assert indices.dtype == np.int64
    np.testing.assert_array_equal(indices, [1, -2, 0])
    np.testing.assert_array_equal(as_indices([MAX_INDEX, 0], 2, "normal"), [MAX_INDEX, 0])


@pytest.mark.parametrize("value", [[0, 0, 0], [1, 0.5, 0], [1, 2], [MAX_INDEX + 1, 0, 0], [1, 0, np.nan]])
def test_indices_that_are_refused(value):
    assert refusal_of(lambda: as_indices(value, 3, "normal")).path[0] == "normal"


def test_words():
    as_choice("real", ("real", "complex"), "density")
    refusal = refusal_of(lambda: as_choice("reel", ("real", "complex"), "density"))
    assert refusal.path == ("density",)
    assert "real, complex" in refusal.cure


@pytest.mark.parametrize("value", [None, 3, ["real"]])
def test_what_is_no_word_is_refused(value):
    assert refusal_of(lambda: as_choice(value, ("real",), "density")).path == ("density",)
