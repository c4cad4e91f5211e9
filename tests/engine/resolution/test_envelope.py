"""Expected strengths against structure factors of random atoms, and against the sums written out."""

from __future__ import annotations

import numpy as np
import pytest
import xraydb

from engine import Lattice
from engine.resolution import Envelope
from engine.scattering import composition
from engine.symmetry import space_group
from tests.engine.resolution.sets import coefficient_set
from tests.engine.symmetry import crystals
from tests.strategies import refusal_of

CELL = Lattice.from_parameters(6, 7, 8, 90, 90, 90)
SOME = np.array([[0, 0, 1], [1, 2, 3], [0, 3, 4]])


def test_a_bound_is_itself():
    given = coefficient_set(CELL, SOME)
    s = CELL.sine_over_wavelength(SOME)
    envelope = Envelope.from_bound(0.7, 2.5)
    envelope.check(given)
    assert envelope.rms(given, SOME) == pytest.approx(0.7 * np.exp(-2.5 * s**2))
    assert envelope.bound_at(given, s) == pytest.approx(0.7 * np.exp(-2.5 * s**2))
    assert envelope.mean_square(given, s) == pytest.approx(0.49 * np.exp(-5 * s**2))
    assert np.exp(-2.5 * envelope.s_end(given) ** 2) < 1e-15
    assert "0.7" in envelope.describe()


def test_a_composition_for_x_rays():
    """Form factors by the other library, xraydb."""
    given = coefficient_set(CELL, SOME, unit="e/Å³")
    s = CELL.sine_over_wavelength(SOME)
    envelope = Envelope.from_composition(composition("SiO2"), 1.5, units=3)
    silicon, oxygen = (xraydb.f0(name, s) for name in ("Si", "O"))
    fall = np.exp(-1.5 * s**2)
    assert envelope.rms(given, SOME) == pytest.approx(
        np.sqrt(3 * silicon**2 + 6 * oxygen**2) * fall / CELL.volume, rel=1e-3
    )
    assert envelope.bound_at(given, s) == pytest.approx((3 * silicon + 6 * oxygen) * fall / CELL.volume, rel=1e-3)
    assert "SiO2" in envelope.describe()
    assert envelope.s_end(given) < 6
    assert Envelope.from_composition(composition("SiO2"), 0.01).s_end(given) == 6


@pytest.mark.parametrize(("unit", "number"), [("fm/Å³", 1), ("10⁻⁶ Å⁻²", 10)])
def test_a_composition_for_neutrons(unit, number):
    """H −3.739, O 5.803 fm: the bound takes lengths as they are long (check 7)."""
    given = coefficient_set(CELL, SOME, unit=unit)
    s = CELL.sine_over_wavelength(SOME)
    envelope = Envelope.from_composition(composition("H2O"), 2.0, units=4)
    fall = number * np.exp(-2 * s**2) / CELL.volume
    assert envelope.rms(given, SOME) == pytest.approx(np.sqrt(4 * (2 * 3.739**2 + 5.803**2)) * fall, rel=1e-3)
    assert envelope.bound_at(given, s) == pytest.approx(4 * (2 * 3.739 + 5.803) * fall, rel=1e-3)
    assert np.exp(-2 * envelope.s_end(given) ** 2) < 1e-15


@pytest.mark.parametrize("symbol", ["P222", "C2", "I41", "P-1"])
def test_special_and_centred_terms_are_as_strong_as_random_atoms_make_them(symbol):
    """⟨|F|²⟩ over many random structures of one atom in general position, class by class of ε."""
    group = space_group(symbol)
    lattice = crystals.cell_of(group)
    h = np.array([[0, 0, 4], [0, 4, 0], [4, 0, 0], [2, 4, 0], [2, 0, 4], [0, 2, 4], [2, 4, 4], [1, 3, 2]])
    rng = np.random.default_rng(8)
    square = np.zeros(len(h))
    trials = 4000
    for _ in range(trials):
        site = rng.random(3)
        images = np.array([r @ site + t for r, t in zip(group.rotations, group.translations, strict=True)])
        square += np.abs(np.exp(2j * np.pi * h @ images.T).sum(axis=1)) ** 2 / trials
    given = coefficient_set(lattice, h, group=group, unit="fm/Å³")
    # One kind of atom with b = 5.803 fm (O), as many as the group has operations.
    envelope = Envelope.from_composition(composition("O"), 1e-9, units=group.order)
    found = (envelope.rms(given, h) * lattice.volume / 5.803) ** 2
    assert found == pytest.approx(square, rel=0.1)


def test_what_does_not_fit_is_refused():
    content = composition("SiO2")
    stack = coefficient_set(Lattice.from_period(50), np.array([[1]]), unit="e/Å³")
    envelope = Envelope.from_composition(content, 1.0)
    assert "crystal" in refusal_of(lambda: envelope.check(stack)).reason
    assert "arbitrary" in refusal_of(lambda: envelope.check(coefficient_set(CELL, SOME))).reason
    assert refusal_of(lambda: Envelope.from_bound(0, 1)).path == ("amplitude",)
    assert refusal_of(lambda: Envelope.from_bound(1, 0)).path == ("b",)
    assert refusal_of(lambda: Envelope.from_composition(content, -1)).path == ("b",)
    assert refusal_of(lambda: Envelope.from_composition(content, 1, units=0)).path == ("units",)
