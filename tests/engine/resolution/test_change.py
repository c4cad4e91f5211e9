"""What unmeasured terms could do to each value, against sums over them written out."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from engine import Demand, InputError, TooLargeError, Treatment, Window, averages, evaluate, sampling
from engine.resolution import Envelope, missing_beyond, missing_inside, unmeasured
from engine.resolution.change import perform_change, prepare_change
from engine.symmetry import space_group
from tests.engine.resolution.sets import ball_indices, coefficient_set
from tests.engine.symmetry import crystals
from tests.strategies import LATTICES

B = 9.0
BOUND = Envelope.from_bound(0.4, B)
LATTICE = LATTICES[3]


def few(lattice=LATTICE, d_min=2.4, seed=1, **options):
    """A set with every third term left out, without symmetry."""
    indices = ball_indices(lattice, d_min)
    rng = np.random.default_rng(seed)
    kept = ~indices.any(axis=1) | (rng.random(len(indices)) < 0.7)
    indices = indices[kept]
    values = rng.normal(size=(2, len(indices)))
    return coefficient_set(
        lattice, indices, values=values[0] + 1j * np.where(indices.any(axis=1), values[1], 0), **options
    )


def box(lattice=LATTICE):
    return sampling.full_cell(lattice, (4, 5, 3)[: lattice.dimension])


def change(made, where, treatment=None, *, envelope=BOUND, d_stop=1.8, **options):
    work = prepare_change(made, envelope, where, treatment or Treatment(), d_stop=d_stop, **options)
    return work, perform_change(work)


def strength(indices):
    """|n| = 0.4 exp(−B s²) of indices, by hand."""
    s = np.linalg.norm(indices @ LATTICE.reciprocal, axis=1) / (4 * np.pi)
    return 0.4 * np.exp(-B * s**2)


def test_rms_without_symmetry_is_the_same_everywhere():
    """In P 1 phases are independent: rms² = Σ 2|n|² over one of each pair of missing terms, and the tail."""
    made = few()
    _, told = change(made, box())
    wide = ball_indices(LATTICE, 1.8)
    have = set(map(tuple, made.indices.tolist()))
    missing = np.array([row for row in wide.tolist() if tuple(row) not in have and any(row)])
    tail = unmeasured(made, BOUND, 1.8).tail_variance
    expected = math.sqrt(2 * float((strength(missing) ** 2).sum()) + tail)
    np.testing.assert_allclose(told.values, expected, rtol=1e-6)
    assert told.rms == pytest.approx(expected)
    assert 0 < tail < expected**2


def test_rms_is_that_of_densities_with_random_phases():
    """Monte Carlo in P −1, where phases are signs and the change differs from place to place."""
    group = space_group(2)
    made = replace(few(), group=group)
    points = sampling.points(LATTICE, [[0, 0, 0], [0.5, 0, 0], [0.13, 0.27, 0.41]])
    work, told = change(made, points)
    terms = [part for part in (work.terms.inside, work.terms.beyond) if part is not None]
    indices = np.concatenate([part.indices for part in terms])
    sizes = strength(indices)
    rng = np.random.default_rng(4)
    signs = rng.choice([-1.0, 1.0], (4000, len(indices)))
    waves = 2 * np.cos(2 * np.pi * points.positions() @ indices.T)
    drawn = (signs * sizes) @ waves.T
    expected = np.sqrt((drawn**2).mean(axis=0) + work.terms.tail_variance)
    np.testing.assert_allclose(told.values, expected, rtol=0.05)
    # At a centre of symmetry every term is at its crest or trough.
    assert told.values[0] == pytest.approx(math.sqrt(4 * (sizes**2).sum() + work.terms.tail_variance), rel=1e-6)
    assert told.values[0] > 1.1 * told.values[2]


def test_symmetry_of_the_field():
    group = space_group(19)
    lattice = crystals.cell_of(group)
    indices = ball_indices(lattice, 3.0)
    strengths, positions = crystals.atoms_of(group, 2)
    values = crystals.structure_factors(-indices, strengths, positions) / lattice.volume
    kept = (np.abs(values) > 1e-9) & ~(np.sort(np.abs(indices), axis=1)[:, 0] == 1)
    made = coefficient_set(lattice, indices[kept], values=values[kept], group=group)
    x = np.array([0.1, 0.23, 0.37])
    images = [r @ x + t for r, t in zip(group.rotations, group.translations, strict=True)]
    _, told = change(made, sampling.points(lattice, images), d_stop=2.2)
    np.testing.assert_allclose(told.values, told.values[0], rtol=1e-6)
    assert told.values.min() > 0


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_grids_profiles_and_points_agree(dimension):
    lattice = LATTICES[dimension]
    made = few(lattice, {1: 3.0, 2: 2.5, 3: 2.6}[dimension], group=None)
    d_stop = {1: 2.0, 2: 1.8, 3: 2.0}[dimension]
    grid = box(lattice)
    _, on_grid = change(made, grid, d_stop=d_stop)
    points = sampling.points(lattice, grid.positions().reshape(-1, dimension))
    _, at_points = change(made, points, d_stop=d_stop)
    np.testing.assert_allclose(on_grid.values.ravel(), at_points.values, rtol=1e-6)
    assert on_grid.values.shape == grid.shape


def test_windows_stay_out_and_averages_stay_in():
    made = few()
    _, plain = change(made, box())
    work, windowed = change(made, box(), Treatment(window=Window("lanczos")))
    np.testing.assert_allclose(windowed.values, plain.values)
    assert "the termination window is not applied to missing terms" in work.words
    average = averages.ball(1.0)
    work, averaged = change(made, box(), Treatment(average=average))
    missing = [unmeasured(made, BOUND, 1.8).inside, unmeasured(made, BOUND, 1.8).beyond]
    indices = np.concatenate([part.indices for part in missing])
    factors = average.factors(LATTICE, indices)
    tail = work.terms.tail_variance
    expected = math.sqrt(2 * float(((strength(indices) * factors) ** 2).sum()) + tail)
    np.testing.assert_allclose(averaged.values, expected, rtol=1e-6)
    assert any("not averaged" in word for word in work.words)
    assert averaged.rms < plain.rms


def test_what_is_measured_is_not_missing():
    """A complete set has nothing missing inside; its values do not matter, and neither do their σ's."""
    indices = ball_indices(LATTICE, 2.4)
    made = coefficient_set(LATTICE, indices)
    work, told = change(made, box())
    assert work.terms.inside is None
    assert told.largest_inside == 0
    assert told.largest_beyond > told.rms
    larger = replace(made, values=100 * made.values, sigma=np.ones(made.count))
    np.testing.assert_array_equal(change(larger, box())[1].values, told.values)


def test_largest_changes_are_bounds():
    made = few()
    _, told = change(made, box())
    inside, beyond = (f(made, BOUND, *rest) for f, rest in ((missing_inside, ()), (missing_beyond, (1.8,))))
    assert told.largest_inside == pytest.approx(2 * strength(inside.indices).sum())
    assert told.largest_beyond >= 2 * strength(beyond.indices).sum()


def test_single_precision_and_bytes():
    made = few()
    work, told = change(made, box(), demand=Demand(precision="single", tolerance=1e-5))
    assert told.values.dtype == np.float32
    np.testing.assert_allclose(told.values, change(made, box())[1].values, rtol=1e-4)
    assert work.bytes >= 60 * 4
    assert work.seconds >= 0
    assert work.shape == (4, 5, 3)


def test_progress_is_passed_on():
    told = []
    work = prepare_change(few(), BOUND, box(), Treatment(), d_stop=1.8)
    perform_change(work, progress=lambda done, total: told.append((done, total)))
    assert told


@pytest.mark.parametrize(
    ("treatment", "options"),
    [
        (Treatment(field="gradient"), {}),
        (Treatment(field="autocorrelation"), {}),
        (Treatment(field="response"), {}),
        (Treatment(sharpen=1.0), {}),
        (Treatment(), {"real": False}),
    ],
)
def test_other_fields_are_refused(treatment, options):
    made = replace(few(), **options)
    with pytest.raises(InputError) as caught:
        prepare_change(made, BOUND, box(), treatment)
    assert caught.value.path == ("unmeasured",)


def test_smoothing_is_no_sharpening():
    """It falls on missing terms as on all others."""
    _, plain = change(few(), box())
    _, smooth = change(few(), box(), Treatment(sharpen=-10.0))
    assert smooth.rms < plain.rms


def test_refusals_of_the_terms():
    with pytest.raises(InputError) as caught:
        prepare_change(few(), BOUND, box(), Treatment(), d_stop=100.0)
    assert caught.value.path == ("d_stop",)
    with pytest.raises(TooLargeError):
        prepare_change(few(), BOUND, box(), Treatment(), d_stop=1e-3)
    with pytest.raises(TooLargeError):
        prepare_change(few(), BOUND, sampling.full_cell(LATTICE, (200, 200, 200)), Treatment(), max_bytes=2**20)


def test_it_is_no_uncertainty():
    """σ of the values and the change are computed from different terms, and neither knows of the other."""
    made = replace(few(), sigma=np.full(few().count, 0.05))
    field = evaluate(made, box(), uncertainty=True)
    _, told = change(made, box())
    _, without = change(replace(made, sigma=None), box())
    np.testing.assert_array_equal(told.values, without.values)
    assert not np.allclose(field.sigma.values, told.values)
