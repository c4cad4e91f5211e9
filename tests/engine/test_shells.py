"""Shells of equal numbers."""

from __future__ import annotations

import numpy as np
import pytest

from engine import Lattice
from engine.shells import equal_shells
from tests.engine.symmetry import crystals
from tests.strategies import CRYSTAL, refusal_of

HALF = crystals.indices_within((4, 5, 6))[643:]
"""One of each Friedel pair; of a triclinic lattice nothing else has equal spacings."""


@pytest.mark.parametrize("count", [1, 2, 7, 10])
def test_shells_hold_equal_numbers_in_order_of_resolution(count):
    """Each holds N/S to the next whole number, found here by sorting."""
    h = HALF[::2]
    shells = equal_shells(CRYSTAL, h, count)
    place = shells.of(CRYSTAL, h)
    assert shells.count == count
    numbers = np.bincount(place, minlength=count)
    assert numbers.max() - numbers.min() <= 1
    order = np.argsort(-CRYSTAL.spacings(h), kind="stable")
    assert np.all(np.diff(place[order]) >= 0)


def test_equal_spacings_are_never_parted():
    """Six reflections of one spacing and one of another make two shells, however many are asked for."""
    cubic = Lattice.from_parameters(5, 5, 5, 90, 90, 90)
    h = np.array([[1, 0, 0], [0, 1, 0], [0, 0, 1], [-1, 0, 0], [0, -1, 0], [0, 0, -1], [1, 1, 1]])
    shells = equal_shells(cubic, h, 7)
    assert shells.of(cubic, h).tolist() == [0] * 6 + [1]


@pytest.mark.parametrize(("size", "count"), [(1, 1), (99, 1), (100, 2), (420, 8), (643, 10)])
def test_without_a_number_fifty_reflections_make_a_shell(size, count):
    assert equal_shells(CRYSTAL, HALF[:size], None).count == count


def test_at_most_ten_shells_unasked():
    h = crystals.indices_within((6, 7, 8))[:1000]
    assert equal_shells(CRYSTAL, h).count == 10


def test_what_lies_outside_belongs_to_the_nearest():
    shells = equal_shells(CRYSTAL, np.array([[0, 0, 2], [0, 0, 3]]), 2)
    assert shells.of(CRYSTAL, np.array([[0, 0, 1], [0, 0, 9]])).tolist() == [0, 1]


@pytest.mark.parametrize(("size", "count"), [(3, 4), (0, 1), (3, 0), (3, 1.5)])
def test_impossible_numbers_are_refused(size, count):
    assert refusal_of(lambda: equal_shells(CRYSTAL, HALF[:size], count)).cure
