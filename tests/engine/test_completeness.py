"""Completeness: what was left out is what is missing."""

from __future__ import annotations

import numpy as np
import pytest

from engine.completeness import completeness
from engine.symmetry import classify, equivalents, space_group, unique_reflections
from tests.engine.symmetry import crystals
from tests.strategies import refusal_of


@pytest.mark.parametrize("friedel", [True, False])
@pytest.mark.parametrize("symbol", ["P21", "C2/c", "P3121", "Fd-3m"])
def test_a_set_with_known_gaps(symbol, friedel):
    """Of all possible reflections a random part is measured, each as a random equivalent, some twice."""
    group = space_group(symbol)
    lattice = crystals.cell_of(group, volume_per_axis=12.0)
    rng = np.random.default_rng(6)
    possible = unique_reflections(lattice, group, 1.4, 9.0, friedel=friedel)
    kept = rng.random(len(possible)) < 0.7
    chosen = np.concatenate([possible[kept], possible[kept][:9]])
    made, _ = equivalents(chosen, group)
    measured = made[rng.integers(0, group.order, len(chosen)), np.arange(len(chosen))]
    if friedel:
        measured = measured * rng.choice([1, -1], (len(measured), 1))
    # Beyond the range, the zero term, and an absent one: counted apart.
    extra = [[0, 0, 0], [0, 20, 0]] + ([[0, 1, 0]] if symbol == "P21" else [])
    measured = np.concatenate([measured, extra])
    given = crystals.reflections_of(lattice, measured, observed=np.ones(len(measured)))
    found = completeness(given, group, friedel=friedel, d_min=1.4, d_max=9.0, shells=5)
    assert found.possible.sum() == len(possible)
    assert found.observed.sum() == np.count_nonzero(kept)
    assert found.fraction == pytest.approx(np.count_nonzero(kept) / len(possible))
    assert (found.outside, found.absent) == (2, 1 if symbol == "P21" else 0)
    # Shell by shell, from the limits reported.
    spacing = lattice.spacings(possible)
    for low, high, number, seen in zip(found.d_min, found.d_max, found.possible, found.observed, strict=True):
        inside = (spacing >= low * (1 - 1e-12)) & (spacing <= high * (1 + 1e-12))
        assert np.count_nonzero(inside) == number
        assert np.count_nonzero(inside & kept) == seen
    assert np.all(found.d_max[1:] < found.d_min[:-1])


def test_a_complete_set_is_complete():
    group = space_group("P212121")
    lattice = crystals.cell_of(group)
    h = unique_reflections(lattice, group, 1.2, friedel=True)
    given = crystals.reflections_of(lattice, h, observed=np.ones(len(h)))
    found = completeness(given, group, friedel=True, d_min=1.2)
    assert found.fraction == 1
    # Mates apart, only those that are not centric count twice.
    apart = completeness(given, group, friedel=False, d_min=1.2)
    assert apart.possible.sum() == len(h) + np.count_nonzero(~classify(h, group).centric)
    assert apart.observed.sum() == len(h)


def test_a_range_without_reflections_is_refused():
    group = space_group("P21")
    given = crystals.reflections_of(crystals.cell_of(group), [[1, 0, 0]], observed=[1.0])
    assert refusal_of(lambda: completeness(given, group, friedel=True, d_min=100)).cure
