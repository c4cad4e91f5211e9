"""Check 12: operations of all settings of all space-group types.

Source: the database of the reference library spglib, asked here directly.
"""

from __future__ import annotations

import numpy as np
import pytest
import spglib

from engine.symmetry import Group, space_group_setting

pytestmark = pytest.mark.filterwarnings("ignore:Set OLD_ERROR_HANDLING:DeprecationWarning")
"""The library warns of its future whatever is asked of it."""

ORDERS = {"1": 1, "-1": 2, "2": 2, "m": 2, "2/m": 4, "222": 4, "mm2": 4, "mmm": 8, "4": 4, "-4": 4, "4/m": 8, "422": 8,
          "4mm": 8, "-42m": 8, "4/mmm": 16, "3": 3, "-3": 6, "32": 6, "3m": 6, "-3m": 12, "6": 6, "-6": 6, "6/m": 12,
          "622": 12, "6mm": 12, "-62m": 12, "-6m2": 12, "6/mmm": 24, "23": 12, "m-3": 24, "432": 24, "-43m": 24,
          "m-3m": 48}  # fmt: skip
"""Orders of the 32 point groups: International Tables A, chapter 3.2."""
CENTRINGS = {"P": 1, "A": 2, "B": 2, "C": 2, "I": 2, "F": 4, "R": 3}
"""Lattice points in a cell: International Tables A, chapter 2.1; a rhombohedral cell has one."""


@pytest.mark.parametrize("setting", range(1, 531))
def test_operations_of_a_setting(setting):
    kind = spglib.get_spacegroup_type(setting)
    database = spglib.get_symmetry_from_database(setting)
    group = space_group_setting(setting)
    np.testing.assert_array_equal(group.rotations, database["rotations"])
    # The database holds thirds and sixths as rounded binary fractions.
    np.testing.assert_allclose(group.translations, database["translations"] % 1, atol=1e-14)
    assert group.number == kind.number

    points = 1 if kind.choice == "R" else CENTRINGS[kind.international_short[0]]
    assert group.order == points * ORDERS[kind.pointgroup_international]
    assert len(group.centring) == points
    assert group.cosets.size == ORDERS[kind.pointgroup_international]

    again = Group.from_operations(group.operations, 3, closure="require")
    np.testing.assert_array_equal(again.rotations, group.rotations)
    np.testing.assert_array_equal(again.translations, group.translations)

    # Closed, looked up here in twenty-fourths and without the engine's own check.
    turns = np.rint(np.asarray(database["translations"]) * 24).astype(int)
    rotations = np.asarray(database["rotations"]).astype(int)
    generators = slice(1, 9)
    products = np.einsum("aij,bjk->abik", rotations[generators], rotations)
    shifts = np.einsum("aij,bj->abi", rotations[generators], turns) + turns[generators, None]
    known = {(r.tobytes(), t.tobytes()) for r, t in zip(rotations, turns % 24, strict=True)}
    made = zip(products.reshape(-1, 3, 3), shifts.reshape(-1, 3) % 24, strict=True)
    assert all((r.tobytes(), t.tobytes()) in known for r, t in made)


def test_the_library_recognises_what_a_few_generators_make():
    """P2_1/c, P6_3/mmc and Fd-3m from generators of International Tables A, identified by the library."""
    cases = [
        (["-x,y+1/2,-z+1/2", "-x,-y,-z"], (5, 6, 7, 90), 14),
        (["-y,x-y,z", "-x,-y,z+1/2", "y,x,-z", "-x,-y,-z"], (3, 3, 17, 120), 194),
        (["x,y+1/2,z+1/2", "x+1/2,y,z+1/2", "z,x,y", "-x,-y+1/2,z+1/2", "-x+1/2,y+1/2,-z",
          "y+3/4,x+1/4,-z+3/4", "-x+1/4,-y+1/4,-z+1/4"], (8, 8, 8, 90), 227),
    ]  # fmt: skip
    for generators, (a, b, c, gamma), number in cases:
        group = Group.from_operations(generators, 3)
        cosine, sine = np.cos(np.radians(gamma)), np.sin(np.radians(gamma))
        found = spglib.get_spacegroup_type_from_symmetry(
            group.rotations.astype(np.intc),
            group.translations,
            np.array([[a, 0, 0], [b * cosine, b * sine, 0], [0, 0, c]]),
        )
        assert found.number == number
