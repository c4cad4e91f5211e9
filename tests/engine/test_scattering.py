"""engine.scattering against two reference libraries and plain arithmetic."""

from __future__ import annotations

import numpy as np
import periodictable
import pytest
import xraydb
from hypothesis import given
from hypothesis import strategies as st

from engine.errors import InputError
from engine.scattering import (
    composition,
    dispersion,
    form_factors,
    mean_density,
    resonant,
    scattering_lengths,
    sum_of_squares,
    zero_term,
)

S = np.linspace(0, 2, 41)


@pytest.mark.parametrize(
    ("formula", "expected"),
    [
        ("SiO2", {"Si": 1, "O": 2}),
        ("Ca(CO3)", {"Ca": 1, "C": 1, "O": 3}),
        ("D2O", {"D": 2, "O": 1}),
        ("T2O", {"H[3]": 2, "O": 1}),
        ("Fe{2+}O", {"Fe2+": 1, "O": 1}),
        ("O[18]2", {"O[18]": 2}),
        ("Fe[56]{3+}2O3", {"Fe[56]3+": 2, "O": 3}),
        ("CaCO3+6H2O", {"Ca": 1, "C": 1, "O": 9, "H": 12}),
        ("(CH2)12.5", {"C": 12.5, "H": 25}),
        ("2H2O", {"H": 4, "O": 2}),
    ],
)
def test_formulas_are_read(formula, expected):
    content = composition(formula)
    assert dict(zip(content.species, content.counts, strict=True)) == expected


@pytest.mark.parametrize(
    ("formula", "named"),
    [
        ("Xx2O", "Xx"),
        ("Fe{9+}", "Fe"),
        ("O[99]", "O"),
        ("", "formula"),
        ("C0", "no atom"),
        ("Si(O2", "character"),
        ("5g NaCl", "small letters"),
        ("H2O@1", "formula"),
        ("50%wt NaCl//H2O", "formula"),
        ("(" * 300 + "C" + ")" * 300, "brackets"),
        ("C" * 1001, "formula"),
    ],
)
def test_what_is_no_formula_is_refused_by_name(formula, named):
    with pytest.raises(InputError, match=named):
        composition(formula)


@given(st.integers(1, 9), st.integers(1, 9), st.integers(1, 9))
def test_brackets_multiply(n, m, k):
    """Law: (A_n B_m)_k holds k times each, and its electrons and lengths follow."""
    content, unit = composition(f"(Si{n}O{m}){k}"), composition(f"Si{n}O{m}")
    assert dict(zip(content.species, content.counts, strict=True)) == {"Si": n * k, "O": m * k}
    assert content.electrons == k * (14 * n + 8 * m)
    assert content.scattering_length == pytest.approx(k * unit.scattering_length, rel=1e-14)
    assert content.molar_mass == pytest.approx(k * unit.molar_mass, rel=1e-14)


@pytest.mark.parametrize("name", ["H", "C", "O", "Si", "Fe", "Fe2+", "O2-", "Cl1-", "U"])
def test_form_factors_of_another_library(name):
    """Check 6: xraydb holds the same fit; its coefficients are printed to seven digits or so."""
    assert form_factors([name], S)[0] == pytest.approx(xraydb.f0(name, S), abs=2e-5)


@pytest.mark.parametrize(("s", "expected"), [(0.0, 5.9972), (0.1, 5.1098), (0.2, 3.5572), (0.5, 1.6828), (1.0, 1.1132)])
def test_form_factor_of_carbon(s, expected):
    """Check 6; half a unit of the last digit written."""
    assert form_factors(["C"], np.array([s]))[0, 0] == pytest.approx(expected, abs=0.5e-4)


def test_isotopes_scatter_x_rays_as_their_element():
    assert np.array_equal(form_factors(["D", "O[18]"], S), form_factors(["H", "O"], S))


@pytest.mark.parametrize("name", ["C", "O", "Si", "Fe", "Mo"])
@pytest.mark.parametrize("wavelength", [0.7107, 1.5406])
def test_dispersion_of_another_table(name, wavelength):
    """xraydb carries the table of Chantler; the two differ by some per cent and 0.1 electrons away from edges."""
    energy = 12398.42 / wavelength
    real, imaginary = dispersion([name], wavelength)
    assert real[0] == pytest.approx(xraydb.f1_chantler(name, energy), abs=0.12)
    assert imaginary[0] == pytest.approx(xraydb.f2_chantler(name, energy), rel=0.06, abs=2e-3)


@pytest.mark.parametrize(
    ("symbol", "sears"), [("H", -3.7390), ("D", 6.671), ("C", 6.6460), ("O", 5.803), ("Si", 4.1491)]
)
def test_scattering_lengths(symbol, sears):
    """Check 7: Sears, Neutron News 3 (1992) 26; the later table differs by 0.05 %."""
    assert scattering_lengths([symbol])[0] == pytest.approx(sears, rel=1.2e-3)


def test_resonant_absorbers_are_told():
    assert resonant(["Si", "Gd", "O", "Cd"]) == ("Gd", "Cd")


def test_densities_of_common_practice():
    """Check 8, the bounds being half the last digit written."""
    water, heavy = composition("H2O"), composition("D2O")
    assert mean_density(water, mass_density=0.9982) == pytest.approx(0.334, abs=5e-4)
    assert mean_density(water, mass_density=0.9982, probe="neutron") == pytest.approx(-0.56, abs=5e-3)
    assert mean_density(heavy, mass_density=1.105, probe="neutron") == pytest.approx(6.4, abs=0.05)
    silicon = composition("Si8")
    assert mean_density(silicon, volume=5.431**3, probe="neutron") == pytest.approx(2.07, abs=5e-3)


def test_mass_density_and_volume_say_the_same():
    """Silicon: 8 atoms of 28.0855 u in (5.431 Å)³ weigh 2.329 g/cm³ (handbook)."""
    by_mass = mean_density(composition("Si"), mass_density=2.329)
    by_volume = mean_density(composition("Si8"), volume=5.431**3)
    assert by_mass == pytest.approx(by_volume, rel=2e-4)


def test_zero_terms():
    """Quartz, three SiO2 a cell: 90 electrons; an ion pair has 28, as argon and neon less nothing."""
    assert zero_term(composition("SiO2"), units=3) == 90
    assert zero_term(composition("Na{+}Cl{-}")) == 28
    b = 3 * (periodictable.Si.neutron.b_c + 2 * periodictable.O.neutron.b_c)
    assert zero_term(composition("SiO2"), units=3, probe="neutron") == pytest.approx(b, rel=1e-14)


def test_sum_of_squares_is_the_plain_sum():
    content = composition("SiO2")
    silicon, oxygen = xraydb.f0("Si", S), xraydb.f0("O", S)
    assert sum_of_squares(content, S, units=3) == pytest.approx(3 * silicon**2 + 6 * oxygen**2, rel=1e-5)
    neutron = 3 * periodictable.Si.neutron.b_c**2 + 6 * periodictable.O.neutron.b_c**2
    assert sum_of_squares(content, S, units=3, probe="neutron") == pytest.approx(np.full(S.size, neutron), rel=1e-14)
    (si, o), (si2, o2) = dispersion(["Si", "O"], 1.5406)
    expected = 3 * abs(silicon + si + 1j * si2) ** 2 + 6 * abs(oxygen + o + 1j * o2) ** 2
    assert sum_of_squares(content, S, units=3, wavelength=1.5406) == pytest.approx(expected, rel=1e-5)


@pytest.mark.parametrize(
    ("call", "path"),
    [
        (lambda: form_factors(["C", "Qq"], S), ("species",)),
        (lambda: form_factors(["C", "C4+"], S), ("species", 1)),
        (lambda: form_factors(["fe"], S), ("species",)),
        (lambda: form_factors(["C"], np.array([0.1, 6.1, -0.1])), ("s",)),
        (lambda: dispersion(["Cm"], 1.5), ("species", 0)),
        (lambda: dispersion(["Si"], 1e-3), ("species", 0)),
        (lambda: dispersion(["Si"], -1), ("wavelength",)),
        (lambda: scattering_lengths(["O", "At"]), ("species", 1)),
        (lambda: mean_density(composition("Si")), ("mass_density",)),
        (lambda: mean_density(composition("Si"), mass_density=1, volume=1), ("mass_density",)),
        (lambda: mean_density(composition("Si"), volume=0), ("volume",)),
        (lambda: zero_term(composition("Si"), probe="electron"), ("probe",)),
        (lambda: sum_of_squares(composition("Si"), S, probe="neutron", wavelength=1.0), ("wavelength",)),
    ],
)
def test_refusals(call, path):
    with pytest.raises(InputError) as fault:
        call()
    assert fault.value.path == path


def test_rows_beyond_the_table_are_named():
    with pytest.raises(InputError) as fault:
        form_factors(["C"], np.array([0.1, 6.1, 0.2, 7.0]))
    assert fault.value.rows == (1, 3)
