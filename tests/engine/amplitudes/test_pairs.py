"""The L-test on simulated crystals and twins, and against plain enumeration of pairs."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest

from engine.amplitudes.normalised import normalise
from engine.amplitudes.pairs import pair_statistics
from engine.errors import InputError
from engine.lattice import Lattice
from tests.engine.amplitudes.simulated import CELL, half_sphere, reflections, stack, twinned_z, wilson_z

INDICES = half_sphere(d_min=1.3)
COUNT = len(INDICES)
FALL = 40 * np.exp(-2 * 12 / (4 * CELL.spacings(INDICES) ** 2))


def statistics(z, indices=INDICES, **more):
    given = reflections(indices, z, **more)
    return pair_statistics(given, normalise(given))


@pytest.mark.parametrize("d", [1, 2, 3])
def test_pairs_are_those_of_plain_enumeration(d):
    lattice = {1: Lattice.from_period(40), 2: Lattice.from_planar_parameters(13, 17, 100), 3: CELL}[d]
    indices = half_sphere(lattice, 2.0 if d < 3 else 4.5)
    rng = np.random.default_rng(31)
    rng.shuffle(indices)
    z = rng.exponential(size=len(indices))
    given = reflections(indices, z, lattice=lattice)
    e = normalise(given).squared
    expected = [
        abs(e[i] - e[j]) / (e[i] + e[j])
        for i, j in itertools.combinations(range(len(z)), 2)
        if set(np.abs(indices[i] - indices[j]).tolist()) <= {0, 2}
    ]
    found = pair_statistics(given, normalise(given))
    assert found.pairs == len(expected)
    assert found.mean_absolute.value == pytest.approx(np.mean(expected), rel=1e-12)
    assert found.mean_square.value == pytest.approx(np.mean(np.square(expected)), rel=1e-12)
    assert found.observed == pytest.approx([np.mean(np.array(expected) <= l) for l in found.l], rel=1e-12)


@pytest.mark.parametrize(
    ("kind", "absolute", "square"),
    [("acentric", 1 / 2, 1 / 3), ("twin", 3 / 8, 1 / 5), ("centric", 2 / math.pi, 1 / 2)],
)
def test_samples_agree_with_theory(kind, absolute, square):
    """Padilla & Yeates (2003); 60 samples with a steep fall of the mean: pulls of width 1 (uncertain by
    0.09, four times allowed), means off by at most 4/√60."""
    rng = np.random.default_rng(32)
    pulls = []
    for _ in range(60):
        z = twinned_z(rng, COUNT) if kind == "twin" else wilson_z(rng, np.full(COUNT, kind == "centric"))
        found = statistics(FALL * z)
        pulls.append([found.mean_absolute.pull(absolute), found.mean_square.pull(square)])
    assert np.abs(np.mean(pulls, axis=0)).max() < 4 / math.sqrt(60)
    assert np.std(pulls, axis=0) == pytest.approx(np.ones(2), abs=0.37)


def test_theoretical_distributions():
    """N(|L|) of independent exponentials is |L|; of a perfect twin |L|(3 − L²)/2, whose mean is 3/8 (by draws)."""
    rng = np.random.default_rng(33)
    a, b = twinned_z(rng, 400_000), twinned_z(rng, 400_000)
    l = np.abs(a - b) / (a + b)
    found = statistics(FALL * twinned_z(rng, COUNT))
    assert found.twin == pytest.approx([np.mean(l <= step) for step in found.l], abs=4e-3)
    assert found.untwinned == pytest.approx(found.l)
    assert found.observed == pytest.approx(found.twin, abs=0.03)


def test_verdicts():
    rng = np.random.default_rng(34)
    one, other = rng.exponential(size=COUNT), rng.exponential(size=COUNT)
    assert statistics(FALL * one).verdict == "untwinned"
    assert statistics(FALL * (one + other)).verdict == "perfect twin"
    assert statistics(FALL * (0.8 * one + 0.2 * other)).verdict == "partial twin or noise"
    above = statistics(FALL * rng.normal(size=COUNT) ** 2)
    assert above.verdict == "undecided"
    assert "above both" in above.words
    few = statistics(one[:15], half_sphere(d_min=4.5)[:15])
    assert few.verdict == "undecided"
    assert "too few" in few.words


def test_pairs_without_meaning_are_counted():
    z = np.random.default_rng(35).exponential(size=COUNT)
    given = reflections(INDICES, z)
    whole = pair_statistics(given, normalise(given))
    z[0] = -0.01
    given = reflections(INDICES, z)
    found = pair_statistics(given, normalise(given))
    assert found.left_out > 0
    assert found.pairs + found.left_out == whole.pairs
    assert "lowers" in found.notes[0]


def test_a_choice_of_reflections():
    rng = np.random.default_rng(36)
    centric = rng.random(COUNT) < 0.5
    given = reflections(INDICES, FALL * wilson_z(rng, centric))
    every = normalise(given)
    chosen = pair_statistics(given, every, ~centric)
    assert abs(chosen.mean_absolute.pull(0.5)) < 4
    assert pair_statistics(given, every).mean_absolute.value > chosen.mean_absolute.value


FIVE = stack([1.0, 2.0, 3.0, 4.0, 5.0])


@pytest.mark.parametrize(
    ("call", "path"),
    [
        (lambda: pair_statistics(FIVE, normalise(stack([1.0, 2.0]))), ("normalised",)),
        (lambda: pair_statistics(FIVE, normalise(FIVE), np.array([True])), ("kept",)),
        (lambda: pair_statistics(FIVE, normalise(FIVE), np.array([True, True, False, False, False])), ("reflections",)),
        (lambda: pair_statistics(FIVE, normalise(FIVE), np.array([True, True, False, True, False])), ("reflections",)),
        (
            lambda: pair_statistics(FIVE.select(np.array([0, 0, 1])), normalise(FIVE.select(np.array([0, 0, 1])))),
            ("indices",),
        ),
    ],
)
def test_refusals(call, path):
    with pytest.raises(InputError) as fault:
        call()
    assert fault.value.path == path
