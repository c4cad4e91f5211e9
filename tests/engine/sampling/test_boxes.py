"""Boxes and the whole cell."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from engine import Lattice
from engine.sampling import box, full_cell, full_cell_by_spacing
from tests.strategies import CRYSTAL, LATTICES, PLANAR, STACK, refusal_of


@pytest.mark.parametrize("shape", [(7,), (8, 9), (6, 7, 10)])
def test_the_whole_cell(shape):
    lattice = LATTICES[len(shape)]
    made = full_cell(lattice, shape)
    assert made.shape == shape
    for sample in itertools.product(*(range(n) for n in shape)):
        expected = [s / n for s, n in zip(sample, shape, strict=True)]
        np.testing.assert_allclose(made.positions()[sample], expected, atol=1e-15)
    axes = made.axes(lattice)
    assert [axis.label for axis in axes] == list("abc")[: len(shape)]
    np.testing.assert_allclose([axis.step * axis.count for axis in axes], lattice.lengths, rtol=1e-14)


def smooth(least):
    """The smallest number not below `least` that has no prime factor above 5."""
    while True:
        rest = least
        for prime in (2, 3, 5):
            while rest % prime == 0:
                rest //= prime
        if rest == 1:
            return least
        least += 1


@pytest.mark.parametrize("spacing", [0.1, 0.33, 1.0, 4.7, 100.0])
def test_counts_by_spacing_are_the_next_fast_lengths(spacing):
    made = full_cell_by_spacing(CRYSTAL, spacing)
    for count, length in zip(made.shape, (7.3, 11.9, 16.4), strict=True):
        exact = length / spacing
        wanted = round(exact) if abs(exact - round(exact)) < 1e-9 else int(np.ceil(exact))
        assert count == smooth(wanted)
        assert length / count <= spacing * (1 + 1e-11)


def test_a_spacing_that_divides_the_cell_is_taken_exactly():
    # 6/0.1 is 60 but for the last digit; it must not become 61, and then 64.
    assert full_cell_by_spacing(Lattice.from_period(6.0), 0.1).shape == (60,)
    assert full_cell_by_spacing(Lattice.from_period(2.7), 0.3).shape == (9,)


@pytest.mark.parametrize("include_end", [True, False])
@pytest.mark.parametrize("shape", [(7,), (8, 9), (4, 5, 6)])
def test_a_box_is_divided_evenly_along_its_edges(shape, include_end):
    d = len(shape)
    rng = np.random.default_rng(d)
    origin, edges = rng.uniform(-1, 1, d), rng.uniform(-1, 1, (d, d)) + np.eye(d)
    made = box(LATTICES[d], origin, list(edges), shape, include_end=include_end)
    for sample in itertools.product(*(range(n) for n in shape)):
        parts = [s / (n - 1 if include_end else n) for s, n in zip(sample, shape, strict=True)]
        np.testing.assert_allclose(made.positions()[sample], origin + np.array(parts) @ edges, atol=1e-14)
    assert made.labels == ("edge_1", "edge_2", "edge_3")[:d]


def test_a_cartesian_box():
    edges = np.array([[2.0, 0, 0], [0, 3.0, 0], [0.5, 0, 4.0]])
    made = box(CRYSTAL, [1, 1, 1], list(edges), (2, 3, 4), coordinates="cartesian")
    corner = made.positions()[1, 2, 3] @ CRYSTAL.vectors
    np.testing.assert_allclose(corner, 1 + edges[0] / 2 + edges[1] * 2 / 3 + edges[2] * 3 / 4, atol=1e-12)


def test_a_box_of_one_sample():
    made = box(CRYSTAL, [0.5, 0, 0], list(np.eye(3)), (1, 1, 1))
    np.testing.assert_array_equal(made.positions(), [[[[0.5, 0, 0]]]])


EYE = [[1, 0, 0], [0, 1, 0], [0, 0, 1]]

REFUSED = [
    (lambda: full_cell(CRYSTAL, (4, 5)), ("shape",)),
    (lambda: full_cell(CRYSTAL, (4, 0, 5)), ("shape", 1)),
    (lambda: full_cell(CRYSTAL, (4, 5, 6.0)), ("shape", 2)),
    (lambda: full_cell(STACK, (4, 5)), ("shape",)),
    (lambda: full_cell_by_spacing(CRYSTAL, 0.0), ("spacing",)),
    (lambda: full_cell_by_spacing(CRYSTAL, np.nan), ("spacing",)),
    (lambda: full_cell_by_spacing(CRYSTAL, 1e-12), ("spacing",)),
    (lambda: box(CRYSTAL, [0, 0, 0], EYE[:2], (4, 5)), ("edges",)),
    (lambda: box(PLANAR, [0, 0], EYE, (4, 5, 6)), ("edges",)),
    (lambda: box(CRYSTAL, [0, 0, 0], EYE, (4, 5)), ("shape",)),
    (lambda: box(CRYSTAL, [0, 0, 0], EYE, (4, 1, 5), include_end=True), ("shape", 1)),
    (lambda: box(CRYSTAL, [0, 0], EYE, (4, 5, 6)), ("origin",)),
    (lambda: box(CRYSTAL, [0, 0, 0], [[1, 0, 0], [0, 0, 0], [0, 0, 1]], (4, 5, 6)), ("edge_2",)),
    (lambda: box(CRYSTAL, [0, 0, 0], [[1, 0, 0], [0, np.nan, 0], [0, 0, 1]], (4, 5, 6)), ("edge_2", 1)),
    (lambda: box(CRYSTAL, [0, 0, 0], [[1, 0, 0], [0, 1, 0], [1, 1, 0]], (4, 5, 6)), ("edge_3",)),
    (lambda: box(CRYSTAL, [0, 0, 0], [[1, 0, 0], [0, 1, 0], [1, 1, 1e-5]], (4, 5, 6)), ("edge_3",)),
]


@pytest.mark.parametrize(("call", "path"), REFUSED)
def test_boxes_that_are_refused(call, path):
    assert refusal_of(call).path == path
