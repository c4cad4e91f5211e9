"""The continuous transform of one symmetric layer, from its values at evenly spaced q.

A layer of thickness D about the origin, n(z) − n_solvent = c(z) for |z| ≤ D/2 and 0 outside, even in z, has the
real and even transform T(q) = ∫ c(z) exp(iqz) dz. It is known everywhere from its values at the nodes
q_h = 2πh/D (sampling theorem: Shannon, Proc. IRE 37 (1949) 10; for structure factors: Sayre, Acta Cryst. 5 (1952)
843):

    T(q) = Σ_h T_h sin(D(q − q_h)/2) / (D(q − q_h)/2),    T_{−h} = T_h.

The amplitude of order l of a stack with the period d is F_l = T(2πl/d), whatever d: the uniform solvent adds to
F_0 alone. The layer itself is c(z) = (1/D)(T_0 + 2 Σ_{h>0} T_h cos(2πhz/D)).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import FloatArray, as_matrix

NODES_BEYOND = 7
"""Nodes carried beyond the largest measured q: what lies there reaches back by the slow tails of the kernel."""


def node_count(largest: float, thickness: float) -> int:
    """Nodes h = 0, 1, … for amplitudes up to the given q (Å⁻¹), those beyond it included."""
    return int(np.ceil(largest * thickness / (2 * np.pi))) + NODES_BEYOND


def basis(q: FloatArray, thickness: float, count: int) -> FloatArray:
    """Weight of each node in T(q), node −h joined to node h; q (Å⁻¹) of shape (N,) -> (N, count)."""
    turns, node = _turns(q, thickness), np.arange(count)
    mate = np.where(node > 0, np.sinc(turns + node), 0.0)
    return np.asarray(np.sinc(turns - node) + mate)


def basis_slope(q: FloatArray, thickness: float, count: int) -> FloatArray:
    """Derivative of `basis` with respect to q, Å; (N,) -> (N, count)."""
    turns, node = _turns(q, thickness), np.arange(count)
    mate = np.where(node > 0, _sinc_slope(turns + node), 0.0)
    return np.asarray((_sinc_slope(turns - node) + mate) * thickness / (2 * np.pi))


@dataclass(frozen=True, slots=True, kw_only=True)
class LayerTransform:
    """T(q) of one symmetric layer, with its covariance.

    Attributes
    ----------
    thickness : float
        D, Å.
    value : float64, shape (M,)
        T at q_h = 2πh/D, h = 0 … M−1; density times Å where the scale is absolute.
    covariance : float64, shape (M, M)
        Of the values.
    largest : float
        The largest q that was measured, Å⁻¹. The nodes beyond it are held by their expected size alone.
    """

    thickness: float
    value: FloatArray
    covariance: FloatArray
    largest: float

    @property
    def nodes(self) -> FloatArray:
        """q_h, Å⁻¹, shape (M,)."""
        return np.asarray(2 * np.pi * np.arange(self.value.size) / self.thickness)

    def at(self, q: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """T and its standard uncertainty at any q (Å⁻¹), shape (N,) each.

        Raises
        ------
        InputError
            Not a list of finite numbers.
        """
        places = as_matrix(np.atleast_2d(np.asarray(q)), (1, -1), "q")[0]
        weights = basis(places, self.thickness, self.value.size)
        return weights @ self.value, _sigma(weights, self.covariance)

    def contrast(self, z: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """c(z) = n(z) − n_solvent and its standard uncertainty at z (Å) from the layer's centre, shape (N,) each.

        Zero outside the layer. The nodes that were not measured count with their expected size in the
        uncertainty, so the detail finer than 2π/`largest` that is not known is in it.

        Raises
        ------
        InputError
            Not a list of finite numbers.
        """
        places = as_matrix(np.atleast_2d(np.asarray(z)), (1, -1), "z")[0]
        node = np.arange(self.value.size)
        waves = np.where(node > 0, 2.0, 1.0) * np.cos(2 * np.pi * places[:, None] / self.thickness * node)
        weights = np.where(np.abs(places)[:, None] <= self.thickness / 2, waves, 0.0) / self.thickness
        return weights @ self.value, _sigma(weights, self.covariance)


def _turns(q: FloatArray, thickness: float) -> FloatArray:
    return np.asarray(q[:, None] * thickness / (2 * np.pi))


def _sinc_slope(x: FloatArray) -> FloatArray:
    """Derivative of sin(πx)/(πx)."""
    near = np.abs(x) < 1e-4
    away = np.where(near, 1.0, x)
    return np.asarray(np.where(near, -(np.pi**2) * x / 3, (np.cos(np.pi * away) - np.sinc(away)) / away))


def _sigma(weights: FloatArray, covariance: FloatArray) -> FloatArray:
    return np.asarray(np.sqrt(np.maximum(np.einsum("nm,mk,nk->n", weights, covariance, weights), 0.0)))
