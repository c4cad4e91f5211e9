"""What fixes the common sign of a layer's transform, which amplitudes alone leave open.

Reversing all signs turns the contrast n(z) − n_solvent into its negative, with the same amplitudes at every
period. Something known beforehand must decide: whether the layer as a whole outweighs the solvent that it
displaces, by how much, the sign of one order, or that no density is below zero.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from engine.arrays import FloatArray, as_choice, as_count, as_positive
from engine.errors import InputError
from engine.films.swelling.transform import LayerTransform

PLACES = 201
"""Samples across the layer on which a density is looked at for being below zero."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Orientation:
    """One of the ways; make it with a function of this module.

    Attributes
    ----------
    kind : {"undecided", "excess", "total", "order", "density"}
    sign : float
        ±1 of an excess or an order.
    value, sigma : float
        Of a total; `value` is the solvent's density of a density.
    entry, order : int
        Set and order of a known sign.
    words : str
    """

    kind: Literal["undecided", "excess", "total", "order", "density"]
    words: str
    sign: float = 1.0
    value: float = 0.0
    sigma: float = 0.0
    entry: int = 0
    order: int = 0


UNDECIDED = Orientation(
    kind="undecided",
    words="nothing fixes the common sign: signs are relative to each other, given so that T(0) comes out positive",
)


def excess(sign: Literal["positive", "negative"]) -> Orientation:
    """The layer scatters more, or less, than the solvent that it displaces: the sign of T(0).

    Raises
    ------
    InputError
        Neither of the two words.
    """
    as_choice(sign, ("positive", "negative"), "sign")
    return Orientation(
        kind="excess",
        sign=1.0 if sign == "positive" else -1.0,
        words=f"common sign from the layer's excess over the solvent, T(0), which is {sign}",
    )


def total(value: float, sigma: float) -> Orientation:
    """T(0) itself, ∫ (n − n_solvent) dz, on the scale of the first set.

    Raises
    ------
    InputError
        Not finite, or σ not above zero.
    """
    if not np.isfinite(value):
        raise InputError("value", "is not a finite number", "give the layer's excess, density times Å")
    error = as_positive(sigma, "sigma", "density times Å")
    return Orientation(
        kind="total", value=float(value), sigma=error, words=f"common sign from T(0) = {value:g} ± {error:g}"
    )


def known_order(entry: int, order: int, sign: Literal["positive", "negative"]) -> Orientation:
    """The sign of one order of one set, counted from 0.

    Raises
    ------
    InputError
        Not a set or an order, or neither of the two words.
    """
    as_choice(sign, ("positive", "negative"), "sign")
    place, number = as_count(entry, "entry", least=0), as_count(order, "order")
    return Orientation(
        kind="order",
        sign=1.0 if sign == "positive" else -1.0,
        entry=place,
        order=number,
        words=f"common sign from order {number} of set {place}, which is {sign}",
    )


def never_negative(solvent: float) -> Orientation:
    """The density is nowhere below zero in a solvent of known density (absolute sets alone).

    Raises
    ------
    InputError
        Not a finite density.
    """
    if not np.isfinite(solvent):
        raise InputError("solvent", "is not a finite number", "give the solvent's density")
    return Orientation(
        kind="density",
        value=float(solvent),
        words=f"common sign from a density nowhere below zero in a solvent of {solvent:g}",
    )


def penalties(known: Orientation, nodes: FloatArray, covariance: FloatArray, thickness: float) -> FloatArray:
    """What each common sign adds to the misfit of each fit, shape (B, 2): as fitted, and reversed.

    Parameters
    ----------
    nodes : float64, shape (B, M)
        T at the nodes; the first is T(0).
    covariance : float64, shape (M, M)
    """
    signs = np.array([1.0, -1.0])
    if known.kind == "excess":
        # Least that the fit must be worse by for T(0) to have the other sign.
        against = np.minimum(known.sign * signs * nodes[:, :1], 0.0)
        return np.asarray(against**2 / covariance[0, 0])
    if known.kind == "total":
        return np.asarray((signs * nodes[:, :1] - known.value) ** 2 / (covariance[0, 0] + known.sigma**2))
    if known.kind == "density":
        z = np.linspace(0, thickness / 2, PLACES)
        made = np.empty((nodes.shape[0], 2))
        for row, value in enumerate(nodes):
            fitted = LayerTransform(thickness=thickness, value=value, covariance=covariance, largest=0.0)
            contrast, sigma = fitted.contrast(z)
            below = np.minimum(known.value + signs[:, None] * contrast, 0.0) / sigma
            made[row] = (below**2).max(axis=1)
        return made
    return np.zeros((nodes.shape[0], 2))
