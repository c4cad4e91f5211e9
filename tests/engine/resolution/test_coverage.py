"""What was left out of a set is what is missing."""

from __future__ import annotations

import importlib
import math

import numpy as np
import pytest

from engine import Lattice
from engine.resolution import coverage
from engine.symmetry import expand, plane_group, space_group, unique_reflections
from tests.engine.resolution.sets import ball_indices, coefficient_set
from tests.engine.symmetry import crystals
from tests.strategies import LATTICES

MODULE = importlib.import_module("engine.resolution.coverage")
"""By its path: the package offers the function under the module's name."""


@pytest.mark.parametrize("real", [True, False])
@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_gaps_of_a_set_without_symmetry(dimension, real):
    lattice = LATTICES[dimension]
    indices = ball_indices(lattice, {1: 1.5, 2: 1.5, 3: 1.3}[dimension])
    if not real:
        indices = np.concatenate([indices, -indices[indices.any(axis=1)]])
    rng = np.random.default_rng(1)
    spacing = lattice.spacings(indices)
    kept = (rng.random(len(indices)) < 0.8) | (spacing < spacing.min() * 1.0001) | ~indices.any(axis=1)
    known = rng.random(len(indices)) < 0.9
    known |= spacing < spacing.min() * 1.0001
    found = coverage(coefficient_set(lattice, indices[kept], known=known[kept], real=real))
    others = indices.any(axis=1)
    assert found.possible == np.count_nonzero(others)
    assert found.present == np.count_nonzero(kept & known & others)
    assert found.without_phase == np.count_nonzero(kept & ~known & others)
    assert found.missing == np.count_nonzero(~kept)
    assert found.fraction == pytest.approx(found.present / found.possible)
    assert found.d_min == pytest.approx(spacing.min())
    gone = np.sort(spacing[others & ~(kept & known)])[::-1]
    assert found.gap_spacings == pytest.approx(gone[:5])
    assert lattice.spacings(found.gaps) == pytest.approx(found.gap_spacings)
    assert not found.estimated


@pytest.mark.parametrize("symbol", ["P21/c", "C2/c", "I41/a", "Fd-3m"])
def test_forbidden_terms_are_not_missed(symbol):
    group = space_group(symbol)
    lattice = crystals.cell_of(group)
    h = unique_reflections(lattice, group, 1.1, friedel=True)
    full = expand(crystals.reflections_of(lattice, h, observed=np.ones(len(h))), group).reflections.indices
    found = coverage(coefficient_set(lattice, full, group=group))
    assert (found.possible, found.missing, found.fraction) == (len(full), 0, 1.0)
    assert len(found.gaps) == 0
    # Without the group the forbidden ones count as possible.
    assert coverage(coefficient_set(lattice, full)).missing > 0
    some = coverage(coefficient_set(lattice, full[7:], group=group))
    assert some.missing == 7


def test_a_film_is_measured_along_its_row():
    lattice = Lattice.from_parameters(7, 8, 120, 90, 90, 104)
    found = coverage(coefficient_set(lattice, np.array([[0, 0, l] for l in range(2, 21) if l != 9])))
    assert (found.possible, found.present, found.missing) == (20, 18, 2)
    assert found.gaps.tolist() == [[0, 0, 1], [0, 0, 9]]
    assert "row" in found.region


def test_only_phases_count_and_only_within_their_reach():
    lattice = Lattice.from_period(30.0)
    known = np.array([True] * 5 + [False] * 5)
    found = coverage(coefficient_set(lattice, np.arange(1, 11)[:, None], known=known))
    assert (found.possible, found.present, found.without_phase) == (5, 5, 0)
    none = coverage(coefficient_set(lattice, np.arange(1, 11)[:, None], known=np.zeros(10, dtype=bool)))
    assert (none.possible, none.present, none.without_phase, none.fraction) == (10, 0, 10, 0.0)
    assert coverage(coefficient_set(lattice, np.zeros((1, 1), dtype=np.int64))) is None


def test_many_points_are_estimated(monkeypatch):
    lattice = Lattice.from_parameters(31, 33, 35, 82, 97, 105)
    indices = ball_indices(lattice, 2.0)
    indices = indices[np.abs(indices).sum(axis=1) != 3]
    exact = coverage(coefficient_set(lattice, indices))
    monkeypatch.setattr(MODULE, "MOST_POINTS", 1000)
    monkeypatch.setattr(MODULE, "LOW_POINTS", 500)
    found = coverage(coefficient_set(lattice, indices))
    assert found.estimated
    assert not exact.estimated
    assert found.possible == pytest.approx(exact.possible, rel=0.01)
    assert found.present == exact.present
    assert found.gaps.tolist() == exact.gaps.tolist()
    assert found.missing == found.possible - found.present
    # Half of a centred lattice is forbidden.
    body = space_group("I222")
    even = indices[indices.sum(axis=1) % 2 == 0]
    cell = Lattice.from_parameters(31, 33, 35, 90, 90, 90)
    monkeypatch.setattr(MODULE, "MOST_POINTS", 10)
    centred = coverage(coefficient_set(cell, even, group=body))
    sphere = 4 / 3 * math.pi * cell.volume / centred.d_min**3
    assert centred.possible == pytest.approx(sphere / 2 / 2, rel=1e-3)


def test_glide_lines_of_a_plane_group():
    group = plane_group("p2gg")
    lattice = Lattice.from_planar_parameters(20, 30, 90)
    indices = ball_indices(lattice, 2.0)
    odd_axis = ((indices[:, 0] == 0) & (indices[:, 1] % 2 != 0)) | ((indices[:, 1] == 0) & (indices[:, 0] % 2 != 0))
    found = coverage(coefficient_set(lattice, indices[~odd_axis], group=group))
    assert (found.missing, found.possible) == (0, np.count_nonzero(~odd_axis) - 1)
