"""Comparisons of two densities against fine grids, and laws of scaling."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine import Columns, Lattice, Treatment, Window, assemble
from engine.features.comparison import TermWeights, compare
from tests.engine.features.drawn import doubled, draws, uncertain
from tests.strategies import CRYSTAL, LATTICES, PLANAR, STACK, Listing, forward, listing, refusal_of


def pair(dimension, *, seed=3, noise=0.6):
    """Two lists that share many terms, of values that have something to do with each other."""
    lattice = LATTICES[dimension]
    whole = listing(lattice, seed=seed, share=1.0)
    rng = np.random.default_rng(seed)
    made = []
    for share in (0.8, 0.7):
        kept = forward(whole.indices) & ((rng.random(len(whole.values)) < share) | ~whole.indices.any(axis=1))
        indices = whole.indices[kept]
        waves = indices.any(axis=1)
        values = (
            whole.values[kept] + noise * (rng.normal(size=len(indices)) + 1j * rng.normal(size=len(indices))) * waves
        )
        values = np.where(waves, values, rng.normal())
        made.append(
            Listing(
                lattice,
                np.concatenate([indices, -indices[waves]]),
                np.concatenate([values, values[waves].conj()]),
                True,
            )
        )
    return made


def on_grid(wanted, shape):
    """Values over the cell on a grid so fine that products of two densities do not fold onto the mean."""
    box = np.zeros(shape, dtype=complex)
    np.add.at(box, tuple((wanted.indices % np.array(shape)).T), wanted.values)
    return np.fft.ifftn(box).real.ravel() * box.size


SHAPES = {1: (60,), 2: (32, 27), 3: (24, 20, 27)}


@pytest.mark.parametrize("terms", ["all", "common"])
@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_against_a_fine_grid(dimension, terms):
    one, two = pair(dimension)
    made = compare(one.coefficients(), two.coefficients(), terms=terms)
    shared = {tuple(row) for row in one.indices.tolist()} & {tuple(row) for row in two.indices.tolist()}
    listed = [one, two]
    if terms == "common":
        kept = [np.array([tuple(row) in shared for row in each.indices.tolist()]) for each in listed]
        listed = [
            Listing(each.lattice, each.indices[chosen], each.values[chosen], True)
            for each, chosen in zip(listed, kept, strict=True)
        ]
    n1, n2 = (on_grid(each, SHAPES[dimension]) for each in listed)
    assert made.correlation == pytest.approx(np.corrcoef(n1, n2)[0, 1], rel=1e-10)
    k, c = np.polyfit(n2, n1, 1)
    assert made.scale == pytest.approx(k, rel=1e-9)
    assert made.offset == pytest.approx(c, abs=1e-10)
    assert made.rms_difference == pytest.approx(np.sqrt(((n1 - n2) ** 2).mean()), rel=1e-11)
    assert made.rms_residual == pytest.approx((n1 - k * n2).std(), rel=1e-10)
    waves = len([row for row in shared if any(row)]) // 2
    assert made.matched == waves
    assert made.first_only == one.coefficients().count - 1 - waves
    assert made.second_only == two.coefficients().count - 1 - waves
    assert made.scale_sigma is None

    # The rest by tables of coefficients.
    tables = [dict(zip(map(tuple, each.indices.tolist()), each.values, strict=True)) for each in listed]
    keys = [key for key in tables[0].keys() | tables[1].keys() if any(key)]
    a, b = (np.array([table.get(key, 0) for key in keys]) for table in tables)
    assert made.r_value == pytest.approx(np.abs(a - k * b).sum() / np.abs(a).sum(), rel=1e-10)
    scale = (np.abs(a) * np.abs(b)).sum() / (np.abs(b) ** 2).sum()
    assert made.amplitude_scale == pytest.approx(scale, rel=1e-10)
    assert made.amplitude_r_value == pytest.approx(
        np.abs(np.abs(a) - scale * np.abs(b)).sum() / np.abs(a).sum(), rel=1e-10
    )
    weight, angle = np.abs(a * b), np.angle(a) - np.angle(b)
    assert made.mean_cosine == pytest.approx((weight * np.cos(angle)).sum() / weight.sum(), rel=1e-10)
    turned = np.abs(np.degrees(np.angle(np.exp(1j * angle))))
    assert made.mean_phase_difference == pytest.approx((weight * turned).sum() / weight.sum(), rel=1e-10)


def test_shells_are_whole_comparisons_of_their_terms():
    one, two = pair(3)
    a, b = one.coefficients(), two.coefficients()
    made = compare(a, b, shells=4)
    shells = made.shells
    assert len(shells.both) == 4
    assert shells.both.sum() == made.matched
    assert shells.first_only.sum() == made.first_only
    assert shells.second_only.sum() == made.second_only
    assert (shells.d_max[1:] < shells.d_min[:-1]).all()
    total = shells.both + shells.first_only + shells.second_only
    assert total.max() - total.min() <= 2
    for row in range(4):
        # A width of some 1e-7 Å around the limits takes in every term of the shell and no other.
        d_min, d_max = shells.d_min[row] - 1e-7, shells.d_max[row] + 1e-7
        inside = [each.within(d_min=d_min, d_max=d_max) for each in (a, b)]
        alone = compare(*inside, shells=1)
        assert alone.matched == shells.both[row]
        assert alone.correlation == pytest.approx(shells.correlation[row], rel=1e-12)
        assert alone.mean_cosine == pytest.approx(shells.mean_cosine[row], rel=1e-12)


@given(st.floats(0.01, 100), st.floats(-5, 5))
def test_a_density_and_its_image_on_another_scale(k, c):
    wanted = listing(PLANAR, seed=2).coefficients()
    waves = wanted.indices.any(axis=1)
    image = replace(wanted, values=np.where(waves, wanted.values / k, (wanted.values - c) / k))
    made = compare(wanted, image)
    assert made.correlation == pytest.approx(1, abs=1e-12)
    assert made.scale == pytest.approx(k, rel=1e-10)
    assert made.offset == pytest.approx(c, abs=1e-9 * max(k, 1))
    assert made.rms_residual == pytest.approx(0, abs=1e-9)
    assert made.r_value == pytest.approx(0, abs=1e-10)
    assert made.mean_cosine == pytest.approx(1, abs=1e-12)
    assert made.mean_phase_difference == pytest.approx(0, abs=1e-5)


def test_the_inverted_density():
    wanted = listing(CRYSTAL, seed=2).coefficients()
    inverse = replace(wanted, values=wanted.values.conj())
    made = compare(wanted, inverse)
    assert made.amplitude_r_value == pytest.approx(0, abs=1e-14)
    assert abs(made.correlation) < 0.5
    negative = compare(wanted, replace(wanted, values=-wanted.values))
    assert negative.correlation == pytest.approx(-1)
    assert negative.scale == pytest.approx(-1)
    assert negative.mean_phase_difference == pytest.approx(180)


@pytest.mark.parametrize("window", ["none", "lanczos"])
@pytest.mark.parametrize("which", [(True, True), (True, False), (False, True)])
def test_sigma_of_the_scale_is_that_of_draws(which, window):
    one, two = (each.coefficients() for each in pair(2, noise=0.2))
    with_errors = [uncertain(each, relative=0.02, phase=0.01, seed=row) for row, each in enumerate((one, two))]
    given_sets = [full if has else bare for full, has, bare in zip(with_errors, which, (one, two), strict=True)]
    made = compare(*given_sets, Treatment(window=Window(window)))
    columns = sorted({tuple(row) for each in (one, two) for row in each.indices.tolist() if any(row)})
    tables = []
    for row, (each, has) in enumerate(zip(with_errors, which, strict=True)):
        values = draws(each, 5000, seed=row) if has else each.values[None]
        magnitudes = PLANAR.magnitudes(each.indices)
        values = values * (np.sinc(magnitudes / magnitudes.max()) if window == "lanczos" else 1)
        table = np.zeros((len(values), len(columns)), dtype=complex)
        for place, index in enumerate(each.indices.tolist()):
            if any(index):
                table[:, columns.index(tuple(index))] = values[:, place]
        tables.append(table)
    a, b = tables
    k = (a * b.conj()).real.sum(axis=1) / (np.abs(b) ** 2).sum(axis=1)
    assert made.scale_sigma == pytest.approx(k.std(), rel=0.05)
    named = [words.split(":")[0] for words in made.contains]
    assert ("first" in named, "second" in named) == which
    assert any("none were given" in words for words in made.omits) == (which != (True, True))


def test_a_common_scale_is_an_error_of_k():
    wanted = listing(STACK, seed=2).coefficients()
    made = compare(replace(wanted, scale_sigma=0.03), replace(wanted, scale_sigma=0.04))
    assert made.scale_sigma == pytest.approx(0.05, rel=1e-10)


def test_term_weights_find_their_terms():
    indices = np.array([[3, 1], [0, 2], [-1, 4]])
    weights = np.array([1.0, 2j, 3.0])
    made = TermWeights(indices, weights).factors(PLANAR, np.array([[0, 2], [5, 5], [3, 1]]))
    np.testing.assert_array_equal(made, [[2j, 0, 1]])
    coefficients = uncertain(listing(PLANAR, seed=4).coefficients(), phase=0.0)
    _, weight = doubled(coefficients)
    assert weight.max() == 2


def test_lattices():
    one = listing(STACK, seed=2)
    near = replace(one.coefficients(), lattice=Lattice.from_period(58.43))
    assert compare(one.coefficients(), near).correlation == pytest.approx(1)
    far = replace(one.coefficients(), lattice=Lattice.from_period(58.6))
    found = refusal_of(lambda: compare(one.coefficients(), far, names=("room", "cold")))
    assert found.path == ("lattice",)
    assert "room" in found.reason
    assert "cold" in found.reason
    assert compare(one.coefficients(), far, tolerance=0.01).matched > 0
    # A cell that stands otherwise in space is the same cell.
    turn = np.array([[0.0, 1.0], [-1.0, 0.0]])
    planar = listing(PLANAR, seed=2).coefficients()
    turned = replace(planar, lattice=Lattice.from_vectors(PLANAR.vectors @ turn))
    assert compare(planar, turned).correlation == pytest.approx(1)
    assert refusal_of(lambda: compare(planar, one.coefficients())).path == ("lattice",)


def test_an_angle_is_part_of_the_lattice():
    wanted = listing(PLANAR, seed=2).coefficients()
    other = replace(wanted, lattice=Lattice.from_planar_parameters(21.3, 34.7, 103.0))
    assert refusal_of(lambda: compare(wanted, other)).path == ("lattice",)


def test_what_is_said():
    wanted = listing(STACK, seed=2).coefficients(unit="e/Å³")
    zeroless = replace(wanted.select(wanted.indices.any(axis=1)), unit="arbitrary")
    made = compare(wanted, zeroless, names=("a", "b"))
    assert any(note.startswith("b:") and "deviation from the mean" in note for note in made.notes)
    assert any("that b does not have" in note for note in made.notes)
    assert any("units differ" in note for note in made.notes)
    assert any("zero term" in words for words in made.assumptions)


def test_terms_that_are_not_shared():
    one = assemble(STACK, Columns(indices=[[1, 2]], real=[1.0, 2.0], imag=[0.0, 0.0]), values="density_coefficient")
    two = assemble(STACK, Columns(indices=[[3]], real=[1.0], imag=[0.0]), values="density_coefficient")
    made = compare(one, two)
    assert (made.matched, made.first_only, made.second_only) == (0, 2, 1)
    assert made.correlation == 0
    assert np.isnan(made.mean_cosine)
    assert refusal_of(lambda: compare(one, two, terms="common")).path == ("first",)


def test_refusals():
    wanted = listing(STACK).coefficients()
    flat = assemble(STACK, Columns(indices=[[0]], real=[1.0], imag=[0.0]), values="density_coefficient")
    assert refusal_of(lambda: compare(flat, flat)).path == ("first",)
    assert refusal_of(lambda: compare(wanted, listing(STACK, real=False).coefficients())).path == ("second",)
    assert refusal_of(lambda: compare(wanted, wanted, terms="some")).path == ("terms",)
    assert refusal_of(lambda: compare(wanted, wanted, shells=10**6)).path == ("shells",)
