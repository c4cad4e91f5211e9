"""Cells that have the symmetry, and cells that do not."""

from __future__ import annotations

import numpy as np
import pytest

from engine import Lattice
from engine.symmetry import check_metric, plane_group, space_group, stack_group
from tests.strategies import refusal_of

CUBIC = Lattice.from_parameters(5, 5, 5, 90, 90, 90)
HEXAGONAL = Lattice.from_parameters(3, 3, 17, 90, 90, 120)
RHOMBOHEDRAL = Lattice.from_parameters(6, 6, 6, 55, 55, 55)
MONOCLINIC = Lattice.from_parameters(5, 6, 7, 90, 104, 90)
OBLIQUE = Lattice.from_parameters(5, 6, 7, 82, 97, 105)


@pytest.mark.parametrize(
    ("lattice", "symbol", "fits"),
    [
        (CUBIC, "Fm-3m", True),
        (HEXAGONAL, "P63/mmc", True),
        (HEXAGONAL, "R-3m", True),
        (RHOMBOHEDRAL, "R-3m:R", True),
        (MONOCLINIC, "P21/c", True),
        (OBLIQUE, "P-1", True),
        (HEXAGONAL, "Fm-3m", False),
        (HEXAGONAL, "R-3m:R", False),
        (RHOMBOHEDRAL, "R-3m:H", False),
        (MONOCLINIC, "P1121/a", False),
        (MONOCLINIC, "Pnma", False),
        (OBLIQUE, "P21/c", False),
    ],
)
def test_crystal_systems(lattice, symbol, fits):
    """Which cells a crystal system allows: International Tables A, chapter 1.3."""
    group = space_group(symbol)
    if fits:
        check_metric(lattice, group)
        return
    refusal = refusal_of(lambda: check_metric(lattice, group))
    assert refusal.path == ("lattice",)
    assert any(f"'{text}'" in refusal.reason for text in group.operations)


@pytest.mark.parametrize(("angle", "fits"), [(90.05, True), (90.2, False)])
def test_the_tolerance_is_a_difference_of_cosines(angle, fits):
    """A mirror turns cos β into −cos β: deviation 2|cos β|, 1.7e-3 at 90.05° and 7.0e-3 at 90.2°."""
    lattice = Lattice.from_parameters(5, 6, 7, 90, angle, 90)
    group = space_group("Pmmm")
    expected = 2 * abs(np.cos(np.radians(angle)))
    if fits:
        check_metric(lattice, group)
    else:
        assert f"{expected:.2g}" in refusal_of(lambda: check_metric(lattice, group)).reason
    check_metric(lattice, group, tolerance=expected * 1.01)
    assert refusal_of(lambda: check_metric(lattice, group, tolerance=expected * 0.99)).cure


def test_planar_lattices_and_stacks():
    check_metric(Lattice.from_planar_parameters(4, 4, 120), plane_group("p6mm"))
    check_metric(Lattice.from_period(50), stack_group("-1"))
    assert refusal_of(lambda: check_metric(Lattice.from_planar_parameters(4, 4, 90), plane_group("p3"))).cure


def test_dimensions_must_agree():
    assert refusal_of(lambda: check_metric(CUBIC, plane_group("p4"))).path == ("group",)
