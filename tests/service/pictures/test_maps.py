"""Maps as a whole: nothing hangs out of the sheet, panels share their scale."""

from __future__ import annotations

import numpy as np
import pytest

pytest.importorskip("matplotlib")

from engine.errors import InputError
from service.pictures import PictureOptions, draw
from service.pictures.maps import _arrange
from tests.service.pictures.made import cell, crystal, group, named, parsed, paths, texts


def test_a_sheet_of_sections_has_them_all_with_their_offsets():
    made, field = crystal()
    root = parsed(draw("density", made, field, PictureOptions(), "svg"))
    assert named(root, "frame") == ["frame"] * 12
    found = texts(root)
    assert {f"z = {number / 12:.3f}, {9.3 * number / 12:.2f} Å" for number in range(12)} <= set(found)
    assert len(named(root, "scale-bar")) == 1
    assert len(named(root, "colour-bar")) == 1
    assert "Sections along c" in " ".join(found)


@pytest.mark.parametrize(("columns", "rows"), [(3, 2), (1, 6), (40, 1)])
def test_columns_are_kept(columns, rows):
    made, field = crystal()
    root = parsed(
        draw("density", made, field, PictureOptions(columns=columns, sections=6, width=1600, height=1200), "svg")
    )
    lower_left = np.round([paths(element)[0][0] for element in group(root, "frame")], 3)
    assert len(set(lower_left[:, 1].tolist())) == rows


def test_panels_do_not_overlap_and_stay_on_the_sheet():
    made, field = crystal()
    root = parsed(draw("density", made, field, PictureOptions(width=600, height=400), "svg"))
    boxes = [(lines[0].min(axis=0), lines[0].max(axis=0)) for lines in map(paths, group(root, "frame"))]
    for order, (low, high) in enumerate(boxes):
        assert np.all(low >= [0, -288])
        assert np.all(high <= [432, 0])
        for other_low, other_high in boxes[:order]:
            assert np.any(high < other_low) or np.any(other_high < low)


def test_many_sections_have_brief_labels_and_too_many_are_refused():
    made, field = crystal(shape=(8, 8, 40))
    found = texts(parsed(draw("density", made, field, PictureOptions(width=700, height=500, sections=40), "svg")))
    assert "z = 0.025" in found
    assert not any("…" in text for text in found)
    with pytest.raises(InputError, match="40 panels"):
        draw("density", made, field, PictureOptions(width=320, height=320, sections=40))


def test_a_vector_on_a_plane_is_a_panel_a_component():
    made, field = cell(field="gradient")
    root = parsed(draw("gradient", made, field, PictureOptions(), "svg"))
    assert named(root, "frame") == ["frame"] * 2
    assert {"component x", "component y"} <= set(texts(root))
    one = parsed(draw("gradient", made, field, PictureOptions(part="y"), "svg"))
    assert named(one, "frame") == ["frame"]
    assert any(text.startswith("gradient, component y") for text in texts(one))


def test_axes_of_an_oblique_map_are_along_and_across():
    made, field = cell()
    assert {"a (Å)", "⊥ a (Å)"} <= set(texts(parsed(draw("density", made, field, PictureOptions(), "svg"))))


def test_panels_are_as_large_as_they_can_be():
    # Four squares in a square: two by two beat a row.
    columns, inches = _arrange(4, np.array([1.0, 1.0]), (4.0, 4.0), (0.0, 0.0, 0.0), None)
    assert (columns, inches) == (2, 2.0)
    # A label of three inches leaves room for one column alone.
    assert _arrange(4, np.array([1.0, 1.0]), (4.0, 4.0), (0.0, 0.0, 3.0), None) == (1, 1.0)
    assert _arrange(3, np.array([2.0, 1.0]), (4.0, 4.0), (0.0, 0.0, 0.0), 3)[0] == 3
