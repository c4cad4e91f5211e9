"""Planes: by origin and edges, or parallel to a lattice plane (hkl)."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import FloatArray, IntArray, as_indices, as_positive
from engine.errors import InputError
from engine.lattice import Lattice
from engine.sampling.boxes import edges_grid
from engine.sampling.grids import AffineGrid
from engine.sampling.positions import Coordinates, as_fractional

TIE = 1e-9
"""Relative difference below which two lengths count as equal."""


def plane(
    lattice: Lattice,
    origin: ArrayLike,
    edge_1: ArrayLike,
    edge_2: ArrayLike,
    shape: tuple[int, int],
    *,
    include_end: bool = False,
    coordinates: Coordinates = "fractional",
) -> AffineGrid:
    """A parallelogram from `origin`, divided evenly along its two edges.

    With `include_end` the last samples fall on the far edges; without, one step before them,
    so that edges that are lattice vectors give one period without repeats.

    Raises
    ------
    InputError
        The edges are parallel or have no length, the lattice has no planes, or a count is too
        small.
    """
    _refuse_stack(lattice, "edge_1")
    return edges_grid(lattice, origin, (edge_1, edge_2), shape, ("edge_1", "edge_2"), include_end, coordinates)


def lattice_plane(
    lattice: Lattice,
    normal: ArrayLike,
    *,
    offset: float = 0.0,
    width: float,
    height: float,
    spacing: float,
    centre: ArrayLike | None = None,
    coordinates: Coordinates = "fractional",
) -> AffineGrid:
    """A rectangle parallel to (hkl), its axes orthogonal, its samples square.

    The rectangle is centred on `centre` (default: the cell's origin) moved by `offset` along the
    plane's normal. Its first axis runs along the shortest lattice vector that lies in the plane,
    its second along normal × first, so that seen against the normal the pair is right-handed.

    Parameters
    ----------
    normal : array_like, shape (3,)
        Indices of the plane.
    offset, width, height, spacing : float
        Å; a side holds floor(length/spacing) + 1 samples, evenly about the centre.

    Raises
    ------
    InputError
        Not a crystal lattice, the indices name no plane, or a length is not positive.
    """
    if lattice.dimension != 3:
        raise InputError("plane", "needs a crystal lattice", "give origin, edge_1 and edge_2 instead")
    indices = as_indices(normal, 3, "plane")
    first, second = in_plane_axes(lattice, indices)
    step = as_positive(spacing, "spacing", "Å")
    if not np.isfinite(offset):
        raise InputError("offset", "is not a finite number", "give a distance in Å")
    counts = []
    for name, length in (("width", width), ("height", height)):
        ratio = as_positive(length, name, "Å") / step
        if ratio > 1e9:
            raise InputError("spacing", f"is {step:g} Å for a {name} of {length:g} Å", "give a coarser spacing")
        counts.append(math.floor(ratio * (1 + 1e-12)) + 1)
    wavevector = lattice.wavevectors(indices[None, :])[0]
    middle = np.zeros(3) if centre is None else as_fractional(lattice, centre, coordinates, "centre")
    middle = lattice.to_cartesian(middle) + offset * wavevector / np.linalg.norm(wavevector)
    starts = tuple(-0.5 * step * (count - 1) for count in counts)
    corner = middle + starts[0] * first + starts[1] * second
    return AffineGrid(
        lattice.to_fractional(corner),
        lattice.to_fractional(step * np.stack([first, second])),
        (counts[0], counts[1]),
        ("across", "up"),
        starts,
    )


def in_plane_axes(lattice: Lattice, normal: IntArray) -> tuple[FloatArray, FloatArray]:
    """Orthogonal Cartesian unit vectors in the plane (hkl): along its shortest lattice vector,
    and normal × that.

    The lattice vectors of the plane are the integer solutions of h·u = 0. A basis of them is
    reduced by the method of Lagrange and Gauss, in whole numbers so that they stay in the plane.
    """
    one, two = _plane_basis(normal)
    while True:
        first, second = (lattice.to_cartesian(vector.astype(np.float64)) for vector in (one, two))
        # Vectors of one length, and projections of just a half, must not change places for ever.
        if second @ second < (1 - TIE) * (first @ first):
            one, two, first, second = two, one, second, first
        turns = first @ second / (first @ first)
        if abs(turns) <= 0.5 + TIE:
            break
        two = two - int(np.rint(turns)) * one
    wavevector = lattice.wavevectors(normal[None, :])[0]
    across = first / np.linalg.norm(first)
    # Of the two ends of the shortest vector take the one that leans towards +x, +y, +z.
    leading = across[np.flatnonzero(np.abs(across) > 1e-9)[0]]
    across = across * np.sign(leading)
    up = np.cross(wavevector / np.linalg.norm(wavevector), across)
    return across, up


def _plane_basis(normal: IntArray) -> tuple[IntArray, IntArray]:
    """Two integer vectors that generate all integer u with h·u = 0."""
    h, k, l = (int(index) // math.gcd(*(int(i) for i in normal)) for index in normal)
    divisor = math.gcd(h, k)
    if divisor == 0:
        return np.array([1, 0, 0]), np.array([0, 1, 0])
    p, q = _bezout(h, k)
    return np.array([k // divisor, -h // divisor, 0]), np.array([-p * l, -q * l, divisor])


def _bezout(a: int, b: int) -> tuple[int, int]:
    """p, q with p·a + q·b = gcd(a, b) > 0."""
    p, next_p, q, next_q, rest, next_rest = 1, 0, 0, 1, a, b
    while next_rest:
        quotient = rest // next_rest
        rest, next_rest = next_rest, rest - quotient * next_rest
        p, next_p = next_p, p - quotient * next_p
        q, next_q = next_q, q - quotient * next_q
    return (p, q) if rest > 0 else (-p, -q)


def _refuse_stack(lattice: Lattice, name: str) -> None:
    if lattice.dimension == 1:
        raise InputError(name, "a layer stack has no planes", "ask for a profile")
