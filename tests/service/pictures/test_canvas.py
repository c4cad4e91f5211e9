from __future__ import annotations

import pytest

matplotlib = pytest.importorskip("matplotlib")

from matplotlib.backends.backend_agg import FigureCanvasAgg  # noqa: E402
from matplotlib.figure import Figure  # noqa: E402
from matplotlib.font_manager import FontProperties  # noqa: E402

from engine.errors import InputError  # noqa: E402
from service.pictures.canvas import FONT, NO_GLYPH, Sheet, plain, settings, width_of  # noqa: E402
from service.pictures.captions import Caption  # noqa: E402
from service.pictures.options import PictureOptions  # noqa: E402

SENTENCES = ("Density (e/Å³), 1275 coefficients summed, d_min = 1.1 Å.", "AVATAR To We, fifth: ÅÅ σσ 10⁻⁶")


@pytest.mark.parametrize("points", [6.0, 14.0])
@pytest.mark.parametrize("text", SENTENCES)
def test_widths_are_those_of_the_drawn_text(text, points):
    canvas = FigureCanvasAgg(Figure(dpi=300))
    properties = FontProperties(family=FONT, size=points)
    drawn, _, _ = canvas.get_renderer().get_text_width_height_descent(text, properties, False)
    # Kerning draws letters together; nothing may draw them apart.
    assert 0.93 * width_of(text, points) < drawn / 300 < 1.01 * width_of(text, points)


def test_settings_are_ours_inside_and_the_users_outside():
    with matplotlib.rc_context({"font.size": 31.0, "axes.grid": True, "text.usetex": True}):
        before = dict(matplotlib.rcParams)
        with settings(PictureOptions()):
            assert matplotlib.rcParams["text.parse_math"] is False
            assert matplotlib.rcParams["text.usetex"] is False
            assert matplotlib.rcParams["axes.grid"] is False
        assert dict(matplotlib.rcParams) == before


def test_text_is_one_line_of_known_letters():
    assert plain("a\n\t b ") == "a b"
    assert plain("Å σ ⁻¹ ³ ⊥ ± − …") == "Å σ ⁻¹ ³ ⊥ ± − …"
    assert plain("x\x00\ud800漢") == f"x{NO_GLYPH * 3}"


def test_lines_fit_and_hold_every_word():
    with settings(PictureOptions()):
        sheet = Sheet(PictureOptions(), Caption((), ()))
        text = " ".join(SENTENCES * 4) + " " + "longword" * 40
        lines = sheet.wrapped(text, 3.0)
        assert max(map(sheet.text_width, lines)) <= 3.0
        assert "".join(lines).replace(" ", "") == text.replace(" ", "")
        assert sheet.wrapped("", 3.0) == []
        short = sheet.fitted(text, 1.0)
        assert short.endswith("…")
        assert sheet.text_width(short) <= 1.0
        assert sheet.fitted("ab", 1.0) == "ab"


def test_what_need_not_be_said_makes_room_and_what_must_is_refused():
    options = PictureOptions(width=400, height=300)
    further = Caption(("Needed.",), ("Further. " * 200,))
    with settings(options):
        sheet = Sheet(options, further)
        assert [text.get_text() for text in sheet.figure.texts] == ["Needed."]
        assert sheet.top - sheet.bottom > 0.4 * sheet.height
        with pytest.raises(InputError, match="height"):
            Sheet(options, Caption(("Needed. " * 200,), ()))
