"""Asymmetric set to full set and back, against sums over atoms and against the density itself."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from engine import Columns, Lattice, assemble, evaluate, sampling
from engine.symmetry import classify, expand, orbits, plane_group, reduce, space_group, stack_group
from tests.engine.symmetry import crystals
from tests.strategies import refusal_of

REACH = {1: (9,), 2: (4, 5), 3: (3, 3, 3)}
SYMBOLS = ["P1", "P-1", "P21", "P212121", "C2/c", "Pna21", "Fdd2", "I41/a", "P41212", "P3121", "P3221", "R-3c",
           "R32:R", "P61", "P63/mmc", "P213", "I-43d", "Fd-3m:2", "Ia-3d"]  # fmt: skip
GROUPS = {
    **{symbol: lambda symbol=symbol: space_group(symbol) for symbol in SYMBOLS},
    **{symbol: lambda symbol=symbol: plane_group(symbol) for symbol in ("p2", "pg", "c2mm", "p4gm", "p31m", "p6")},
    "stack 1": lambda: stack_group("1"),
    "stack -1": lambda: stack_group("-1"),
}


def structure(group, seed=2):
    """A structure, all its reflections in a box closed under the group, and an asymmetric set of them."""
    strengths, positions = crystals.atoms_of(group, count=2, seed=seed)
    box = crystals.indices_within(REACH[group.dimension])
    asymmetric = crystals.plain_asymmetric(box, group, friedel=True)
    factors = crystals.structure_factors(asymmetric, strengths, positions)
    return strengths, positions, crystals.reflections_of(crystals.cell_of(group), asymmetric, factors)


@pytest.mark.parametrize("mates", ["one", "both"])
@pytest.mark.parametrize("name", GROUPS)
def test_an_expanded_set_has_the_factors_of_the_structure(name, mates):
    """Each index of each orbit once, with F as the sum over all atoms has it.

    Bound: 1e-9 of Σ f, as sums of hundreds of terms with phases good to 1e-13.
    """
    group = GROUPS[name]()
    strengths, positions, asymmetric = structure(group)
    full = expand(asymmetric, group, mates=mates).reflections
    expected = crystals.structure_factors(full.indices, strengths, positions)
    np.testing.assert_allclose(crystals.complex_of(full), expected, atol=1e-9 * strengths.sum())
    members = [crystals.plain_orbit(h, group, friedel=True) for h in asymmetric.indices]
    found = [tuple(h) for h in full.indices.tolist()]
    assert len(found) == len(set(found))
    if mates == "both":
        assert set(found) == set().union(*members)
    else:
        # The one whose last index other than zero is positive.
        assert set(found) == {m for m in set().union(*members) if next(v for v in m[::-1] if v) > 0}
    for h, row in zip(found, full.row, strict=True):
        assert h in members[row]


@pytest.mark.parametrize("name", GROUPS)
def test_a_density_made_of_an_expanded_set_is_invariant(name):
    """ρ(Rx + t) = ρ(x) at random points, with random amplitudes and the phases that are allowed.

    Bound: 1e-9 of the sum of amplitudes over the volume, which no density exceeds.
    """
    group = GROUPS[name]()
    rng = np.random.default_rng(21)
    h = crystals.plain_asymmetric(crystals.indices_within(REACH[group.dimension]), group, friedel=True)
    kinds = classify(h, group)
    free = rng.uniform(-np.pi, np.pi, len(h))
    phase = np.where(kinds.centric, kinds.restricted_phase + np.pi * rng.integers(0, 2, len(h)), free)
    lattice = crystals.cell_of(group)
    full = expand(
        crystals.reflections_of(lattice, h, rng.uniform(1, 9, len(h)) * np.exp(1j * phase)), group
    ).reflections
    coefficients = assemble(
        lattice,
        Columns(indices=list(full.indices.T), amplitude=full.observed, phase_deg=np.rad2deg(full.phase)),
        values="structure_factor",
    )
    x = rng.random((4, group.dimension))
    images = np.concatenate([x @ r.T + t for r, t in zip(group.rotations, group.translations, strict=True)])
    values = evaluate(coefficients, sampling.points(lattice, images)).values.reshape(group.order, -1)
    bound = 1e-9 * 2 * full.observed.sum() / lattice.volume
    np.testing.assert_allclose(values, np.broadcast_to(values[0], values.shape), atol=bound)
    assert np.ptp(values[0]) > 1e3 * bound


@pytest.mark.parametrize("number", range(1, 231))
def test_every_type_of_space_group_expands_and_reduces(number):
    """Random data on representatives come back from every equivalent: all 230 types.

    Phases come back to 1e-12 radians: a few roundings of multiples of π.
    """
    group = space_group(number)
    rng = np.random.default_rng(number)
    drawn = rng.integers(-6, 7, (25, 3))
    h = orbits(drawn[drawn.any(axis=1)], group, friedel=True).unique
    kinds = classify(h, group)
    phase = rng.uniform(-np.pi, np.pi, len(h))
    phase = np.where(kinds.centric, kinds.restricted_phase + np.pi * rng.integers(0, 2, len(h)), phase)
    given = crystals.reflections_of(crystals.cell_of(group), h, rng.uniform(1, 9, len(h)) * np.exp(1j * phase))
    made = expand(given, group, mates="both")
    assert made.absent_rows.tolist() == np.flatnonzero(kinds.absent).tolist()
    assert made.reflections.count == kinds.multiplicity[~kinds.absent].sum()
    back = reduce(made.reflections, group)
    np.testing.assert_array_equal(back.indices, given.indices[back.row])
    np.testing.assert_array_equal(back.observed, given.observed[back.row])
    turned = np.exp(1j * back.phase) / np.exp(1j * given.phase[back.row])
    np.testing.assert_allclose(turned, 1, atol=1e-12)


@pytest.mark.parametrize("symbol", ["P21", "P3121", "P213", "C2/c"])
def test_without_friedels_law_mates_stand_for_themselves(symbol):
    """Complex scattering strengths: F(−h) is not conj F(h), but equivalents of either follow from it."""
    group = space_group(symbol)
    strengths, positions = crystals.atoms_of(group)
    strengths = strengths * np.repeat([1, 1 + 0.4j, 1 - 0.2j], group.order)
    h = crystals.plain_asymmetric(crystals.indices_within(REACH[3]), group, friedel=False)
    factors = crystals.structure_factors(h, strengths, positions)
    lattice = crystals.cell_of(group)
    full = expand(crystals.reflections_of(lattice, h, factors), group, friedel=False).reflections
    expected = crystals.structure_factors(full.indices, strengths, positions)
    np.testing.assert_allclose(crystals.complex_of(full), expected, atol=1e-9 * np.abs(strengths).sum())
    found = {tuple(row) for row in full.indices.tolist()}
    assert found == set().union(*(crystals.plain_orbit(row, group, friedel=False) for row in h))
    assert len(found) == full.count
    back = reduce(full, group, friedel=False)
    expected = crystals.structure_factors(back.indices, strengths, positions)
    np.testing.assert_allclose(crystals.complex_of(back), expected, atol=1e-9 * np.abs(strengths).sum())


def test_columns_travel_along():
    """σ, phase σ, merit and unknown phases go with their reflection; intensities stay intensities."""
    group = space_group("P21")
    given = crystals.reflections_of(
        crystals.cell_of(group), [[1, 2, 3], [2, 1, 1]], observed=[5, -1], sigma=[0.5, 2], quantity="intensity",
        phase=np.array([1.0, np.nan]), phase_sigma=np.array([0.1, np.nan]), merit=np.array([0.9, np.nan]),
        row=np.array([40, 7]),
    )  # fmt: skip
    full = expand(given, group, mates="both").reflections
    assert full.row.tolist() == [40] * 4 + [7] * 4
    assert full.observed.tolist() == [5] * 4 + [-1] * 4
    assert full.sigma.tolist() == [0.5] * 4 + [2] * 4
    assert full.merit.tolist()[:4] == [0.9] * 4
    assert full.phase_sigma.tolist()[:4] == [0.1] * 4
    assert np.isnan(full.phase[4:]).all()
    assert full.quantity == "intensity"


def test_the_zero_term_is_its_own_mate():
    group = space_group("P212121")
    given = crystals.reflections_of(crystals.cell_of(group), [[0, 0, 0]], np.array([30.0 + 0j]))
    assert expand(given, group, mates="both").reflections.indices.tolist() == [[0, 0, 0]]


def test_phases_that_break_a_restriction():
    """P2_1: h0l reflections are real, F(h0l) with R: y → −y, t = ½ along b gives φ = 0 or π."""
    group = space_group("P21")
    phases = np.radians([0.4, 177.0, 90.0, 50.0])
    given = crystals.reflections_of(
        crystals.cell_of(group), [[1, 0, 2], [3, 0, 1], [2, 0, 1], [1, 1, 1]], np.exp(1j * phases),
        row=np.array([10, 11, 12, 13]),
    )  # fmt: skip
    refusal = refusal_of(lambda: expand(given, group))
    assert refusal.path == ("phase",)
    # The worst first.
    assert refusal.rows == (12, 11)
    made = expand(given, group, restricted="report")
    assert made.misplaced_rows.tolist() == [11, 12]
    np.testing.assert_allclose(made.misplaced_deg, [3, 90], atol=1e-9)
    # One of each pair: h0l is a pair by itself, hkl two.
    assert made.reflections.count == 3 * 1 + 2
    tolerant = expand(given.select(np.array([True, True, False, True])), group, phase_tolerance_deg=3.5)
    assert tolerant.misplaced_rows.size == 0
    # Of a complex density nothing is restricted.
    assert expand(given, group, friedel=False).misplaced_rows.size == 0


def test_absent_reflections_are_left_out_and_named():
    group = space_group("P21")
    given = crystals.reflections_of(
        crystals.cell_of(group), [[0, 1, 0], [0, 2, 0], [0, 3, 0], [0, 5, 0], [0, 7, 0]],
        observed=[9.0, 5.0, 0.5, 0.0, 2.0], sigma=[1.0, 1.0, 1.0, 0.0, 0.0], row=np.arange(5) + 100,
    )  # fmt: skip
    made = expand(given, group)
    assert made.absent_rows.tolist() == [100, 102, 103, 104]
    assert made.significant_absent_rows.tolist() == [100, 104]
    assert set(made.reflections.row.tolist()) == {101}
    assert expand(dataclasses.replace(given, sigma=None), group).significant_absent_rows.tolist() == [100, 102, 104]
    assert expand(given, group, significance=20).significant_absent_rows.tolist() == [104]


def test_nothing_but_absent_reflections():
    group = space_group("P21")
    given = crystals.reflections_of(crystals.cell_of(group), [[0, 1, 0]], observed=[1.0])
    assert expand(given, group).reflections.indices.shape == (0, 3)


@pytest.mark.parametrize(
    ("indices", "friedel", "rows"),
    [
        ([[1, 2, 3], [1, -2, 3], [2, 0, 1]], True, (0, 1)),
        ([[1, 2, 3], [2, 0, 1], [1, 2, 3]], True, (0, 2)),
        ([[1, 2, 3], [-1, -2, -3]], True, (0, 1)),
        ([[1, 2, 3], [-1, 2, -3]], False, (0, 1)),
    ],
)
def test_a_set_that_is_not_asymmetric_is_refused(indices, friedel, rows):
    group = space_group("P21")
    given = crystals.reflections_of(crystals.cell_of(group), indices, observed=np.ones(len(indices)))
    assert refusal_of(lambda: expand(given, group, friedel=friedel)).rows == rows


@pytest.mark.parametrize("options", [{"mates": "none"}, {"restricted": "drop"}, {"phase_tolerance_deg": 0},
                                     {"significance": -1}])  # fmt: skip
def test_bad_options_are_refused(options):
    group = space_group("P21")
    given = crystals.reflections_of(crystals.cell_of(group), [[1, 2, 3]], observed=[1.0])
    assert refusal_of(lambda: expand(given, group, **options)).path == tuple(options)


def test_a_cell_without_the_symmetry_is_refused():
    lattice = Lattice.from_parameters(5, 6, 7, 80, 95, 102)
    given = crystals.reflections_of(lattice, [[1, 2, 3]], observed=[1.0])
    for call in (expand, reduce):
        assert refusal_of(lambda call=call: call(given, space_group("P21"))).path == ("lattice",)
        call(given, space_group("P21"), metric_tolerance=1)


def test_more_rows_than_one_block_holds():
    group = space_group("P21/c")
    h = crystals.indices_within((20, 20, 20))
    h = h[(h[:, 1] > 0) & ((h[:, 2] > 0) | ((h[:, 2] == 0) & (h[:, 0] > 0)))]
    given = crystals.reflections_of(crystals.cell_of(group), h, observed=np.arange(1.0, len(h) + 1))
    assert len(h) > 2**14
    full = expand(given, group, mates="both").reflections
    kinds = classify(h, group)
    np.testing.assert_array_equal(np.bincount(full.row, minlength=len(h)), kinds.multiplicity * ~kinds.absent)
    np.testing.assert_array_equal(full.observed, given.observed[full.row])
