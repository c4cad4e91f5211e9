from __future__ import annotations

import numpy as np
import pytest

from engine import sampling
from engine.errors import InputError
from service.pictures.options import PictureOptions
from service.pictures.panels import of_box, of_plane
from service.pictures.parts import Part
from tests.service.pictures.made import TRICLINIC, cell


def numbered(grid):
    """Values that tell which sample they are."""
    return Part("", np.arange(grid.samples, dtype=np.float64).reshape(grid.shape), None)


def test_a_plane_is_closed_and_keeps_its_values():
    made, field = cell()
    (panel,) = of_plane(made.lattice, field.sampling, (Part("", field.values, None),))
    assert panel.values.shape == (41, 51)
    np.testing.assert_array_equal(panel.values[:40, :50], field.values)
    assert panel.plane.spans == ((0.0, 40.0), (0.0, 50.0))


def test_sections_are_at_equal_steps_and_say_where():
    grid = sampling.full_cell(TRICLINIC, (12, 16, 24))
    part = numbered(grid)
    panels, shown, cut = of_box(TRICLINIC, grid, part, PictureOptions())
    assert (shown, cut) == ((0, 1), 2)
    assert len(panels) == 12
    for number, panel in enumerate(panels):
        np.testing.assert_array_equal(panel.values[:12, :16], part.values[:, :, 2 * number])
        assert panel.label == f"z = {number / 12:.3f}, {9.3 * number / 12:.2f} Å"
        np.testing.assert_allclose(panel.plane.origin, [0, 0, number / 12])


def test_another_axis_and_number():
    grid = sampling.full_cell(TRICLINIC, (12, 16, 24))
    part = numbered(grid)
    panels, shown, cut = of_box(TRICLINIC, grid, part, PictureOptions(sections_along="b", sections=5))
    assert (shown, cut) == ((0, 2), 1)
    # The samples nearest to n/5 of 16.
    for panel, index in zip(panels, (0, 3, 6, 10, 13), strict=True):
        np.testing.assert_array_equal(panel.values[:12, :24], part.values[:, index, :])
        assert panel.label.startswith(f"y = {index / 16:.3f}")


@pytest.mark.parametrize(("count", "sections"), [(24, 12), (32, 8), (100, 10), (97, 12), (5, 5)])
def test_the_usual_number_divides_the_samples_where_it_can(count, sections):
    grid = sampling.full_cell(TRICLINIC, (4, 4, count))
    assert len(of_box(TRICLINIC, grid, numbered(grid), PictureOptions())[0]) == sections


def test_a_slanted_box_counts_in_its_own_edge():
    grid = sampling.box(TRICLINIC, [0, 0, 0.5], [[1, 0, 0], [0, 1, 0], [0.5, 0, 0.5]], (4, 4, 5), include_end=True)
    panels, _, _ = of_box(TRICLINIC, grid, numbered(grid), PictureOptions())
    length = np.linalg.norm(TRICLINIC.to_cartesian(np.array([0.5, 0, 0.5])))
    assert [panel.label for panel in panels][1] == f"0.250 of edge 3, {length / 4:.2f} Å"
    np.testing.assert_allclose(panels[-1].plane.origin, [0.5, 0, 1.0])


def test_refusals():
    grid = sampling.full_cell(TRICLINIC, (4, 4, 5))
    with pytest.raises(InputError, match="give one of a, b, c"):
        of_box(TRICLINIC, grid, numbered(grid), PictureOptions(sections_along="z"))
    with pytest.raises(InputError, match="5 samples"):
        of_box(TRICLINIC, grid, numbered(grid), PictureOptions(sections=6))
