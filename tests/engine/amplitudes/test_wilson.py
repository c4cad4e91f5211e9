"""Wilson's plot on exact lines and on simulated data with known scale and B."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine.amplitudes.wilson import wilson_plot
from engine.errors import InputError
from engine.scattering import composition, sum_of_squares
from tests.engine.amplitudes.simulated import CELL, half_sphere, reflections, stack, wilson_z

CONTENT = composition("C120N30O40H180")
INDICES = half_sphere(d_min=1.2)
SQUARES = (1 / (2 * CELL.spacings(INDICES))) ** 2
SUMS = sum_of_squares(CONTENT, np.sqrt(SQUARES))


def simulated(rng, scale, b, *, noise=0.02):
    centric = rng.random(len(INDICES)) < 0.2
    epsilon = np.where(rng.random(len(INDICES)) < 0.1, 2.0, 1.0)
    true = scale * epsilon * SUMS * np.exp(-2 * b * SQUARES) * wilson_z(rng, centric)
    sigma = np.full(len(INDICES), noise * true.mean())
    measured = reflections(INDICES, true + sigma * rng.normal(size=len(INDICES)), sigma)
    return wilson_plot(measured, SUMS, epsilon=epsilon, centric=centric)


def test_scale_and_b_are_recovered_within_their_uncertainties():
    """120 sets with k = 7.3, B = 12.5 Å²: pulls of mean 0 and width 1.

    The mean of 120 pulls is uncertain by 0.09 and their width by 0.065; four times that is
    allowed. Uncertainties enlarged for misfit (1 % of sets by chance) do not matter at this bound.
    """
    rng = np.random.default_rng(5)
    plots = [simulated(rng, 7.3, 12.5) for _ in range(120)]
    scales = np.array([np.log(plot.scale / 7.3) * plot.scale / plot.scale_sigma for plot in plots])
    bs = np.array([(plot.b - 12.5) / plot.b_sigma for plot in plots])
    for pulls in (scales, bs):
        assert abs(pulls.mean()) < 0.36
        assert pulls.std() == pytest.approx(1, abs=0.26)
    # 18 degrees of freedom a plot: the mean of χ² over 120 is uncertain by √(2/18/120) = 0.03.
    assert np.mean([plot.reduced_chi_squared for plot in plots]) == pytest.approx(1, abs=0.12)


def test_covariance_is_that_of_repeated_experiments():
    """The correlation of ln k and B over 120 sets, uncertain by (1 − r²)/√120 ≈ 0.02."""
    rng = np.random.default_rng(6)
    plots = [simulated(rng, 0.02, 4.0) for _ in range(120)]
    found = np.corrcoef([np.log(plot.scale) for plot in plots], [plot.b for plot in plots])[0, 1]
    claimed = plots[0].covariance[0, 1] / np.sqrt(plots[0].covariance[0, 0] * plots[0].covariance[1, 1])
    assert found == pytest.approx(claimed, abs=0.08)


@given(st.floats(1e-6, 1e6), st.floats(-2, 40))
def test_an_exact_line_is_found_whatever_the_shells(scale, b):
    """Without statistics I = kΣf² exp(−2Bs²) is a line, but for ψ(a) − ln a of the shells' counts:
    173 reflections a shell or more shift all points by 1/(2·173) at most, and alike."""
    plot = wilson_plot(reflections(INDICES, scale * SUMS * np.exp(-2 * b * SQUARES)), SUMS)
    assert plot.b == pytest.approx(b, abs=1e-3)
    assert plot.scale == pytest.approx(scale, rel=4e-3)


def test_points_are_the_textbook_ones():
    """ln(⟨I/ε⟩/Σf²) of each shell, by plain sums over reflections sorted by s².

    Of a flat mean (B = 0), where Wilson's original quotient and the mean of quotients agree: constant
    Σf². Points are raised by 1/2n + … for the logarithm of a mean of n.
    """
    rng = np.random.default_rng(8)
    observed = rng.exponential(size=len(INDICES))
    plot = wilson_plot(reflections(INDICES, observed), np.full(len(INDICES), 4.0), d_max=100.0, shells=5)
    order = np.argsort(SQUARES)
    ends = np.cumsum(plot.count)[:-1]
    means = np.array([part.mean() for part in np.split(observed[order], ends)]) / 4
    # exp(2Bs²) with the small B found shifts each point by less than the second order in B.
    assert plot.ordinate == pytest.approx(np.log(means) + 0.5 / plot.count, abs=2e-4)
    assert plot.ordinate_sigma == pytest.approx(1 / np.sqrt(plot.count), rel=2e-3)
    slope, intercept = np.polyfit(plot.s_squared, plot.ordinate, 1, w=1 / plot.ordinate_sigma)
    assert plot.b == pytest.approx(-slope / 2, rel=1e-8)
    assert plot.scale == pytest.approx(np.exp(intercept), rel=1e-8)
    assert plot.line == pytest.approx(intercept + slope * plot.s_squared, rel=1e-8)


def test_amplitudes_give_the_same_plot_and_half_the_factor():
    rng = np.random.default_rng(9)
    observed = 9 * SUMS * rng.exponential(size=len(INDICES))
    squares = reflections(INDICES, observed)
    roots = reflections(INDICES, np.sqrt(observed), quantity="amplitude")
    one, other = wilson_plot(squares, SUMS), wilson_plot(roots, SUMS)
    assert one.b == pytest.approx(other.b, abs=1e-9)
    absolute = one.apply(squares)
    assert absolute.scale == other.apply(roots).scale == "absolute"
    assert absolute.observed == pytest.approx(observed / one.scale, rel=1e-14)
    assert other.apply(roots).observed ** 2 == pytest.approx(absolute.observed, rel=1e-8)


def test_default_range_leaves_out_low_resolution_and_says_so():
    plot = wilson_plot(reflections(INDICES, SUMS), SUMS)
    assert plot.d_max <= 4
    assert plot.outside == np.count_nonzero(CELL.spacings(INDICES) > 4)
    assert plot.used + plot.outside == len(INDICES)
    assert "above 4 Å are left out" in plot.notes[0]
    chosen = wilson_plot(reflections(INDICES, SUMS), SUMS, d_max=3, d_min=1.5)
    assert 1.5 <= chosen.d_min < chosen.d_max <= 3


def test_doubts_are_said():
    rng = np.random.default_rng(10)
    low = half_sphere(d_min=3.0)
    sums = sum_of_squares(CONTENT, CELL.sine_over_wavelength(low))
    plot = wilson_plot(reflections(low, sums * rng.exponential(size=len(low))), sums)
    assert any("end at 3" in note for note in plot.notes)
    assert any("too small to fix B" in note for note in plot.notes)
    wavy = SUMS * np.exp(np.sin(60 * SQUARES))
    bent = wilson_plot(reflections(INDICES, wavy), SUMS)
    assert bent.reduced_chi_squared > 3
    assert any("more than chance" in note for note in bent.notes)
    rising = wilson_plot(reflections(INDICES, SUMS * np.exp(2 * 5 * SQUARES)), SUMS)
    assert any("negative" in note for note in rising.notes)


def test_shells_without_a_logarithm_are_counted():
    observed = np.where(np.quantile(SQUARES, 0.9) < SQUARES, -1e-3, 1.0) * SUMS
    plot = wilson_plot(reflections(INDICES, observed, np.full(len(INDICES), 0.1)), SUMS)
    assert plot.points_left_out == 2
    assert plot.s_squared.size == 18
    assert any("2 shells" in note for note in plot.notes)


FORTY = stack(np.ones(40))


@pytest.mark.parametrize(
    ("call", "path"),
    [
        (lambda: wilson_plot(stack(np.ones(29)), np.ones(29)), ("reflections",)),
        (lambda: wilson_plot(FORTY, np.ones(39)), ("sum_of_squares",)),
        (lambda: wilson_plot(FORTY, np.zeros(40)), ("sum_of_squares",)),
        (lambda: wilson_plot(FORTY, np.ones(40), d_max=2, d_min=3), ("d_min",)),
        (lambda: wilson_plot(FORTY, np.ones(40), d_max=-2), ("d_max",)),
        (lambda: wilson_plot(FORTY, np.ones(40), shells=2), ("shells",)),
        (lambda: wilson_plot(FORTY, np.ones(40), shells=9), ("shells",)),
        (lambda: wilson_plot(stack(-np.ones(40)), np.ones(40)), ("reflections",)),
        (lambda: wilson_plot(reflections(np.zeros((40, 3)), np.ones(40)), np.ones(40)), ("indices",)),
    ],
)
def test_refusals(call, path):
    with pytest.raises(InputError) as fault:
        call()
    assert fault.value.path == path
