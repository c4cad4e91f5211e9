"""Check 11: the bond in the static deformation density of silicon.

Source: factors of Aldred & Hart, Proc. R. Soc. A 332 (1973) 223, and later Pendellösung work,
memory; the free atom by check 6; the published maps show about 0.2 e/Å³ at the bond's midpoint.
Values have two digits; the bound is half a unit of the second.
"""

from __future__ import annotations

import numpy as np
import pytest

from engine import Columns, Lattice, assemble, evaluate, sampling
from engine.coefficients import CoefficientSet
from tests.external.silicon import ATOMS, BOND_MIDPOINT, deformation_set

HALF_DIGIT = 0.005


def coefficients(*, forbidden_adds: bool) -> CoefficientSet:
    given = deformation_set(forbidden_adds=forbidden_adds)
    columns = Columns(indices=[given.h, given.k, given.l], amplitude=given.amplitude, phase_deg=given.phase_deg)
    # The atoms are neutral and so is the crystal: the deformation has no mean.
    return assemble(Lattice.from_parameters(*given.cell), columns, values="structure_factor", mean=0.0, unit="e/Å³")


def at(given: CoefficientSet, positions: np.ndarray) -> np.ndarray:
    return evaluate(given, sampling.points(given.lattice, positions)).values


@pytest.mark.parametrize(("forbidden_adds", "expected"), [(True, 0.22), (False, 0.07)])
def test_density_at_the_bond_midpoint(forbidden_adds, expected):
    found = at(coefficients(forbidden_adds=forbidden_adds), np.array([BOND_MIDPOINT]))
    assert found[0] == pytest.approx(expected, abs=HALF_DIGIT)


@pytest.mark.parametrize(("forbidden_adds", "expected"), [(True, 0.22), (False, 0.07)])
def test_a_whole_cell_and_a_line_hold_the_same_bond(forbidden_adds, expected):
    given = coefficients(forbidden_adds=forbidden_adds)
    cell = evaluate(given, sampling.full_cell(given.lattice, (24, 40, 32))).values
    assert cell[3, 5, 4] == pytest.approx(expected, abs=HALF_DIGIT)
    along = evaluate(given, sampling.line(given.lattice, ATOMS[0], ATOMS[4], 41)).values
    assert along[20] == pytest.approx(expected, abs=HALF_DIGIT)
    # The midpoint is a centre of symmetry, and the highest point of the bond.
    np.testing.assert_allclose(along, along[::-1], atol=1e-9)
    assert int(along.argmax()) == 20
    # Highest of the whole cell only where F(222) adds: 16 bonds in it, every one on a sample.
    if forbidden_adds:
        assert np.count_nonzero(cell > cell.max() - 1e-9) == 16


def test_all_bonds_are_alike_and_the_inverted_structure_has_none_there():
    given = coefficients(forbidden_adds=True)
    neighbours = np.array([[1, 1, 1], [1, -1, -1], [-1, 1, -1], [-1, -1, 1]]) / 4
    midpoints = (ATOMS[:4, None, :] + neighbours[None, :, :] / 2).reshape(-1, 3)
    np.testing.assert_allclose(at(given, midpoints), at(given, midpoints[:1])[0], atol=1e-9)
    # With the sign of the exponent mistaken, the atoms would sit at −(¼,¼,¼) and a bond here.
    assert at(given, -np.array([BOND_MIDPOINT]))[0] < 0


def test_families_are_complete():
    """158 reflections: multiplicities of m-3m, International Tables A; each has its mate."""
    given = deformation_set(forbidden_adds=True)
    rows = set(zip(given.h, given.k, given.l, strict=True))
    assert len(rows) == len(given.h) == 8 + 12 + 24 + 8 + 6 + 24 + 24 + 8 + 24 + 12 + 8
    assert all((-h, -k, -l) in rows for h, k, l in rows)
    assert coefficients(forbidden_adds=True).tally.mates_joined == len(rows) // 2
