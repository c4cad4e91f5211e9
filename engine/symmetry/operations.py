"""Symmetry operations written as coordinates, such as ``-x+1/2, y, -z``.

The notation of International Tables for Crystallography A, chapter 1.4: the image of the point
with fractional coordinates x, y, z. A component is a sum of coordinates and of a translation in
any order; x' = R x + t.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from engine.arrays import IntArray
from engine.errors import InputError

LARGEST_DENOMINATOR = 24
"""Of a translation. Conventional settings need 2, 3, 4, 6, 8; chosen origins and centrings some more."""
LARGEST_COEFFICIENT = 99
"""Of a coordinate: beyond it the cell is no cell anyone would choose."""
COORDINATES = {1: ("z",), 2: ("x", "y"), 3: ("x", "y", "z")}
"""Names of the coordinates by dimension; a stack may call its one coordinate x as well."""

_TERM = re.compile(r"([+-]?)(?:(\d+)\*?)?([xyz])|([+-]?)(\d+/\d+|\d*\.\d+|\d+\.?)(?![\d.*/xyz])")
_TORN = re.compile(r"[\d.]\s+[\d.]")
_DIGITS_THAT_TELL = 3
"""Decimals needed before a rounded number is taken for n/24."""


@dataclass(frozen=True, slots=True)
class Operation:
    """x' = R x + t.

    Attributes
    ----------
    rotation : int64, shape (d, d)
        R, determinant ±1.
    translation : tuple of Fraction, length d
        t, each in [0, 1).
    """

    rotation: IntArray
    translation: tuple[Fraction, ...]


def parse_operation(text: str, dimension: int, path: str | Sequence[str | int] = "operation") -> Operation:
    """One operation from its coordinates.

    Capitals, blanks, either order (``1/2-x``), ``+x``, ``2x`` or ``2*x``, translations anywhere
    and as decimals are understood. A decimal that is no fraction with a denominator up to 24 is
    taken for n/24 when it has three or more decimals and lies within one unit of the last
    (``.333`` is 1/3). Translations are reduced to [0, 1).

    Parameters
    ----------
    text : str
        As many components as the dimension, separated by commas: ``x,y,z`` for a crystal,
        ``x,y`` for a planar lattice, ``z`` (or ``x``) for a stack.
    dimension : {1, 2, 3}
    path : str or sequence
        Where the text stands, for messages.

    Raises
    ------
    InputError
        Not such a text, a determinant other than ±1, or a translation that is no small fraction.
    """
    components = text.split(",")
    names = ",".join(COORDINATES[dimension])
    if len(components) != dimension:
        raise InputError(
            path,
            f"'{text}' has {len(components)} components where the dimension is {dimension}",
            f"write the image of {names}",
        )
    rotation = np.zeros((dimension, dimension), dtype=np.int64)
    translation = []
    for place, component in enumerate(components):
        coefficients, shift = _component(component, dimension, text, path)
        rotation[place] = coefficients
        translation.append(shift % 1)
    if abs(determinant(rotation)) != 1:
        raise InputError(
            path,
            f"'{text}' has the determinant {determinant(rotation)}, so it does not map the lattice onto itself",
            "give operations whose rotation part has determinant 1 or -1",
        )
    return Operation(rotation, tuple(translation))


def _component(
    component: str, dimension: int, text: str, path: str | Sequence[str | int]
) -> tuple[list[int], Fraction]:
    def refuse(reason: str) -> InputError:
        example = ", ".join(("-x+1/2", "y", "z")[:dimension]) if dimension > 1 else "-z+1/2"
        return InputError(path, f"'{text}': {reason}", f"write it like {example}")

    if _TORN.search(component):
        raise refuse("a blank parts the digits of a number")
    rest = re.sub(r"\s+", "", component).lower().replace("−", "-")
    if not rest:
        raise refuse("a component is empty")
    coefficients, shift = [0] * dimension, Fraction(0)
    place = 0
    while place < len(rest):
        term = _TERM.match(rest, place)
        if term is None or (place > 0 and rest[place] not in "+-"):
            raise refuse(f"'{component.strip()}' is no sum of coordinates and fractions")
        sign, count, name, number_sign, number = term.groups()
        if name is not None:
            axis = 0 if dimension == 1 and name in "xz" else "xyz".index(name)
            if axis >= dimension:
                raise refuse(f"there is no coordinate {name} in dimension {dimension}")
            coefficients[axis] += (-1 if sign == "-" else 1) * int(count or 1)
        else:
            shift += (-1 if number_sign == "-" else 1) * _fraction(number, refuse)
        place = term.end()
    if max(abs(value) for value in coefficients) > LARGEST_COEFFICIENT:
        raise refuse(f"a coefficient lies beyond ±{LARGEST_COEFFICIENT}")
    return coefficients, shift


def _fraction(number: str, refuse: Callable[[str], InputError]) -> Fraction:
    if "/" in number and int(number.split("/")[1]) == 0:
        raise refuse("a denominator is zero")
    value = Fraction(number.rstrip(".") if number.endswith(".") else number)
    if value.denominator <= LARGEST_DENOMINATOR:
        return value
    decimals = len(number.partition(".")[2])
    nearest = Fraction(round(value * 24), 24)
    if decimals >= _DIGITS_THAT_TELL and abs(value - nearest) <= Fraction(1, 10**decimals):
        return nearest
    raise refuse(f"{number} is no fraction with a denominator up to {LARGEST_DENOMINATOR}")


def format_operation(operation: Operation) -> str:
    """The coordinates of the image, such as ``-x+1/2,y,-z``; `parse_operation` reads them back."""
    dimension = len(operation.translation)
    components = []
    for row, shift in zip(operation.rotation.tolist(), operation.translation, strict=True):
        terms = [
            ("-" if value < 0 else "+") + ("" if abs(value) == 1 else str(abs(value))) + name
            for value, name in zip(row, COORDINATES[dimension], strict=True)
            if value
        ]
        if shift:
            terms.append(f"+{shift}")
        components.append("".join(terms).removeprefix("+"))
    return ",".join(components)


def determinant(rotation: IntArray) -> int:
    """Determinant of an integer matrix (1, 1) to (3, 3), exactly."""
    rows = rotation.tolist()
    if len(rows) == 1:
        return int(rows[0][0])
    if len(rows) == 2:
        return int(rows[0][0] * rows[1][1] - rows[0][1] * rows[1][0])
    (a, b, c), (d, e, f), (g, h, i) = rows
    return int(a * (e * i - f * h) - b * (d * i - f * g) + c * (d * h - e * g))
