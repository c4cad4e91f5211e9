"""Positions and vectors as a caller gives them: fractional or Cartesian."""

from __future__ import annotations

from typing import Literal, get_args

from numpy.typing import ArrayLike

from engine.arrays import FloatArray, as_choice, as_matrix, as_vector
from engine.errors import InputError
from engine.lattice import Lattice

Coordinates = Literal["fractional", "cartesian"]


def as_fractional(lattice: Lattice, value: ArrayLike, coordinates: Coordinates, name: str) -> FloatArray:
    """One position or vector as fractional coordinates, shape (d,).

    Raises
    ------
    InputError
        Not d finite numbers.
    """
    as_choice(coordinates, get_args(Coordinates), "coordinates")
    vector = as_vector(value, lattice.dimension, name)
    return vector if coordinates == "fractional" else lattice.to_fractional(vector)


def as_fractional_rows(lattice: Lattice, value: ArrayLike, coordinates: Coordinates, name: str) -> FloatArray:
    """Several positions or vectors as fractional coordinates, shape (n, d).

    Raises
    ------
    InputError
        Not rows of d finite numbers.
    """
    as_choice(coordinates, get_args(Coordinates), "coordinates")
    rows = as_matrix(value, (-1, lattice.dimension), name)
    return rows if coordinates == "fractional" else lattice.to_fractional(rows)


def refuse_null(vector: FloatArray, name: str | tuple[str | int, ...]) -> None:
    """Raise InputError where a vector has no length."""
    if not vector.any():
        raise InputError(name, "has no length", "give a vector other than zero")
