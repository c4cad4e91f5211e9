"""Which reflections are possible, against a plain search."""

from __future__ import annotations

import numpy as np
import pytest

from engine import Lattice, TooLargeError
from engine.symmetry import classify, orbits, plane_group, space_group, stack_group, unique_reflections
from tests.engine.symmetry import crystals
from tests.strategies import refusal_of

GROUPS = {
    **{s: lambda s=s: space_group(s) for s in ("P-1", "P21", "C2/c", "Fdd2", "P3121", "R-3c:R", "P63/mmc", "Fd-3m")},
    "p4gm": lambda: plane_group("p4gm"),
    "p3": lambda: plane_group("p3"),
    "stack 1": lambda: stack_group("1"),
    "stack -1": lambda: stack_group("-1"),
}


@pytest.mark.parametrize("friedel", [True, False])
@pytest.mark.parametrize("name", GROUPS)
def test_unique_reflections_by_a_plain_search(name, friedel):
    """All indices of a generous box, |G| from 2π|h B|, orbits tuple by tuple."""
    group = GROUPS[name]()
    lattice = crystals.cell_of(group, seed=4, volume_per_axis=6.0)
    d_min, d_max = 1.7, 4.1
    box = crystals.indices_within({1: (8,), 2: (8, 8), 3: (8, 8, 8)}[group.dimension])
    spacing = 1 / np.linalg.norm(box @ np.linalg.inv(lattice.vectors).T, axis=1)
    inside = box[(spacing >= d_min) & (spacing <= d_max)]
    assert np.abs(inside).max() < 8
    expected = {
        max(crystals.plain_orbit(h, group, friedel), key=lambda m: m[::-1])
        for h in inside
        if not crystals.plain_absent(h, group)
    }
    found = unique_reflections(lattice, group, d_min, d_max, friedel=friedel)
    assert {tuple(h) for h in found.tolist()} == expected
    assert len(found) == len(expected)
    np.testing.assert_array_equal(found, orbits(found, group, friedel=friedel).unique)


def test_a_limit_read_from_a_reflection_keeps_it():
    lattice = Lattice.from_parameters(4.156826, 4.156826, 4.156826, 90, 90, 90)
    d = float(lattice.spacings(np.array([[2, 1, 1]]))[0])
    found = unique_reflections(lattice, space_group("Pm-3m"), d, d, friedel=True)
    assert found.tolist() == [[1, 1, 2]]


def test_the_number_in_a_sphere_follows_its_volume():
    """4π/3 V/d³ lattice points (Gauss), over multiplicity 8 of mmm; more blocks than one.

    Bound 2 %: what lies on the three mirror planes counts too often, a term of order d·V^(-1/3).
    """
    lattice = Lattice.from_parameters(41, 53, 61, 90, 90, 90)
    found = unique_reflections(lattice, space_group("Pmmm"), 1.5, friedel=True)
    multiplicity = classify(found, space_group("Pmmm")).multiplicity
    assert multiplicity.sum() == pytest.approx(4 / 3 * np.pi * lattice.volume / 1.5**3, rel=0.02)
    assert np.all(found >= 0)


@pytest.mark.parametrize(
    ("d_min", "d_max", "path"), [(0, None, "d_min"), (2, 1, "d_min"), (1, -1, "d_max"), (np.nan, None, "d_min")]
)
def test_limits_that_are_no_range_are_refused(d_min, d_max, path):
    lattice = Lattice.from_period(50)
    assert refusal_of(lambda: unique_reflections(lattice, stack_group("1"), d_min, d_max, friedel=True)).path == (path,)


def test_too_much_is_refused_before_it_is_begun():
    lattice = Lattice.from_parameters(500, 500, 500, 90, 90, 90)
    with pytest.raises(TooLargeError):
        unique_reflections(lattice, space_group("P1"), 0.5, friedel=True)


def test_an_empty_range():
    assert unique_reflections(Lattice.from_period(5), stack_group("1"), 6, friedel=True).shape == (0, 1)
