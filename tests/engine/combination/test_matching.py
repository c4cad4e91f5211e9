"""Rows with equal indices, cells that are nearly one, operations in common."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine import Lattice
from engine.arrays import MAX_INDEX
from engine.combination.matching import cell_words, common_group, keys_of, match, positions_in, same_keys
from engine.symmetry import Group
from tests.engine.combination.crystals import GROUPS, random_set
from tests.strategies import refusal_of


@given(st.integers(0, 2**16), st.integers(0, 2**16), st.sampled_from((1, 2, 3)), st.booleans())
def test_rows_with_the_same_indices(one, two, dimension, real):
    first, second = random_set(dimension, seed=one, real=real), random_set(dimension, seed=two, real=real)
    made = match(first, second)
    a, b = ([tuple(row) for row in one.indices.tolist()] for one in (first, second))
    assert [a[row] for row in made.first] == [h for h in a if h in b]
    assert [b[row] for row in made.second] == [h for h in a if h in b]
    assert [a[row] for row in made.only_first] == [h for h in a if h not in b]
    assert [b[row] for row in made.only_second] == [h for h in b if h not in a]


def test_keys_are_distinct_and_in_lexical_order_up_to_the_bound_of_an_index():
    corner = np.array([-MAX_INDEX, -1, 0, 1, MAX_INDEX])
    indices = np.stack(np.meshgrid(corner, corner, corner, indexing="ij"), axis=-1).reshape(-1, 3)
    base = random_set()
    made = replace(base, indices=indices)
    (keys,) = keys_of([made])
    assert np.all(np.diff(keys) > 0)
    too_far = replace(base, indices=indices * 4)
    assert refusal_of(lambda: keys_of([too_far])).path == ("indices",)


@given(
    st.lists(st.integers(-50, 50), unique=True, max_size=30), st.lists(st.integers(-50, 50), unique=True, max_size=30)
)
def test_places_of_keys_in_any_order(one, two):
    keys, other = np.array(one, dtype=np.int64), np.array(two, dtype=np.int64)
    at_first, at_second = same_keys(keys, other)
    assert keys[at_first].tolist() == other[at_second].tolist() == [key for key in one if key in two]
    place, found = positions_in(keys, other)
    assert found.tolist() == [key in one for key in two]
    assert keys[place[found]].tolist() == [key for key in two if key in one]


CELL = (7.3, 11.9, 16.4, 82.0, 97.0, 106.0)


@pytest.mark.parametrize(
    ("cell", "allowed"),
    [
        ((7.36, 11.9, 16.4, 82.0, 97.0, 106.0), True),
        ((7.39, 11.9, 16.4, 82.0, 97.0, 106.0), False),
        ((7.3, 11.9, 16.22, 82.0, 97.0, 106.0), False),
        ((7.3, 11.9, 16.4, 82.5, 97.0, 106.0), True),
        ((7.3, 11.9, 16.4, 83.0, 97.0, 106.0), False),
        ((7.3, 11.9, 16.4, 82.0, 97.0, 105.0), False),
    ],
)
def test_cells_within_a_hundredth(cell, allowed):
    first, second = random_set(), replace(random_set(seed=1), lattice=Lattice.from_parameters(*cell))
    if allowed:
        assert any(
            cell_words(first.lattice) in note and cell_words(second.lattice) in note
            for note in match(first, second).notes
        )
        return
    fault = refusal_of(lambda: match(first, second))
    assert fault.path == ("second",)
    assert cell_words(first.lattice) in fault.reason
    assert cell_words(second.lattice) in fault.reason
    assert match(first, second, cell_tolerance=0.03).first.size


def test_orientation_of_a_cell_does_not_matter():
    first = random_set()
    turn = np.linalg.qr(np.random.default_rng(0).normal(size=(3, 3)))[0]
    turn *= np.sign(np.linalg.det(turn))
    turned = replace(random_set(seed=1), lattice=Lattice.from_vectors(first.lattice.vectors @ turn))
    assert match(first, turned).notes == ()


def test_cells_in_words():
    assert cell_words(Lattice.from_parameters(*CELL)) == "7.3 × 11.9 × 16.4 Å, 82°, 97°, 106°"
    assert cell_words(Lattice.from_planar_parameters(3, 4, 100)) == "3 × 4 Å, 100°"
    assert cell_words(Lattice.from_period(58.4)) == "58.4 Å"


def test_sets_of_other_kinds_are_refused():
    assert refusal_of(lambda: match(random_set(3), random_set(2))).path == ("second",)
    assert "complex" in refusal_of(lambda: match(random_set(3), random_set(3, real=False))).reason
    assert refusal_of(lambda: match(random_set(), random_set(), cell_tolerance=0)).path == ("cell_tolerance",)


def grouped(*groups):
    return [replace(random_set(), group=group) for group in groups]


def test_operations_in_common():
    group = GROUPS["P212121"]
    assert common_group(grouped(group, group)) == (group, ())
    shuffled = Group.from_operations([group.operations[0], *group.operations[:0:-1]], 3, name="shuffled")
    assert common_group(grouped(group, shuffled)) == (group, ())
    assert common_group(grouped(None, None)) == (None, ())
    made, notes = common_group(grouped(group, None))
    assert made is None
    assert len(notes) == 1
    # One screw axis of three is in both; the same rotation with another translation is another operation.
    screw = Group.from_operations(["x+1/2,-y+1/2,-z"], 3, name="one screw axis")
    made, notes = common_group(grouped(group, screw))
    assert set(made.operations) == set(screw.operations)
    assert "one screw axis" in made.name
    assert len(notes) == 1
    axis = Group.from_operations(["x,-y,-z"], 3, name="an axis")
    made, _ = common_group(grouped(group, axis))
    assert made.order == 1
    centred = Group.from_operations(["x+1/3,y+2/3,z+2/3", "-y,x-y,z"], 3, name="centred")
    made, _ = common_group(grouped(centred, Group.from_operations(["x+1/3,y+2/3,z+2/3"], 3, name="centring")))
    assert made.order == 3
