"""Boxes, and the whole cell."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike
from scipy import fft

from engine.arrays import as_count, as_positive
from engine.errors import InputError
from engine.lattice import FLATTEST, Lattice
from engine.sampling.grids import AffineGrid
from engine.sampling.positions import Coordinates, as_fractional, refuse_null

CELL_LABELS = ("a", "b", "c")


def full_cell(lattice: Lattice, shape: Sequence[int]) -> AffineGrid:
    """The whole cell divided into shape[j] steps along each direct vector.

    Raises
    ------
    InputError
        Not one count per dimension, or a count below 1.
    """
    d = lattice.dimension
    if len(shape) != d:
        raise InputError("shape", f"has {len(shape)} counts", f"give {d}, one per direct vector")
    counts = tuple(as_count(count, ("shape", j)) for j, count in enumerate(shape))
    return AffineGrid(np.zeros(d), np.diag(1.0 / np.array(counts)), counts, CELL_LABELS[:d], (0.0,) * d)


def full_cell_by_spacing(lattice: Lattice, spacing: float) -> AffineGrid:
    """The whole cell with samples at most `spacing` (Å) apart along each direct vector.

    Each count is rounded up to a length whose Fourier transform is fast.

    Raises
    ------
    InputError
        The spacing is not a positive length.
    """
    step = as_positive(spacing, "spacing", "Å")
    if float(lattice.lengths.max()) / step > 1e9:
        raise InputError("spacing", f"is {step:g} Å, a billionth of the cell", "give a coarser spacing")
    wanted = [math.ceil(length / step * (1 - 1e-12)) for length in lattice.lengths]
    return full_cell(lattice, [int(fft.next_fast_len(count, real=True)) for count in wanted])


def box(
    lattice: Lattice,
    origin: ArrayLike,
    edges: Sequence[ArrayLike],
    shape: Sequence[int],
    *,
    include_end: bool = False,
    coordinates: Coordinates = "fractional",
) -> AffineGrid:
    """A parallelepiped from `origin`, divided evenly along its d edges.

    Raises
    ------
    InputError
        Not one edge and one count per dimension, edges that span no box, or a count too small.
    """
    d = lattice.dimension
    if len(edges) != d:
        raise InputError("edges", f"are {len(edges)}", f"give {d}, one per dimension of the lattice")
    labels = tuple(f"edge_{j + 1}" for j in range(d))
    return edges_grid(lattice, origin, edges, shape, labels, include_end, coordinates)


def edges_grid(
    lattice: Lattice,
    origin: ArrayLike,
    edges: Sequence[ArrayLike],
    shape: Sequence[int],
    labels: tuple[str, ...],
    include_end: bool,
    coordinates: Coordinates,
) -> AffineGrid:
    """A grid spanned by edges, whose labels are also their names in a fault."""
    p = len(edges)
    if len(shape) != p:
        raise InputError("shape", f"has {len(shape)} counts", f"give {p}, one per edge")
    counts = [as_count(count, ("shape", j), least=2 if include_end else 1) for j, count in enumerate(shape)]
    start = as_fractional(lattice, origin, coordinates, "origin")
    spans = np.empty((p, lattice.dimension))
    for j, (edge, label) in enumerate(zip(edges, labels, strict=True)):
        spans[j] = as_fractional(lattice, edge, coordinates, label)
        refuse_null(spans[j], label)
    cartesian = lattice.to_cartesian(spans)
    unit = cartesian / np.linalg.norm(cartesian, axis=1)[:, None]
    if math.sqrt(max(float(np.linalg.det(unit @ unit.T)), 0.0)) < FLATTEST:
        raise InputError(labels[-1], "lies along the other edges or nearly so", "give edges that span a region")
    divisions = np.array(counts) - 1 if include_end else np.array(counts)
    return AffineGrid(start, spans / divisions[:, None], tuple(counts), labels, (0.0,) * p)
