"""Lattices: reciprocal vectors, spacings, coordinates, refusals."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine import InputError, Lattice
from tests.strategies import LATTICES, lattices, refusal_of

ROUNDING = 1e-13
"""A few hundred ulp: matrices of order 3 that are far from singular."""

any_lattice = st.sampled_from((1, 2, 3)).flatmap(lattices)


@given(any_lattice)
def test_reciprocal_vectors_are_dual_to_the_direct_ones(lattice):
    product = lattice.reciprocal @ lattice.vectors.T
    assert np.abs(product - 2 * np.pi * np.eye(lattice.dimension)).max() < 1e-12


def test_reciprocal_vectors_of_a_crystal_are_the_vector_products():
    lattice = LATTICES[3]
    a_1, a_2, a_3 = lattice.vectors
    expected = 2 * np.pi / lattice.volume * np.array([np.cross(a_2, a_3), np.cross(a_3, a_1), np.cross(a_1, a_2)])
    np.testing.assert_allclose(lattice.reciprocal, expected, rtol=0, atol=ROUNDING)


def test_volume_of_each_dimension():
    assert Lattice.from_period(58.4).volume == pytest.approx(58.4, rel=ROUNDING)
    planar = Lattice.from_planar_parameters(3.0, 5.0, 100.0)
    assert planar.volume == pytest.approx(15 * math.sin(math.radians(100)), rel=ROUNDING)
    cosines = [math.cos(math.radians(x)) for x in (82, 97, 106)]
    squared = 1 - sum(c * c for c in cosines) + 2 * math.prod(cosines)
    crystal = Lattice.from_parameters(7.3, 11.9, 16.4, 82, 97, 106)
    assert crystal.volume == pytest.approx(7.3 * 11.9 * 16.4 * math.sqrt(squared), rel=ROUNDING)


@pytest.mark.parametrize("parameters", [(7.3, 11.9, 16.4, 82, 97, 106), (3, 3, 17.4, 90, 90, 120)])
def test_parameters_come_back_from_the_vectors(parameters):
    vectors = Lattice.from_parameters(*parameters).vectors
    lengths = np.linalg.norm(vectors, axis=1)
    unit = vectors / lengths[:, None]
    angles = [math.degrees(math.acos(unit[i] @ unit[j])) for i, j in ((1, 2), (0, 2), (0, 1))]
    np.testing.assert_allclose([*lengths, *angles], parameters, rtol=1e-12)


def test_the_first_vector_lies_along_x_and_the_second_in_the_xy_plane():
    vectors = LATTICES[3].vectors
    assert vectors[0, 1] == vectors[0, 2] == vectors[1, 2] == 0
    assert vectors[0, 0] > 0
    assert vectors[1, 1] > 0
    assert vectors[2, 2] > 0


def test_right_angles_and_120_degrees_are_exact():
    vectors = Lattice.from_parameters(3, 4, 5, 90, 90, 120).vectors
    assert vectors[1, 0] == -2.0
    assert vectors[2, 0] == vectors[2, 1] == 0.0
    assert Lattice.from_planar_parameters(3, 4, 60).vectors[1, 0] == 2.0


def test_spacings_by_the_closed_formulas_of_crystal_systems():
    indices = np.array([[1, 0, 0], [1, 1, 1], [2, -1, 3], [0, 0, 4]])
    h, k, l = indices.T
    brick = Lattice.from_parameters(3.1, 4.7, 6.5, 90, 90, 90)
    expected = 1 / np.sqrt((h / 3.1) ** 2 + (k / 4.7) ** 2 + (l / 6.5) ** 2)
    np.testing.assert_allclose(brick.spacings(indices), expected, rtol=ROUNDING)
    hexagonal = Lattice.from_parameters(3.1, 3.1, 6.5, 90, 90, 120)
    expected = 1 / np.sqrt(4 / 3 * (h * h + h * k + k * k) / 3.1**2 + (l / 6.5) ** 2)
    np.testing.assert_allclose(hexagonal.spacings(indices), expected, rtol=ROUNDING)
    tilted = Lattice.from_parameters(3.1, 4.7, 6.5, 90, 103, 90)
    sine, cosine = math.sin(math.radians(103)), math.cos(math.radians(103))
    inverse = (h / 3.1) ** 2 + (k * sine / 4.7) ** 2 + (l / 6.5) ** 2 - 2 * h * l * cosine / (3.1 * 6.5)
    np.testing.assert_allclose(tilted.spacings(indices), sine / np.sqrt(inverse), rtol=1e-12)


def test_spacings_of_a_stack_are_the_period_over_the_order():
    orders = np.array([[1], [2], [-5]])
    np.testing.assert_allclose(LATTICES[1].spacings(orders), [58.4, 29.2, 58.4 / 5], rtol=ROUNDING)


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_magnitude_spacing_and_s_are_one_quantity(dimension):
    lattice = LATTICES[dimension]
    indices = np.random.default_rng(1).integers(-9, 10, (40, dimension))
    indices = indices[indices.any(axis=1)]
    vectors = sum(m[:, None] * g for m, g in zip(indices.T, lattice.reciprocal, strict=True))
    np.testing.assert_allclose(lattice.wavevectors(indices), vectors, rtol=0, atol=1e-12)
    q = np.sqrt((vectors**2).sum(axis=1))
    np.testing.assert_allclose(lattice.magnitudes(indices), q, rtol=ROUNDING)
    np.testing.assert_allclose(lattice.spacings(indices), 2 * np.pi / q, rtol=ROUNDING)
    np.testing.assert_allclose(
        lattice.sine_over_wavelength(indices), 1 / (2 * lattice.spacings(indices)), rtol=ROUNDING
    )


def test_the_zero_term_has_an_infinite_spacing():
    assert LATTICES[3].spacings(np.zeros((1, 3), dtype=np.int64))[0] == np.inf


@given(any_lattice, st.integers(0, 2**32 - 1))
def test_coordinates_go_and_come_back(lattice, seed):
    d = lattice.dimension
    fractional = np.random.default_rng(seed).uniform(-3, 3, (4, 5, d))
    cartesian = lattice.to_cartesian(fractional)
    expected = sum(fractional[..., j, None] * lattice.vectors[j] for j in range(d))
    np.testing.assert_allclose(cartesian, expected, rtol=0, atol=1e-11)
    np.testing.assert_allclose(lattice.to_fractional(cartesian), fractional, rtol=0, atol=1e-12)


def test_phase_is_the_same_in_both_coordinates():
    lattice = LATTICES[3]
    m, x = np.array([[3, -1, 4]]), np.array([0.21, -0.4, 1.3])
    phase = float((lattice.wavevectors(m) @ lattice.to_cartesian(x))[0])
    assert phase == pytest.approx(2 * np.pi * float(m[0] @ x), rel=1e-12)


def test_lengths_are_those_of_the_vectors():
    np.testing.assert_allclose(LATTICES[3].lengths, [7.3, 11.9, 16.4], rtol=ROUNDING)


def test_a_lattice_keeps_nothing_of_the_callers_array():
    given_vectors = np.diag([4.0, 5.0, 6.0])
    lattice = Lattice.from_vectors(given_vectors)
    given_vectors[0, 0] = 99.0
    assert lattice.vectors[0, 0] == 4.0
    with pytest.raises(ValueError, match="read-only"):
        lattice.vectors[0, 0] = 1.0
    with pytest.raises(ValueError, match="read-only"):
        lattice.reciprocal[0, 0] = 1.0


def test_vectors_may_point_anywhere():
    turn = np.linalg.qr(np.random.default_rng(3).normal(size=(3, 3)))[0]
    turn *= np.sign(np.linalg.det(turn))
    lattice = LATTICES[3]
    turned = Lattice.from_vectors(lattice.vectors @ turn)
    indices = np.array([[1, -2, 3], [0, 1, 0]])
    assert turned.volume == pytest.approx(lattice.volume, rel=1e-12)
    np.testing.assert_allclose(turned.spacings(indices), lattice.spacings(indices), rtol=1e-12)


REFUSED = [
    ("left-handed", lambda: Lattice.from_vectors([[0, 3, 0], [3, 0, 0], [0, 0, 3]]), ("vectors",)),
    ("left-handed planar", lambda: Lattice.from_vectors([[0, 3], [3, 0]]), ("vectors",)),
    ("negative period", lambda: Lattice.from_vectors([[-3.0]]), ("vectors",)),
    ("dependent", lambda: Lattice.from_vectors([[1, 0, 0], [0, 1, 0], [1, 1, 0]]), ("vectors",)),
    ("nearly dependent", lambda: Lattice.from_vectors([[1, 0], [1, 1e-4]]), ("vectors",)),
    ("null vector", lambda: Lattice.from_vectors([[1, 0], [0, 0]]), ("vectors", 1)),
    ("short vector", lambda: Lattice.from_vectors([[5, 0], [0, 0.05]]), ("vectors", 1)),
    ("long vector", lambda: Lattice.from_vectors([[2e7, 0], [0, 5]]), ("vectors", 0)),
    ("overflowing vector", lambda: Lattice.from_vectors([[1e300, 0], [0, 5]]), ("vectors", 0)),
    ("not finite", lambda: Lattice.from_vectors([[5, np.nan], [0, 5]]), ("vectors", 0, 1)),
    ("infinite", lambda: Lattice.from_vectors([[5, 0], [np.inf, 5]]), ("vectors", 1, 0)),
    ("not square", lambda: Lattice.from_vectors([[5, 0, 0], [0, 5, 0]]), ("vectors",)),
    ("four dimensions", lambda: Lattice.from_vectors(np.eye(4)), ("vectors",)),
    ("a row", lambda: Lattice.from_vectors([5, 6, 7]), ("vectors",)),
    ("empty", lambda: Lattice.from_vectors([]), ("vectors",)),
    ("ragged", lambda: Lattice.from_vectors([[5, 0], [5]]), ("vectors",)),
    ("complex", lambda: Lattice.from_vectors([[5j]]), ("vectors",)),
    ("words", lambda: Lattice.from_vectors([["five"]]), ("vectors",)),
    ("period zero", lambda: Lattice.from_period(0), ("period",)),
    ("period negative", lambda: Lattice.from_period(-58.4), ("period",)),
    ("period not a number", lambda: Lattice.from_period(float("nan")), ("period",)),
    ("period infinite", lambda: Lattice.from_period(float("inf")), ("period",)),
    ("period in metres", lambda: Lattice.from_period(5e-9), ("period",)),
    ("period too long", lambda: Lattice.from_period(2e7), ("period",)),
    ("period beyond a float", lambda: Lattice.from_period(10**400), ("period",)),
    ("period a word", lambda: Lattice.from_period("58.4"), ("period",)),
    ("period a truth value", lambda: Lattice.from_period(True), ("period",)),
    ("planar b", lambda: Lattice.from_planar_parameters(5, 0.01, 90), ("b",)),
    ("planar gamma 180", lambda: Lattice.from_planar_parameters(5, 5, 180), ("gamma",)),
    ("planar gamma zero", lambda: Lattice.from_planar_parameters(5, 5, 0), ("gamma",)),
    ("planar gamma flat", lambda: Lattice.from_planar_parameters(5, 5, 179.99), ("gamma",)),
    ("c", lambda: Lattice.from_parameters(5, 5, -5, 90, 90, 90), ("c",)),
    ("a", lambda: Lattice.from_parameters(1e8, 5, 5, 90, 90, 90), ("a",)),
    ("alpha", lambda: Lattice.from_parameters(5, 5, 5, -90, 90, 90), ("alpha",)),
    ("beta", lambda: Lattice.from_parameters(5, 5, 5, 90, 200, 90), ("beta",)),
    ("gamma", lambda: Lattice.from_parameters(5, 5, 5, 90, 90, float("nan")), ("gamma",)),
    ("angles cannot meet", lambda: Lattice.from_parameters(5, 5, 5, 30, 40, 80), ("alpha",)),
    ("angles in one plane", lambda: Lattice.from_parameters(5, 5, 5, 120, 120, 120), ("alpha",)),
    ("angles over 360", lambda: Lattice.from_parameters(5, 5, 5, 130, 130, 130), ("alpha",)),
]


@pytest.mark.parametrize(("call", "path"), [case[1:] for case in REFUSED], ids=[case[0] for case in REFUSED])
def test_refused_with_its_place(call, path):
    refusal = refusal_of(call)
    assert refusal.path == path
    assert refusal.reason
    assert refusal.cure


def test_a_left_handed_set_is_told_apart_from_a_flat_one():
    with pytest.raises(InputError, match="left-handed"):
        Lattice.from_vectors(np.diag([3.0, -3.0, 3.0]))
    with pytest.raises(InputError, match="linearly dependent"):
        Lattice.from_vectors([[3, 0, 0], [0, 3, 0], [3, 3, 1e-4]])
