"""Amplitudes of a trial stack against integrals done by quadrature."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate, special

from engine import InputError
from engine.films.trial import Plane, Slab, Stack, calculated

LENGTH = st.floats(0.3, 6.0)


def transform(density, low, high, q):
    """∫ n(z) exp(iqz) dz by adaptive quadrature."""
    real = integrate.quad(lambda z: density(z) * np.cos(q * z), low, high, limit=400, epsabs=1e-11)[0]
    imag = integrate.quad(lambda z: density(z) * np.sin(q * z), low, high, limit=400, epsabs=1e-11)[0]
    return real + 1j * imag


def rough_slab(lower, upper, density, roughness):
    root = np.sqrt(2) * roughness
    return lambda z: density / 2 * (special.erf((z - lower) / root) - special.erf((z - upper) / root))


@settings(max_examples=15, deadline=None)
@given(lower=st.floats(-5, 5), thick=LENGTH, rough=st.floats(0.1, 1.0), order=st.integers(-9, 9))
def test_a_slab_is_its_quadrature(lower, thick, rough, order):
    upper, d = lower + thick, 17.3
    model = Stack.of(d, [Slab.between("a", lower, upper, density=0.7, roughness=rough)])
    expected = transform(
        rough_slab(lower, upper, 0.7, rough), lower - 9 * rough, upper + 9 * rough, 2 * np.pi * order / d
    )
    assert calculated(model, [order])[0] == pytest.approx(expected, abs=1e-8)


def test_a_sharp_slab_is_its_quadrature():
    model = Stack.of(21.0, [Slab.between("a", 1.2, 7.9, density=-0.4)])
    expected = [transform(lambda z: -0.4, 1.2, 7.9, 2 * np.pi * l / 21) for l in range(12)]
    np.testing.assert_allclose(calculated(model, range(12)), expected, atol=1e-9)


@settings(max_examples=15, deadline=None)
@given(z=st.floats(-8, 8), width=st.floats(0.1, 1.5), order=st.integers(-9, 9))
def test_a_plane_is_its_quadrature(z, width, order):
    model = Stack.of(16.1, [Plane.of("a", z, width=width, strength=3.0, occupancy=0.6)])

    def sheet(place):
        return 1.8 * np.exp(-((place - z) ** 2) / (2 * width**2)) / np.sqrt(2 * np.pi) / width

    expected = transform(sheet, z - 9 * width, z + 9 * width, 2 * np.pi * order / 16.1)
    assert calculated(model, [order])[0] == pytest.approx(expected, abs=1e-8)


def test_a_background_is_what_the_parts_displace():
    """A period filled with the solvent, slab and sheet put into it: the whole density by quadrature."""
    d, solvent = 18.0, 0.334
    sheet = Plane.of("ion", 6.0, width=0.5, strength=2.0, displaced=1.5)
    layer = Slab.between("sheet", 9.0, 14.0, density=1.1, roughness=0.3)
    model = Stack.of(d, [sheet, layer], background=solvent)
    slab = rough_slab(9.0, 14.0, 1.1 - solvent, 0.3)

    def whole(z):
        ion = (2.0 - 1.5 * solvent) * np.exp(-((z - 6) ** 2) / 0.5) / np.sqrt(np.pi * 0.5)
        return solvent + slab(z) + ion

    expected = [transform(whole, 0.0, d, 2 * np.pi * l / d) for l in range(6)]
    np.testing.assert_allclose(calculated(model, range(6)), expected, atol=1e-7)


@pytest.mark.parametrize("symmetry", ["m", "-1"])
def test_symmetry_makes_images_and_counts_what_lies_on_a_mirror_once(symmetry):
    d = 20.0
    half = [
        Plane.of("centre", 0.0, strength=5.0, width=0.2),
        Plane.of("edge", d / 2, strength=2.0),
        Plane.of("between", 3.3, strength=1.5, width=0.4),
        Slab.between("middle", -1.0, 1.0, density=0.4),
        Slab.between("gallery", 5.0, 8.0, density=0.2, roughness=0.3),
    ]
    whole = [
        *half,
        Plane.of("image", -3.3, strength=1.5, width=0.4),
        Slab.between("mirror", -8.0, -5.0, density=0.2, roughness=0.3),
    ]
    l = np.arange(-7, 8)
    made = calculated(Stack.of(d, half, symmetry=symmetry), l)
    np.testing.assert_allclose(made, calculated(Stack.of(d, whole), l), atol=1e-12)
    assert not made.imag.any()


def test_scale_and_b_multiply_all():
    parts = [Plane.of("a", 1.0, strength=1.0), Slab.between("b", 2.0, 5.0, density=0.3)]
    l, d = np.arange(8), 12.0
    plain = calculated(Stack.of(d, parts), l)
    np.testing.assert_allclose(
        calculated(Stack.of(d, parts, B=2.5, scale=3.0), l), 3 * plain * np.exp(-2.5 * (l / (2 * d)) ** 2)
    )


def test_the_mirror_at_half_a_period_moves_with_the_period():
    model = Stack.of(20.0, [Plane.of("edge", 10.0, strength=1.0), Plane.of("in", 3.0, strength=1.0)], symmetry="m")
    moved = model.with_period(20.1)
    assert [part.position for part in moved.parts] == [10.05, 3.0]
    assert moved.parts[0].central
    assert not moved.parts[1].central


def test_numbers_are_read_and_replaced_by_name():
    model = Stack.of(20.0, [Plane.of("ion", 3.0, strength=1.0), Slab.between("wall", 5.0, 9.0, density=0.2)])
    moved = model.with_values(["ion.position", "wall.thickness", "B", "scale"], [3.5, 4.5, 1.0, 2.0])
    assert [moved.value(name) for name in ("ion.position", "wall.thickness", "B", "scale")] == [3.5, 4.5, 1.0, 2.0]
    assert model.value("ion.position") == 3.0


def test_units():
    carbon = Plane.of("a", 0.0, formula="C", area=2.6)
    bare = Plane.of("b", 0.0, strength=1.0)
    assert Stack.of(7.0, [carbon]).unit == "e/Å³"
    assert Stack.of(7.0, [carbon], probe="neutron").unit == "10⁻⁶ Å⁻²"
    assert Stack.of(7.0, [bare]).unit == "arbitrary"
    assert Stack.of(7.0, [bare], unit="e/Å³").unit == "e/Å³"


SHEET = Plane.of("a", 1.0, strength=1.0)


@pytest.mark.parametrize(
    ("make", "place"),
    [
        (lambda: Stack.of(10.0, []), "parts"),
        (lambda: Stack.of(10.0, [SHEET, SHEET]), "twice"),
        (lambda: Stack.of(-1.0, [SHEET]), "period"),
        (lambda: Stack.of(1e9, [SHEET]), "period"),
        (lambda: Stack.of(10.0, [SHEET], symmetry="2"), "symmetry"),
        (lambda: Stack.of(10.0, [SHEET], probe="electron"), "probe"),
        (lambda: Stack.of(10.0, [SHEET], scale=0.0), "scale"),
        (lambda: Stack.of(10.0, [SHEET], B=np.nan), "B"),
        (lambda: Stack.of(10.0, [Slab.between("b", 0.0, 11.0, density=1.0)]), "thicker"),
        (lambda: Stack.of(10.0, [Slab.between("b", -1.0, 2.0, density=1.0)], symmetry="m"), "across a mirror"),
        (lambda: Stack.of(10.0, [Slab.between("b", 4.0, 5.5, density=1.0)], symmetry="m"), "across a mirror"),
        (lambda: Stack.of(10.0, [Plane.of("b", 0.0, formula="C", area=2.0)], unit="V"), "unit"),
        (lambda: calculated(Stack.of(10.0, [SHEET]), [1.5]), "orders"),
        (lambda: calculated(Stack.of(10.0, [SHEET]), [200]), "orders"),
        (lambda: Stack.of(10.0, [SHEET]).value("a.colour"), "a.position"),
    ],
)
def test_refusals(make, place):
    with pytest.raises(InputError, match=place):
        make()
