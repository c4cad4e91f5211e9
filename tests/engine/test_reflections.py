"""Reflections: choosing rows and multiplying strengths, without a trace on the original."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine.lattice import Lattice
from engine.reflections import Reflections

LATTICE = Lattice.from_parameters(5.0, 6.0, 7.0, 80.0, 95.0, 110.0)
COLUMNS = ("observed", "sigma", "phase", "phase_sigma", "merit", "row")
OPTIONAL = ("sigma", "phase", "phase_sigma", "merit")
ROWS = 7


def made(rows=ROWS, **columns):
    """Every number different from every other, so that a mixed-up column shows."""
    values = np.arange(1.0, rows + 1)
    full = {
        "lattice": LATTICE,
        "indices": np.stack([values, -values, 2 * values], axis=1).astype(np.int64),
        "quantity": "intensity",
        "observed": values + 0.1,
        "sigma": values + 0.2,
        "phase": values + 0.3,
        "phase_sigma": values + 0.4,
        "merit": values / 100,
        "row": np.arange(rows) * 10,
        "scale": "absolute",
    }
    return Reflections(**(full | columns))


def same(one, other):
    for field in dataclasses.fields(Reflections):
        first, second = getattr(one, field.name), getattr(other, field.name)
        if isinstance(first, np.ndarray):
            np.testing.assert_array_equal(first, second, field.name)
        else:
            assert first is second or first == second, field.name


def test_count():
    assert made().count == ROWS
    assert made(1).count == 1
    assert type(made().count) is int


@pytest.mark.parametrize(
    ("kept", "rows"),
    [
        (np.array([True, False, True, False, False, False, True]), [0, 2, 6]),
        (np.array([5, 0, 3]), [5, 0, 3]),
        (np.array([2, 2, -1]), [2, 2, 6]),
        (np.zeros(ROWS, dtype=bool), []),
    ],
    ids=["flags", "numbers in their order", "repeated and from the end", "none"],
)
def test_select_takes_the_same_rows_of_every_column(kept, rows):
    full = made()
    chosen = full.select(kept)
    assert chosen.count == len(rows)
    assert chosen.indices.tolist() == [full.indices[row].tolist() for row in rows]
    for name in COLUMNS:
        assert getattr(chosen, name).tolist() == [getattr(full, name)[row] for row in rows], name
    assert chosen.lattice is LATTICE
    assert (chosen.quantity, chosen.scale) == ("intensity", "absolute")


@pytest.mark.parametrize("absent", OPTIONAL)
def test_what_is_absent_stays_absent(absent):
    bare = made(**{absent: None})
    for changed in (bare.select(np.array([1, 2])), bare.scaled(2.0)):
        assert getattr(changed, absent) is None
        assert all(getattr(changed, name) is not None for name in OPTIONAL if name != absent)


@pytest.mark.parametrize("factors", [2.5, np.linspace(0.5, 3.5, ROWS)], ids=["one for all", "one a row"])
def test_scaled_multiplies_strength_and_sigma_alone(factors):
    full = made()
    changed = full.scaled(factors)
    np.testing.assert_array_equal(changed.observed, full.observed * factors)
    np.testing.assert_array_equal(changed.sigma, full.sigma * factors)
    same(dataclasses.replace(changed, observed=full.observed, sigma=full.sigma), full)


def test_the_original_is_left_alone():
    full, untouched = made(), made()
    full.select(np.array([0])).observed[:] = 0
    full.select(np.ones(ROWS, dtype=bool)).indices[:] = 0
    full.scaled(3.0).observed[:] = 0
    same(full, untouched)
    with pytest.raises(dataclasses.FrozenInstanceError):
        full.observed = np.zeros(ROWS)


@given(
    first=st.lists(st.integers(0, ROWS - 1), min_size=1, max_size=9),
    places=st.lists(st.integers(0, 8), max_size=6),
    factor=st.sampled_from([0.25, 0.5, 2.0, 8.0]),
)
def test_choosing_twice_is_choosing_once_and_scaling_does_not_care(first, places, factor):
    """Factors are powers of two, so that all is exact."""
    rows = np.array(first)
    again = np.array([place % rows.size for place in places], dtype=np.int64)
    same(made().select(rows).select(again), made().select(rows[again]))
    same(made().select(rows).scaled(factor), made().scaled(factor).select(rows))
    same(made().scaled(factor).scaled(1 / factor), made())
