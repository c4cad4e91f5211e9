"""From the values of a field to the signed volume whose zero the marching cubes follow."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from engine.arrays import AnyArray

SingleArray = NDArray[np.float32]

LEAST = 2e-4
"""No sample of a signed volume is nearer to zero than this fraction of the one that is farthest.

The library places vertices in single precision: nearer, one would fall on a sample, and the edge it
belongs to could no longer be told. Where it lies on that edge is computed anew from the values.
"""
JITTER = 1e-4
"""Relative noise on a signed volume. On a face of a cube with two opposite corners above the level the library
compares products of the corners; where symmetry makes these equal it can leave an edge to four triangles."""
SLAB = 1 << 18
"""Samples treated at a time."""


@dataclass(frozen=True, slots=True)
class Above:
    """Which samples lie above a level, in the form that marching cubes need.

    Attributes
    ----------
    signed : float32
        Positive above the level. Wrapped axes have their first plane again at the end; where the region is
        closed, a plane far below the level goes round everything.
    padding : int
        Planes added on each side: 1 where the region is closed, else 0.
    crossings : int
        Edges of the grid that the surface cuts, one vertex on each.
    """

    signed: SingleArray
    padding: int
    crossings: int


def padded_shape(planes: tuple[int, ...], *, closed: bool) -> tuple[int, ...]:
    """Of the signed volume of a region."""
    return tuple(count + 2 * closed for count in planes)


def signed_bytes(planes: tuple[int, ...], *, closed: bool) -> int:
    """Memory that `above` takes."""
    samples = math.prod(padded_shape(planes, closed=closed))
    return 4 * samples + 48 * min(samples, SLAB)


def above(values: AnyArray, level: float, wrapped: tuple[bool, ...], *, closed: bool, tie: float) -> Above:
    """The signed volume of a field.

    Parameters
    ----------
    values : float array, shape (n_1, n_2, n_3)
    level : float
    wrapped : tuple of bool
        Axes along which the field repeats after n_j samples.
    closed : bool
    tie : float
        Samples at most this far below the level count as above it: the error of the values.
    """
    padding = int(closed)
    planes = tuple(count + wrap for count, wrap in zip(values.shape, wrapped, strict=True))
    signed = np.empty(padded_shape(planes, closed=closed), dtype=np.float32)
    core = signed[tuple(slice(padding, padding + count) for count in planes)]
    n_1, n_2, n_3 = values.shape
    farthest = max(abs(float(values.max()) - level), abs(float(values.min()) - level))
    least = max(LEAST, max(signed.shape) * 2.0**-22)
    noise = np.random.default_rng(0)
    slab = max(1, SLAB // (n_2 * n_3))
    for start in range(0, n_1, slab):
        part = values[start : start + slab].astype(np.float64) - level
        size = np.maximum(np.abs(part) / (farthest * least), 1.0)
        size *= 1 + JITTER * noise.random(size.shape, dtype=np.float32)
        core[start : start + len(part), :n_2, :n_3] = np.where(part >= -tie, size, -size)
    for axis, count in enumerate(values.shape):
        if wrapped[axis]:
            along = np.moveaxis(core, axis, 0)
            along[count] = along[0]
        if closed:
            # As far below the level as the farthest sample.
            along = np.moveaxis(signed, axis, 0)
            along[0] = along[-1] = -1 / least
    return Above(signed, padding, _crossings(signed))


def _crossings(signed: SingleArray) -> int:
    """Neighbours along an axis of which one is positive and one is not."""
    found = 0
    slab = max(1, SLAB // (signed.shape[1] * signed.shape[2]))
    for start in range(0, signed.shape[0], slab):
        positive = signed[start : start + slab + 1] > 0
        found += int(np.count_nonzero(positive[1:] != positive[:-1]))
        own = positive[:slab]
        found += int(np.count_nonzero(own[:, 1:] != own[:, :-1]))
        found += int(np.count_nonzero(own[:, :, 1:] != own[:, :, :-1]))
    return found
