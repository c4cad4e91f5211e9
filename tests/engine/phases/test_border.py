"""Refusals that the modules of phases share."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from engine.arrays import refuse_rows
from engine.phases.border import amplitudes, calculated_for
from tests.engine.phases.trial import measured, triclinic
from tests.strategies import refusal_of

GIVEN = measured(triclinic(), np.array([[1, 0, 0], [0, 1, 0], [0, 0, 2]]), [1.0, 0.0, 2.0])


def test_rows_are_named_and_counted():
    refusal = refusal_of(lambda: refuse_rows(np.arange(30) % 2 == 1, "b_iso", "is odd", "give even ones"))
    assert refusal.path == ("b_iso",)
    assert refusal.rows == tuple(range(1, 20, 2))
    assert "5 more" in str(refusal)
    refuse_rows(np.zeros(3, dtype=bool), "b_iso", "is odd", "give even ones")


def test_amplitudes_pass():
    np.testing.assert_array_equal(amplitudes(GIVEN), [1, 0, 2])
    np.testing.assert_array_equal(calculated_for(GIVEN, np.array([1j, 2, 0])), [1j, 2, 0])


@pytest.mark.parametrize(
    ("changed", "path", "rows"),
    [
        ({"quantity": "intensity"}, "quantity", ()),
        ({"observed": np.array([1.0, -1.0, 2.0])}, "observed", (1,)),
        ({"observed": np.array([1.0, np.inf, np.nan])}, "observed", (1, 2)),
        ({"observed": np.empty(0)}, "reflections", ()),
    ],
)
def test_what_is_no_amplitude(changed, path, rows):
    refusal = refusal_of(lambda: amplitudes(replace(GIVEN, **changed)))
    assert (refusal.path, refusal.rows) == ((path,), rows)


@pytest.mark.parametrize(("factors", "rows"), [(np.ones(2), ()), (np.array([1, np.nan, 1]), (1,))])
def test_structure_factors_that_do_not_fit(factors, rows):
    refusal = refusal_of(lambda: calculated_for(GIVEN, factors))
    assert (refusal.path, refusal.rows) == (("calculated",), rows)
