from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine import Columns, Lattice, assemble
from engine.errors import InputError
from engine.preview import SAMPLES_PER_SPACING, preview
from engine.sampling import full_cell


def a_set(deepest=6):
    lattice = Lattice.from_parameters(6.1, 7.4, 9.3, 82, 97, 105)
    indices = np.array([m for m in np.ndindex(deepest, deepest, deepest) if any(m)])
    rng = np.random.default_rng(1)
    columns = Columns(
        indices=list(indices.T),
        amplitude=rng.uniform(1, 9, len(indices)),
        phase_deg=rng.uniform(-180, 180, len(indices)),
    )
    return assemble(lattice, columns, values="structure_factor", density="real", mean=100.0, missing_phase="omit")


SET = a_set()


@given(st.tuples(*[st.integers(1, 60)] * 3), st.integers(8, 5000))
def test_a_preview_is_no_larger_than_asked_and_no_finer_than_it_can_show(shape, most):
    grid = full_cell(SET.lattice, shape)
    made, coarse = preview(SET, grid, most)
    assert math.prod(coarse.shape) <= most
    if math.prod(shape) <= most:
        assert made is SET
        assert coarse is grid
        return
    step = (SET.lattice.lengths / np.array(coarse.shape)).max()
    d_min, d_max = made.resolution()
    assert d_min >= min(SAMPLES_PER_SPACING * step, SET.resolution()[1]) * (1 - 1e-6)
    assert d_max == pytest.approx(SET.resolution()[1])
    assert made.tally.beyond_resolution == SET.count - made.count
    assert "low-resolution preview" in made.history[-1]
    assert f"{made.count} of {SET.count} coefficients" in made.history[-1]


def test_what_is_kept_is_the_part_of_large_spacing():
    made, _ = preview(SET, full_cell(SET.lattice, (64, 64, 64)), 4096)
    assert 1 < made.count < SET.count
    spacings = SET.lattice.spacings(SET.indices)
    kept = {tuple(row) for row in made.indices}
    inside = [spacings[place] for place, row in enumerate(SET.indices) if tuple(row) in kept and row.any()]
    outside = [spacings[place] for place, row in enumerate(SET.indices) if tuple(row) not in kept]
    assert min(inside) > max(outside)


def test_the_coarsest_preview_keeps_the_largest_spacing():
    made, coarse = preview(SET, full_cell(SET.lattice, (64, 64, 64)), 8)
    assert coarse.shape == (2, 2, 2)
    assert made.resolution()[1] == pytest.approx(SET.resolution()[1])


def test_a_set_of_the_mean_alone():
    lattice = Lattice.from_period(10.0)
    only = assemble(
        lattice,
        Columns(indices=[[0]], amplitude=[5.0], phase_deg=[0.0]),
        values="structure_factor",
        density="real",
        mean=None,
        missing_phase="omit",
    )
    made, coarse = preview(only, full_cell(lattice, [100]), 10)
    assert (made.count, coarse.shape) == (1, (10,))


def test_too_small_a_preview_is_refused():
    with pytest.raises(InputError, match="preview"):
        preview(SET, full_cell(SET.lattice, (9, 9, 9)), 7)
