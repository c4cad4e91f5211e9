"""Pages of films: sizes, what is drawn where, and that no words cover others or leave the page."""

from __future__ import annotations

import re
import struct
from dataclasses import replace
from itertools import combinations

import numpy as np
import pytest

pytest.importorskip("matplotlib")

from engine.errors import InputError
from engine.films.analysis import analyse_film
from engine.films.task import Region
from service.films import interpret
from service.pictures.canvas import Sheet
from service.pictures.films import draw_film, draw_run
from service.pictures.options import PictureOptions
from tests.service.films.asked import FILM, GIVEN, RUN, SIMPLE, asked, changed, members, scan
from tests.service.pictures.made import chunks, parsed, texts

SIZES = [(600, 400), (1400, 1000)]


def made(body):
    request = asked("film", body)
    return analyse_film(interpret.task(request, interpret.scan_of(request.scan)))


@pytest.fixture(scope="module")
def film():
    return made(FILM)


@pytest.fixture(scope="module")
def plain_film():
    return made(GIVEN)


@pytest.fixture(scope="module")
def series():
    body = changed(RUN, samples=65)
    shared = {name: value for name, value in body.items() if name not in ("members", "variable", "variable_unit")}
    periods = np.linspace(14.5, 21.7, 9)
    films = [
        made({**shared, "product": "film", "scan": {**scan(), **one["scan"]}, "regions": []})
        for one in members(*periods)
    ]
    return films, [10.0 * number for number in range(9)]


@pytest.fixture
def figures(monkeypatch):
    """Every figure that is drawn."""
    found = []
    save = Sheet.save

    def kept(sheet, form, title):
        found.append(sheet.figure)
        return save(sheet, form, title)

    monkeypatch.setattr(Sheet, "save", kept)
    return found


def boxes(figure):
    """Boxes of all that is written, by its words, and that of the page, in pixels."""
    renderer = figure.canvas.get_renderer()
    found = []
    for axes in figure.axes:
        legend = axes.get_legend()
        written = [*axes.texts, axes.xaxis.label, axes.yaxis.label, *([] if legend is None else legend.get_texts())]
        for axis in (axes.xaxis, axes.yaxis):
            low, high = sorted(axis.get_view_interval())
            written += [
                label
                for place, label in zip(axis.get_majorticklocs(), axis.get_majorticklabels(), strict=True)
                if low <= place <= high
            ]
        found += [(one.get_text(), one.get_window_extent(renderer)) for one in written if one.get_text()]
    found += [(one.get_text(), one.get_window_extent(renderer)) for one in figure.texts]
    return found, figure.bbox


def assert_tidy(figure):
    found, page = boxes(figure)
    for words, box in found:
        assert box.x0 >= page.x0 - 1, words
        assert box.y0 >= page.y0 - 1, words
        assert box.x1 <= page.x1 + 1, words
        assert box.y1 <= page.y1 + 1, words
    for (words, one), (others, other) in combinations(found, 2):
        across = min(one.x1, other.x1) - max(one.x0, other.x0)
        along = min(one.y1, other.y1) - max(one.y0, other.y0)
        # Boxes hold the room above and below letters too.
        assert min(across, along) < 2.5, (words, others)


@pytest.mark.parametrize("theme", ["light", "dark"])
@pytest.mark.parametrize(("width", "height"), SIZES)
def test_no_words_cover_others(film, plain_film, series, figures, width, height, theme):
    options = PictureOptions(width=width, height=height, theme=theme, title="Film FG-7 (invented)")
    for one in (film, plain_film):
        picture = draw_film(one, options, "png")
        assert struct.unpack(">II", chunks(picture)["IHDR"][0][:8]) == (width, height)
    draw_run(*series, "relative humidity", "%", options, "png")
    assert len(figures) == 3
    for figure in figures:
        assert_tidy(figure)


def test_many_layers_and_long_names_have_no_room(film, figures):
    crowd = tuple(
        Region(name="a name that is longer than its region" * 2, start=0.5 * one, end=0.5 * one + 0.4)
        for one in range(20)
    )
    crowded = replace(film, task=replace(film.task, regions=crowd))
    draw_film(crowded, PictureOptions(width=320, height=420), "png")
    draw_run([film] * 60, list(range(60)), "a variable", "a unit of many letters", PictureOptions(), "png")
    for figure in figures:
        assert_tidy(figure)


def test_a_page_is_read_back_from_its_svg(film):
    root = parsed(draw_film(film, PictureOptions(title="FG-7"), "svg"))
    found = texts(root)
    whole = " ".join(found)
    assert float(root.get("width").removesuffix("pt")) == pytest.approx(900 * 0.72)
    for words in ("FG-7", "density (e/Å³)", "distance along the normal (Å)", "sheet", "gallery", "sign set: score"):
        assert words in found, words
    assert "Period 19.2 ± 0.0033 Å from 5 orders." in whole
    assert "Orders in doubt: 3, 4, 5." in whole
    assert "Phases decide" in whole
    assert "order, pale: sign in doubt" in found
    for position, sigma in zip(film.layers.position, film.layers.position_sigma, strict=True):
        expected = f"{position:.4g}" if sigma < 1e-9 else f"{position:.4g} ± {sigma:.2g}"
        assert (expected if abs(position) > 1e-9 else "0") in found, expected


def test_what_was_not_asked_is_not_drawn(plain_film):
    found = texts(parsed(draw_film(plain_film, PictureOptions(), "svg")))
    assert "sign set: score" not in found
    assert "sheet" not in found
    assert "order" in found
    assert "density (arbitrary unit)" in found
    assert any(one.startswith("Band: ±1 σ") for one in re.split(r"(?<=\.) ", " ".join(found)))


def test_without_errors_there_is_no_band():
    bare = made(changed(SIMPLE, amplitudes="root", scan__intensity_sigma=...))
    assert "Band" not in " ".join(texts(parsed(draw_film(bare, PictureOptions(), "svg"))))


def test_a_region_is_shaded_in_every_period_that_is_seen(film, figures):
    draw_film(film, PictureOptions(), "png")
    profile = figures[0].axes[0]
    spans = sorted((round(one.get_x(), 2), round(one.get_x() + one.get_width(), 2)) for one in profile.patches)
    assert spans == [(0.0, 4.5), (5.0, 14.2), (14.7, 19.2)]


def test_the_curves_are_the_profiles(film, series, figures):
    draw_film(film, PictureOptions(low=-1.0, high=4.0), "png")
    profile = figures[0].axes[0]
    np.testing.assert_array_equal(profile.lines[0].get_ydata(), film.profile.values)
    assert profile.get_ylim() == (-1.0, 4.0)
    amplitudes = figures[0].axes[1]
    ends = [
        line.get_ydata()[1] for line in amplitudes.lines if list(line.get_xdata()[:1]) == list(line.get_xdata()[1:])
    ]
    np.testing.assert_allclose(ends[:5], film.orders.amplitude * np.cos(np.radians(film.phase_deg)))
    draw_run(*series, "relative humidity", "%", PictureOptions(), "png")
    lines = figures[1].axes[0].lines
    steps = [line.get_ydata() - one.profile.values for line, one in zip(lines, series[0], strict=True)]
    assert all(np.ptp(step) < 1e-12 for step in steps)
    heights = np.array([step[0] for step in steps])
    np.testing.assert_allclose(np.diff(heights), heights[1])
    assert heights[1] > 0


def test_a_page_too_small_for_its_caption_is_refused(film):
    with pytest.raises(InputError, match="no room"):
        draw_film(film, PictureOptions(width=300, height=220), "png")


@pytest.mark.parametrize("form", ["png", "svg"])
def test_the_same_film_gives_the_same_bytes(film, form):
    assert draw_film(film, PictureOptions(), form) == draw_film(film, PictureOptions(), form)
