"""Shell means against plain sums and known curves."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine.amplitudes.shells import intensities, s_squared, shell_means
from engine.errors import InputError
from tests.engine.amplitudes.simulated import CELL, half_sphere, reflections, stack

INDICES = half_sphere(d_min=1.8)
SQUARES = (1 / (2 * CELL.spacings(INDICES))) ** 2
"""By s = 1/2d."""


def test_means_are_the_plain_means_of_each_shell():
    rng = np.random.default_rng(3)
    observed, sigma, epsilon = (
        rng.exponential(size=len(INDICES)),
        rng.uniform(0.1, 1, len(INDICES)),
        rng.integers(1, 5, len(INDICES)),
    )
    centric = rng.random(len(INDICES)) < 0.3
    found = shell_means(reflections(INDICES, observed, sigma), epsilon=epsilon, centric=centric, shells=7)
    assert found.count.sum() == len(INDICES)
    assert np.ptp(found.count) <= 2
    for k in range(7):
        low, high = found.edges[k] - 1e-15, found.edges[k + 1] + (1e-15 if k == 6 else -1e-15)
        inside = (low <= SQUARES) & (high > SQUARES)
        assert found.count[k] == np.count_nonzero(inside)
        mean = (observed / epsilon)[inside].mean()
        assert found.mean[k] == pytest.approx(mean, rel=1e-12)
        assert found.centre[k] == pytest.approx(SQUARES[inside].mean(), rel=1e-12)
        variance = np.where(centric, 2, 1)[inside] * mean**2 + (sigma / epsilon)[inside] ** 2
        assert found.mean_sigma[k] == pytest.approx(np.sqrt(variance.sum()) / found.count[k], rel=1e-12)


@given(st.floats(0.0, 60.0), st.floats(0.01, 1e6), st.integers(1, 12))
def test_an_exponential_fall_is_followed(b, height, shells):
    """Of I = K exp(−2Bs²) exactly, linear pieces of the logarithm hit the curve; a shell's mean lies above the
    curve at its mean s² by 2B² var(s²), which is the bound for as many shells as were asked for."""
    found = shell_means(reflections(INDICES, height * np.exp(-2 * b * SQUARES)), shells=shells)
    if shells == 1:
        assert found.at(SQUARES) == pytest.approx(np.full(SQUARES.size, found.mean[0]))
        return
    width = np.diff(found.edges).max()
    error = np.log(found.at(SQUARES) / (height * np.exp(-2 * b * SQUARES)))
    # The end pieces are extrapolated by half a shell, which can double a difference of the two means.
    assert np.abs(error).max() <= 2 * (2 * b * width) ** 2 / 2 + 1e-9


def test_default_number_of_shells():
    assert shell_means(reflections(INDICES, np.ones(len(INDICES)))).mean.size == len(INDICES) // 100
    assert shell_means(stack(np.ones(12))).mean.size == 1


def test_equal_resolutions_stay_together():
    """Thirty reflections at one resolution make one shell, however many were asked for."""
    same = reflections(np.tile(INDICES[:1], (30, 1)), np.arange(30.0))
    found = shell_means(same, shells=5)
    assert found.count.tolist() == [30]
    assert found.mean.tolist() == [14.5]


def test_amplitudes_are_squared():
    observed, sigma = intensities(stack([3.0], [0.1], quantity="amplitude"))
    assert observed == pytest.approx([9.0])
    assert sigma == pytest.approx([0.6])


def test_s_is_half_the_inverse_spacing():
    assert s_squared(reflections(INDICES, SQUARES)) == pytest.approx(SQUARES, rel=1e-12)


@pytest.mark.parametrize(
    ("call", "path"),
    [
        (lambda: shell_means(stack([])), ("reflections",)),
        (lambda: shell_means(reflections([[0, 0, 0]], [1.0])), ("indices",)),
        (lambda: shell_means(stack(np.ones(9)), shells=2), ("shells",)),
        (lambda: shell_means(stack(np.ones(9)), shells=0), ("shells",)),
        (lambda: shell_means(stack(np.ones(9)), epsilon=np.ones(8)), ("epsilon",)),
        (lambda: shell_means(stack(np.ones(9)), epsilon=-np.ones(9)), ("epsilon",)),
        (lambda: shell_means(stack(np.ones(9)), centric=np.zeros(8, dtype=bool)), ("centric",)),
    ],
)
def test_refusals(call, path):
    with pytest.raises(InputError) as fault:
        call()
    assert fault.value.path == path


def test_a_shell_without_signal_is_named_by_its_resolution():
    falling = np.concatenate([np.ones(10), -np.ones(10)])
    means = shell_means(stack(falling), shells=2)
    with pytest.raises(InputError, match=r"1 of 2 \(the first from 5.45 to 3 Å"):
        means.at(means.centre)
