"""Covariances in the complex plane, and sums of parts."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from engine.coefficients import PlaneErrors
from engine.combination.linear import UNIFORM, Part, Sum, added, amplitude_sigma, joint_history, joint_tally
from engine.uncertainty.errors import errors_of
from tests.engine.combination.crystals import random_set


def ellipses(seed, size=20):
    """Random covariances, some of rank 1 and some that vanish."""
    rng = np.random.default_rng(seed)
    along, across = rng.uniform(0, 2, size), rng.uniform(0, 2, size)
    mixed = rng.choice((-1, -0.5, 0, 0.3, 1), size) * along * across
    along[:2], across[:2], mixed[:2] = 0, 0, 0
    return PlaneErrors(
        phasor=np.exp(2j * np.pi * rng.random(size)), along=along, across=across, mixed=mixed, contains=("invented",)
    )


def covariances(errors):
    """Of the real and the imaginary part; (N, 2, 2)."""
    inner = np.stack(
        [np.stack([errors.along**2, errors.mixed], -1), np.stack([errors.mixed, errors.across**2], -1)], -1
    )
    c, s = errors.phasor.real, errors.phasor.imag
    turn = np.stack([np.stack([c, -s], -1), np.stack([s, c], -1)], -2)
    return turn @ inner @ turn.transpose(0, 2, 1)


@given(st.integers(0, 2**16))
def test_axes_do_not_change_a_covariance(seed):
    made = ellipses(seed)
    axes = np.exp(2j * np.pi * np.random.default_rng(seed + 1).random(20))
    turned = made.towards(axes)
    np.testing.assert_array_equal(turned.phasor, axes)
    np.testing.assert_allclose(covariances(turned), covariances(made), atol=1e-13)


@given(st.integers(0, 2**16))
def test_factors_scale_a_covariance_by_their_square(seed):
    made, factors = ellipses(seed), np.random.default_rng(seed).normal(size=20)
    np.testing.assert_allclose(
        covariances(made.scaled(factors)), factors[:, None, None] ** 2 * covariances(made), atol=1e-13
    )


@given(st.integers(0, 2**16))
def test_strengths_of_the_independent_errors_have_the_covariance(seed):
    base = random_set(seed=1).select(np.arange(random_set(seed=1).count) < 20)
    errors = ellipses(seed)
    made = errors_of(replace(base, plane_errors=errors))
    total = np.zeros((20, 2, 2))
    for strength in (made.spread(), made.turned()):
        parts = np.stack([strength.real, strength.imag], -1)
        total += parts[:, :, None] * parts[:, None, :]
    np.testing.assert_allclose(total, covariances(errors)[made.order], atol=1e-7)
    assert made.contains[0] == "invented"


@given(st.integers(0, 2**16), st.booleans())
def test_roots_turn_and_reflect_with_their_covariances(seed, reflected):
    """What makes equivalents one measurement: the strengths of each are those of the other, turned or reflected."""
    base = random_set(seed=1).select(np.arange(random_set(seed=1).count) < 20)
    errors = ellipses(seed)
    turn = np.exp(0.7j)
    other = replace(errors, phasor=turn * errors.phasor)
    if reflected:
        other = replace(errors, phasor=turn * errors.phasor.conj(), mixed=-errors.mixed)
    one, two = (errors_of(replace(base, plane_errors=part)) for part in (errors, other))
    if reflected:
        np.testing.assert_allclose(two.spread(), turn * one.spread().conj(), atol=1e-12)
        np.testing.assert_allclose(two.turned(), -turn * one.turned().conj(), atol=1e-12)
    else:
        np.testing.assert_allclose(two.spread(), turn * one.spread(), atol=1e-12)
        np.testing.assert_allclose(two.turned(), turn * one.turned(), atol=1e-12)


def part(source, name, rows, places, factor):
    rows = np.array(rows)
    return Part(source=source, name=name, rows=rows, places=np.array(places), factors=np.full(rows.size, factor))


def test_covariances_of_a_sum_add():
    one, two = random_set(seed=1), random_set(seed=2)
    errors = [ellipses(seed, source.count) for seed, source in ((5, one), (6, two))]
    one, two = (replace(source, plane_errors=made) for source, made in zip((one, two), errors, strict=True))
    rows = np.arange(12)
    made = added([part(one, "one", rows, rows, 2.0), part(two, "two", rows[:10], rows[2:], -0.5)], 12)
    wanted = 4 * covariances(errors[0])[:12]
    wanted[2:] += 0.25 * covariances(errors[1])[:10]
    np.testing.assert_allclose(covariances(made.errors), wanted, atol=1e-13)
    values = 2 * one.values[:12]
    values[2:] -= 0.5 * two.values[:10]
    np.testing.assert_allclose(made.values, values)
    np.testing.assert_array_equal(made.errors.phasor, one.plane_errors.phasor[:12])
    assert made.errors.contains == ("invented (one)", "invented (two)")


def test_a_coefficient_that_vanishes_has_no_phase():
    errors = PlaneErrors(phasor=np.ones(3) + 0j, along=np.ones(3), across=np.array([1.0, 1, 0]), mixed=np.zeros(3))
    sigma, phase_sigma = Sum(values=np.array([0j, 100j, -4]), errors=errors).described()
    np.testing.assert_allclose(sigma, 1)
    np.testing.assert_allclose(phase_sigma, [UNIFORM, 0.01, 0], atol=1e-15)
    assert Sum(values=np.array([1j]), errors=None).described() == (None, None)


def test_amplitudes_without_sigma_add_nothing():
    one, two = random_set(seed=1), random_set(seed=2, sigma=None)
    rows = np.arange(5)
    made = amplitude_sigma([part(one, "one", rows, rows, -2.0), part(two, "two", rows, rows, 1.0)], 5)
    np.testing.assert_allclose(made, 2 * one.sigma[:5])
    assert amplitude_sigma([part(two, "two", rows, rows, 1.0)], 5) is None


def test_accounts_are_joined():
    one, two = random_set(seed=1), random_set(seed=2)
    one = replace(one, tally=replace(one.tally, mates_joined=3, beyond_resolution=2), history=("the same",))
    two = replace(two, tally=replace(two.tally, mates_joined=4, repeats_joined=1), history=("the same",))
    made = joint_tally([one, two], "given")
    assert (made.rows, made.mates_joined) == (one.tally.rows + two.tally.rows, 7)
    assert (made.beyond_resolution, made.repeats_joined, made.zero_term) == (2, 1, "given")
    assert joint_history([one, two], ["one", "two"]) == ("the same",)
    two = replace(two, history=("other",))
    assert joint_history([one, two], ["one", "two"]) == ("one: the same", "two: other")
