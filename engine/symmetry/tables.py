"""Groups by name: the 230 space-group types in 530 settings, the 17 plane groups, the two line groups."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from functools import cache
from typing import Literal, get_args

from engine.arrays import as_choice, as_count
from engine.errors import InputError
from engine.symmetry.database import SETTINGS, setting, setting_operations
from engine.symmetry.group import Group

Notation = Literal["any", "hermann_mauguin", "hall"]

_NAMES_OFFERED = 3
_SHOWN = 40
"""Characters of an unknown symbol that a message repeats."""
_MONOCLINIC = range(3, 16)

_BEFORE_E_GLIDES = {39: "A b m 2", 41: "A b a 2", 64: "C m c a", 67: "C m m a", 68: "C c c a"}
"""Names in use before the e glide was introduced (de Wolff et al., Acta Cryst. A48 (1992) 727)."""

_PLANE_GROUPS: tuple[tuple[tuple[str, ...], tuple[str, ...]], ...] = (
    (("p1",), ("x,y",)),
    (("p2", "p211"), ("-x,-y",)),
    (("pm", "p1m1"), ("-x,y",)),
    (("pg", "p1g1"), ("-x,y+1/2",)),
    (("cm", "c1m1"), ("x+1/2,y+1/2", "-x,y")),
    (("p2mm", "pmm"), ("-x,-y", "-x,y")),
    (("p2mg", "pmg"), ("-x,-y", "-x+1/2,y")),
    (("p2gg", "pgg"), ("-x,-y", "-x+1/2,y+1/2")),
    (("c2mm", "cmm"), ("x+1/2,y+1/2", "-x,-y", "-x,y")),
    (("p4",), ("-y,x",)),
    (("p4mm", "p4m"), ("-y,x", "-x,y")),
    (("p4gm", "p4g"), ("-y,x", "-x+1/2,y+1/2")),
    (("p3",), ("-y,x-y",)),
    (("p3m1",), ("-y,x-y", "-y,-x")),
    (("p31m",), ("-y,x-y", "y,x")),
    (("p6",), ("x-y,x",)),
    (("p6mm", "p6m"), ("x-y,x", "-y,-x")),
)
"""Names and generators in the order of International Tables for Crystallography A, chapter 2.2."""


def space_group(symbol: int | str, *, notation: Notation = "any") -> Group:
    """A space group of a crystal by number, Hermann–Mauguin symbol or Hall symbol.

    A number or a Hermann–Mauguin symbol that several settings share stands for the first of
    them in the library's database: unique axis b and cell choice 1, hexagonal axes, origin
    choice 1. Another setting is named by its own full symbol (``P 1 1 2/m``), by the choice
    after a colon (``Fd-3m:2``, ``R-3c:R``), by its Hall symbol, or by `space_group_setting`.

    Parameters
    ----------
    symbol : int or str
        1–230, or a symbol. Case, underscores and, but for Hall symbols, blanks do not matter.
    notation : {"any", "hermann_mauguin", "hall"}
        How to read a symbol. Only ``P 2`` reads both ways: Hermann–Mauguin with unique axis b,
        Hall with unique axis c.

    Raises
    ------
    InputError
        Number out of range, a symbol that reads both ways, or an unknown symbol (the nearest
        ones are named).
    """
    as_choice(notation, get_args(Notation), "notation")
    if not isinstance(symbol, str):
        number = as_count(symbol, "symbol")
        if number > 230:
            raise InputError("symbol", f"= {number} is no space-group number", "give 1 to 230")
        return space_group_setting(_first_settings()[number])
    words = " ".join(symbol.replace("_", "").casefold().split())
    compact = words.replace(" ", "")
    by_name = _hermann_mauguin() if notation != "hall" else {}
    by_hall = _hall() if notation != "hermann_mauguin" else {}
    readings = {known[key][0] for known, key in ((by_name, compact), (by_hall, words)) if key in known}
    if not readings:
        spelt = {key: spelling for known in (by_hall, by_name) for key, (_, spelling) in known.items()}
        near = difflib.get_close_matches(words, sorted(spelt), 2 * _NAMES_OFFERED, 0.5)
        offered = ", ".join(list(dict.fromkeys(spelt[key] for key in near))[:_NAMES_OFFERED])
        raise InputError(
            "symbol",
            f"'{symbol[:_SHOWN]}' is no known space-group symbol" + (f"; the nearest are {offered}" if offered else ""),
            "give a number 1 to 230, a Hermann–Mauguin symbol or a Hall symbol",
        )
    if len(readings) > 1:
        raise InputError(
            "symbol",
            f"'{symbol}' names different settings as a Hermann–Mauguin and as a Hall symbol",
            'write it in full, P 1 2 1 or P 1 1 2, or say which is meant with notation "hermann_mauguin" or "hall"',
        )
    return space_group_setting(readings.pop())


def space_group_setting(hall_number: int) -> Group:
    """One of the 530 settings by its Hall number, 1–530 in the order of the library's database.

    Raises
    ------
    InputError
        Number out of range.
    """
    number = as_count(hall_number, "hall_number")
    if number > SETTINGS:
        raise InputError("hall_number", f"= {number} is no setting", f"give 1 to {SETTINGS}")
    kind = setting(number)
    rotations, translations = setting_operations(number)
    choice = f" ({kind.choice})" if kind.choice else ""
    return Group(rotations=rotations, translations=translations, name=kind.full + choice, number=kind.number)


def plane_group(symbol: int | str) -> Group:
    """A plane group by number 1–17 or by its symbol, short or full (``p2mm``, ``pmm``).

    Hexagonal axes enclose 120°; origins as in International Tables A.

    Raises
    ------
    InputError
        Unknown number or symbol; the symbols are listed.
    """
    names = [name for name, _ in _PLANE_GROUPS]
    number = _position(symbol, names)
    if number is None:
        listed = ", ".join(name[0] for name in names)
        raise InputError("symbol", f"'{str(symbol)[:_SHOWN]}' is no plane group", f"give 1 to 17 or one of {listed}")
    aliases, generators = _PLANE_GROUPS[number - 1]
    return Group.from_operations(generators, 2, name=aliases[0], number=number)


def stack_group(symbol: str) -> Group:
    """The group of a layer stack: ``1``, or with a centre at the origin ``-1``, also called ``m``.

    Raises
    ------
    InputError
        Any other symbol.
    """
    if symbol not in ("1", "-1", "m"):
        raise InputError("symbol", f"'{symbol}' is no group of a stack", "give 1, -1 or m")
    if symbol == "1":
        return Group.from_operations(["z"], 1, name="1", number=1)
    return Group.from_operations(["-z"], 1, name="-1", number=2)


def _position(symbol: int | str, names: list[tuple[str, ...]]) -> int | None:
    if isinstance(symbol, str):
        wanted = "".join(symbol.casefold().split())
        return next((place for place, aliases in enumerate(names, 1) if wanted in aliases), None)
    return symbol if not isinstance(symbol, bool) and 1 <= symbol <= len(names) else None


@cache
def _first_settings() -> Mapping[int, int]:
    first: dict[int, int] = {}
    for place in range(1, SETTINGS + 1):
        first.setdefault(setting(place).number, place)
    return first


@cache
def _hall() -> Mapping[str, tuple[int, str]]:
    """Hall symbols, lower case -> first setting and spelling (three come twice, with the same operations)."""
    known: dict[str, tuple[int, str]] = {}
    for place in range(1, SETTINGS + 1):
        symbol = setting(place).hall
        known.setdefault(" ".join(symbol.casefold().split()), (place, symbol))
    return known


@cache
def _hermann_mauguin() -> Mapping[str, tuple[int, str]]:
    """Hermann–Mauguin symbols, lower case without blanks and underscores -> first setting and spelling."""
    known: dict[str, tuple[int, str]] = {}
    for place in range(1, SETTINGS + 1):
        for symbol in _symbols(place):
            known.setdefault(symbol.replace(" ", "").casefold(), (place, symbol))
    for number, symbol in _BEFORE_E_GLIDES.items():
        known.setdefault(symbol.replace(" ", "").casefold(), (_first_settings()[number], symbol))
    return known


def _symbols(place: int) -> list[str]:
    """The names of a setting, each also with the setting's choice after a colon."""
    kind = setting(place)
    symbols = list(kind.names)
    if kind.number in _MONOCLINIC:
        # P 1 21/n 1 is commonly written P 21/n.
        symbols += [" ".join(part for part in symbol.split() if part != "1") for symbol in symbols]
    if kind.choice:
        symbols += [f"{symbol}:{kind.choice}" for symbol in symbols]
    return symbols
