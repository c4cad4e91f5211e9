"""Checks 6 to 8: form factors, scattering lengths and the densities that follow from them."""

from __future__ import annotations

import numpy as np
import periodictable
import pytest
import xraydb

from engine import Columns, Lattice, assemble, evaluate, sampling
from tests.external import silicon

AVOGADRO = 6.02214076e23
"""1/mol, exact since 2019 (SI)."""


def by_periodictable(symbol: str, s: float) -> float:
    return float(getattr(periodictable, symbol).xray.f0(4 * np.pi * s))


def by_xraydb(symbol: str, s: float) -> float:
    return float(xraydb.f0(symbol, s)[0])


LIBRARIES = {"periodictable": by_periodictable, "xraydb": by_xraydb}


@pytest.mark.parametrize("library", LIBRARIES)
@pytest.mark.parametrize(("s", "expected"), [(0.0, 5.9972), (0.1, 5.1098), (0.2, 3.5572), (0.5, 1.6828), (1.0, 1.1132)])
def test_form_factor_of_carbon(library, s, expected):
    """Check 6: Waasmaier & Kirfel, Acta Cryst. A51 (1995) 416, by two reference libraries.

    The bound is half a unit of the last digit written.
    """
    assert LIBRARIES[library]("C", s) == pytest.approx(expected, abs=0.5e-4)


def test_two_libraries_give_the_same_free_silicon_atom():
    """Check 6, for the atom that check 11 takes away; the tables print seven digits."""
    for s in np.linspace(0, 2, 41):
        assert silicon.free_atom(s) == pytest.approx(by_xraydb("Si", s), abs=1e-6)


@pytest.mark.parametrize(
    ("symbol", "sears"), [("H", -3.7390), ("D", 6.671), ("C", 6.6460), ("O", 5.803), ("Si", 4.1491)]
)
def test_neutron_scattering_lengths(symbol, sears):
    """Check 7: Sears, Neutron News 3 (1992) 26; fm, memory.

    The library periodictable carries Rauch & Waschkowski (Neutron Data Booklet, 2003) with later
    measurements, not the table of Sears. The two evaluate much the same measurements and differ
    by up to 0.05 %; twice that is allowed, and a wrong isotope or sign is off by far more.
    """
    assert getattr(periodictable, symbol).neutron.b_c == pytest.approx(sears, rel=1e-3)


def molecular_cell(grams_per_mole: float, grams_per_cm3: float) -> Lattice:
    """A cube that holds one molecule of a liquid."""
    edge = (grams_per_mole / (grams_per_cm3 * AVOGADRO) * 1e24) ** (1 / 3)
    return Lattice.from_parameters(edge, edge, edge, 90, 90, 90)


def mean_density(lattice: Lattice, total: float) -> float:
    """The mean of a sampled cell with F(000) = total and one ripple that must not matter."""
    columns = Columns(indices=[[1], [0], [0]], amplitude=[0.3 * abs(total)], phase_deg=[40.0])
    coefficients = assemble(lattice, columns, values="structure_factor", mean=total)
    return float(evaluate(coefficients, sampling.full_cell(lattice, (6, 5, 4))).values.mean())


@pytest.mark.parametrize(
    ("isotope", "grams_per_cm3", "expected", "bound"),
    [("D", 1.105, 6.4, 0.05), ("H", 0.9982, -0.56, 0.005)],
)
def test_scattering_length_density_of_water(isotope, grams_per_cm3, expected, bound):
    """Check 8: common practice, in 10⁻⁶ Å⁻² at 20 °C; 1 fm/Å³ is 10 of these."""
    hydrogen, oxygen = getattr(periodictable, isotope), periodictable.O
    lattice = molecular_cell(2 * hydrogen.mass + oxygen.mass, grams_per_cm3)
    found = 10 * mean_density(lattice, 2 * hydrogen.neutron.b_c + oxygen.neutron.b_c)
    assert found == pytest.approx(expected, abs=bound)


def test_scattering_length_density_of_silicon():
    """Check 8: common practice, 2.07 × 10⁻⁶ Å⁻²."""
    lattice = Lattice.from_parameters(*[silicon.EDGE] * 3, 90, 90, 90)
    found = 10 * mean_density(lattice, 8 * periodictable.Si.neutron.b_c)
    assert found == pytest.approx(2.07, abs=0.005)


def test_electron_density_of_water():
    """Check 8: common practice, 0.334 e/Å³ at 20 °C; ten electrons a molecule."""
    mass = 2 * periodictable.H.mass + periodictable.O.mass
    assert mean_density(molecular_cell(mass, 0.9982), 10.0) == pytest.approx(0.334, abs=0.0005)
