"""Fields of a series side by side."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from engine import Treatment, evaluate, sampling
from engine.combination import AS_GIVEN, Variable, aligned, evaluate_stack, fitted_scale, given_scale
from engine.errors import TooLargeError
from engine.sampling import FreePoints
from tests.engine.combination.crystals import measured, random_set
from tests.strategies import CRYSTAL, oracle, refusal_of

THREE = Variable.of("time", [0.0, 1, 5], "ps")
LINE = sampling.line(CRYSTAL, [0, 0, 0], [0, 0, 1], 21)
POINTS = np.random.default_rng(0).random((9, 3))


def full(coefficients):
    """Both of each pair."""
    others = coefficients.indices.any(axis=1)
    indices, values = coefficients.indices, coefficients.values
    return np.concatenate([indices, -indices[others]]), np.concatenate([values, values[others].conj()])


def series(**options):
    return aligned([random_set(seed=seed) for seed in (1, 2, 3)], THREE, **({"scale": AS_GIVEN} | options))


@pytest.mark.parametrize("difference", [False, True])
@pytest.mark.parametrize("common", ["intersection", "each"])
def test_values_are_those_of_each_set(difference, common):
    made = series(common=common, reference=1)
    stack = evaluate_stack(made, FreePoints(POINTS), difference=difference)
    assert stack.values.shape == (3, 9)
    for number, one in enumerate(made.sets):
        indices, values = full(one)
        if difference:
            other = dict(zip(map(tuple, full(made.sets[1])[0].tolist()), full(made.sets[1])[1], strict=True))
            kept = [tuple(h) in other for h in indices.tolist()]
            indices = indices[kept]
            values = values[kept] - [other[tuple(h)] for h in indices.tolist()]
        np.testing.assert_allclose(stack.values[number], oracle(indices, values, POINTS).real, atol=1e-6)
    assert stack.sigma is None
    assert len(stack.applied) == len(stack.notes) == 3


def test_axes_are_shared():
    stack = evaluate_stack(series(), LINE)
    assert stack.values.shape == (3, 21)
    assert len(stack.axes) == 1
    assert stack.axes[0].label == LINE.axes(CRYSTAL)[0].label
    assert stack.variable is THREE


def test_vectors_have_their_components_last():
    stack = evaluate_stack(series(), LINE, Treatment(field="gradient"), uncertainty=True, difference=True)
    assert stack.values.shape == stack.sigma.shape == (3, 21, 3)
    assert stack.components == ("x", "y", "z")


@pytest.mark.parametrize("phases", ["own", "reference"])
def test_sigma_of_differences_by_monte_carlo(phases):
    crystals = [measured("P212121", seed, relative=0.1, phase=0.2) for seed in (3, 4)]
    made = aligned([one.coefficients() for one in crystals], Variable.of("time", [0, 1]), scale=AS_GIVEN, phases=phases)
    positions = POINTS[:4]
    stack = evaluate_stack(made, FreePoints(positions), difference=True, uncertainty=True)
    rng = np.random.default_rng(2)
    kernels = crystals[0].kernels(positions)
    one, two = (crystal.drawn(rng, 20000) for crystal in crystals)
    drawn = two - one if phases == "own" else (np.abs(two) - np.abs(one)) * np.exp(1j * np.angle(one))
    np.testing.assert_allclose(stack.sigma[1], (drawn @ kernels).real.std(axis=0), rtol=0.03)
    assert not stack.sigma[0].any()
    assert not stack.values[0].any()


@pytest.mark.parametrize("difference", [False, True])
def test_scales_are_in_sigma(difference):
    made = series(scale=given_scale(2.0, k_sigma=0.5))
    exact = series(scale=given_scale(2.0))
    points = FreePoints(POINTS)
    found = evaluate_stack(made, points, difference=difference, uncertainty=True)
    without = evaluate_stack(exact, points, difference=difference, uncertainty=True)
    for number in (1, 2):
        moved = 0.25 * evaluate(made.sets[number], points).values
        np.testing.assert_allclose(found.sigma[number], np.hypot(without.sigma[number], moved), rtol=1e-5)
        assert any("scales" in words for words in found.contains[number])
        assert not any("scale" in words for words in found.omits[number])
    np.testing.assert_allclose(found.sigma[0], without.sigma[0])


def test_the_scale_of_a_fitted_series_is_common():
    base = replace(random_set(seed=1, share=1), scale_sigma=0.1)
    changed = base.values * (1 + 0.3 * np.random.default_rng(1).normal(size=base.count))
    others = [base, replace(base, values=changed)]
    made = aligned(others, Variable.of("time", [0, 1]), scale=fitted_scale())
    points = FreePoints(POINTS)
    found = evaluate_stack(made, points, difference=True, uncertainty=True)
    bare = replace(made, sets=tuple(replace(one, scale_sigma=0.0) for one in made.sets))
    without = evaluate_stack(bare, points, difference=True, uncertainty=True)
    assert np.abs(found.values[1]).max() > 0.1
    np.testing.assert_allclose(found.sigma[1], np.hypot(without.sigma[1], 0.1 * found.values[1]), rtol=1e-6)


@pytest.mark.parametrize("phases", ["own", "reference"])
def test_merit_in_differences(phases):
    rng = np.random.default_rng(3)
    sets = [random_set(seed=seed, share=1) for seed in (1, 2)]
    sets = [replace(one, merit=rng.uniform(0.2, 1, one.count)) for one in sets]
    made = aligned(sets, Variable.of("time", [0, 1]), scale=given_scale(1.0, k_sigma=0.1), phases=phases)
    points = FreePoints(POINTS)
    treatment = Treatment(apply_merit=True)
    stack = evaluate_stack(made, points, treatment, difference=True, uncertainty=True)
    each = evaluate_stack(made, points, treatment)
    np.testing.assert_allclose(stack.values[1], each.values[1] - each.values[0], atol=1e-6)
    exact = evaluate_stack(replace(made, scale_modes=((), ())), points, treatment, difference=True, uncertainty=True)
    moved = np.sqrt(stack.sigma[1] ** 2 - exact.sigma[1] ** 2)
    np.testing.assert_allclose(moved, 0.1 * np.abs(each.values[1]), rtol=1e-4, atol=1e-6)


def test_progress_and_limits():
    reports = []
    made = series()
    evaluate_stack(made, LINE, progress=lambda done, total: reports.append((done, total)))
    assert reports == [(1, 3), (2, 3), (3, 3)]
    with pytest.raises(TooLargeError):
        evaluate_stack(made, LINE, max_bytes=3 * 21 * 8 - 1)
    evaluate_stack(made, LINE, max_bytes=2**24)
    fault = refusal_of(lambda: evaluate_stack(made, LINE, Treatment(field="response"), difference=True))
    assert fault.path == ("difference",)
