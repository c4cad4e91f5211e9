"""Groups: closure, refusals, and laws that hold for whatever generates them."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine.symmetry import Group, space_group_setting
from tests.strategies import refusal_of


def elements(group):
    """The operations as plain tuples, translations in 24ths (modulo 1)."""
    turned = np.rint(group.translations * 24).astype(int) % 24
    return {(tuple(r.ravel().tolist()), tuple(t.tolist())) for r, t in zip(group.rotations, turned, strict=True)}


def test_a_screw_axis_and_an_inversion_generate_their_group():
    """P 2_1/c, unique axis b: the four positions of International Tables A."""
    group = Group.from_operations(["-x,y+1/2,-z+1/2", "-x,-y,-z"], 3, name="P21/c", number=14)
    assert set(group.operations) == {"x,y,z", "-x,y+1/2,-z+1/2", "-x,-y,-z", "x,-y+1/2,z+1/2"}
    assert group.operations[0] == "x,y,z"
    assert group.centrosymmetric
    assert (group.name, group.number, group.order, group.dimension) == ("P21/c", 14, 4, 3)


def test_the_order_of_a_complete_list_is_kept_and_duplicates_are_joined():
    listed = ["-x,-y,z", "x,y,z", "-x,y,-z", "-X, -Y, Z", "x,-y,-z", "x,y,z+1"]
    group = Group.from_operations(listed, 3, closure="require")
    assert group.operations == ("x,y,z", "-x,-y,z", "-x,y,-z", "x,-y,-z")


def test_the_identity_may_be_left_out():
    assert Group.from_operations(["-z"], 1, closure="require").operations == ("z", "-z")


def test_arrays_are_read_only_and_exact():
    group = Group.from_operations(["-y,x-y,z+.333", "x,y,-z"], 3)
    assert not any(a.flags.writeable for a in (group.rotations, group.translations, group.numerators, group.cosets))
    assert set(group.translations[:, 2].tolist()) <= {0, 1 / 3, 2 / 3}
    np.testing.assert_array_equal(group.numerators / group.denominator, group.translations)


def test_translations_in_floating_point_are_snapped():
    eye = np.eye(2)
    group = Group(rotations=[eye, eye, eye], translations=[[0, 0], [0.33333, 0.66667], [0.66667, 0.33333]], name="")
    assert group.translations.tolist() == [[0, 0], [1 / 3, 2 / 3], [2 / 3, 1 / 3]]
    assert sorted(group.centring.tolist()) == [[0, 0], [1, 2], [2, 1]]
    assert group.cosets.tolist() == [0]


@settings(max_examples=25, deadline=None)
@given(st.integers(1, 530), st.data())
def test_generators_and_their_group(setting, data):
    """Any few operations of a group generate a subgroup: closed, its order a divisor (Lagrange)."""
    whole = space_group_setting(setting)
    chosen = data.draw(st.lists(st.sampled_from(whole.operations), min_size=1, max_size=4))
    made = Group.from_operations(chosen, 3)
    assert whole.order % made.order == 0
    assert elements(made) <= elements(whole)
    for r, t in zip(made.rotations, made.translations, strict=True):
        # Inverse: x = R⁻¹x' − R⁻¹t.
        inverse = np.rint(np.linalg.inv(r)).astype(int)
        shift = tuple((np.rint(-inverse @ t * 24).astype(int) % 24).tolist())
        assert (tuple(inverse.ravel().tolist()), shift) in elements(made)


@pytest.mark.parametrize(
    ("operations", "row"),
    [
        (["x,y,z", "x+y,y,z"], 1),
        (["-x,-y,-z", "-y,x,z", "x+1/3,y,z", "x,y+1/7,z", "y,z,x"], 3),
        (["y,x,z", "x-99y,-y,z"], 1),
        (["x,y+1/24,z+1/23"], 0),
    ],
)
def test_what_generates_no_small_group_is_refused_by_name(operations, row):
    refusal = refusal_of(lambda: Group.from_operations(operations, 3))
    assert refusal.path == ("operations", row)
    assert operations[row] in refusal.reason
    assert "192" in refusal.reason


def test_a_list_that_is_not_closed_is_refused_where_that_is_asked():
    refusal = refusal_of(lambda: Group.from_operations(["x,y,z", "-x,-y,z+1/2", "-x,y,-z"], 3, closure="require"))
    named = ["-x,-y,z+1/2", "-x,y,-z", "x,-y,-z+1/2"]
    assert all(text in refusal.reason for text in named), refusal.reason


EYE = np.eye(3)


@pytest.mark.parametrize(
    ("rotations", "translations", "path"),
    [
        ([EYE, -EYE], [[0, 0, 0]], ("translations",)),
        (EYE, [0, 0, 0], ("rotations",)),
        ([-EYE], [[0, 0, 0]], ("rotations", 0)),
        ([EYE, 2 * EYE], [[0, 0, 0]] * 2, ("rotations", 1)),
        ([EYE, -EYE * 0.999], [[0, 0, 0]] * 2, ("rotations", 1)),
        ([EYE, -EYE], [[0, 0, 0], [0.123, 0, 0]], ("translations", 1)),
        ([EYE, -EYE], [[0, 0, 0], [np.nan, 0, 0]], ("translations", 1)),
        ([EYE, EYE], [[0, 0, 0], [1, 0, 0]], ("operations",)),
        ([EYE] * 200, [[0, 0, 0]] * 200, ("rotations",)),
        ([EYE, EYE], [[0, 0, 0], [1 / 3, 0, 0]], ("operations", 1)),
    ],
)
def test_arrays_that_are_no_group_are_refused(rotations, translations, path):
    assert refusal_of(lambda: Group(rotations=rotations, translations=translations, name="")).path == path


@pytest.mark.parametrize(
    "call",
    [
        lambda: Group.from_operations([], 3),
        lambda: Group.from_operations(["x"], 4),
        lambda: Group.from_operations(["z"], 1, closure="perhaps"),
    ],
)
def test_bad_arguments_are_refused(call):
    assert refusal_of(call).cure


def test_signed_permutations_generate_all_48():
    """The holohedry of the cube is the group of signed permutation matrices, listed here one by one."""
    group = Group.from_operations(["y,z,x", "-y,x,z", "-x,-y,-z"], 3)
    expected = set()
    for order in itertools.permutations(range(3)):
        for signs in itertools.product((1, -1), repeat=3):
            matrix = np.zeros((3, 3), dtype=int)
            matrix[range(3), order] = signs
            expected.add(tuple(matrix.ravel().tolist()))
    assert {tuple(r.ravel().tolist()) for r in group.rotations} == expected
