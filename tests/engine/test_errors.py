"""The faults of the engine: their tree, their words, their rows."""

from __future__ import annotations

import pickle

import numpy as np
import pytest

from engine import EngineError, InputError, TooLargeError, TransformError
from engine.errors import ROWS_NAMED


def test_the_tree():
    assert issubclass(InputError, EngineError)
    assert issubclass(TooLargeError, InputError)
    assert issubclass(TransformError, EngineError)
    assert not issubclass(TransformError, InputError)
    assert not issubclass(EngineError, ValueError)


def test_a_message_says_where_why_and_how():
    fault = InputError(("cell", "vectors", 1), "is flat", "give another")
    assert str(fault) == "cell.vectors.1: is flat. give another."
    assert fault.path == ("cell", "vectors", 1)
    assert fault.reason == "is flat"
    assert fault.cure == "give another"
    assert fault.rows == ()


def test_a_word_is_a_path_of_one():
    assert InputError("sigma", "is negative", "mend it").path == ("sigma",)


def test_without_a_place_the_message_starts_with_the_reason():
    assert str(InputError((), "is flat", "give another")) == "is flat. give another."


@pytest.mark.parametrize("kind", [InputError, TooLargeError])
def test_faults_survive_a_change_of_process(kind):
    fault = kind(("sigma", 3), "is negative", "mend it", [3, 5])
    again = pickle.loads(pickle.dumps(fault))
    assert type(again) is kind
    assert (again.path, again.reason, again.cure, again.rows) == (("sigma", 3), "is negative", "mend it", (3, 5))
    assert str(again) == str(fault)


def test_one_row():
    fault = InputError.for_rows("sigma", np.array([7]), "is negative", "mend it")
    assert "(row 7, counted from 0)" in str(fault)
    assert fault.rows == (7,)


def test_few_rows_are_all_named():
    fault = InputError.for_rows("sigma", np.array([7, 2]), "is negative", "mend it")
    assert "(rows 7, 2, counted from 0)" in str(fault)
    assert fault.rows == (7, 2)
    assert all(type(row) is int for row in fault.rows)


def test_of_many_rows_the_first_are_named_and_all_counted():
    fault = InputError.for_rows("sigma", np.arange(100, 125), "is negative", "mend it")
    assert fault.rows == tuple(range(100, 100 + ROWS_NAMED))
    assert f"and {25 - ROWS_NAMED} more" in str(fault)
    assert str(100 + ROWS_NAMED) not in str(fault)
