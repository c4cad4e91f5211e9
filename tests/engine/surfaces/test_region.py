from __future__ import annotations

import numpy as np
import pytest

from engine import InputError, Lattice
from engine.sampling import box, full_cell, line, plane
from engine.surfaces.region import FEWEST, NEAREST, Region
from tests.engine.surfaces.shapes import TRICLINIC


def test_a_whole_cell_leaves_out_what_repeats():
    grid = full_cell(TRICLINIC, (5, 6, 7))
    region = Region.of(grid)
    assert (region.divisions, region.planes, region.wrapped) == ((5, 6, 7), (6, 7, 8), (True, True, True))
    sampling = region.sampling()
    assert sampling.shape == (5, 6, 7)
    np.testing.assert_array_equal(sampling.steps, grid.steps)
    np.testing.assert_allclose(region.spacing(TRICLINIC), np.array([9, 10, 11]) / [5, 6, 7])
    assert region.volume(TRICLINIC) == pytest.approx(TRICLINIC.volume)


@pytest.mark.parametrize("include_end", [False, True])
def test_a_box_is_sampled_to_its_far_faces(include_end):
    """Whether the request left them out or not."""
    shape = (4, 5, 6) if not include_end else (5, 6, 7)
    edges = [[0.5, 0, 0], [0.1, 0.7, 0], [0, 0, 0.3]]
    region = Region.of(box(TRICLINIC, [0.1, 0.2, 0.3], edges, shape, include_end=include_end), include_end=include_end)
    assert region.divisions == (4, 5, 6)
    assert region.wrapped == (False, False, False)
    assert region.sampling().shape == (5, 6, 7)
    np.testing.assert_allclose(
        region.sampling().positions()[-1, -1, -1], np.add([0.1, 0.2, 0.3], np.sum(edges, axis=0))
    )


def test_an_edge_that_is_a_translation_repeats():
    region = Region.of(box(TRICLINIC, [0.1, 0.2, 0.3], [[1, 0, 0], [0, 0.5, 0], [1, 0, -2]], (3, 4, 7)))
    assert region.wrapped == (True, False, True)
    assert region.sampling().shape == (3, 5, 7)


@pytest.mark.parametrize(
    "grid",
    [
        full_cell(Lattice.from_period(17.0), (5,)),
        full_cell(Lattice.from_planar_parameters(7.0, 8.0, 100.0), (5, 6)),
        line(TRICLINIC, [0, 0, 0], [0, 0, 1], 5),
        plane(TRICLINIC, [0, 0, 0], [1, 0, 0], [0, 1, 0], (5, 5)),
    ],
    ids=["stack", "planar", "line", "plane"],
)
def test_fewer_than_three_dimensions_are_refused(grid):
    with pytest.raises(InputError, match="no surface") as caught:
        Region.of(grid)
    assert caught.value.path == ("cell",)


def test_coarser_steps_are_longer_and_fast_to_transform():
    region = Region.of(full_cell(TRICLINIC, (64, 100, 7)))
    made = region.coarser(1.5)
    assert made.divisions == (40, 64, FEWEST)
    np.testing.assert_array_equal(made.edges, region.edges)
    assert Region.of(full_cell(TRICLINIC, (FEWEST, 2, FEWEST))).coarser(3).divisions == (FEWEST, 2, FEWEST)


def test_near_the_origin_vertices_come_as_near_as_they_may():
    assert Region.of(full_cell(TRICLINIC, (64, 64, 64))).nearest(TRICLINIC) == NEAREST


def test_far_away_vertices_keep_more_distance_and_then_are_refused():
    def far(cells):
        return Region.of(box(TRICLINIC, [cells, 0, 0], 0.5 * np.eye(3), (50, 50, 50)))

    assert NEAREST < far(100).nearest(TRICLINIC) < 0.05
    with pytest.raises(InputError, match="single precision") as caught:
        far(100_000).nearest(TRICLINIC)
    assert caught.value.path == ("origin",)
