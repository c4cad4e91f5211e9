"""One map, read back from the SVG: true shape, outlines, contour lines, scale bar, colour bar."""

from __future__ import annotations

import base64
import io
from dataclasses import replace

import numpy as np
import pytest

pytest.importorskip("matplotlib")

from matplotlib.image import imread

from service.pictures import PictureOptions, draw
from tests.service.pictures.made import SVG, cell, group, named, parsed, paths, texts

XLINK = "{http://www.w3.org/1999/xlink}href"


def picture(options=None, **given):
    made, field = cell(**given)
    return field, parsed(draw("density", made, field, PictureOptions(**(options or {})), "svg"))


def frame(root):
    (corners,) = paths(group(root, "frame")[0])
    return corners[:4]


def test_the_frame_has_the_cell_s_true_shape():
    corners = frame(picture()[1])
    first, second = corners[1] - corners[0], corners[3] - corners[0]
    assert np.linalg.norm(first) / np.linalg.norm(second) == pytest.approx(10 / 14, rel=1e-4)
    cosine = first @ second / np.linalg.norm(first) / np.linalg.norm(second)
    assert np.degrees(np.arccos(cosine)) == pytest.approx(100, abs=0.01)


def test_the_scale_bar_is_as_long_as_it_says():
    root = picture()[1]
    (bar,) = paths(group(root, "scale-bar")[0])
    corners = frame(root)
    length = np.ptp(bar[:, 0]) / np.linalg.norm(corners[1] - corners[0]) * 10
    assert f"{length:.6g} Å" in texts(root)
    assert length in (pytest.approx(1), pytest.approx(2), pytest.approx(5))


def test_outlines_are_the_edges_of_the_cell():
    root = picture()[1]
    assert named(root, "cells") == ["cells-0", "cells-1"]
    corners = frame(root)
    for name, edges in (("cells-0", ((0, 3), (1, 2))), ("cells-1", ((0, 1), (3, 2)))):
        drawn = [np.sort(line, axis=0) for line in paths(group(root, name)[0])]
        for ends in edges:
            edge = np.sort(corners[list(ends)], axis=0)
            assert any(np.allclose(line, edge, atol=0.01) for line in drawn)
    assert not named(picture({"cells": False})[1], "cells")


def test_contour_lines_are_where_the_values_are():
    # One cosine along a: the lines of half its height are straight, at x_1 = ±1/6.
    made, field = cell(shape=(60, 60))
    x = np.arange(60) / 60
    field = replace(field, values=np.repeat(np.cos(2 * np.pi * x)[:, None], 60, axis=1))
    root = parsed(draw("density", made, field, PictureOptions(levels=(0.5,)), "svg"))
    corners = frame(root)
    basis = np.stack([corners[1] - corners[0], corners[3] - corners[0]])
    points = np.concatenate(paths(group(root, "contours")[0]))
    share = (points - corners[0]) @ np.linalg.inv(basis)
    near = np.min(np.abs(share[:, :1] - [1 / 6, 5 / 6]), axis=1)
    assert near.max() < 2e-3
    assert (share[:, 1].min(), share[:, 1].max()) == (pytest.approx(0, abs=0.01), pytest.approx(1, abs=0.01))


def test_negative_contours_are_dashed_and_counted():
    made, field = cell(shape=(60, 60))
    x = np.arange(60) / 60
    field = replace(field, values=np.repeat(0.3 + np.cos(2 * np.pi * x)[:, None], 60, axis=1))
    root = parsed(draw("density", made, field, PictureOptions(level_step=0.4), "svg"))
    styles = [path.get("style") for path in group(root, "contours")[0].iter(f"{SVG}path")]
    # −0.4 is dashed; 0.4, 0.8 and 1.2 are not.
    assert len(styles) == 4
    assert sum("dasharray" in style for style in styles) == 1
    assert "none at 0" in " ".join(texts(root))


@pytest.mark.parametrize("count", [40, 1900])
def test_a_peak_is_where_it_belongs(count):
    made, field = cell(shape=(count, count), sigma=None)
    x = np.arange(count) / count
    values = np.exp(-(((x[:, None] - 0.3) / 0.04) ** 2) - ((x[None, :] - 0.65) / 0.04) ** 2)
    field = replace(field, values=values)
    options = PictureOptions(width=700, height=600, cells=False, levels=(0.9,))
    root = parsed(draw("density", made, field, options, "svg"))
    corners = frame(root)
    expected = corners[0] + np.array([0.3, 0.65]) @ np.stack([corners[1] - corners[0], corners[3] - corners[0]])
    pixels = imread(io.BytesIO(draw("density", made, field, options)))[..., :3]
    # Ivory, the last colour, is yellow and bright; white paper is not yellow.
    bright = (pixels[..., 0] > 0.75) & (pixels[..., 2] < 0.9) & (pixels[..., 0] - pixels[..., 2] > 0.08)
    bright[:, 550:] = False
    rows, columns = np.nonzero(bright)
    middle = np.array([columns.mean() + 0.5, -(rows.mean() + 0.5)]) * 0.72
    np.testing.assert_allclose(middle, expected, atol=1.0)
    contour = np.concatenate(paths(group(root, "contours")[0])).mean(axis=0)
    np.testing.assert_allclose(contour, expected, atol=1.0)


def test_the_image_is_pixels_inside_the_svg_with_the_end_colours_in_it():
    made, field = cell(shape=(300, 300))
    svg = draw("density", made, field, PictureOptions(palette="sequential", cells=False), "svg")
    root = parsed(svg)
    images = list(root.iter(f"{SVG}image"))
    assert len(images) == 2
    # The image ends where the samples end, at the frame: cut by its corners, not by a box.
    (holder,) = [element for element in root.iter() if images[0] in list(element)]
    cut = holder.get("clip-path")[5:-1]
    (corners,) = [paths(element) for element in root.iter(f"{SVG}clipPath") if element.get("id") == cut]
    np.testing.assert_allclose(corners[0][:4], frame(root), atol=1e-3)
    assert len(svg) < 600_000
    pixels = imread(io.BytesIO(base64.b64decode(images[0].get(XLINK).split(",")[1])))
    seen = pixels[pixels[..., 3] == 1][:, :3]
    brightness = seen @ [0.3, 0.6, 0.1]
    assert brightness.min() < 0.15
    assert brightness.max() > 0.9


def test_no_number_has_no_colour():
    made, field = cell()
    values = field.values.copy()
    values[5:15, 5:15] = np.nan
    svg = draw("density", made, replace(field, values=values), PictureOptions(cells=False, level_step=0.5), "svg")
    root = parsed(svg)
    assert "No colour: no number." in " ".join(texts(root))
    nothing = draw("density", made, replace(field, values=np.full_like(values, np.nan)), None, "svg")
    assert parsed(nothing) is not None


@pytest.mark.parametrize(
    ("options", "marks"),
    [({}, []), ({"low": 0.5}, ["beyond-min"]), ({"low": 0.5, "high": 1.5}, ["beyond-min", "beyond-max"])],
)
def test_values_beyond_the_colours_are_shown_and_said(options, marks):
    root = picture(options)[1]
    assert named(root, "beyond") == marks
    assert ("the end colour" in " ".join(texts(root))) == bool(marks)


def test_the_colour_bar_names_quantity_and_unit():
    assert "density (e/Å³)" in texts(picture()[1])
