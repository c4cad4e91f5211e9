"""Check 8: densities that scale a film, from composition and mass density, and a film that they scale."""

from __future__ import annotations

import numpy as np
import pytest

from engine.films.facts import KnownDensity, mean_of_composition
from engine.films.orders import FilmOrders
from engine.films.scale import scale_by_density_and_mean, scale_by_two_densities
from engine.scattering import composition, mean_density

AVOGADRO = 6.02214076e23
"""1/mol, exact since 2019 (SI)."""


@pytest.mark.parametrize(
    ("formula", "grams_per_cm3", "probe", "expected", "bound"),
    [
        ("H2O", 0.9982, "xray", 0.334, 0.0005),
        ("D2O", 1.105, "neutron", 6.4, 0.05),
        ("H2O", 0.9982, "neutron", -0.56, 0.005),
        ("Si", 2.329, "neutron", 2.07, 0.005),
    ],
)
def test_densities_of_common_practice(formula, grams_per_cm3, probe, expected, bound):
    """Check 8: common practice; e/Å³ and 10⁻⁶ Å⁻² at 20 °C."""
    assert mean_density(composition(formula), mass_density=grams_per_cm3, probe=probe) == pytest.approx(
        expected, abs=bound
    )


def test_a_liquid_alkane():
    """CH2 at 0.78 g/cm³: 8 electrons on 14.03 g/mol, 0.268 e/Å³; 0.30 to 0.33 only where chains are packed in crystals.

    Crystalline chains: 25.3 Å³ a CH2 (common practice: 18.6 Å² a chain, 1.27 Å a CH2; 23.6 Å³ at low temperature).
    """
    liquid = mean_density(composition("CH2"), mass_density=0.78)
    assert liquid == pytest.approx(8 / (14.027 / (0.78 * AVOGADRO) * 1e24), rel=1e-4)
    assert liquid == pytest.approx(0.268, abs=0.0005)
    assert 0.30 < mean_density(composition("CH2"), volume=25.3) < 0.33


def slabs(l, period, width, step):
    """F_l of a slab about the origin: step · sin(πl w/d)/(πl/d) (a textbook's transform)."""
    return step * np.sin(np.pi * l * width / period) / (np.pi * l / period)


@pytest.mark.parametrize("probe", ["xray", "neutron"])
def test_water_between_slabs_of_silicon(probe):
    """Invented: 12 Å of water a period of 40 Å, the rest silicon; both ways to the scale agree with the truth.

    Means over halves of the slabs; of 2000 orders what is cut off changes them by less than 10⁻³ of the jump.
    """
    period, width, unit = 40.0, 12.0, {"xray": "e/Å³", "neutron": "10⁻⁶ Å⁻²"}[probe]
    water = mean_density(composition("H2O"), mass_density=0.9982, probe=probe)
    silicon = mean_density(composition("Si"), mass_density=2.329, probe=probe)
    l = np.arange(1, 2001)
    factors = slabs(l, period, width, water - silicon)
    orders = FilmOrders.of(period, l, 7.0 * np.abs(factors))
    phases = np.where(factors < 0, 180.0, 0.0)
    inside = KnownDensity(start=-3, end=3, density=water, name="water")
    outside = KnownDensity(start=13, end=27, density=silicon, name="silicon")
    both = scale_by_two_densities(orders, phases, inside, outside, unit=unit)
    # What a period of 1 Å² holds: molecules by volume over area.
    volumes = {
        "H2O": 2 * 1.008 + 15.999,
        "Si": 28.085,
    }
    held = {
        "H2O": width * 0.9982 * AVOGADRO / (volumes["H2O"] * 1e24),
        "Si": (period - width) * 2.329 * AVOGADRO / (volumes["Si"] * 1e24),
    }
    mean = mean_of_composition(
        composition(f"(H2O){held['H2O']:.9f}(Si){held['Si']:.9f}"), area=1.0, period=period, probe=probe
    )
    expected = (water * width + silicon * (period - width)) / period
    assert mean.mean == pytest.approx(expected, rel=2e-4)
    by_mean = scale_by_density_and_mean(orders, phases, inside, mean, unit=unit)
    for found in (both, by_mean):
        assert found.factor == pytest.approx(1 / 7, rel=2e-3)
        assert found.mean == pytest.approx(expected, rel=2e-3)
