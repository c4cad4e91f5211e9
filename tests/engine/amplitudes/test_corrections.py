"""Factors of the geometry against values worked by hand, limits and a numerical integration."""

from __future__ import annotations

import dataclasses
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import integrate

from engine.amplitudes.corrections import (
    FilmAbsorption,
    Footprint,
    Lorentz,
    Multiplicity,
    Polarisation,
    correct,
    glancing_angles,
)
from engine.errors import InputError
from engine.lattice import Lattice
from tests.engine.amplitudes.simulated import reflections, stack

DEGREES_30 = np.array([math.pi / 6])
ANGLES = np.radians([0.3, 1.0, 7.0, 22.5, 44.0, 61.0, 85.0])


@pytest.mark.parametrize(
    ("kind", "expected"),
    [
        # sin 60° = √3/2, sin 30° = 1/2, cos 30° = √3/2.
        ("rotation", 2 / math.sqrt(3)),
        ("powder", 8 / math.sqrt(3)),
        ("film_whole_arc", 2 / math.sqrt(3)),
        ("film_part_of_arc", 4 / math.sqrt(3)),
    ],
)
def test_lorentz_at_thirty_degrees(kind, expected):
    assert Lorentz(kind).factors(DEGREES_30) == pytest.approx([expected], rel=1e-14)


@pytest.mark.parametrize(("kind", "power"), [("film_whole_arc", 1), ("film_part_of_arc", 2)])
def test_orders_of_a_stack_at_small_angles(kind, power):
    """Blaurock & Worthington (1966): intensities of the orders h are multiplied by h, or h²; d = 60 Å, Cu Kα.

    sin 2θ = 2 sin θ cos θ and the cosine is 1 within 1 % up to order 10.
    """
    orders = np.arange(1, 11)
    found = correct(stack(np.ones(10)), 1.5406, [Lorentz(kind)])
    assert found.reflections.observed / found.reflections.observed[0] == pytest.approx(orders**power, rel=0.01)


def test_polarisation_by_hand():
    """2θ = 60°, cos² = 1/4. Unpolarised 5/8; degree 0.9: 0.95 + 0.05/4; cos²2θ_M = 1/2: (1 + 1/8)/1.5."""
    assert Polarisation().factors(DEGREES_30) == pytest.approx([0.625], rel=1e-14)
    assert Polarisation(degree=0.9).factors(DEGREES_30) == pytest.approx([0.9625], rel=1e-14)
    assert Polarisation(degree=1).factors(ANGLES) == pytest.approx(np.ones(7), rel=1e-14)
    assert Polarisation(degree=-1).factors(ANGLES) == pytest.approx(np.cos(2 * ANGLES) ** 2, rel=1e-14)
    mosaic = Polarisation(monochromator_2theta_deg=45)
    assert mosaic.factors(DEGREES_30) == pytest.approx([0.75], rel=1e-14)
    perfect = Polarisation(monochromator_2theta_deg=60, perfect=True)
    assert perfect.factors(DEGREES_30) == pytest.approx([(1 + 0.5 / 4) / 1.5], rel=1e-14)


@given(st.floats(0.01, 1.5), st.floats(1, 179))
def test_a_monochromator_is_a_partly_polarised_source(theta, angle):
    """Law: with K = cos²2θ_M it equals a source of degree (1 − K)/(1 + K)."""
    k = math.cos(math.radians(angle)) ** 2
    angles = np.array([theta])
    by_crystal = Polarisation(monochromator_2theta_deg=angle).factors(angles)
    assert by_crystal == pytest.approx(Polarisation(degree=(1 - k) / (1 + k)).factors(angles), rel=1e-12)


@pytest.mark.parametrize("theta", ANGLES)
@pytest.mark.parametrize(("thickness", "mu"), [(0.01, 10), (3.0, 80), (500, 200)])
def test_film_absorption_is_the_integral_over_depth(theta, thickness, mu):
    """∫₀ᵗ exp(−2μz/sin θ) dz/sin θ over the same for t → ∞, 1/2μ, by quadrature (scipy)."""
    depth = 1e-4 * thickness
    integral = integrate.quad(
        lambda z: math.exp(-2 * mu * z / math.sin(theta)) / math.sin(theta),
        0,
        min(depth, 40 * math.sin(theta) / (2 * mu)),
        epsabs=0,
        epsrel=1e-11,
    )[0]
    film = FilmAbsorption(thickness_um=thickness, mu_per_cm=mu)
    assert film.factors(np.array([theta]))[0] == pytest.approx(2 * mu * integral, rel=1e-9)


def test_limits_of_film_absorption():
    """Thin: 2μt/sin θ, the next term being half its square; thick: 1; without absorption: 1/sin θ up to a scale."""
    thin = FilmAbsorption(thickness_um=1e-4, mu_per_cm=1.0).factors(ANGLES)
    assert thin == pytest.approx(2e-8 / np.sin(ANGLES), rel=1e-5)
    assert FilmAbsorption(thickness_um=1e5, mu_per_cm=100).factors(ANGLES) == pytest.approx(np.ones(7), rel=1e-15)
    none = FilmAbsorption(thickness_um=5, mu_per_cm=0).factors(ANGLES)
    assert none / none[0] == pytest.approx(thin / thin[0], rel=1e-5)


@pytest.mark.parametrize("theta", ANGLES)
def test_gaussian_footprint_is_the_integral_of_the_beam(theta):
    """The part of a normal density of FWHM w within ±L sin θ/2, by quadrature (scipy)."""
    length, width = 12.0, 0.2
    sigma = width / math.sqrt(8 * math.log(2))
    half = length * math.sin(theta) / 2
    expected = integrate.quad(
        lambda y: math.exp(-0.5 * (y / sigma) ** 2) / (sigma * math.sqrt(2 * math.pi)),
        -min(half, 9 * sigma),
        min(half, 9 * sigma),
    )[0]
    found = Footprint(length_mm=length, width_mm=width, profile="gaussian").factors(np.array([theta]))[0]
    assert found == pytest.approx(expected, rel=1e-9)


def test_uniform_footprint_by_hand():
    """L = 10 mm, w = 2 mm: all from sin θ = 0.2 on, half at 0.1."""
    found = Footprint(length_mm=10, width_mm=2).factors(np.arcsin([0.1, 0.2, 0.5]))
    assert found == pytest.approx([0.5, 1, 1], rel=1e-14)


def test_glancing_angles_of_silver_behenate():
    """Check 4: d = 58.380 Å; order l at Cu Kα1 has θ = arcsin(lλ/2d)."""
    chain = reflections([[1], [2], [13]], np.ones(3), lattice=Lattice.from_period(58.380))
    expected = np.arcsin(np.array([1, 2, 13]) * 1.5405929 / (2 * 58.380))
    assert glancing_angles(chain, 1.5405929) == pytest.approx(expected, rel=1e-14)


def test_corrections_multiply_and_carry_errors():
    """At 2θ = 60° on both: d = λ, so that sin θ = 1/2; by hand 0.625 · 2/√3 · m."""
    pair = reflections([[1, 0], [0, 1]], [10.0, 20.0], [1.0, 3.0], lattice=Lattice.from_planar_parameters(5, 5, 90))
    found = correct(pair, 5.0, [Lorentz("rotation"), Polarisation(), Multiplicity(np.array([2.0, 4.0]))])
    factors = 0.625 * 2 / math.sqrt(3) * np.array([2.0, 4.0])
    assert found.factors == pytest.approx(factors, rel=1e-13)
    assert found.reflections.observed == pytest.approx(np.array([10, 20]) / factors, rel=1e-13)
    assert found.reflections.sigma == pytest.approx(np.array([1, 3]) / factors, rel=1e-13)
    assert [words.split(" of ")[0] for words in found.applied] == [
        "Lorentz factor",
        "polarisation factor",
        "multiplicity",
    ]
    assert pair.observed.tolist() == [10.0, 20.0]


def test_nothing_named_nothing_done():
    found = correct(stack([3.0, 2.0]), 1.5, [])
    assert found.applied == ()
    assert found.reflections.observed.tolist() == [3.0, 2.0]


@pytest.mark.parametrize(
    "made",
    [
        Lorentz("film_part_of_arc"),
        Polarisation(degree=0.95, monochromator_2theta_deg=26.6),
        FilmAbsorption(thickness_um=3, mu_per_cm=77),
        Footprint(length_mm=15, width_mm=0.3, profile="gaussian"),
    ],
)
def test_words_hold_every_number(made):
    for part in dataclasses.fields(made):
        value = getattr(made, part.name)
        if isinstance(value, float | int) and not isinstance(value, bool):
            assert f"{value:g}" in made.describe()


@pytest.mark.parametrize(
    ("call", "path", "rows"),
    [
        (lambda: correct(stack(np.ones(4), period=3), 1.6, []), ("wavelength",), (3,)),
        (lambda: correct(stack(np.ones(4), period=3), 3.0, [Lorentz("rotation")]), ("wavelength",), (2, 3)),
        (lambda: correct(stack(np.ones(2), period=3), 3.0, [Lorentz("powder")]), ("corrections",), (1,)),
        (lambda: correct(stack(np.ones(4)), 0.0, []), ("wavelength",), ()),
        (lambda: correct(stack(np.ones(4), quantity="amplitude"), 1.0, []), ("reflections",), ()),
        (lambda: correct(reflections([[0, 0, 0]], [1.0]), 1.0, []), ("indices",), (0,)),
        (lambda: correct(stack([1.0]), 1.0, [Polarisation(), Polarisation(degree=1)]), ("corrections", 1), ()),
        (lambda: correct(stack([1.0, 1.0]), 1.0, [Multiplicity([1, 0])]), ("multiplicity",), (1,)),
        (lambda: correct(stack([1.0, 1.0]), 1.0, [Multiplicity([1])]), ("multiplicity",), ()),
        (lambda: Lorentz("laue"), ("kind",), ()),
        (lambda: Polarisation(degree=1.1), ("degree",), ()),
        (lambda: Polarisation(degree=math.nan), ("degree",), ()),
        (lambda: Polarisation(monochromator_2theta_deg=180), ("monochromator_2theta_deg",), ()),
        (lambda: Polarisation(perfect=True), ("perfect",), ()),
        (lambda: FilmAbsorption(thickness_um=0, mu_per_cm=1), ("thickness_um",), ()),
        (lambda: FilmAbsorption(thickness_um=1, mu_per_cm=-1), ("mu_per_cm",), ()),
        (lambda: Footprint(length_mm=1, width_mm=0), ("width_mm",), ()),
        (lambda: Footprint(length_mm=1, width_mm=1, profile="round"), ("profile",), ()),
    ],
)
def test_refusals(call, path, rows):
    with pytest.raises(InputError) as fault:
        call()
    assert fault.value.path == path
    assert fault.value.rows == rows
