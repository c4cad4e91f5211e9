"""Check 10 and conventions §8: width and ripple that the engine reports for complete sets, against closed forms.

James, The Optical Principles of the Diffraction of X-rays, 1948: the response of a complete sphere is
3 (sin u − u cos u)/u³ = 3 j₁(u)/u with u = G_max r; of a disc 2 J₁(u)/u; of an interval sin u/u. Bessel
functions and their extremes by scipy.special and scipy.optimize.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import optimize, special

from engine import Lattice, Treatment, Window
from engine.fields import summands
from engine.resolution import compare_windows, coverage, point_response
from engine.windows import point_width
from tests.external.test_termination import D_MIN, FULL_WIDTH, OBLIQUE, RESPONSES, complete_set, step_profile

RIPPLE = {1: -0.2172, 2: -0.1323, 3: -0.0862}
"""Deepest value of the closed forms, four digits."""


def deepest(dimension: int) -> tuple[float, float]:
    """Value and u of the first minimum of the closed form."""
    found = optimize.minimize_scalar(
        RESPONSES[dimension], bounds=(3.5, 6.8), method="bounded", options={"xatol": 1e-10}
    )
    return float(found.fun), float(found.x)


def test_the_depths_are_those_of_the_zeros_of_the_next_bessel_function():
    """d/du of j₁/u is −j₂/u, of J₁/u −J₂/u: the minima lie at zeros of j₂ and J₂."""
    assert deepest(2)[1] == pytest.approx(special.jn_zeros(2, 1)[0], rel=1e-6)
    assert special.spherical_jn(2, deepest(3)[1]) == pytest.approx(0, abs=1e-7)
    for dimension, depth in RIPPLE.items():
        assert deepest(dimension)[0] == pytest.approx(depth, abs=1e-4)


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_a_complete_set_reports_the_width_and_ripple_of_its_closed_form(dimension):
    given = complete_set(dimension)
    found = point_response(summands(given, Treatment(field="response")).series[0])
    depth, at = deepest(dimension)
    half = optimize.brentq(lambda u: RESPONSES[dimension](u) - 0.5, 0.5, 3.0)
    # The ragged rim of 10⁵ lattice points changes the radius by a few 1e-4, and ripples by about 1e-4 in places.
    assert found.widths / D_MIN == pytest.approx(np.full(dimension, half / np.pi), rel=6e-4)
    assert found.widths / D_MIN == pytest.approx(np.full(dimension, FULL_WIDTH[dimension]), abs=1e-3)
    assert found.ripple == pytest.approx(depth, abs=4e-4)
    assert found.ripple_at / D_MIN == pytest.approx(at / (2 * np.pi), rel=2e-3)


@pytest.mark.parametrize("kind", ["lanczos", "raised_cosine"])
@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_windows_widen_a_complete_set_as_the_integral_says(dimension, kind):
    """Lattice sums against the quadrature of the radial integral, which knows no lattice."""
    given = complete_set(dimension)
    g_max = float(given.lattice.magnitudes(given.indices).max())
    (found,) = compare_windows(given, windows=[Window(kind)])
    assert found.widths == pytest.approx(np.full(dimension, point_width(Window(kind), dimension, g_max)), rel=1e-3)
    # Heights: Σ w / Σ 1 → d ∫ w(u) u^{d−1} du, in closed form for d = 1.
    if dimension == 1:
        expected = {"lanczos": special.sici(np.pi)[0] / np.pi, "raised_cosine": 0.5}[kind]
        assert found.peak == pytest.approx(expected, abs=1e-3)


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_complete_sets_are_complete(dimension):
    found = coverage(complete_set(dimension))
    assert (found.missing, found.fraction, len(found.gaps)) == (0, 1.0, 0)
    lattice = OBLIQUE[dimension]
    # The ball of radius 2π/d_min holds V·(sphere of radius 1/d_min) points.
    volume = {1: 2.0, 2: np.pi, 3: 4 * np.pi / 3}[dimension]
    assert 2 * found.possible + 1 == pytest.approx(volume * lattice.volume / D_MIN**dimension, rel=2e-3)


def test_a_film_reports_its_normal_alone():
    """00l orders written on a three-dimensional cell resolve along c only."""
    film = step_profile(200)
    cell = Lattice.from_parameters(4.0, 5.0, 100.0, 90, 90, 90)
    indices = np.column_stack([np.zeros((film.count, 2), dtype=np.int64), film.indices])
    embedded = replace(film, lattice=cell, indices=np.asfortranarray(indices))
    found = point_response(summands(embedded, Treatment(field="response")).series[0])
    row = point_response(summands(film, Treatment(field="response")).series[0])
    assert found.widths[0] == pytest.approx(row.widths[0], rel=1e-9)
    assert np.all(np.isinf(found.widths[1:]))
