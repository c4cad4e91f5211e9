"""Hendrickson–Lattman coefficients: combination against multiplied tables, symmetry against the definition."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine.phases import combine, hendrickson_lattman, probabilities, summarize, summarize_table, von_mises
from tests.strategies import refusal_of

ANGLES = np.arange(256) * 2 * np.pi / 256
SOME = np.random.default_rng(3).normal(scale=2.0, size=(40, 4))


def density(coefficients, phi):
    """P up to its factor, straight from the definition."""
    a, b, c, d = np.asarray(coefficients).T[:, :, None]
    return np.exp(a * np.cos(phi) + b * np.sin(phi) + c * np.cos(2 * phi) + d * np.sin(2 * phi))


def normalised(table):
    return table / table.sum(axis=-1, keepdims=True)


def test_probabilities_are_the_definition():
    found = probabilities(hendrickson_lattman(SOME), ANGLES)
    np.testing.assert_allclose(found, normalised(density(SOME, ANGLES)), rtol=1e-12)
    np.testing.assert_allclose(found.sum(axis=1), 1, rtol=1e-13)


def test_probabilities_do_not_overflow():
    """exp(1e5) would; the two peaks of cos 2φ share everything."""
    found = probabilities(hendrickson_lattman([[0, 0, 1e5, 0]]), ANGLES)
    assert found[0, 0] == pytest.approx(0.5)
    assert found[0, 128] == pytest.approx(0.5)


def test_von_mises_is_its_own_definition():
    phase, kappa = np.array([0.3, -2.0]), np.array([0.7, 12.0])
    expected = normalised(np.exp(kappa[:, None] * np.cos(ANGLES - phase[:, None])))
    np.testing.assert_allclose(probabilities(von_mises(phase, kappa), ANGLES), expected, rtol=1e-12)


def test_combination_is_the_product_of_tables():
    """The sources as tables, multiplied angle by angle, against coefficients added."""
    sources = [SOME, SOME[::-1] / 2, np.roll(SOME, 7, axis=0)]
    product = np.prod([normalised(density(source, ANGLES)) for source in sources], axis=0)
    joint = combine([hendrickson_lattman(source) for source in sources])
    np.testing.assert_allclose(probabilities(joint, ANGLES), normalised(product), rtol=1e-10)
    tabulated, summed = summarize_table(product, ANGLES), summarize(joint)
    np.testing.assert_allclose(tabulated.merit, summed.merit, atol=1e-12)
    np.testing.assert_allclose(np.exp(1j * tabulated.phase), np.exp(1j * summed.phase), atol=1e-10)


def test_a_shift_turns_the_distribution():
    delta = np.linspace(-7, 7, len(SOME))
    moved = hendrickson_lattman(SOME).shifted(delta)
    expected = [normalised(density(row[None], ANGLES - d))[0] for row, d in zip(SOME, delta, strict=True)]
    np.testing.assert_allclose(probabilities(moved, ANGLES), expected, rtol=1e-10)


@given(st.floats(-10, 10), st.floats(-3, 3))
def test_best_phase_follows_the_origin(delta, restricted):
    """Under a shift of the origin best phases turn and figures of merit stay; centric ones too."""
    centric = np.where(np.arange(len(SOME)) % 2, np.nan, restricted)
    before = hendrickson_lattman(SOME, centric)
    old, new = summarize(before), summarize(before.shifted(np.full(len(SOME), delta)))
    np.testing.assert_allclose(new.merit, old.merit, atol=1e-13)
    np.testing.assert_allclose(
        new.merit * np.exp(1j * new.phase), old.merit * np.exp(1j * (old.phase + delta)), atol=1e-12
    )


def test_mates_have_the_opposite_phase():
    mates = hendrickson_lattman(SOME).mates()
    np.testing.assert_allclose(probabilities(mates, ANGLES), normalised(density(SOME, -ANGLES)), rtol=1e-12)
    centric = hendrickson_lattman(SOME, np.full(len(SOME), 0.4))
    one, other = summarize(centric), summarize(centric.mates())
    np.testing.assert_allclose(np.exp(1j * other.phase), np.exp(-1j * one.phase), atol=1e-12)
    np.testing.assert_allclose(other.merit, one.merit, atol=1e-14)


def test_the_callers_array_is_not_kept():
    given_array = SOME.copy()
    held = hendrickson_lattman(given_array)
    given_array[:] = 0
    np.testing.assert_array_equal(held.coefficients, SOME)


NONE = np.full(2, np.nan)


@pytest.mark.parametrize(
    ("call", "path"),
    [
        (lambda: hendrickson_lattman([[1.0, 2.0, 3.0]]), ("coefficients",)),
        (lambda: hendrickson_lattman([[1.0, 2.0, np.inf, 0.0]]), ("coefficients", 0, 2)),
        (lambda: hendrickson_lattman(SOME, [0.0]), ("restricted",)),
        (lambda: hendrickson_lattman(SOME[:2], [0.0, np.inf]), ("restricted", 1)),
        (lambda: von_mises([0.1], [np.inf]), ("concentration",)),
        (lambda: von_mises([0.1], [-1.0]), ("concentration",)),
        (lambda: von_mises([0.1, 0.2], [1.0]), ("concentration",)),
        (lambda: von_mises([np.nan], [1.0]), ("phase", 0)),
        (lambda: von_mises([1.0], [1.0], [0.0]), ("phase",)),
        (lambda: combine([]), ("sources",)),
        (lambda: combine([hendrickson_lattman(SOME), hendrickson_lattman(SOME[:3])]), ("sources", 1)),
        (lambda: combine([hendrickson_lattman(SOME[:2], [0, 0]), hendrickson_lattman(SOME[:2], [0, 1])]), ("sources",)),
        (lambda: combine([hendrickson_lattman(SOME[:2], [0, 0]), hendrickson_lattman(SOME[:2], NONE)]), ("sources",)),
        (lambda: hendrickson_lattman(SOME).shifted([0.1]), ("shift",)),
        (lambda: probabilities(hendrickson_lattman(SOME), [np.nan]), ("angles", 0)),
    ],
)
def test_refusals(call, path):
    assert refusal_of(call).path == path


def test_restrictions_may_name_either_of_the_two_phases():
    joint = combine(
        [hendrickson_lattman(SOME[:2], [0.2, np.nan]), hendrickson_lattman(SOME[:2], [0.2 + np.pi, np.nan])]
    )
    assert joint.centric.tolist() == [True, False]
    assert von_mises([np.pi], [1.0], [0.0]).coefficients[0, 0] == -1
