"""Layers against closed forms of Gaussian stacks, laws, and draws of errors analysed anew."""

from __future__ import annotations

import dataclasses
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine import Columns, Lattice, Treatment, Window, assemble
from engine import sampling as where
from engine.averages import lateral
from engine.features.layers import layers, stack_layers
from tests.engine.features.drawn import doubled, draws, uncertain
from tests.engine.features.stacks import CROWDED, HALF, LAYERS, PERIOD, Drawn, gaussians, reanalysed
from tests.strategies import CRYSTAL, STACK, listing, refusal_of

MEASURED = (
    "position",
    "centroid",
    "height",
    "prominence",
    "width",
    "area",
    "area_above",
    "lower",
    "upper",
    "lower_density",
    "upper_density",
)


def test_gaussian_layers():
    """Area A, standard deviation s, centre z: height A/(s√2π), full width 2√(2 ln 2) s."""
    found = stack_layers(gaussians(), [1], baseline="zero", least_prominence=1e-3)
    area, sigma, centre = np.array(LAYERS).T
    assert found.periodic
    assert found.length == pytest.approx(PERIOD)
    np.testing.assert_allclose(found.position, centre, atol=1e-7)
    np.testing.assert_allclose(found.width, HALF * sigma, atol=1e-6)
    np.testing.assert_allclose(found.height, area / sigma / np.sqrt(2 * np.pi), rtol=1e-7)
    # What is lost beyond the minima and what comes in from the neighbours.
    np.testing.assert_allclose(found.area, area, atol=5e-5)
    np.testing.assert_allclose(found.centroid, centre, atol=1e-3)
    np.testing.assert_allclose(found.half_upper - centre, HALF * sigma / 2, atol=1e-6)
    np.testing.assert_allclose(centre - found.half_lower, HALF * sigma / 2, atol=1e-6)
    assert not found.open.any()
    assert not found.overlapping.any()
    assert found.unit == "e/Å³"
    assert found.area_unit == "e/Å²"
    assert found.merged > 0
    assert any(f"{found.merged} maxima" in note for note in found.notes)
    assert all(getattr(found, f"{name}_sigma") is None for name in MEASURED)


def test_a_background_is_taken_off_by_its_level():
    plain = stack_layers(gaussians(), [1], baseline="zero", least_prominence=1e-3)
    raised = stack_layers(gaussians(background=0.3), [1], baseline=0.3, least_prominence=1e-3)
    for name in ("position", "centroid", "width", "area_above", "half_lower", "prominence"):
        np.testing.assert_allclose(getattr(raised, name), getattr(plain, name), atol=1e-6, err_msg=name)
    np.testing.assert_allclose(raised.area - plain.area, 0.3 * (plain.upper - plain.lower), atol=1e-6)
    np.testing.assert_allclose(raised.base, 0.3)


def test_a_sloping_baseline_by_hand():
    """Two minima of different depth: the width is measured on the line through them."""
    found = stack_layers(gaussians(CROWDED), [1])
    dense = 400001
    t = np.linspace(found.lower[1], found.upper[1], dense)
    n = sum(
        a / s / np.sqrt(2 * np.pi) * np.exp(-0.5 * ((t - z - k * PERIOD) / s) ** 2)
        for a, s, z in CROWDED
        for k in (-1, 0, 1)
    )
    line = np.interp(t, t[[0, -1]], n[[0, -1]])
    assert abs(n[0] - n[-1]) > 0.01
    top = np.argmax(n)
    over = t[n - line > 0.5 * (n[top] - line[top])]
    step = t[1] - t[0]
    assert found.width[1] == pytest.approx(over[-1] - over[0], abs=3 * step)
    assert found.position[1] == pytest.approx(t[top], abs=step)
    assert found.base[1] == pytest.approx(line[top], abs=1e-5)
    above = n - line
    assert found.area_above[1] == pytest.approx(np.trapezoid(above, t), rel=1e-8)
    assert found.centroid[1] == pytest.approx(np.trapezoid(above * t, t) / np.trapezoid(above, t), abs=1e-7)


@pytest.mark.parametrize("window", ["none", "lanczos"])
@pytest.mark.parametrize("baseline", ["minima", "higher_minimum", "zero", 0.05])
def test_sigmas_are_those_of_draws_analysed_anew(baseline, window):
    coefficients = uncertain(gaussians(CROWDED, orders=9, background=0.05), relative=3e-4, phase=3e-4)
    treatment = Treatment(window=Window(window))
    found = stack_layers(coefficients, [1], treatment, baseline=baseline, least_prominence=0.02)
    assert found.count >= 3
    orders, weight = doubled(coefficients)
    factor = np.sinc(orders[:, 0] / 9) if window == "lanczos" else 1.0
    level = 0.0 if baseline == "zero" else baseline
    drawn = Drawn(orders[:, 0], weight * factor, draws(coefficients, 2000), PERIOD)
    exact = Drawn(orders[:, 0], weight * factor, coefficients.values[None], PERIOD)
    places, centroids, areas = [], [], []
    for j in range(found.count):
        start = {
            "p": found.position[j],
            "a": found.lower[j],
            "b": found.upper[j],
            "left": found.half_lower[j] if np.isfinite(found.half_lower[j]) else found.position[j],
            "right": found.half_upper[j] if np.isfinite(found.half_upper[j]) else found.position[j],
        }
        wide = np.isfinite(found.width[j])
        nominal, moved = reanalysed(exact, start, level), reanalysed(drawn, start, level)
        for name in MEASURED:
            if (name == "width" and not wide) or (name == "centroid" and found.area_above[j] < 0):
                assert np.isnan(getattr(found, name)[j])
                assert np.isnan(getattr(found, f"{name}_sigma")[j])
                continue
            assert getattr(found, name)[j] == pytest.approx(nominal[name][0], abs=1e-8), name
            sigma = getattr(found, f"{name}_sigma")[j]
            # 2000 draws know σ to 1.6 %; beyond first order little is left with errors so small.
            assert sigma == pytest.approx(moved[name].std(ddof=1), rel=0.065), (name, j)
        places.append(moved["position"])
        centroids.append(moved["centroid"])
        areas.append(moved["area"])
    for covariance, numbers in (
        (found.position_covariance, places),
        (found.centroid_covariance, centroids),
        (found.area_covariance, areas),
    ):
        sigma = np.sqrt(np.diagonal(covariance))
        known = np.isfinite(sigma)
        assert known.sum() >= 2
        expected = np.where(known & known[:, None], np.corrcoef(numbers), np.nan)
        np.testing.assert_allclose(covariance / np.outer(sigma, sigma), expected, atol=0.08)


def test_the_position_of_one_cosine():
    """n = 2A cos(κz − φ): σ_z = σ_φ/κ, the amplitude has no part in it."""
    l, amplitude = 3, 0.7
    columns = Columns(
        indices=[[l]], amplitude=[amplitude], phase_deg=[25.0], sigma=[0.05], phase_sigma_deg=[np.rad2deg(1e-3)]
    )
    made = assemble(STACK, columns, values="density_coefficient")
    found = stack_layers(made, [1])
    kappa = 2 * np.pi * l / 58.4
    assert found.count == l
    np.testing.assert_allclose(np.diff(found.position), 58.4 / l, rtol=1e-12)
    np.testing.assert_allclose(found.position_sigma, 1e-3 / kappa, rtol=3e-3)
    np.testing.assert_allclose(found.height, 2 * amplitude, rtol=1e-12)
    np.testing.assert_allclose(found.height_sigma, 2 * 0.05, rtol=1e-5)
    # Half of the height above the minima: half of a period.
    np.testing.assert_allclose(found.width, 58.4 / l / 2, rtol=1e-10)


@given(st.floats(-80, 80), st.integers(0, 1000))
def test_moving_the_stack_moves_its_layers(shift, seed):
    del seed
    at_rest = stack_layers(uncertain(gaussians(CROWDED, orders=20)), [1])
    moved = stack_layers(uncertain(gaussians(CROWDED, orders=20, shift=shift)), [1])
    assert moved.count == at_rest.count
    assert (moved.position >= 0).all()
    assert (moved.position < PERIOD).all()
    wanted = (at_rest.position + shift) % PERIOD
    order = np.argsort(wanted)
    apart = np.abs(moved.position - wanted[order])
    np.testing.assert_allclose(np.minimum(apart, PERIOD - apart), 0, atol=1e-8)
    for name in MEASURED:
        if name not in ("position", "centroid", "lower", "upper"):
            np.testing.assert_allclose(getattr(moved, name), getattr(at_rest, name)[order], atol=1e-8, err_msg=name)
        sigma = getattr(moved, f"{name}_sigma")
        np.testing.assert_allclose(sigma, getattr(at_rest, f"{name}_sigma")[order], rtol=1e-5, err_msg=name)


def test_a_line_that_begins_elsewhere_counts_from_there():
    made = gaussians()
    line = where.normal_line(made.lattice, [1], 50, origin=[20 / PERIOD], include_end=False)
    found = layers(made, line, baseline="zero", least_prominence=1e-3)
    assert found.periodic
    np.testing.assert_allclose(found.position, [5.0, 28.0, 50.0], atol=1e-6)


@pytest.mark.parametrize("include_end", [False, True])
@pytest.mark.parametrize("samples", [2, 3, 17])
def test_a_whole_period_with_or_without_its_end(samples, include_end):
    made = gaussians()
    line = where.normal_line(made.lattice, [1], samples, include_end=include_end)
    found = layers(made, line, least_prominence=1e-3)
    assert found.periodic
    assert found.length == pytest.approx(PERIOD)
    assert found.count == 3


def test_a_symmetrical_stack():
    """Centred on a mirror: layers lie in pairs ±z of equal numbers, one exactly on the mirror."""
    mirrored = ((4.0, 1.5, 0.0), (3.0, 2.0, 14.0), (3.0, 2.0, -14.0), (2.0, 3.0, 30.0))
    made = uncertain(gaussians(mirrored, orders=16), relative=0.01, phase=0.0)
    found = stack_layers(made, [1], least_prominence=1e-2)
    np.testing.assert_allclose(found.position, [0, 14, 30, 46], atol=0.05)
    assert min(found.position[0], PERIOD - found.position[0]) < 1e-9
    assert found.position[2] == pytest.approx(30, abs=1e-9)
    assert found.position[1] + found.position[3] == pytest.approx(PERIOD, abs=1e-9)
    for name in ("width", "area", "height", "position_sigma", "width_sigma"):
        values = getattr(found, name)
        assert values[1] == pytest.approx(values[3], rel=1e-8), name
    # Phases are 0 or π and have no errors: what lies on the mirror stays there.
    assert found.position_sigma[0] < 1e-9
    assert found.centroid_sigma[2] < 1e-9


def test_layers_of_a_crystal_are_those_of_its_averaged_profile():
    wanted = listing(CRYSTAL, seed=12, share=1.0)
    coefficients = uncertain(wanted.coefficients())
    found = stack_layers(coefficients, [0, 0, 2])
    chosen = (wanted.indices[:, :2] == 0).all(axis=1)
    profile = wanted.indices[chosen][:, 2], wanted.values[chosen]
    stack = assemble(
        Lattice.from_period(2 * np.pi / np.linalg.norm(CRYSTAL.reciprocal[2])),
        Columns(indices=[profile[0]], real=profile[1].real, imag=profile[1].imag),
        values="density_coefficient",
    )
    alone = stack_layers(stack, [1])
    assert found.count == alone.count > 2
    for name in MEASURED:
        np.testing.assert_allclose(getattr(found, name), getattr(alone, name), atol=1e-7, err_msg=name)
    line = where.normal_line(CRYSTAL, [0, 0, 1], 31)
    averaged = layers(coefficients, line, Treatment(average=lateral(CRYSTAL, [0, 0, 1])))
    np.testing.assert_allclose(averaged.position_sigma, found.position_sigma, rtol=1e-8)


def test_a_line_through_a_crystal_that_is_no_period():
    wanted = listing(CRYSTAL, seed=12)
    line = where.line(CRYSTAL, [0.1, 0.2, 0.05], [0.8, 0.35, 1.0], 40)
    found = layers(uncertain(wanted.coefficients()), line)
    assert not found.periodic
    start, end = np.array([0.1, 0.2, 0.05]), np.array([0.8, 0.35, 1.0])
    length = np.linalg.norm(CRYSTAL.to_cartesian(end - start))
    t = np.linspace(0, 1, 8001)
    n = wanted.at(start + t[:, None] * (end - start))
    peaks = np.flatnonzero((n[1:-1] > n[:-2]) & (n[1:-1] > n[2:])) + 1
    dips = np.flatnonzero((n[1:-1] < n[:-2]) & (n[1:-1] < n[2:])) + 1
    np.testing.assert_allclose(found.position, t[peaks] * length, atol=length / 8000)
    np.testing.assert_allclose(found.height, n[peaks], rtol=1e-4)
    inner = t[dips] * length
    np.testing.assert_allclose(found.upper[:-1], found.lower[1:])
    first_open, last_open = peaks[0] < dips[0], peaks[-1] > dips[-1]
    np.testing.assert_allclose(
        np.unique(np.concatenate([found.lower, found.upper])),
        np.concatenate([[0.0] * int(first_open), inner, [length] * int(last_open)]),
        atol=length / 8000,
    )
    assert found.open[0] == first_open
    assert found.open[-1] == last_open
    assert not found.open[1:-1].any()


@pytest.mark.parametrize(
    ("start", "end", "centres", "open_"),
    [
        (9.0, 47.0, [10, 17.5, 26, 44], [True, False, False, True]),
        (12.0, 47.0, [17.5, 26, 44], [False, False, True]),
        (12.0, 36.0, [17.5, 26], [False, False]),
    ],
)
def test_open_ends(start, end, centres, open_):
    made = uncertain(gaussians(CROWDED, orders=30), relative=0.01)
    line = where.line(made.lattice, [start / PERIOD], [end / PERIOD], 30)
    found = layers(made, line, baseline="zero", least_prominence=1e-3)
    assert list(found.open) == open_
    assert not found.periodic
    np.testing.assert_allclose(found.position + start, centres, atol=0.3)
    if open_[0]:
        assert found.lower[0] == 0
        assert found.lower_sigma[0] == 0
        assert found.lower_density_sigma[0] > 0
        assert any("open" in note for note in found.notes)
    # The end of the line is fixed: the σ of the area there is that of the integral and of one minimum.
    assert np.isfinite(found.area_sigma).all()


def test_a_shoulder_at_the_end_is_no_minimum():
    """A line that ends on the flank of a layer: its baseline is the one minimum it has."""
    made = gaussians(((5.0, 3.0, 20.0), (4.0, 3.0, 35.0)), orders=30)
    line = where.line(made.lattice, [17.0 / PERIOD], [40.0 / PERIOD], 30)
    found = layers(made, line, least_prominence=1e-4)
    assert list(found.open) == [True, True]
    np.testing.assert_allclose(found.base, found.upper_density[0], rtol=1e-12)
    np.testing.assert_allclose(found.prominence, found.height - found.upper_density[0])
    # The half height is not reached before the line begins.
    assert np.isnan(found.half_lower[0])
    assert np.isnan(found.width[0])
    assert np.isfinite(found.half_upper[0])
    assert any("no width" in note for note in found.notes)


def test_overlap():
    near = gaussians(((5.0, 2.0, 20.0), (5.0, 2.0, 25.0), (5.0, 2.0, 45.0)), orders=30)
    found = stack_layers(near, [1], baseline="zero", least_prominence=1e-3)
    assert list(found.overlapping) == [True, True, False]
    assert np.isnan(found.half_upper[0])
    assert np.isnan(found.width[:2]).all()
    np.testing.assert_allclose(found.width[2], HALF * 2, atol=1e-3)
    on_minima = stack_layers(near, [1], least_prominence=1e-3)
    assert list(on_minima.overlapping) == [True, True, False]
    assert np.isfinite(on_minima.width).all()


def test_merging_by_prominence():
    """Three heights: the lowest step goes first, and what is joined keeps the higher maximum."""
    made = gaussians(((5.0, 2.0, 20.0), (4.0, 2.0, 25.0), (5.0, 2.0, 45.0)), orders=30)
    every = stack_layers(made, [1], least_prominence=1e-6)
    assert every.count == 3
    step = every.prominence[1]
    apart = stack_layers(made, [1], least_prominence=0.99 * step)
    joined = stack_layers(made, [1], least_prominence=1.01 * step)
    assert (apart.count, joined.count) == (3, 2)
    assert joined.merged == every.merged + 1
    np.testing.assert_allclose(joined.position, every.position[[0, 2]], rtol=1e-12)
    assert joined.lower[0] == pytest.approx(every.lower[0])
    assert joined.upper[0] == pytest.approx(every.upper[1])
    assert joined.area[0] == pytest.approx(every.area[:2].sum(), rel=1e-12)
    # However much is asked for, one layer a period remains.
    assert stack_layers(made, [1], least_prominence=1e9).count == 1


@given(st.floats(0, 1, exclude_max=True), st.integers(0, 50))
def test_merged_layers_still_tile_the_period(shift, seed):
    """Of random profiles: areas add up to the cell's content, bounds to the period, whatever is merged."""
    wanted = listing(STACK, seed=seed, reach=(9,))
    indices, values = wanted.indices[:, 0], wanted.values * np.exp(-2j * np.pi * wanted.indices[:, 0] * shift)
    made = assemble(STACK, Columns(indices=[indices], real=values.real, imag=values.imag), values="density_coefficient")
    mean = values[indices == 0].real.sum()
    whole = stack_layers(made, [1])
    for least in np.quantile(whole.prominence, [0, 0.3, 0.6, 1.0]):
        found = stack_layers(made, [1], least_prominence=least * 1.0000001)
        assert found.count + found.merged == whole.count
        assert found.area.sum() == pytest.approx(mean * 58.4, abs=1e-8)
        assert (found.upper - found.lower).sum() == pytest.approx(58.4, abs=1e-9)
        np.testing.assert_allclose(found.lower[1:], found.upper[:-1])
        assert ((found.lower < found.position) & (found.position < found.upper)).all()
        assert (found.prominence > least).all() or found.count == 1
        for row in range(found.count):
            inside = (whole.position > found.lower[row] + 1e-9) & (whole.position < found.upper[row] - 1e-9)
            turned = (whole.position - 58.4 > found.lower[row] + 1e-9) | (
                whole.position + 58.4 < found.upper[row] - 1e-9
            )
            if inside.any() and not turned.any():
                assert found.height[row] == pytest.approx(whole.height[inside].max(), abs=1e-10)


def test_the_width_of_a_merged_layer_is_that_of_its_highest_maximum():
    """Merged across a valley deeper than half height: the first points of that level from the maximum count."""
    for mirrored in (1, -1):
        made = gaussians(((5.0, 2.0, 30.0), (4.0, 2.0, 30.0 - 9 * mirrored)), orders=30)
        every = stack_layers(made, [1], baseline="zero", least_prominence=1e-3)
        joined = stack_layers(made, [1], baseline="zero", least_prominence=0.7)
        assert (every.count, joined.count) == (2, 1)
        assert joined.width[0] == pytest.approx(every.width[every.height.argmax()], rel=1e-10)
        assert joined.area[0] == pytest.approx(9.0, rel=1e-9)


def test_the_axis_of_the_samples_counts():
    """Every place is shifted by the axis coordinate of the first sample, and nothing else."""
    made = gaussians(CROWDED, orders=20)
    plain = where.normal_line(made.lattice, [1], 2)
    found = layers(made, plain)
    shifted = layers(made, replace(plain, starts=(-7.5,)))
    for name in ("position", "centroid", "lower", "upper", "half_lower", "half_upper"):
        np.testing.assert_allclose(getattr(shifted, name), getattr(found, name) - 7.5, atol=1e-10, err_msg=name)
    np.testing.assert_allclose(shifted.width, found.width)


def test_merging_by_significance():
    base = gaussians(((5.0, 2.0, 20.0), (4.0, 2.0, 25.0), (5.0, 2.0, 45.0)), orders=12)
    made = uncertain(base, relative=0.02, phase=0.0)
    every = stack_layers(made, [1])
    ratio = every.prominence / every.prominence_sigma
    low, high = np.sort(ratio)[0] * 0.99, np.sort(ratio)[0] * 1.01
    assert stack_layers(made, [1], least_significance=low).count == every.count
    less = stack_layers(made, [1], least_significance=high)
    assert less.count == every.count - 1
    gone = every.position[np.argmin(ratio)]
    assert not np.isclose(less.position, gone).any() or not np.isclose(less.height.min(), every.height.min())
    assert refusal_of(lambda: stack_layers(base, [1], least_significance=3)).path == ("least_significance",)


def test_a_density_that_does_not_vary():
    flat = assemble(STACK, Columns(indices=[[0]], real=[2.0], imag=[0.0]), values="density_coefficient")
    found = stack_layers(flat, [1])
    assert found.count == 0
    assert any("no maximum" in note for note in found.notes)
    # A crystal whose terms all lie off the normal has a flat profile.
    off = assemble(CRYSTAL, Columns(indices=[[1], [0], [1]], real=[2.0], imag=[0.0]), values="density_coefficient")
    assert stack_layers(uncertain(off), [0, 0, 1]).count == 0


def test_a_line_without_a_maximum():
    made = uncertain(gaussians(((5.0, 3.0, 20.0),), orders=12))
    found = layers(made, where.line(made.lattice, [21 / PERIOD], [24 / PERIOD], 5))
    assert found.count == 0
    assert found.position_covariance.shape == (0, 0)


def test_what_is_said():
    found = stack_layers(uncertain(gaussians(CROWDED, orders=9)), [1])
    assert any("amplitudes" in words for words in found.contains)
    assert any("termination" in words for words in found.omits)
    assert any("lattice" in words for words in found.omits)
    assert any("minima" in words for words in found.assumptions)
    assert any("averaged over all directions" in words for words in found.applied)
    zeroless = replace(gaussians(CROWDED, orders=9))
    kept = zeroless.select(zeroless.indices.any(axis=1))
    assert any("deviation from the mean" in note for note in stack_layers(kept, [1]).notes)
    far = stack_layers(uncertain(gaussians(CROWDED, orders=9), relative=2.0), [1])
    assert any("not to be trusted to first order" in note for note in far.notes)


def test_every_array_counts_the_layers():
    found = stack_layers(uncertain(gaussians(CROWDED, orders=9)), [1])
    for field in dataclasses.fields(found):
        value = getattr(found, field.name)
        if isinstance(value, np.ndarray):
            assert value.shape in ((found.count,), (found.count, found.count)), field.name


@pytest.mark.parametrize(
    ("options", "path"),
    [
        ({"baseline": "lowest"}, ("baseline",)),
        ({"baseline": np.nan}, ("baseline",)),
        ({"baseline": True}, ("baseline",)),
        ({"least_prominence": -1.0}, ("least_prominence",)),
        ({"least_significance": np.inf}, ("least_significance",)),
        ({"treatment": Treatment(average=lateral(STACK, [1]))}, ("average",)),
        ({"treatment": Treatment(field="laplacian")}, ("field",)),
    ],
)
def test_refusals(options, path):
    assert refusal_of(lambda: stack_layers(listing(STACK).coefficients(), [1], **options)).path == path


def test_complex_densities_are_refused():
    assert refusal_of(lambda: stack_layers(listing(STACK, real=False).coefficients(), [1])).path == ("density",)
