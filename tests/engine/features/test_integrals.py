"""Integrals over regions against quadrature, laws, and draws of errors."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import integrate

from engine import Lattice, Treatment, Window
from engine.averages import lateral
from engine.features.integrals import ball, integrals, integrated_unit, parallelepiped, segment, slab
from tests.engine.features.drawn import doubled, draws, measured
from tests.strategies import CRYSTAL, LATTICES, PLANAR, STACK, lattices, listing, listings, refusal_of

LAPLACIAN = Treatment(field="laplacian")
NODES, WEIGHTS = np.polynomial.legendre.leggauss(28)


def values_over(wanted, regions, treatment=None):
    return integrals(wanted.coefficients(unit="e/Å³"), regions, treatment).values


def panels(low, high, count):
    """Nodes and weights of Gauss's rule in equal panels."""
    edges = np.linspace(low, high, count + 1)
    half = np.diff(edges)[:, None] / 2
    middle = (edges[1:] + edges[:-1])[:, None] / 2
    return (middle + half * NODES).ravel(), (half * WEIGHTS).ravel()


def along_line(wanted, start, end, count=8):
    t, w = panels(0, 1, count)
    start, end = np.asarray(start), np.asarray(end)
    span = np.linalg.norm(wanted.lattice.to_cartesian(end - start))
    return span * float(w @ wanted.at(start + t[:, None] * (end - start)))


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_a_line(dimension):
    wanted = listing(LATTICES[dimension], seed=2)
    start, end = np.array([0.1, -0.3, 0.7])[:dimension], np.array([0.55, 0.4, 0.2])[:dimension]
    found = values_over(wanted, [segment(wanted.lattice, start, end)])
    assert found[0] == pytest.approx(along_line(wanted, start, end), rel=1e-11)


def test_a_line_in_cartesian_coordinates():
    wanted = listing(PLANAR, seed=2)
    ends = np.array([[1.0, 3.0], [9.0, -2.0]])
    made = integrals(wanted.coefficients(), [segment(PLANAR, *ends, coordinates="cartesian")])
    assert made.measures[0] == pytest.approx(math.hypot(8, 5))
    assert made.values[0] == pytest.approx(along_line(wanted, *PLANAR.to_fractional(ends)), rel=1e-11)


@pytest.mark.parametrize(
    ("normal", "start", "end"), [((0, 0, 1), -2.0, 5.5), ((2, -2, 4), 0.3, 1.7), ((1, 0, 0), 3, 30)]
)
def test_a_slab_of_a_crystal(normal, start, end):
    """Per unit area: the profile of the terms along the normal, written out and integrated by itself."""
    wanted = listing(CRYSTAL, seed=4, share=1.0)
    primitive = np.array(normal) // math.gcd(*normal)
    g = CRYSTAL.wavevectors(primitive[None])[0]
    d = 2 * math.pi / np.linalg.norm(g)

    def profile(t):
        total = 0.0
        for row, value in zip(wanted.indices, wanted.values, strict=True):
            order = round(float(CRYSTAL.wavevectors(row[None])[0] @ g / (g @ g)))
            if (row == order * primitive).all():
                total = total + (value * np.exp(2j * np.pi * order * t / d)).real
        return total

    t, w = panels(start, end, 10)
    expected = float(w @ profile(t))
    regions = [slab(CRYSTAL, normal, start, end), slab(CRYSTAL, normal, start, end, per="cell")]
    made = integrals(wanted.coefficients(unit="e/Å³"), regions)
    assert made.values[0] == pytest.approx(expected, rel=1e-11)
    assert made.values[1] == pytest.approx(expected * CRYSTAL.volume / d, rel=1e-11)
    assert made.units == ("e/Å²", "e")
    assert made.measures[0] == pytest.approx(end - start)
    np.testing.assert_allclose(made.means, expected / (end - start), rtol=1e-11)


def test_a_slab_is_counted_from_its_origin():
    wanted = listing(CRYSTAL, seed=4)
    g = CRYSTAL.wavevectors(np.array([[1, 1, 2]]))[0]
    shift = CRYSTAL.to_fractional(g / np.linalg.norm(g) * 1.25)
    inside = shift + np.array([0.3, -0.3, 0])
    pair = [slab(CRYSTAL, [1, 1, 2], 1.25, 3), slab(CRYSTAL, [1, 1, 2], 0, 1.75, origin=inside)]
    np.testing.assert_allclose(*np.split(values_over(wanted, pair), 2), rtol=1e-10)


def test_parallelepipeds_of_every_dimension():
    wanted = listing(CRYSTAL, seed=5, reach=(2, 1, 2))
    origin = np.array([0.2, -0.1, 0.4])
    edges = np.array([[0.4, 0.1, 0.0], [0.0, 0.3, 0.2], [0.1, -0.1, 0.5]])
    t, w = panels(0, 1, 1)
    for count in (1, 2, 3):
        chosen = edges[:count]
        mesh = np.stack(np.meshgrid(*[t] * count, indexing="ij"), axis=-1)
        weight = w
        for _ in range(count - 1):
            weight = np.multiply.outer(weight, w)
        gram = CRYSTAL.to_cartesian(chosen) @ CRYSTAL.to_cartesian(chosen).T
        size = math.sqrt(np.linalg.det(gram))
        expected = size * float((weight * wanted.at(origin + mesh @ chosen)).sum())
        middle = origin + chosen.sum(axis=0) / 2
        cartesian = CRYSTAL.to_cartesian(chosen)
        regions = [
            parallelepiped(CRYSTAL, chosen, origin=origin),
            parallelepiped(CRYSTAL, chosen, centre=middle),
            parallelepiped(CRYSTAL, cartesian, origin=CRYSTAL.to_cartesian(origin), coordinates="cartesian"),
        ]
        np.testing.assert_allclose(values_over(wanted, regions), expected, rtol=1e-10)
        assert regions[0].measure == pytest.approx(size, rel=1e-12)
        assert regions[0].power == count


def test_a_disc_and_a_ball():
    """In polar coordinates: Gauss's rule along the radius and cos θ, the trapezoidal rule round the axis."""
    radius, turn = 2.7, 2 * np.pi * np.arange(48) / 48
    r, w = panels(0, radius, 1)
    wanted = listing(PLANAR, seed=6)
    centre = np.array([0.3, 0.8])
    offset = r[:, None, None] * np.stack([np.cos(turn), np.sin(turn)], axis=-1)
    n = wanted.at(centre + PLANAR.to_fractional(offset))
    expected = float(w * r @ n.mean(axis=1)) * 2 * np.pi
    assert values_over(wanted, [ball(PLANAR, centre, radius)])[0] == pytest.approx(expected, rel=1e-10)

    wanted = listing(CRYSTAL, seed=6, reach=(2, 2, 2))
    centre, radius = np.array([0.3, 0.8, 0.1]), 1.9
    r, w = panels(0, radius, 1)
    sine = np.sqrt(1 - NODES**2)
    round_ = np.stack(
        [
            np.multiply.outer(sine, np.cos(turn)),
            np.multiply.outer(sine, np.sin(turn)),
            np.broadcast_to(NODES[:, None], (NODES.size, turn.size)),
        ],
        axis=-1,
    )
    n = wanted.at(centre + CRYSTAL.to_fractional(r[:, None, None, None] * round_))
    expected = float(w * r**2 @ (n.mean(axis=2) @ WEIGHTS)) * 2 * np.pi
    assert values_over(wanted, [ball(CRYSTAL, centre, radius)])[0] == pytest.approx(expected, rel=1e-10)


def test_an_interval_about_a_point_by_adaptive_quadrature():
    wanted = listing(STACK, seed=8)
    expected = integrate.quad(lambda z: float(wanted.at([[z / 58.4]])[0]), 10 - 3.5, 10 + 3.5, epsabs=1e-11)[0]
    assert values_over(wanted, [ball(STACK, [10 / 58.4], 3.5)])[0] == pytest.approx(expected, abs=1e-9)


@given(st.data())
def test_the_whole_cell_holds_its_mean(data):
    wanted = data.draw(listings(real=True))
    lattice, d = wanted.lattice, wanted.lattice.dimension
    mean = wanted.values[~wanted.indices.any(axis=1)].sum().real
    normal = data.draw(st.tuples(*(st.integers(-3, 3) for _ in range(d))).filter(any))
    shift = data.draw(st.floats(-3, 3))
    spacing = float(lattice.spacings(np.array([normal]))[0]) * math.gcd(*normal)
    regions = [
        parallelepiped(lattice, np.eye(d), origin=[shift] * d),
        slab(lattice, normal, shift, shift + spacing, per="cell"),
    ]
    made = integrals(wanted.coefficients(), regions)
    np.testing.assert_allclose(made.values, mean * lattice.volume, atol=1e-10 * wanted.weight * lattice.volume)
    np.testing.assert_allclose(made.measures, lattice.volume, rtol=1e-10)


@given(st.data())
def test_integrals_add_up_and_move_with_the_lattice(data):
    wanted = data.draw(listings(real=True))
    d = wanted.lattice.dimension
    normal = data.draw(st.tuples(*(st.integers(-3, 3) for _ in range(d))).filter(any))
    low, middle, high = np.sort(data.draw(st.lists(st.floats(-9, 9), min_size=3, max_size=3, unique=True)))
    if min(middle - low, high - middle) < 1e-6:
        return
    move = np.array(data.draw(st.tuples(*(st.integers(-4, 4) for _ in range(d)))))
    at = np.array(data.draw(st.tuples(*(st.floats(-1, 1) for _ in range(d)))))
    lattice = wanted.lattice
    made = integrals(
        wanted.coefficients(),
        [
            slab(lattice, normal, low, middle, origin=at),
            slab(lattice, normal, middle, high, origin=at),
            slab(lattice, normal, low, high, origin=at),
            slab(lattice, normal, low, high, origin=at + move),
            ball(lattice, at, 2.0),
            ball(lattice, at + move, 2.0),
        ],
    ).values
    bound = 1e-10 * wanted.weight * 50
    assert made[0] + made[1] == pytest.approx(made[2], abs=bound)
    assert made[2] == pytest.approx(made[3], abs=bound)
    assert made[4] == pytest.approx(made[5], abs=bound)


@given(lattices(3), st.integers(1, 6))
def test_per_cell_is_the_area_of_the_planes_unit(lattice, multiple):
    """(001) has the unit a × b, whatever multiple of the indices names it."""
    one = slab(lattice, [0, 0, multiple], 0, 1, per="cell")
    area = np.linalg.norm(np.cross(lattice.vectors[0], lattice.vectors[1]))
    assert one.measure == pytest.approx(area, rel=1e-9)


@pytest.mark.parametrize("dimension", [1, 2, 3])
@pytest.mark.parametrize("window", ["none", "lanczos"])
def test_covariance_is_that_of_draws(dimension, window):
    coefficients = measured(dimension)
    lattice = coefficients.lattice
    normal = [1, 0, 1][:dimension] if dimension < 3 else [0, 0, 1]
    regions = [
        slab(lattice, normal, 1, 6),
        ball(lattice, [0.2, 0.3, 0.4][:dimension], 2.5),
        segment(lattice, [0.0] * dimension, [0.4, 0.1, 0.3][:dimension]),
    ]
    treatment = Treatment(window=Window(window))
    made = integrals(coefficients, regions, treatment)
    # The integral is linear: those of single coefficients make the matrix that draws are sent through.
    indices, weight = doubled(coefficients)
    u = lattice.magnitudes(indices) / lattice.magnitudes(indices).max()
    factor = np.sinc(u) if window == "lanczos" else np.ones(u.size)
    waves = np.stack([region.factors(lattice, indices) for region in regions])
    drawn = (draws(coefficients, 8000) @ (waves * weight * factor).T).real
    np.testing.assert_allclose(made.values, (waves * weight * factor @ coefficients.values).real, rtol=1e-11)
    spread = np.cov(drawn.T)
    np.testing.assert_allclose(made.sigma, np.sqrt(np.diagonal(spread)), rtol=0.035)
    scaled = made.covariance / np.outer(made.sigma, made.sigma)
    np.testing.assert_allclose(scaled, np.corrcoef(drawn.T), atol=0.04)
    np.testing.assert_allclose(made.mean_sigma, made.sigma / made.measures)


def test_a_merit_is_not_counted_twice():
    """The best coefficient m A leaves the variance of the true one; a merit of 0 leaves all of A²."""
    coefficients = replace(listing(STACK, seed=1).coefficients(), merit=None)
    merit = np.where(coefficients.indices.any(axis=1), 0.0, 1.0)
    unknown = replace(coefficients, merit=merit)
    region = [slab(STACK, [1], 2, 9)]
    made = integrals(unknown, region, Treatment(apply_merit=True))
    indices, weight = doubled(coefficients)
    strength = region[0].factors(STACK, indices) * weight * np.abs(coefficients.values)
    # A phase that may be anything: each term is A t cos φ, of variance A² t²/2.
    expected = math.sqrt(float((np.abs(strength[indices.any(axis=1)]) ** 2).sum()) / 2)
    assert made.sigma[0] == pytest.approx(expected, rel=1e-9)


def test_the_error_of_a_scale_goes_with_the_best_coefficients():
    base = listing(STACK, seed=1).coefficients()
    known = replace(base, merit=np.full(base.count, 0.5), scale_sigma=0.1)
    region = [slab(STACK, [1], 2, 9)]
    treatment = Treatment(apply_merit=True)
    with_scale = integrals(known, region, treatment)
    without = integrals(replace(known, scale_sigma=0.0), region, treatment)
    added = with_scale.sigma[0] ** 2 - without.sigma[0] ** 2
    assert added == pytest.approx((0.1 * with_scale.values[0]) ** 2, rel=1e-9)


def test_no_uncertainties_no_sigma():
    made = integrals(listing(STACK).coefficients(), [slab(STACK, [1], 0, 5)])
    assert made.sigma is made.mean_sigma is made.covariance is None
    assert any("no uncertainties" in note for note in made.notes)


def test_without_the_zero_term_the_integral_is_that_of_the_deviation():
    wanted = listing(STACK, zero=False)
    made = integrals(wanted.coefficients(), [slab(STACK, [1], 0, 58.4)])
    assert made.values[0] == pytest.approx(0, abs=1e-10)
    assert any("deviation from the mean" in note for note in made.notes)
    assert not any("mean" in note for note in integrals(listing(STACK).coefficients(), [slab(STACK, [1], 0, 5)]).notes)


def test_units_in_words():
    assert [integrated_unit("e/Å³", k) for k in (1, 2, 3)] == ["e/Å²", "e/Å", "e"]
    assert [integrated_unit("10⁻⁶ Å⁻²", k) for k in (1, 2, 3)] == ["10⁻⁶ Å⁻¹", "10⁻⁶", "10⁻⁶ Å"]
    assert integrated_unit("V", 3) == "V·Å³"
    assert integrated_unit("arbitrary", 2) == "arbitrary"


def test_total_scattering_length():
    """A cell of silicon: 8 × 4.1491 fm in V = 160.2 Å³ has 2.07 × 10⁻⁶ Å⁻² (checks 7 and 8)."""
    silicon = Lattice.from_parameters(5.431, 5.431, 5.431, 90, 90, 90)
    made = listing(silicon, seed=2).coefficients(unit="10⁻⁶ Å⁻²")
    values = np.where(made.indices.any(axis=1), made.values, 2.072)
    cell = parallelepiped(silicon, np.eye(3), origin=[0, 0, 0])
    found = integrals(replace(made, values=values), [cell, slab(silicon, [0, 0, 1], 0, 1)])
    assert found.scattering_length[0] == pytest.approx(8 * 4.1491, rel=2e-3)
    assert found.scattering_units == ("fm", "fm/Å²")
    assert found.units == ("10⁻⁶ Å", "10⁻⁶ Å⁻¹")
    assert integrals(made, [cell]).scattering_sigma is None


def test_a_lateral_average_leaves_a_slab_as_it_is():
    wanted = listing(CRYSTAL, seed=4)
    region = [slab(CRYSTAL, [0, 0, 1], 1, 4)]
    averaged = values_over(wanted, region, Treatment(average=lateral(CRYSTAL, [0, 0, 1])))
    np.testing.assert_allclose(averaged, values_over(wanted, region), rtol=1e-13)


@pytest.mark.parametrize(
    ("call", "path"),
    [
        (lambda: slab(STACK, [1], 3, 3), ("end",)),
        (lambda: slab(STACK, [1], 3, math.inf), ("end",)),
        (lambda: slab(STACK, [1], "0", 3), ("start",)),
        (lambda: slab(STACK, [0], 0, 3), ("normal",)),
        (lambda: slab(STACK, [1], 0, 3, per="mole"), ("per",)),
        (lambda: segment(STACK, [0.5], [0.5]), ("to",)),
        (lambda: ball(STACK, [0.0], -1), ("radius",)),
        (lambda: parallelepiped(PLANAR, [[1, 0], [1, 0]], origin=[0, 0]), ("edges",)),
        (lambda: parallelepiped(PLANAR, [[1, 0], [0, 0]], origin=[0, 0]), ("edges", 1)),
        (lambda: parallelepiped(PLANAR, [[1, 0], [0, 1], [1, 1]], origin=[0, 0]), ("edges",)),
        (lambda: parallelepiped(PLANAR, np.eye(2)), ("origin",)),
        (lambda: parallelepiped(PLANAR, np.eye(2), origin=[0, 0], centre=[0, 0]), ("origin",)),
        (lambda: integrals(listing(STACK).coefficients(), []), ("regions",)),
        (lambda: integrals(listing(STACK).coefficients(), [ball(PLANAR, [0, 0], 1)]), ("regions", 0)),
        (lambda: integrals(listing(STACK, real=False).coefficients(), [ball(STACK, [0], 1)]), ("density",)),
        (lambda: integrals(listing(STACK).coefficients(), [ball(STACK, [0], 1)], LAPLACIAN), ("field",)),
    ],
)
def test_refusals(call, path):
    assert refusal_of(call).path == path
