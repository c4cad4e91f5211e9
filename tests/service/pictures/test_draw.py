"""The way in: forms, sizes, refusals, and text from users that must stay text."""

from __future__ import annotations

import builtins
import io
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from engine import sampling
from engine.errors import InputError
from engine.evaluate import evaluate
from engine.quantities import shown
from service.pictures import PictureOptions, draw, require_matplotlib
from service.problems import Problem
from tests.service.pictures.made import (
    OBLIQUE,
    STACK,
    cell,
    chunks,
    coefficients,
    crystal,
    parsed,
    profile,
    size,
    texts,
)

matplotlib = pytest.importorskip("matplotlib")

FIELDS = {"profile": profile, "slice": cell, "grid": crystal}
FEW = {"width": 400, "height": 400, "sections": 2}
"""Options that make a picture quick."""
HOSTILE = '</svg><script>x</script> $\\alpha$ & "q" ]]> \n second\tline \x00 漢'
ROOT = Path(__file__).parents[3]


@pytest.mark.parametrize("theme", ["light", "dark"])
@pytest.mark.parametrize("product", FIELDS)
def test_a_png_has_the_size_asked_for_and_the_colour_of_its_theme(product, theme):
    made, field = FIELDS[product]()
    options = PictureOptions(width=601, height=433, dpi=97, theme=theme, sections=2)
    picture = draw("density", made, field, options)
    assert size(picture) == (601, 433)
    pixels = matplotlib.image.imread(io.BytesIO(picture))
    assert pixels.shape[:2] == (433, 601)
    assert (pixels[0, 0, :3].mean() > 0.9) == (theme == "light")
    # Nothing touches the edge: nothing is cut off.
    rim = np.concatenate([pixels[:2].reshape(-1, 4), pixels[-2:].reshape(-1, 4), pixels[:, -2:].reshape(-1, 4)])
    assert np.ptp(rim, axis=0).max() < 0.01


@pytest.mark.parametrize("product", FIELDS)
@pytest.mark.parametrize("form", ["png", "svg"])
def test_the_same_input_gives_the_same_bytes_without_date_or_maker(product, form):
    made, field = FIELDS[product]()
    options = PictureOptions(**FEW, level_step=0.5)
    picture = draw("density", made, field, options, form)
    assert picture == draw("density", made, field, options, form)
    if form == "png":
        assert [text.split(b"\0")[0] for text in chunks(picture).get("tEXt", [])] == [b"Title"]
        assert not {"tIME", "zTXt", "iTXt"} & set(chunks(picture))
    else:
        assert b"dc:date" not in picture
        assert b"creator" not in picture.lower()


@pytest.mark.parametrize("product", FIELDS)
def test_hostile_text_stays_text(product):
    made, field = FIELDS[product]()
    field = replace(field, unit="</text>$x_2$&")
    options = PictureOptions(**FEW, title=HOSTILE, markers=((0.0, "<i>$y$"),))
    root = parsed(draw("density", made, field, options, "svg"))
    found = texts(root)
    assert '</svg><script>x</script> $\\alpha$ & "q" ]]> second line □ □' in " ".join(found)
    assert "density (</text>$x_2$&)" in found
    assert not [element for element in root.iter() if element.tag.endswith("script")]
    assert size(draw("density", made, field, options))


def test_quantities_name_themselves():
    made, field = cell()
    found = texts(parsed(draw("density", made, shown(field, "sigma"), None, "svg", quantity="sigma")))
    assert "σ of the density (e/Å³)" in found
    options = PictureOptions(level_sigmas=5.0)
    found = texts(parsed(draw("density", made, shown(field, "significance"), options, "svg", quantity="significance")))
    assert "density over its σ" in found
    assert "every 5 σ" in " ".join(found)


def test_a_significance_without_numbers_is_drawn():
    made, field = cell()
    values = field.sigma.values.copy()
    values[:4] = 0
    field = shown(replace(field, sigma=replace(field.sigma, values=values)), "significance")
    assert np.isnan(field.values).any()
    root = parsed(draw("density", made, field, PictureOptions(level_sigmas=5.0), "svg", quantity="significance"))
    assert "No colour: no number." in " ".join(texts(root))


def test_a_stack_s_grid_is_its_closed_profile():
    made = coefficients(STACK)
    field = evaluate(made, sampling.full_cell(STACK, [64]))
    root = parsed(draw("density", made, field, None, "svg"))
    assert "a (Å)" in texts(root)


def test_the_file_names_what_it_shows():
    made, field = profile()
    root = parsed(draw("density", made, field, None, "svg", product="profile"))
    assert root.findtext("{http://www.w3.org/2000/svg}title") == "density, profile"


@pytest.mark.parametrize("scale", [0.0, 1e-30, 1e30])
def test_extreme_and_constant_values_are_drawn(scale):
    for make in FIELDS.values():
        made, field = make(sigma=None)
        found = texts(
            parsed(draw("density", made, replace(field, values=field.values * scale), PictureOptions(**FEW), "svg"))
        )
        assert not any("e+" in text or "e−" in text for text in found)


def test_refusals_name_the_option():
    made, field = crystal(field="gradient")
    with pytest.raises(InputError) as fault:
        draw("gradient", made, field)
    assert fault.value.path == ("part",)
    assert draw("gradient", made, field, PictureOptions(**FEW, part="z"))
    made = coefficients(OBLIQUE)
    points = evaluate(made, sampling.points(OBLIQUE, [[0, 0]]))
    with pytest.raises(InputError, match="free points"):
        draw("density", made, points)
    made, field = cell(sigma=None)
    with pytest.raises(InputError, match="level_sigmas"):
        draw("density", made, field, PictureOptions(level_sigmas=3.0))
    with pytest.raises(InputError, match="form"):
        draw("density", made, field, None, "pdf")
    single = evaluate(coefficients(STACK), sampling.box(STACK, [0], [[0.5]], [1]))
    with pytest.raises(InputError, match="single sample"):
        draw("density", coefficients(STACK), single)


def test_without_the_package_the_problem_says_so(monkeypatch):
    real = builtins.__import__

    def absent(name, *rest, **more):
        if name.split(".")[0] == "matplotlib":
            raise ImportError(name)
        return real(name, *rest, **more)

    monkeypatch.setattr(builtins, "__import__", absent)
    with pytest.raises(Problem) as fault:
        require_matplotlib()
    assert fault.value.kind == "not-installed"
    assert "matplotlib" in fault.value.detail
    with pytest.raises(Problem):
        draw("density", *profile())


def test_the_package_is_imported_when_a_picture_is_drawn_and_pyplot_never():
    code = (
        "import sys, service.pictures\n"
        "assert not [name for name in sys.modules if name.startswith('matplotlib')]\n"
        "from tests.service.pictures.made import cell\n"
        "service.pictures.draw('density', *cell())\n"
        "service.pictures.draw('density', *cell(), None, 'svg')\n"
        "assert 'matplotlib.pyplot' not in sys.modules\n"
    )
    subprocess.run([sys.executable, "-c", code], cwd=ROOT, check=True)
