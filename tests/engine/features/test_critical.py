import numpy as np
import pytest

from engine import Columns, Treatment, assemble
from engine.features import critical, search
from engine.features.critical import critical_points, symmetry_of, varying_field
from engine.features.search import Wanted
from engine.fields import multipliers
from engine.symmetry import space_group
from tests.engine.features.densities import gaussian_atoms, random_set, symmetric_set
from tests.strategies import CRYSTAL, LATTICES, PLANAR, refusal_of


def points_of(coefficients, **options):
    field = varying_field(multipliers(coefficients, Treatment()))
    group, _ = symmetry_of(coefficients, field)
    return critical_points(field, Wanted(indices=tuple(range(field.dimension + 1))), group, **options)


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_morses_relations_hold_of_random_sets(dimension):
    """In a cell Σ (−1)^index = 0 and the inequalities: one lost or counted twice breaks them."""
    for seed in range(25):
        points = points_of(random_set(dimension, 100 + seed)[0])
        assert points.tally.degenerate == 0
        assert points.cell.holds, seed
        assert points.notes == ()


@pytest.mark.parametrize("number", [4, 19, 61, 136, 198, 225])
def test_morses_relations_hold_with_multiplicities(number):
    points = points_of(symmetric_set(space_group(number), 1, 2.2, 5.0))
    assert points.cell.holds
    # A one-sided count: fewer sites than positions.
    assert points.value.size < sum(points.cell.counts)


@pytest.mark.parametrize("dimension", [2, 3])
def test_peaks_in_empty_space(dimension):
    """Sharp atoms in a wide cell: between them are only the ripples of termination, a thousand times lower."""
    x = np.random.default_rng(9).random((3, dimension))
    cell = LATTICES[dimension] if dimension == 2 else CRYSTAL
    points = points_of(gaussian_atoms(cell, x, [8, 20, 50], 20.0, 2.5))
    assert points.cell.holds


def test_a_loss_is_noticed_and_made_good(monkeypatch):
    """With a search that overlooks much, finer grids follow; where a caller's grid is kept, words do."""
    coefficients, _ = random_set(2, 5)
    expected = points_of(coefficients).cell.counts
    monkeypatch.setattr(search, "MARGIN", 0.15)
    monkeypatch.setattr(search, "THIRD", {2: 0.0})
    monkeypatch.setattr(search, "FOURTH", 0.0)
    with_words = points_of(coefficients, spacing=1.5)
    assert not with_words.cell.holds
    assert any("cannot be all" in note for note in with_words.notes)
    monkeypatch.setattr(critical, "FINER", (1.0, 3.0, 9.0, 30.0))
    monkeypatch.setattr(search, "MARGIN", 1.0)
    monkeypatch.setattr(critical, "DIVISIONS", 3.0)
    made = points_of(coefficients)
    assert made.cell.holds
    assert made.cell.counts == expected


def test_lines_of_critical_points_are_left_out_and_said():
    """cos x cos y cos z: where two of them vanish the slope does, along whole lines."""
    signs = np.array([(1, 1, 1), (1, 1, -1), (1, -1, 1), (-1, 1, 1)])
    every = np.concatenate([signs, -signs])
    coefficients = assemble(
        CRYSTAL,
        Columns(indices=tuple(every.T), real=np.full(8, 0.125), imag=np.zeros(8)),
        values="density_coefficient",
    )
    points = points_of(coefficients)
    assert points.tally.degenerate > 0
    assert any("curvature vanishes" in note for note in points.notes)
    assert sorted(points.index.tolist()) == [0] * 4 + [3] * 4
    np.testing.assert_allclose(np.abs(points.value), 1, atol=1e-12)


def test_a_centred_set_without_a_group_has_every_copy():
    """h + k even: the set repeats at (½, ½), which no group says."""
    coefficients, _ = random_set(2, 1, (4, 4))
    centred = coefficients.select(coefficients.indices.sum(axis=1) % 2 == 0)
    points = points_of(centred)
    assert points.cell.holds
    assert all(count % 2 == 0 for count in points.cell.counts)


@pytest.mark.parametrize(
    ("lattice", "indices", "rank"),
    [
        (CRYSTAL, [(0, 0, 0), (0, 0, 1), (0, 0, 2)], "1 of 3"),
        (CRYSTAL, [(1, 1, 0), (2, 1, 0), (1, 0, 0)], "2 of 3"),
        (PLANAR, [(1, 1), (2, 2)], "1 of 2"),
        (PLANAR, [(0, 0)], "0 of 2"),
    ],
)
def test_sets_that_vary_along_fewer_directions_are_refused(lattice, indices, rank):
    rows = np.array(indices)
    columns = Columns(indices=tuple(rows.T), real=np.ones(len(rows)), imag=np.zeros(len(rows)))
    coefficients = assemble(lattice, columns, values="density_coefficient")
    refusal = refusal_of(lambda: varying_field(multipliers(coefficients, Treatment())))
    assert refusal.path == ("field",)
    assert rank in refusal.reason
    assert ("profile" in refusal.cure) == (rank[0] != "0")


def test_a_spacing_too_coarse_is_refused():
    coefficients, _ = random_set(2, 1)
    assert refusal_of(lambda: points_of(coefficients, spacing=8.0)).path == ("spacing",)
    assert refusal_of(lambda: points_of(coefficients, spacing=-1.0)).path == ("spacing",)


def test_operations_that_the_set_lacks_are_not_believed():
    """A set without (h k l) of one orbit member is symmetric no more; nor is a P1 set that names a group."""
    whole = symmetric_set(space_group(19), 3)
    assert symmetry_of(whole, varying_field(multipliers(whole, Treatment())))[0] is whole.group
    row = int(np.flatnonzero((whole.indices == (1, 2, 1)).all(axis=1))[0])
    torn = whole.select(np.arange(whole.count) != row)
    group, notes = symmetry_of(torn, varying_field(multipliers(torn, Treatment())))
    assert group.order == 1
    assert "1 of the 4 operations" in notes[0]
