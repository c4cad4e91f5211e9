"""Advice comes exactly where its condition holds, and ordinary requests hear nothing."""

from __future__ import annotations

import numpy as np
import pytest

from engine import Lattice, averages, sampling
from engine.resolution import PointResponse, advice, coverage, point_response
from engine.resolution.coverage import Coverage
from tests.engine.resolution.sets import ball_indices, coefficient_set, equal_series

CELL = Lattice.from_parameters(20, 22, 24, 90, 90, 90)


def response(*widths):
    d = len(widths)
    return PointResponse(
        directions=np.eye(d), widths=np.array(widths, dtype=float), ripple=-0.09, ripple_at=1.0, searched=""
    )


def line(length, samples):
    return sampling.line(CELL, [0, 0, 0], [length, 0, 0], samples, coordinates="cartesian")


def covered(possible, present, gaps=(), spacings=(), d_min=1.0, estimated=False):
    return Coverage(
        d_min=d_min,
        possible=possible,
        present=present,
        without_phase=0,
        missing=possible - present,
        gaps=np.array(gaps, dtype=np.int64).reshape(-1, 3),
        gap_spacings=np.array(spacings, dtype=float),
        region="",
        estimated=estimated,
    )


def test_ordinary_requests_hear_nothing():
    indices = ball_indices(CELL, 1.5)
    made = point_response(equal_series(CELL, indices))
    full = coverage(coefficient_set(CELL, indices))
    for spacing in (0.2, 0.3, 0.45):
        assert advice(made, sampling.full_cell_by_spacing(CELL, spacing), CELL, coverage=full) == ()
    assert advice(made, sampling.points(CELL, [[0.1, 0.2, 0.3]]), CELL, coverage=full) == ()
    slab = averages.slab(CELL, [0, 0, 1], 3.0)
    assert advice(made, line(10, 51), CELL, average=slab) == ()
    assert advice(made, line(10, 51), CELL, average=averages.lateral(CELL, [1, 0, 0])) == ()
    assert advice(None, line(10, 51), CELL) == ()


@pytest.mark.parametrize(
    ("step", "word"), [(0.049, "twentieth"), (0.051, None), (0.49, None), (0.51, "between the samples")]
)
def test_fine_and_coarse_lines(step, word):
    said = advice(response(1, 1, 1), line(100 * step, 101), CELL)
    assert [word in one for one in said] == ([True] if word else [])


def test_every_axis_must_be_fine_and_one_suffices_to_be_coarse():
    grid = sampling.full_cell(CELL, [600, 22, 60])
    said = advice(response(1, 1, 1), grid, CELL)
    assert len(said) == 1
    assert "1 Å apart along b" in said[0]
    assert advice(response(1, 2.1, 1), sampling.full_cell(CELL, [600, 22, 60]), CELL) == ()
    # One sample along an axis is no axis.
    assert "twentieth" in advice(response(1, 1, 1), sampling.full_cell(CELL, [600, 1, 1]), CELL)[0]


@pytest.mark.parametrize(("span", "heard"), [(0.98, True), (1.02, False)])
def test_a_region_smaller_than_a_point(span, heard):
    said = advice(response(1, 1, 1), line(span, 11), CELL)
    assert any("one feature" in one for one in said) == heard


@pytest.mark.parametrize(
    ("size", "word"), [(0.24, "next to nothing"), (0.26, "around it"), (0.98, "around it"), (1.02, None)]
)
@pytest.mark.parametrize("kind", ["slab", "ball", "box"])
def test_thin_averages(kind, size, word):
    average = {
        "slab": lambda: averages.slab(CELL, [0, 0, 1], size),
        "ball": lambda: averages.ball(size / 2),
        "box": lambda: averages.box(CELL, [[size / 20, 0, 0], [0, size / 22, 0]]),
    }[kind]()
    said = advice(response(1, 1, 1), line(10, 51), CELL, average=average)
    assert [word in one for one in said] == ([True] if word else [])


def test_a_box_with_one_long_edge_is_no_thin_one():
    average = averages.box(CELL, [[0.01, 0, 0], [0, 0.5, 0]])
    assert advice(response(1, 1, 1), line(10, 51), CELL, average=average) == ()


def test_a_box_is_without_effect_where_every_edge_is():
    average = averages.box(CELL, [[0.01, 0, 0], [0, 0.5 / 22, 0]])
    (said,) = advice(response(1, 1, 1), line(10, 51), CELL, average=average)
    assert "around it" in said


@pytest.mark.parametrize(("ratio", "heard"), [(1.49, False), (1.51, True)])
def test_anisotropy(ratio, heard):
    said = advice(response(1, 1.2, ratio), line(10, 51), CELL)
    assert any("depends on the direction" in one for one in said) == heard


def test_a_film_is_resolved_along_its_normal_alone():
    film = point_response(equal_series(CELL, np.array([[0, 0, l] for l in range(13)])))
    along = sampling.line(CELL, [0, 0, 0], [0, 0, 1], 101)
    said = advice(film, along, CELL)
    assert len(said) == 1
    assert "(0 0 1)" in said[0]
    # Along the film nothing varies: no word about samples there.
    assert len(advice(film, line(10, 1001), CELL)) == 1
    stack = Lattice.from_period(60.0)
    one = point_response(equal_series(stack, np.arange(13)[:, None]))
    assert advice(one, sampling.line(stack, [0], [1], 101), stack) == ()


def test_gaps():
    def said(**more):
        return advice(response(1, 1, 1), line(10, 51), CELL, coverage=covered(**more))

    assert said(possible=1000, present=950) == ()
    few = said(possible=1000, present=949)
    assert len(few) == 1
    assert "949 of 1000" in few[0]
    assert "about 1000" in said(possible=1000, present=900, estimated=True)[0]
    low = said(possible=1000, present=998, gaps=[[0, 0, 1], [1, 0, 2]], spacings=[4.1, 3.9])
    assert len(low) == 1
    assert "(0 0 1) 4.1 Å" in low[0]
    assert "(1 0 2)" not in low[0]
