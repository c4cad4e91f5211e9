"""Fields as pictures, where the optional package that draws is installed."""

from __future__ import annotations

from importlib.util import find_spec
from typing import Literal

from service.encoders.describe import Shown
from service.pictures.options import PictureOptions
from service.problems import Problem, located


def picture(shown: Shown, form: Literal["png", "svg"], options: PictureOptions | None) -> bytes:
    """The picture's bytes.

    Raises
    ------
    Problem
        501: the package is not installed; 422: the field cannot be drawn so.
    """
    require_drawing()
    # Loaded at the first picture: most processes never draw one.
    from service.pictures.draw import draw

    with located("picture"):
        return draw(
            shown.kind,
            shown.coefficients,
            shown.field,
            options,
            form,
            product=shown.product,
            quantity=shown.quantity,
        )


def require_drawing() -> None:
    """Raise Problem (501) where pictures cannot be drawn."""
    if find_spec("matplotlib") is None:
        raise Problem(
            "not-installed",
            "Pictures need the optional package matplotlib: pip install 'densityloom[pictures]'. Numbers come as "
            "application/json, application/x-npy, application/x-npz and text/csv.",
        )
