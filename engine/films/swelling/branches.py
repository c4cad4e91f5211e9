"""Search over the signs of amplitudes that are samples of one continuous transform.

With the expected squares τ_h² of the node values, the amplitudes' uncertainties and fixed scales, the best fit to
signed amplitudes y = s|F| leaves the misfit

    Q(s) = min_T Σ (y − AT)²/σ² + Σ T_h²/τ_h² = yᵀ C⁻¹ y,    C = A diag(τ²) Aᵀ + diag(σ²)

(the identity of least squares with prior information; Rasmussen & Williams, Gaussian Processes for Machine
Learning, 2006, §2.2). With the Cholesky root of C this is a sum over the orders, ascending in q, of squared
differences between each signed amplitude and what those before it predict, in units of the prediction's own
uncertainty. So the signs can be chosen one after the other, keeping the best choices: continuity decides where the
prediction is good, and both signs are carried on where it is not.
"""

from __future__ import annotations

import numpy as np

from engine.arrays import FloatArray
from engine.films.swelling.observations import Observations

MOST_INTERVALS = 6000
"""Runs of signs that are reversed together, as alternatives to a choice."""


def whitened(seen: Observations, scales: FloatArray) -> FloatArray:
    """R with Q(s) = |R s|², lower triangular, shape (N, N); scales (J,)."""
    own = scales[seen.which]
    tau = seen.expected_squares(scales)
    covariance = (seen.weights * tau) @ seen.weights.T + np.diag((seen.sigma / own) ** 2)
    root = np.linalg.cholesky(covariance)
    return np.asarray(np.tril(np.linalg.solve(root, np.diag(seen.amplitude / own))))


def branch(root: FloatArray, width: int) -> tuple[FloatArray, FloatArray]:
    """The best choices of signs, up to a common sign, found by keeping `width` at each step.

    Parameters
    ----------
    root : float64, shape (N, N)
        Of `whitened`.
    width : int

    Returns
    -------
    signs : float64, shape (B, N)
        ±1, the first +1; ascending in Q.
    misfit : float64, shape (B,)
        Q.
    """
    count = root.shape[0]
    signs = np.ones((1, count))
    misfit = np.array([root[0, 0] ** 2])
    for step in range(1, count):
        known, own = signs[:, :step] @ root[step, :step], root[step, step]
        signs = np.concatenate([signs, signs])
        signs[known.size :, step] = -1
        misfit = np.concatenate([misfit + (known + own) ** 2, misfit + (known - own) ** 2])
        if misfit.size > width:
            kept = np.argpartition(misfit, width)[:width]
            signs, misfit = signs[kept], misfit[kept]
    place = np.argsort(misfit, kind="stable")
    return signs[place], misfit[place]


def neighbours(root: FloatArray, signs: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Choices that differ from one by the reversal of a run of consecutive signs, and their Q.

    All runs up to a length, and all that reach to the end: a zero of the transform is passed over, added,
    moved, or a stretch between two zeros is reversed.

    Returns
    -------
    signs : float64, shape (B, N)
    misfit : float64, shape (B,)
    """
    count = signs.size
    longest = max(1, min(count, MOST_INTERVALS // count))
    first, last = np.triu_indices(count)
    kept = (last - first < longest) | (last == count - 1)
    first, last = first[kept], last[kept]
    place = np.arange(count)
    inside = (place >= first[:, None]) & (place <= last[:, None])
    made = np.where(inside, -signs, signs)
    made = made[~inside.all(axis=1)]
    return made, np.sum((made @ root.T) ** 2, axis=1)


def alternatives(signs: FloatArray, misfit: FloatArray, power: FloatArray, most: int) -> tuple[FloatArray, FloatArray]:
    """Of many choices the best `most`, and for each order the best that has it reversed against the best of all.

    Choices are compared up to a common sign: each is turned to agree with the best where most of the power is.

    Parameters
    ----------
    power : float64, shape (N,)
        |F|² on one scale.

    Returns
    -------
    signs : float64, shape (B, N)
        Distinct, ascending in Q, the best first.
    misfit : float64, shape (B,)
    """
    place = np.argsort(misfit, kind="stable")
    ordered, values = signs[place], misfit[place]
    turned = ordered * agreement(ordered, power)[:, None]
    # Rows as bits: a fraction of the bytes to sort.
    _, distinct = np.unique(np.packbits(turned > 0, axis=1), axis=0, return_index=True)
    distinct.sort()
    turned, values = turned[distinct], values[distinct]
    reversed_in = turned != turned[0]
    first = np.where(reversed_in.any(axis=0), reversed_in.argmax(axis=0), 0)
    kept = np.unique(np.concatenate([np.arange(min(most, values.size)), first]))
    return turned[kept], values[kept]


def agreement(signs: FloatArray, power: FloatArray) -> FloatArray:
    """±1 for each choice (B, N), shape (B,): −1 where it contradicts the first in most of the power."""
    return np.where((signs * signs[0]) @ power < 0, -1.0, 1.0)
