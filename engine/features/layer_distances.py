"""Distances between layers, whose places share the errors of one set of coefficients."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import FloatArray, IntArray, as_choice, as_matrix
from engine.errors import InputError
from engine.features.layers import Layers

Place = Literal["position", "centroid"]


@dataclass(frozen=True, slots=True, kw_only=True)
class LayerDistances:
    """Distances along the line from one layer to another.

    Attributes
    ----------
    first, second : int64, shape (K,)
        Numbers of the layers, from 0.
    periods : int64, shape (K,)
        Periods of the line by which the second is moved on.
    distance, sigma : float64, shape (K,)
        Å, second minus first; σ with the covariance of the two, None without uncertainties.
    """

    first: IntArray
    second: IntArray
    periods: IntArray
    distance: FloatArray
    sigma: FloatArray | None


def layer_distances(found: Layers, pairs: ArrayLike | None = None, *, of: Place = "position") -> LayerDistances:
    """Distances between layers, with the covariance of their places in the σ.

    Parameters
    ----------
    found : Layers
    pairs : array_like, shape (K, 2) or (K, 3), optional
        Numbers of two layers, from 0, and how many periods the second is moved on. By default all
        pairs, the first before the second.
    of : {"position", "centroid"}

    Raises
    ------
    InputError
        A number that names no layer, or periods of a line that is none.
    """
    as_choice(of, get_args(Place), "of")
    if pairs is None:
        above = np.triu_indices(found.count, 1)
        chosen = np.stack([*above, np.zeros_like(above[0])], axis=1)
    else:
        chosen = _pairs(found, pairs).astype(np.int64)
    first, second, periods = chosen.T
    place = found.position if of == "position" else found.centroid
    covariance = found.position_covariance if of == "position" else found.centroid_covariance
    sigma = None
    if covariance is not None:
        variance = covariance[first, first] + covariance[second, second] - 2 * covariance[first, second]
        sigma = np.sqrt(np.maximum(variance, 0.0))
    return LayerDistances(
        first=first,
        second=second,
        periods=periods,
        distance=place[second] - place[first] + periods * found.length,
        sigma=sigma,
    )


def layer_spacings(found: Layers, *, of: Place = "position") -> LayerDistances:
    """Distances from each layer to the next; on a periodic line from the last to the first of the next period."""
    count = found.count
    rows = np.arange(count if found.periodic else max(count - 1, 0))
    if not rows.size:
        return layer_distances(found, of=of)
    second = rows + 1
    return layer_distances(found, np.stack([rows, second % count, second // count], axis=1), of=of)


def _pairs(found: Layers, pairs: ArrayLike) -> FloatArray:
    given = as_matrix(pairs, (-1, -1), "pairs")
    if given.shape[1] not in (2, 3) or (given != np.rint(given)).any():
        raise InputError("pairs", "are not pairs of whole numbers", "give two numbers of layers, and periods if wanted")
    chosen = given if given.shape[1] == 3 else np.column_stack([given, np.zeros(len(given))])
    bad = np.flatnonzero(((chosen[:, :2] < 0) | (chosen[:, :2] >= found.count)).any(axis=1))
    if bad.size:
        raise InputError.for_rows("pairs", bad, f"name none of the {found.count} layers", "count layers from 0")
    if chosen[:, 2].any() and not found.periodic:
        raise InputError("pairs", "count periods of a line that is none", "give two numbers of layers")
    return chosen
