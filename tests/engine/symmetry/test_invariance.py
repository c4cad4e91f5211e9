"""Full sets and the groups that their densities have, against structure factors summed by hand."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from engine import Columns, InputError, assemble
from engine.symmetry import plane_group, space_group, stack_group
from engine.symmetry.invariance import related
from tests.engine.symmetry import crystals

GROUPS = {
    "P -1": space_group(2),
    "P 21/c": space_group(14),
    "P 21 21 21": space_group(19),
    "C 2": space_group(5),
    "P 31": space_group(144),
    "R -3 c": space_group(167),
    "F d -3 m": space_group("Fd-3m:1"),
    "p 3 1 m": plane_group("p31m"),
    "p 2 g g": plane_group("p2gg"),
    "-1": stack_group("-1"),
}


def full_set(group, density="real", seed=0, drop=None, change=None, reach=3):
    """All structure factors of an invented crystal out to a reach, as the engine takes them."""
    lattice = crystals.cell_of(group, seed)
    strengths, positions = crystals.atoms_of(group, 2, seed)
    indices = crystals.indices_within((reach,) * group.dimension, zero=True)
    # A box of indices holds no whole orbits where axes are turned into each other's sum.
    whole = [max(max(map(abs, h)) for h in crystals.plain_orbit(row, group, True)) <= reach for row in indices]
    indices = indices[np.array(whole)]
    values = crystals.structure_factors(indices, strengths, positions)
    if density == "real":
        keys = indices[:, ::-1].tolist()
        kept = np.array([next((value for value in key if value), 1) > 0 for key in keys])
        indices, values = indices[kept], values[kept]
    else:
        values = values * (1 + 0.3j)
    if change is not None:
        values = change(indices, values)
    if drop is not None:
        kept = ~drop(indices, values)
        indices, values = indices[kept], values[kept]
    return assemble(
        lattice,
        Columns(indices=list(indices.T), real=values.real, imag=values.imag),
        values="structure_factor",
        density=density,
    )


def refusal(made, group, **options):
    with pytest.raises(InputError) as caught:
        related(made, group, **options)
    return caught.value


@pytest.mark.parametrize("density", ["real", "complex"])
@pytest.mark.parametrize("name", GROUPS)
def test_what_symmetry_made_is_taken(name, density):
    group = GROUPS[name]
    made = full_set(group, density)
    told = related(made, group)
    assert told.group is group
    np.testing.assert_array_equal(told.values, made.values)
    assert replace(told, group=None).history == made.history


@pytest.mark.parametrize("name", [name for name in GROUPS if name != "-1"])
def test_equivalents_that_are_absent_are_missed(name):
    """One strong general coefficient left out: the set is not full."""
    group = GROUPS[name]

    def one(indices, values):
        chosen = np.zeros(len(indices), dtype=bool)
        orbit = [len(crystals.plain_orbit(h, group, True)) for h in indices]
        strength = np.where(np.array(orbit) >= 4, np.abs(values), 0) if max(orbit) >= 4 else np.zeros(len(indices))
        if strength.any():
            chosen[strength.argmax()] = True
        return chosen

    made = full_set(group, drop=one)
    if made.count == full_set(group).count:
        assert related(made, group).group is group
    else:
        assert "lacks" in refusal(made, group).reason


@pytest.mark.parametrize("density", ["real", "complex"])
def test_a_changed_equivalent_is_found(density):
    def spoilt(indices, values):
        rows = np.flatnonzero((np.abs(indices) == [1, 2, 3]).all(axis=1))
        values = values.copy()
        values[rows[0]] *= np.exp(0.2j)
        return values

    fault = refusal(full_set(GROUPS["P 21 21 21"], density, change=spoilt), GROUPS["P 21 21 21"])
    assert fault.path == ("symmetry",)
    assert "differs by" in fault.reason


def test_tolerance_is_relative_to_the_largest():
    def moved(by):
        def change(indices, values):
            values = values.copy()
            rows = np.flatnonzero((np.abs(indices) == [1, 2, 3]).all(axis=1))
            others = np.abs(values[indices.any(axis=1)]).max()
            values[~indices.any(axis=1)] = others
            values[rows[0]] += by * others
            return values

        return full_set(GROUPS["P 21 21 21"], change=change)

    group = GROUPS["P 21 21 21"]
    assert related(moved(0.9e-3), group).group is group
    refusal(moved(1.1e-3), group)
    assert related(moved(1.1e-3), group, tolerance=1e-2).group is group
    with pytest.raises(InputError, match="tolerance"):
        related(moved(0.0), group, tolerance=0.0)


def test_centric_phases_of_a_real_density():
    """In P −1 every F is real: nothing else tells a wrong origin, since no two of a half set are related."""
    group = GROUPS["P -1"]
    shifted = full_set(group, change=lambda indices, values: values * np.exp(2j * np.pi * (indices @ [0.1, 0.0, 0.05])))
    assert "two phases" in refusal(shifted, group).reason
    halved = full_set(group, change=lambda indices, values: values * np.exp(2j * np.pi * (indices @ [0.5, 0.0, 0.5])))
    assert related(halved, group).group is group


def test_centric_phases_with_translations():
    """P 21 21 21 leaves h0l phases of ±90° where l is odd; conjugates and signs are told apart."""
    group = GROUPS["P 21 21 21"]
    made = full_set(group)
    rows = (made.indices[:, 1] == 0) & (made.indices[:, 2] % 2 == 1) & (np.abs(made.values) > 1e-6)
    assert rows.any()
    assert np.abs(np.cos(np.angle(made.values[rows]))).max() < 1e-6
    turned = replace(made, values=np.where(rows, made.values * 1j, made.values))
    assert "two phases" in refusal(turned, group).reason


def test_forbidden_coefficients():
    def present(indices, values):
        values = values.copy()
        rows = (indices[:, 0] == 0) & (indices[:, 1] == 0) & (np.abs(indices[:, 2]) == 1)
        values[rows] = np.abs(values).max() / 3
        return values

    assert "forbids" in refusal(full_set(GROUPS["P 21 21 21"], change=present), GROUPS["P 21 21 21"]).reason
    absent = full_set(GROUPS["P 21 21 21"], drop=lambda indices, values: np.abs(values) < 1e-9)
    assert related(absent, GROUPS["P 21 21 21"]).group is not None


def test_a_group_the_density_lacks():
    made = full_set(space_group(1), seed=3)
    orthogonal = replace(made, lattice=crystals.cell_of(GROUPS["P 21 21 21"]))
    refusal(orthogonal, GROUPS["P 21 21 21"])
    with pytest.raises(InputError) as caught:
        related(made, GROUPS["P 21 21 21"])
    assert caught.value.path == ("lattice",)


def test_hands_are_told_apart():
    """P 31 is not P 32: the translations decide the phases between equivalents."""
    made = full_set(GROUPS["P 31"])
    refusal(made, space_group(145))


def test_unknown_phases_do_not_matter_where_a_whole_orbit_lacks_them():
    group = GROUPS["P 21 21 21"]
    made = full_set(group)
    known = ~(np.abs(made.indices) == [1, 2, 3]).all(axis=1)
    values = np.where(known, made.values, np.abs(made.values))
    assert related(replace(made, phase_known=known, values=values), group).group is group
