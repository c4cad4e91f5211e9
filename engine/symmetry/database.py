"""The space-group database of the reference library; the only module that calls it."""

from __future__ import annotations

import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from functools import cache

import numpy as np
import spglib

from engine.arrays import FloatArray, IntArray
from engine.errors import TransformError

SETTINGS = 530
"""Settings in the database, counted from 1 (the "Hall numbers")."""


@dataclass(frozen=True, slots=True)
class Setting:
    """How a setting is called.

    Attributes
    ----------
    number : int
        Of the space-group type, 1–230.
    full : str
        Full Hermann–Mauguin symbol, without underscores.
    names : tuple of str
        All its Hermann–Mauguin symbols, the short one first.
    hall : str
        Hall symbol.
    choice : str
        Of axes, cell or origin; empty where there is none.
    """

    number: int
    full: str
    names: tuple[str, ...]
    hall: str
    choice: str


@cache
def setting(hall_number: int) -> Setting:
    """Names of a setting, 1–530.

    Raises
    ------
    TransformError
        The library does not know the setting.
    """
    with _quietly():
        kind = spglib.get_spacegroup_type(hall_number)
    if kind is None:
        raise TransformError(f"the space-group library does not know setting {hall_number}")
    given = (kind.international_short, kind.international_full, *kind.international.split(" = "))
    names = tuple(name.replace("_", "") for name in given)
    return Setting(int(kind.number), names[1], tuple(dict.fromkeys(names)), str(kind.hall_symbol), str(kind.choice))


def setting_operations(hall_number: int) -> tuple[IntArray, FloatArray]:
    """Rotations (n, d, d) and translations (n, d) of a setting, 1–530.

    Raises
    ------
    TransformError
        The library does not know the setting.
    """
    with _quietly():
        found = spglib.get_symmetry_from_database(hall_number)
    if found is None:
        raise TransformError(f"the space-group library has no operations of setting {hall_number}")
    return np.asarray(found["rotations"], dtype=np.int64), np.asarray(found["translations"], dtype=np.float64)


@contextmanager
def _quietly() -> Iterator[None]:
    # From 2.7 on the library warns, whatever is asked of it, that it will raise exceptions one
    # day where it now returns None. Its switch would change it for everyone in the process.
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)
        yield
