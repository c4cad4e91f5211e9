"""The sheet that pictures are drawn on: settings, text that fits, and the bytes in the end.

Here and in the modules that draw, matplotlib is imported at the top: `draw` imports them only after
`require_matplotlib`. Figures are made and written without pyplot, and its settings are changed
only inside `settings`.
"""

from __future__ import annotations

import io
import math
import warnings
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from functools import cache, lru_cache
from pathlib import Path
from typing import Any, Literal

import matplotlib
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.ft2font import FT2Font, LoadFlags
from matplotlib.ticker import MaxNLocator, ScalarFormatter
from matplotlib.transforms import Bbox

from engine.errors import InputError
from service.pictures.captions import Caption, power_of, with_unit
from service.pictures.options import PictureOptions
from service.pictures.palettes import Colours, colours

Form = Literal["png", "svg"]
FONT = "DejaVu Sans"
"""Comes with matplotlib; has Å, σ, ⁻¹ and ³."""
NO_GLYPH = "□"
UNIT = 1000
"""Points at which the font is measured."""
SLACK = 0.98
"""Text is measured letter by letter; with kerning, or on the grid of pixels, it may be this much wider."""
LEAST_SHARE = 0.4
"""Of the height that a caption and title must leave to the picture itself."""


@contextmanager
def settings(options: PictureOptions) -> Iterator[None]:
    """Matplotlib's own defaults, whatever the user has set, and ours on top."""
    theme = colours(options.theme)
    rules: dict[Any, Any] = {
        "font.family": "sans-serif",
        "font.sans-serif": [FONT, "sans-serif"],
        "font.size": font_size(options),
        "text.parse_math": False,
        "text.color": theme.ink,
        "axes.labelcolor": theme.ink,
        "axes.edgecolor": theme.ink,
        "axes.facecolor": "none",
        "axes.linewidth": 0.7,
        "axes.labelpad": 3.0,
        "xtick.color": theme.ink,
        "ytick.color": theme.ink,
        "xtick.labelsize": "small",
        "ytick.labelsize": "small",
        "xtick.major.width": 0.7,
        "ytick.major.width": 0.7,
        "figure.facecolor": theme.paper,
        "savefig.facecolor": theme.paper,
        "text.hinting": "no_hinting",
        "svg.hashsalt": "densityloom",
        "svg.fonttype": "none",
    }
    with matplotlib.rc_context(), warnings.catch_warnings():
        # Missing glyphs are replaced before they are drawn; what else matplotlib doubts is no fault of the caller.
        warnings.simplefilter("ignore")
        matplotlib.rcdefaults()
        matplotlib.rcParams.update(rules)
        yield


def font_size(options: PictureOptions) -> float:
    """Points: grows with the picture, more slowly than it."""
    width, height = options.inches
    return min(max(8.5 * math.pow(width * height / 24, 0.3), 6.0), 18.0)


def plain(text: str) -> str:
    """One line of a user's text in characters that the font has.

    White space becomes single blanks; a character without a glyph becomes a box, never vanishes.
    """
    known = _glyphs()
    return "".join(letter if ord(letter) in known else NO_GLYPH for letter in " ".join(text.split()))


def width_of(text: str, points: float) -> float:
    """Width of a line of text, inches: the sum of its letters' advances.

    Quicker by far than to lay the text out, of which wrapping would do hundreds of times.
    """
    return sum(map(_advance, text)) * points / 72


@cache
def _font() -> FT2Font:
    font = FT2Font(str(Path(matplotlib.get_data_path()) / "fonts" / "ttf" / "DejaVuSans.ttf"))
    font.set_size(UNIT, 72)
    return font


@cache
def _glyphs() -> frozenset[int]:
    return frozenset(_font().get_charmap())


@lru_cache(maxsize=4096)
def _advance(letter: str) -> float:
    """In ems."""
    return float(_font().load_char(ord(letter), LoadFlags.NO_HINTING).linearHoriAdvance) / 65536 / UNIT


class Sheet:
    """A figure with title and caption set, and the room between them in inches.

    Attributes
    ----------
    figure : Figure
    theme : Colours
    em : float
        Size of the font, inches.
    left, right, bottom, top : float
        Edges of the room that is left, inches from the lower left corner.
    """

    def __init__(self, options: PictureOptions, caption: Caption) -> None:
        self.width, self.height = options.inches
        self.theme: Colours = colours(options.theme)
        self.points = font_size(options)
        self.em = self.points / 72
        self.figure = Figure(figsize=options.inches, dpi=options.dpi)
        self._canvas = FigureCanvasAgg(self.figure)
        self._renderer = self._canvas.get_renderer()  # type: ignore[no-untyped-call]
        self.left, self.right = 0.8 * self.em, self.width - 0.8 * self.em
        self.bottom, self.top = 0.5 * self.em, self.height - 0.6 * self.em
        self._title(plain(options.title))
        self._caption(caption)

    @property
    def pixels_per_inch(self) -> float:
        return float(self.figure.dpi)

    def axes(self, left: float, bottom: float, width: float, height: float) -> Axes:
        """New axes at a place in inches."""
        return self.figure.add_axes(self._share(left, bottom, width, height))

    def move(self, axes: Axes, left: float, bottom: float, width: float, height: float) -> None:
        """Axes to another place, in inches."""
        axes.set_position(self._share(left, bottom, width, height))

    def text_width(self, text: str, points: float | None = None) -> float:
        """Width of a line of text, inches."""
        return width_of(text, points or self.points)

    def bounds(self, axes: Axes) -> Bbox:
        """All that belongs to axes, inches."""
        box = axes.get_tightbbox(self._renderer)
        if box is None:
            raise TypeError("axes without extent")
        return Bbox(box.get_points() / self.pixels_per_inch)

    def write(self, left: float, bottom: float, text: str, **style: Any) -> None:  # noqa: ANN401
        """Text at a place in inches."""
        self.figure.text(left / self.width, bottom / self.height, text, **style)

    def fitted(self, text: str, width: float, points: float | None = None) -> str:
        """The text, its end replaced by … where it is wider than `width` inches."""
        if self.text_width(text, points) <= width:
            return text
        low, high = 0, len(text)
        while high - low > 1:
            middle = (low + high) // 2
            fits = self.text_width(text[:middle] + "…", points) <= width
            low, high = (middle, high) if fits else (low, middle)
        return text[:low].rstrip() + "…"

    def wrapped(self, text: str, width: float, points: float | None = None) -> list[str]:
        """The text in lines not wider than `width` inches; words longer than a line are broken."""
        lines: list[str] = []
        line = ""
        for word in text.split(" "):
            longer = f"{line} {word}" if line else word
            if self.text_width(longer, points) <= width:
                line = longer
                continue
            if line:
                lines.append(line)
            line = word
            while self.text_width(line, points) > width and len(line) > 1:
                kept = len(self.fitted(line, width, points)) - 1
                lines.append(line[: max(kept, 1)])
                line = line[max(kept, 1) :]
        return [*lines, line] if line else lines

    def save(self, form: Form, title: str) -> bytes:
        """The bytes of a PNG or an SVG, without date or name of software."""
        buffer = io.BytesIO()
        if form == "png":
            metadata = {"Software": None, "Title": _latin(plain(title))}
            self._canvas.print_png(buffer, metadata=metadata)  # type: ignore[no-untyped-call]
        else:
            # What XML cannot hold has no glyph either.
            named = {"Date": None, "Creator": None, "Title": plain(title)}
            self.figure.savefig(buffer, format="svg", metadata=named, dpi=self.pixels_per_inch)
        return buffer.getvalue()

    def _share(self, left: float, bottom: float, width: float, height: float) -> tuple[float, float, float, float]:
        return left / self.width, bottom / self.height, width / self.width, height / self.height

    def _title(self, title: str) -> None:
        points = 1.15 * self.points
        for line in self.wrapped(title, SLACK * (self.right - self.left), points):
            self.top -= 1.25 * points / 72
            self.write(self.left, self.top + 0.3 * points / 72, line, fontsize=points)

    def _caption(self, caption: Caption) -> None:
        points = max(0.76 * self.points, 5.5)
        leading = 1.3 * points / 72
        room = self.top - self.bottom - LEAST_SHARE * self.height
        most = int(room / leading)

        def lines_of(sentences: Sequence[str]) -> list[str]:
            width = SLACK * (self.right - self.left)
            return self.wrapped(plain(" ".join(sentences)), width, points)

        lines = lines_of(caption.needed)
        if len(lines) > most:
            raise InputError("height", "leaves no room for the picture above its caption", "give a larger picture")
        longer = lines_of((*caption.needed, *caption.further))
        if len(longer) <= most:
            lines = longer
        for above, line in enumerate(lines, start=1):
            lift = (len(lines) - above) * leading + 0.3 * points / 72
            self.write(self.left, self.bottom + lift, line, fontsize=points)
        self.bottom += len(lines) * leading + 0.3 * self.em


def set_ticks(axes: Axes, sheet: Sheet, width: float, height: float) -> None:
    """As many ticks as there is room for, for axes of a size in inches."""
    for axis, room in ((axes.xaxis, width / 5), (axes.yaxis, height / 3)):
        axis.set_major_locator(_locator(room / sheet.em))
        axis.set_major_formatter(_formatter(0))


def set_value_label(axes: Axes, sheet: Sheet, name: str, unit: str, height: float) -> None:
    """Name and unit beside a vertical axis of values `height` inches long, with the power of ten of its numbers."""
    power = power_of(*axes.get_ylim())
    axes.yaxis.set_major_formatter(_formatter(power))
    axes.yaxis.get_offset_text().set_visible(False)
    axes.set_ylabel(sheet.fitted(plain(with_unit(name, unit, power)), height * SLACK))


def _locator(room: float) -> MaxNLocator:
    return MaxNLocator(nbins=int(min(max(room, 2), 9)), steps=[1, 2, 2.5, 5, 10])


def _formatter(power: int) -> ScalarFormatter:
    """Numbers over 10^power, which is said elsewhere, all with as many digits."""
    formatter = ScalarFormatter(useOffset=False)
    if power:
        formatter.set_powerlimits((power, power))
    else:
        formatter.set_scientific(False)
    return formatter


def _latin(text: str) -> str:
    """What a PNG's text chunk holds."""
    return text.encode("latin-1", "replace").decode("latin-1")
