"""Groups by name. Operations are compared with the library's database in tests/external."""

from __future__ import annotations

import numpy as np
import pytest
import spglib

from engine.symmetry import plane_group, space_group, space_group_setting, stack_group
from tests.strategies import refusal_of

pytestmark = pytest.mark.filterwarnings("ignore:Set OLD_ERROR_HANDLING:DeprecationWarning")
"""The library warns of its future whatever is asked of it."""

PLANE_GROUPS = {
    "p1": 1, "p2": 3, "pm": 6, "pg": 7, "cm": 8, "p2mm": 25, "p2mg": 28, "p2gg": 32, "c2mm": 35, "p4": 75, "p4mm": 99,
    "p4gm": 100, "p3": 143, "p3m1": 156, "p31m": 157, "p6": 168, "p6mm": 183,
}  # fmt: skip
"""The space-group type of each plane group continued unchanged along a third axis."""


@pytest.mark.parametrize(
    ("symbol", "number", "setting"),
    [
        (14, 14, 81),
        ("P21/c", 14, 81),
        ("P 1 21/c 1", 14, 81),
        ("p 2_1 / c", 14, 81),
        ("P 21/n", 14, 82),
        ("P 1 1 21/b", 14, 86),
        ("P2_1/c:c1", 14, 84),
        ("-P 2ybc", 14, 81),
        ("-p  2yn", 14, 82),
        ("P2", 3, 3),
        ("P63/mmc", 194, 488),
        ("Fd-3m", 227, 525),
        ("Fd-3m:2", 227, 526),
        ("F 41/d -3 2/m", 227, 525),
        ("-F 4vw 2vw 3", 227, 526),
        ("R-3c", 167, 460),
        ("R-3c:h", 167, 460),
        ("R -3 c : R", 167, 461),
        ("Cmca", 64, 304),
        ("Cmce", 64, 304),
        ("Abm2", 39, 191),
        (230, 230, 530),
    ],
)
def test_symbols(symbol, number, setting):
    """Numbers from International Tables A; settings in the order of the library's database."""
    found, expected = space_group(symbol), space_group_setting(setting)
    assert found.number == number
    assert found.name == expected.name
    assert found.operations == expected.operations


def test_the_first_setting_of_each_number_is_the_default():
    first = {}
    for setting in range(1, 531):
        first.setdefault(spglib.get_spacegroup_type(setting).number, setting)
    for number in (3, 50, 68, 146, 148, 203, 228):
        assert space_group(number).operations == space_group_setting(first[number]).operations


def test_a_symbol_names_one_type_of_group_only():
    """A symbol that the library prints leads to a setting of the type it was printed for; every third setting."""
    for setting in range(1, 531, 3):
        kind = spglib.get_spacegroup_type(setting)
        assert space_group(kind.international_full, notation="hermann_mauguin").number == kind.number
        assert space_group(kind.hall_symbol, notation="hall").number == kind.number


def test_the_one_symbol_of_two_readings():
    """ "P 2" has the axis along b as a Hermann–Mauguin symbol, along c as a Hall symbol."""
    assert "notation" in refusal_of(lambda: space_group("P 2")).cure
    assert space_group("P 2", notation="hermann_mauguin").operations == ("x,y,z", "-x,y,-z")
    assert space_group("P 2", notation="hall").operations == ("x,y,z", "-x,-y,z")


@pytest.mark.parametrize(("symbol", "near"), [("Fd3m", "Fd-3m"), ("P21/q", "P21/c"), ("Pnmaa", "Pnma")])
def test_unknown_symbols_are_answered_with_the_nearest(symbol, near):
    refusal = refusal_of(lambda: space_group(symbol))
    assert symbol in refusal.reason
    assert near in refusal.reason


@pytest.mark.parametrize(
    "call",
    [
        lambda: space_group(0),
        lambda: space_group(231),
        lambda: space_group("?!"),
        lambda: space_group("Pnma", notation="hall"),
        lambda: space_group("Pnma", notation="long"),
        lambda: space_group(True),
        lambda: space_group_setting(0),
        lambda: space_group_setting(531),
        lambda: plane_group("p5"),
        lambda: plane_group(18),
        lambda: plane_group(0),
        lambda: plane_group(True),
        lambda: stack_group("2"),
    ],
)
def test_what_names_no_group_is_refused(call):
    assert refusal_of(call).cure


@pytest.mark.parametrize(("place", "symbol"), list(enumerate(PLANE_GROUPS, 1)))
def test_plane_groups_are_those_of_the_tables(place, symbol):
    """Continued along a third axis they are space groups that the library recognises by type."""
    group = plane_group(symbol)
    assert (group.number, group.name) == (place, symbol)
    assert plane_group(place).operations == group.operations
    rotations = np.zeros((group.order, 3, 3), dtype=np.intc)
    rotations[:, :2, :2], rotations[:, 2, 2] = group.rotations, 1
    translations = np.pad(group.translations, ((0, 0), (0, 1)))
    b = [-2, 2 * np.sqrt(3), 0] if symbol[1] in "36" else [0, 4 if symbol[1] == "4" else 5, 0]
    cell = np.array([[4, 0, 0], b, [0, 0, 9.0]])
    found = spglib.get_spacegroup_type_from_symmetry(rotations, translations, cell)
    assert found.number == PLANE_GROUPS[symbol]


@pytest.mark.parametrize(
    ("alias", "symbol"), [("pmm", "p2mm"), ("P 6 M M", "p6mm"), ("p4g", "p4gm"), ("p1g1", "pg"), ("cmm", "c2mm")]
)
def test_other_names_of_plane_groups(alias, symbol):
    assert plane_group(alias).number == plane_group(symbol).number


def test_stacks():
    assert stack_group("1").operations == ("z",)
    assert stack_group("-1").operations == stack_group("m").operations == ("z", "-z")
