"""Parts of a trial stack: what they scatter, and what is refused."""

from __future__ import annotations

import numpy as np
import pytest
import xraydb

from engine import InputError
from engine.films.trial import Plane, Slab
from engine.films.trial.parts import strengths


def test_a_formula_scatters_as_its_atoms_over_the_area():
    part = Plane.of("sheet", 1.0, formula="SiO2", area=20.0)
    s = np.array([0.05, 0.3])
    expected = (xraydb.f0("Si", s) + 2 * xraydb.f0("O", s)) / 20
    np.testing.assert_allclose(strengths(part, s, "xray"), expected, rtol=2e-3)


def test_neutrons_see_the_same_at_every_q():
    """D2O: 2 × 6.671 + 5.803 fm (Sears, Neutron News 3 (1992) 26); 1 fm/Å² = 10 × 10⁻⁶ Å⁻¹."""
    part = Plane.of("water", 0.0, formula="D2O", area=9.6)
    expected = 10 * (2 * 6.671 + 5.803) / 9.6
    np.testing.assert_allclose(strengths(part, np.array([0.0, 0.4]), "neutron"), expected, rtol=1e-3)


def test_a_strength_is_the_same_at_every_q():
    part = Plane.of("sheet", 1.0, strength=-2.5)
    np.testing.assert_array_equal(strengths(part, np.array([0.0, 9.0]), "xray"), [-2.5, -2.5])


def test_a_slab_has_a_centre_and_a_thickness():
    part = Slab.between("gallery", 2.0, 7.0, density=0.3)
    assert (part.position, part.thickness) == (4.5, 5.0)


@pytest.mark.parametrize(
    ("make", "place"),
    [
        (lambda: Plane.of("a", 0.0), "formula"),
        (lambda: Plane.of("a", 0.0, formula="C", area=3.0, strength=1.0), "formula"),
        (lambda: Plane.of("a", 0.0, formula="C"), "area"),
        (lambda: Plane.of("a", 0.0, formula="C", area=0.0), "area"),
        (lambda: Plane.of("a", np.nan, strength=1.0), "position"),
        (lambda: Plane.of("a", 0.0, strength=1.0, width=-1.0), "width"),
        (lambda: Plane.of("a", 0.0, strength=1.0, occupancy=-0.1), "occupancy"),
        (lambda: Plane.of("a.b", 0.0, strength=1.0), "a.b"),
        (lambda: Plane.of("", 0.0, strength=1.0), "name"),
        (lambda: Slab.between("a", 3.0, 3.0, density=1.0), "upper"),
        (lambda: Slab.between("a", 3.0, np.inf, density=1.0), "upper"),
        (lambda: Slab.between("a", 3.0, 4.0, density=1.0, roughness=-1.0), "roughness"),
    ],
)
def test_refusals(make, place):
    with pytest.raises(InputError, match=place):
        make()
