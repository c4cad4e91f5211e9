"""What symmetry does to reflections: textbook conditions, explicit sums over atoms, plain loops."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine.symmetry import Group, classify, equivalents, orbits, plane_group, space_group, space_group_setting
from engine.symmetry.reflections import Packing, wrapped
from tests.engine.symmetry import crystals
from tests.strategies import refusal_of

SAMPLE = ["P1", "P-1", "P21", "C2/c", "P212121", "Fdd2", "Pnma", "I41/a", "P41212", "P3121", "R-3c", "R3:R", "P61",
          "P63/mmc", "P213", "I-43d", "Fd-3m", "Ia-3d"]  # fmt: skip
"""Chiral, polar, centrosymmetric, centred, trigonal on both axes, hexagonal, cubic."""
ROUNDING = 1e-9
"""Of Σ f: a sum of some hundred terms whose phases 2π h·x are good to 1e-13."""


def phasor(angle):
    return np.exp(1j * angle)


@pytest.mark.parametrize("symbol", SAMPLE)
def test_the_phases_of_equivalents_are_those_of_a_structure(symbol):
    """F summed over every atom at h and at each hR; source: the definition of F."""
    group = space_group(symbol)
    strengths, positions = crystals.atoms_of(group, count=2)
    h = crystals.indices_within((2, 3, 2))[::3]
    made, shift = equivalents(h, group)
    assert made.shape == (group.order, len(h), 3)
    assert shift.shape == (group.order, len(h))
    factors = crystals.structure_factors(h, strengths, positions)
    found = crystals.structure_factors(made.reshape(-1, 3), strengths, positions).reshape(shift.shape)
    np.testing.assert_allclose(found, factors * phasor(shift), atol=ROUNDING * strengths.sum())


@pytest.mark.parametrize("symbol", SAMPLE)
def test_absent_and_centric_reflections_of_a_structure(symbol):
    """Explicit sums over atoms at general positions: F vanishes where absent and nowhere else, and
    the phase is one of the two allowed where centric. An inversion that is not at the origin, a
    twofold axis of a chiral group and a polar group are among them."""
    group = space_group(symbol)
    strengths, positions = crystals.atoms_of(group, count=3, seed=3)
    h = crystals.indices_within((3, 3, 6))
    kinds = classify(h, group)
    factors = crystals.structure_factors(h, strengths, positions)
    small = ROUNDING * strengths.sum()
    np.testing.assert_array_equal(np.abs(factors) < small, kinds.absent)
    centric = kinds.centric & ~kinds.absent
    turned = factors[centric] * phasor(-kinds.restricted_phase[centric])
    assert np.abs(turned.imag).max(initial=0) < small
    np.testing.assert_array_equal(np.isnan(kinds.restricted_phase), ~kinds.centric)
    allowed = kinds.restricted_phase[kinds.centric]
    assert np.all((allowed >= 0) & (allowed < np.pi))


@pytest.mark.parametrize("symbol", SAMPLE)
def test_a_phase_that_is_free_is_not_called_centric(symbol):
    """By definition: some operation turns h into −h. Tuple by tuple."""
    group = space_group(symbol)
    h = crystals.indices_within((2, 2, 3), zero=True)
    expected = [tuple((-row).tolist()) in crystals.plain_orbit(row, group, friedel=False) for row in h]
    np.testing.assert_array_equal(classify(h, group).centric, expected)


@pytest.mark.parametrize("symbol", [*SAMPLE, "Fm-3m", "Cmmm"])
def test_weights_and_multiplicities_by_brute_force(symbol):
    """ε: operations with hR = h over the number of pure translations; multiplicity: distinct tuples."""
    group = space_group(symbol)
    pure = sum(np.array_equal(r, np.eye(3)) for r in group.rotations)
    h = crystals.indices_within((2, 1, 3), zero=True)
    kinds = classify(h, group)
    epsilon = [sum(np.array_equal(row @ r, row) for r in group.rotations) // pure for row in h]
    np.testing.assert_array_equal(kinds.epsilon, epsilon)
    multiplicity = [len(crystals.plain_orbit(row, group, friedel=True)) for row in h]
    np.testing.assert_array_equal(kinds.multiplicity, multiplicity)


def test_powder_multiplicities_of_the_cube():
    """International Tables A, chapter 3.2: forms of m-3m."""
    h = [[1, 0, 0], [1, 1, 0], [1, 1, 1], [2, 1, 0], [2, 1, 1], [2, 2, 1], [3, 2, 1], [0, 0, 0]]
    kinds = classify(h, space_group("Pm-3m"))
    assert kinds.multiplicity.tolist() == [6, 12, 8, 24, 24, 24, 48, 1]
    assert kinds.epsilon.tolist() == [8, 4, 6, 2, 2, 2, 1, 48]


ODD = {  # condition on h, k, l for presence, by group; International Tables A, table 2.1.3 (reflection conditions)
    "P21": lambda h, k, l: not (h == l == 0 and k % 2),
    "P41": lambda h, k, l: not (h == k == 0 and l % 4),
    "P42": lambda h, k, l: not (h == k == 0 and l % 2),
    "P31": lambda h, k, l: not (h == k == 0 and l % 3),
    "P61": lambda h, k, l: not (h == k == 0 and l % 6),
    "P62": lambda h, k, l: not (h == k == 0 and l % 3),
    "P63": lambda h, k, l: not (h == k == 0 and l % 2),
    "P212121": lambda h, k, l: not (
        (h % 2 and k == l == 0) or (k % 2 and h == l == 0) or (l % 2 and h == k == 0)
    ),
    "Pc": lambda h, k, l: not (k == 0 and l % 2),
    "Pn": lambda h, k, l: not (k == 0 and (h + l) % 2),
    "P21/c": lambda h, k, l: not ((k == 0 and l % 2) or (h == l == 0 and k % 2)),
    "P21/n": lambda h, k, l: not ((k == 0 and (h + l) % 2) or (h == l == 0 and k % 2)),
    "Pnma": lambda h, k, l: not ((h == 0 and (k + l) % 2) or (l == 0 and h % 2)),
    "C2": lambda h, k, l: (h + k) % 2 == 0,
    "I222": lambda h, k, l: (h + k + l) % 2 == 0,
    "A2": lambda h, k, l: (k + l) % 2 == 0,
    "Fm-3m": lambda h, k, l: h % 2 == k % 2 == l % 2,
    "R3": lambda h, k, l: (-h + k + l) % 3 == 0,
    "R3:R": lambda h, k, l: True,
    "P63/mmc": lambda h, k, l: not (h == k and l % 2),
    "Fd-3m": lambda h, k, l: h % 2 == k % 2 == l % 2
    and not any(a == 0 and (b + c) % 4 for a, b, c in ((h, k, l), (k, l, h), (l, h, k))),
}  # fmt: skip


@pytest.mark.parametrize("symbol", ODD)
def test_reflection_conditions_of_the_tables(symbol):
    h = crystals.indices_within((6, 6, 6))
    # Conditions of special projections follow from those of their zones: hhl and its two equivalents in
    # the hexagonal system, where h = k stands for h = −2k and k = −2h as well.
    present = np.array([ODD[symbol](*row) for row in h.tolist()])
    if symbol == "P63/mmc":
        also = [(a == -2 * b or b == -2 * a) and c % 2 for a, b, c in h.tolist()]
        present &= ~np.array(also, dtype=bool)
    np.testing.assert_array_equal(classify(h, space_group(symbol)).absent, ~present)


def test_odd_orders_of_graphite_are_absent():
    """Check 5: graphite, P6_3/mmc, 00l with l odd absent (Trucano & Chen, Nature 258 (1975) 136, memory)."""
    l = np.arange(1, 30)
    h = np.column_stack([0 * l, 0 * l, l])
    np.testing.assert_array_equal(classify(h, space_group("P63/mmc")).absent, l % 2 == 1)


PLANE_CONDITIONS = {
    "pg": lambda h, k: not (h == 0 and k % 2),
    "cm": lambda h, k: (h + k) % 2 == 0,
    "p2mg": lambda h, k: not (k == 0 and h % 2),
    "p2gg": lambda h, k: not ((k == 0 and h % 2) or (h == 0 and k % 2)),
    "c2mm": lambda h, k: (h + k) % 2 == 0,
    "p4gm": lambda h, k: not ((k == 0 and h % 2) or (h == 0 and k % 2)),
    "p6mm": lambda h, k: True,
}
"""International Tables A, chapter 2.2."""


@pytest.mark.parametrize("symbol", PLANE_CONDITIONS)
def test_reflection_conditions_of_plane_groups(symbol):
    h = crystals.indices_within((5, 6))
    present = [PLANE_CONDITIONS[symbol](*row) for row in h.tolist()]
    np.testing.assert_array_equal(classify(h, plane_group(symbol)).absent, ~np.array(present))


@pytest.mark.parametrize("friedel", [True, False])
@pytest.mark.parametrize("symbol", SAMPLE)
def test_orbits_are_those_found_tuple_by_tuple(symbol, friedel):
    group = space_group(symbol)
    rng = np.random.default_rng(8)
    h = rng.integers(-4, 5, (200, 3))
    found = orbits(h, group, friedel=friedel)
    for row, number in zip(h, found.orbit, strict=True):
        members = crystals.plain_orbit(row, group, friedel)
        # The representative comes last by l, then k, then h.
        assert tuple(found.unique[number].tolist()) == max(members, key=lambda m: m[::-1])
    keys = [tuple(row[::-1]) for row in found.unique.tolist()]
    assert keys == sorted(set(keys))


@pytest.mark.parametrize("friedel", [True, False])
@pytest.mark.parametrize("symbol", SAMPLE)
def test_phases_brought_to_representatives(symbol, friedel):
    """Against sums over atoms at the representatives; complex strengths where Friedel's law is not used."""
    group = space_group(symbol)
    strengths, positions = crystals.atoms_of(group)
    if not friedel:
        strengths = strengths * np.exp(0.3j * (np.arange(strengths.size) // group.order))
    h = np.random.default_rng(8).integers(-4, 5, (300, 3))
    h = h[~classify(h, group).absent]
    found = orbits(h, group, friedel=friedel)
    factors = crystals.structure_factors(h, strengths, positions)
    carried = np.abs(factors) * phasor(found.carried(np.angle(factors)))
    expected = crystals.structure_factors(found.unique[found.orbit], strengths, positions)
    np.testing.assert_allclose(carried, expected, atol=ROUNDING * np.abs(strengths).sum())
    made = np.einsum("ij,ijk->ik", h, group.rotations[found.operation])
    made[found.conjugated] *= -1
    np.testing.assert_array_equal(made, found.unique[found.orbit])
    assert friedel or not found.conjugated.any()


@settings(max_examples=40, deadline=None)
@given(st.integers(1, 530), st.integers(0, 2**32 - 1), st.booleans())
def test_equivalents_share_an_orbit(setting, seed, friedel):
    """A law: whatever operation is applied, the orbit and all properties stay."""
    group = space_group_setting(setting)
    h = np.random.default_rng(seed).integers(-9, 10, (12, 3))
    made, _ = equivalents(h, group)
    flat = made.reshape(-1, 3)
    found = orbits(np.concatenate([h, flat]), group, friedel=friedel)
    np.testing.assert_array_equal(found.orbit[len(h) :].reshape(group.order, -1), [found.orbit[: len(h)]] * group.order)
    mine, theirs = classify(h, group), classify(flat, group)
    for name in ("absent", "centric", "epsilon", "multiplicity"):
        np.testing.assert_array_equal(np.tile(getattr(mine, name), group.order), getattr(theirs, name))


def test_many_rows_are_treated_as_few():
    """More rows than one block holds."""
    group = space_group("Fd-3m")
    h = np.random.default_rng(1).integers(-30, 31, (20001, 3))
    whole, parts = classify(h, group), [classify(part, group) for part in np.array_split(h, 40)]
    for name in ("absent", "centric", "restricted_phase", "epsilon", "multiplicity"):
        np.testing.assert_array_equal(getattr(whole, name), np.concatenate([getattr(p, name) for p in parts]))
    found = orbits(h, group, friedel=True)
    again = np.concatenate([(o := orbits(p, group, friedel=True)).unique[o.orbit] for p in np.array_split(h, 40)])
    np.testing.assert_array_equal(found.unique[found.orbit], again)


@settings(max_examples=60)
@given(st.integers(1, 3), st.integers(0, 2**32 - 1), st.sampled_from([1, 7, 1000, 2**20]))
def test_packed_rows_are_unpacked_and_ordered(dimension, seed, largest):
    group = Group.from_operations([",".join("xyz"[:dimension]).replace("x", "z" if dimension == 1 else "x")], dimension)
    rows = np.random.default_rng(seed).integers(-largest, largest + 1, (50, dimension))
    rows[0] = largest
    packing = Packing.of(rows, group)
    keys = rows @ packing.weights
    np.testing.assert_array_equal(packing.unpacked(keys), rows)
    np.testing.assert_array_equal(np.argsort(keys, kind="stable"), np.lexsort(rows.T))


def test_indices_whose_equivalents_leave_64_bits_are_refused():
    h = np.array([[2**20, 0, 0]])
    assert orbits(h, space_group("Pmmm"), friedel=True).count == 1
    assert refusal_of(lambda: orbits(h, space_group("P6/mmm"), friedel=True)).path == ("indices",)


@pytest.mark.parametrize(
    ("indices", "rows"),
    [
        ([[1, 2]], ()),
        ([1, 2, 3], ()),
        ([["a", "b", "c"]], ()),
        ([[1, 2, 3], [1, 2.5, 3]], (1,)),
        ([[1, 2, 3], [1, np.nan, 3]], (1,)),
        ([[1, 2, 2**21]], (0,)),
    ],
)
@pytest.mark.parametrize(
    "call",
    [
        lambda h, group: equivalents(h, group),
        lambda h, group: classify(h, group),
        lambda h, group: orbits(h, group, friedel=True),
    ],
)
def test_what_is_no_row_of_indices_is_refused(call, indices, rows):
    refusal = refusal_of(lambda: call(indices, space_group("P-1")))
    assert refusal.path == ("indices",)
    assert refusal.rows == rows


def test_no_reflections_make_no_orbits():
    empty = np.zeros((0, 3), dtype=np.int64)
    group = space_group("P-1")
    assert orbits(empty, group, friedel=True).count == 0
    assert classify(empty, group).absent.shape == (0,)


def test_phases_in_range_stay_as_they_are():
    phase = np.array([-np.pi, -1.0, 0.0, np.pi / 2, np.pi, np.nan])
    np.testing.assert_array_equal(wrapped(phase), phase)
    np.testing.assert_allclose(wrapped(np.array([4.0, -4.0, 9.0])), [4 - 2 * np.pi, 2 * np.pi - 4, 9 - 2 * np.pi])
