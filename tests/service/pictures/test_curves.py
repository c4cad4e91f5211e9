"""Profiles, read back from the SVG."""

from __future__ import annotations

import numpy as np
import pytest

pytest.importorskip("matplotlib")

from service.pictures import PictureOptions, draw
from service.pictures.curves import MOST_POINTS, thinned
from tests.service.pictures.made import group, named, parsed, paths, profile, texts


def picture(options=None, kind="density", **given):
    made, field = profile(field=kind, **given)
    return field, parsed(draw(kind, made, field, PictureOptions(**(options or {})), "svg"))


def scale(root, field):
    """From points to Å and values, by two known curves: the ends and the extremes."""
    (curve,) = paths(group(root, "curve-0")[0])
    length = field.axes[0].step * (field.axes[0].count - 1)
    per_x = length / np.ptp(curve[:, 0])
    per_y = np.ptp(field.values) / np.ptp(curve[:, 1])
    return curve, per_x, per_y


def test_the_curve_follows_the_values():
    field, root = picture(samples=120)
    curve, _, per_y = scale(root, field)
    assert curve.shape == (120, 2)
    np.testing.assert_allclose((curve[:, 1] - curve[:, 1].min()) * per_y, field.values - field.values.min(), atol=1e-4)


@pytest.mark.parametrize("band", [1.0, 3.0])
def test_the_band_is_as_many_sigma_wide_as_said(band):
    field, root = picture({"band": band}, samples=60, sigma=0.1)
    curve, _, per_y = scale(root, field)
    outline = np.concatenate(paths(group(root, "band-0")[0]))
    middle = curve[30, 0]
    there = outline[np.abs(outline[:, 0] - middle) < 1e-4]
    assert np.ptp(there[:, 1]) * per_y == pytest.approx(2 * band * field.sigma.values[30], rel=1e-3)
    assert f"±{band:g} σ" in texts(root)


def test_without_sigma_or_with_a_band_of_none_there_is_no_band():
    assert not named(picture(sigma=None)[1], "band")
    assert not named(picture({"band": 0.0})[1], "band")


def test_zero_and_mean_are_drawn_at_their_heights():
    field, root = picture(mean=0.3, samples=100)
    curve, _, per_y = scale(root, field)
    zero, mean = (float(paths(group(root, name)[0])[0][0, 1]) for name in ("zero-line", "mean-line"))
    assert (mean - zero) * per_y == pytest.approx(0.3, rel=1e-3)
    top = curve[:, 1].max()
    assert (top - zero) * per_y == pytest.approx(field.values.max(), rel=1e-3)
    assert "mean density 0.3" in texts(root)
    assert not named(picture(mean=None)[1], "mean-line")
    assert not named(picture(mean=50.0)[1], "zero-line")


def test_labels_name_what_and_where():
    _, root = picture()
    assert {"density (e/Å³)", "distance (Å)"} <= set(texts(root))
    _, root = picture(unit="1")
    assert "density" in texts(root)


def test_large_numbers_leave_their_power_in_the_label():
    made, field = profile()
    field = type(field)(**{name: getattr(field, name) for name in field.__slots__} | {"values": field.values * 1e9})
    found = texts(parsed(draw("density", made, field, PictureOptions(band=0), "svg")))
    assert "density (10⁹ e/Å³)" in found
    assert not any("1e" in text or "000000" in text for text in found)


def test_a_complex_profile_is_two_curves_and_says_why_there_is_no_band():
    _, root = picture(density="complex")
    assert named(root, "curve") == ["curve-0", "curve-1"]
    assert not named(root, "band")
    assert {"real part", "imaginary part"} <= set(texts(root))
    assert "is not drawn" in " ".join(texts(root))


def test_markers_stand_where_they_are_and_those_outside_are_named():
    field, root = picture({"markers": ((10.0, "spacer"), (30.0, "core <b>"), (99.0, "far"))})
    curve, per_x, _ = scale(root, field)
    for order, position in enumerate((10.0, 30.0)):
        (line,) = paths(group(root, f"marker-{order}")[0])
        assert (line[0, 0] - curve[0, 0]) * per_x == pytest.approx(position, rel=1e-3)
    assert named(root, "marker") == ["marker-0", "marker-1"]
    assert {"spacer", "core <b>"} <= set(texts(root))
    assert "not marked: far" in " ".join(texts(root))


def test_crowded_markers_are_numbered_and_named_in_the_caption():
    many = tuple((20.0 + 0.01 * number, f"a long label {number}") for number in range(12))
    found = texts(picture({"markers": many})[1])
    assert {"1", "12"} <= set(found)
    assert "12 a long label 11" in " ".join(found)


def test_limits_are_kept_and_what_is_cut_is_said():
    _, root = picture({"high": 1.0, "low": 0.5})
    assert "is cut off" in " ".join(texts(root))


def test_a_long_curve_keeps_every_extreme():
    generator = np.random.default_rng(2)
    place, values = np.arange(100_001.0), generator.normal(size=100_001)
    x, y = thinned(place, values)
    assert x.size <= 1.1 * MOST_POINTS
    assert np.all(np.diff(x) > 0)
    assert (y.min(), y.max()) == (values.min(), values.max())
    assert (x[0], x[-1]) == (0.0, 100_000.0)
    for start in range(0, 100_000, 5000):
        inside = (x >= start) & (x < start + 5000)
        assert y[inside].max() == values[start : start + 5000].max()
    assert thinned(place[:50], values[:50])[0].size == 50
