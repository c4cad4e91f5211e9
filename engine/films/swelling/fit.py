"""Least squares for the layer's transform and the scales of the sets, the signs given or not yet given.

Squared amplitudes need no signs: where T is normally distributed with covariance K, T² has the mean K(q, q) and
the covariance 2K(q, q′)² (Isserlis, Biometrika 12 (1918) 134), so the scales that make the sets' intensities one
continuous function follow by linear least squares before any sign is known. With signs, node values and the
logarithms of the scales are refined together by Gauss–Newton steps, many choices of signs side by side.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.arrays import FloatArray
from engine.films.swelling.observations import Observations

STEPS = 12
"""Gauss–Newton steps at most; the misfit is quadratic but for the scales, which start within some per cent."""
STILL = 1e-7
"""Largest change of a logarithm of a scale at which the steps end."""
LARGEST_STEP = 0.3
"""Of the logarithm of a scale in one step."""
SCALE_SPREAD = 0.7
"""Standard deviation of the logarithm of a scale about its start; holds scales that the data leave free."""
ROUNDS = 5
"""Of the scales from squared amplitudes; each renews the expected squares."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Fits:
    """Fits of several choices of signs.

    Attributes
    ----------
    nodes : float64, shape (B, M)
        T at the nodes.
    scales : float64, shape (B, J)
    residual : float64, shape (B, N)
        (s|F| − kT)/σ.
    chi_square : float64, shape (B,)
        Σ residual².
    misfit : float64, shape (B,)
        χ² and what the expected sizes of the nodes add: what choices are ranked by.
    """

    nodes: FloatArray
    scales: FloatArray
    residual: FloatArray
    chi_square: FloatArray
    misfit: FloatArray


def scales_from_squares(seen: Observations) -> FloatArray:
    """Scales of the sets (J,), the first 1, that make |F|² one continuous function of q."""
    observed = seen.amplitude**2
    mine = seen.which[:, None] == np.arange(seen.sets)
    scales = np.sqrt(observed @ mine / mine.sum(axis=0))
    scales /= scales[0]
    for _ in range(ROUNDS):
        own = scales[seen.which]
        squares, sigma = observed / own**2, seen.sigma / own
        covariance = (seen.weights * seen.expected_squares(scales)) @ seen.weights.T
        mean = np.diag(covariance)
        noise = 4 * squares * sigma**2 + 2 * sigma**4
        design = np.where(mine, squares[:, None], 0.0)
        solved = np.linalg.solve(2 * covariance**2 + np.diag(noise), np.column_stack([design, mean]))
        factors = np.linalg.solve(design.T @ solved[:, :-1], design.T @ solved[:, -1])
        scales = scales / np.sqrt(np.clip(factors, 0.1, 10.0))
        scales /= scales[0]
    return np.asarray(scales)


def refine(seen: Observations, signs: FloatArray, start: FloatArray, *, free: bool) -> Fits:
    """Fit node values, and the scales of all sets but the first where `free`, to each choice of signs.

    Parameters
    ----------
    signs : float64, shape (B, N)
    start : float64, shape (J,)
        Scales.
    """
    tau = seen.expected_squares(start)
    batch, nodes = signs.shape[0], seen.weights.shape[1]
    signed = signs * seen.amplitude
    logs = np.zeros((batch, seen.sets - 1 if free else 0))
    values = _linear(seen, signed, start, tau)
    for _ in range(STEPS if free else 0):
        jacobian, residual = _system(seen, signed, start, values, logs)
        normal = _normal(jacobian, tau)
        slope = np.einsum("bnp,bn->bp", jacobian, residual)
        slope[:, :nodes] -= values / tau
        slope[:, nodes:] -= logs / SCALE_SPREAD**2
        step = np.linalg.solve(normal, slope[..., None])[..., 0]
        values = values + step[:, :nodes]
        moved = np.clip(step[:, nodes:], -LARGEST_STEP, LARGEST_STEP)
        logs = logs + moved
        if np.abs(moved).max() < STILL:
            break
    _, residual = _system(seen, signed, start, values, logs)
    chi_square = np.sum(residual**2, axis=1)
    prior = np.sum(values**2 / tau, axis=1) + np.sum(logs**2, axis=1) / SCALE_SPREAD**2
    return Fits(
        nodes=values,
        scales=_scales(start, logs),
        residual=residual,
        chi_square=chi_square,
        misfit=chi_square + prior,
    )


def covariance_of(
    seen: Observations, signs: FloatArray, start: FloatArray, fits: Fits, *, free: bool
) -> tuple[FloatArray, float]:
    """Covariance of node values and logarithms of free scales of the first fit, and the parameters it spent.

    The latter is the trace of the matrix from observed to fitted amplitudes: the number of parameters as far
    as the data, and not the expected sizes, decide them.

    Returns
    -------
    covariance : float64, shape (M + K, M + K)
    spent : float
    """
    tau = seen.expected_squares(start)
    logs = np.log(fits.scales[:1, 1:] / start[1:]) if free else np.zeros((1, 0))
    jacobian, _ = _system(seen, signs[None, :] * seen.amplitude, start, fits.nodes[:1], logs)
    covariance = np.linalg.inv(_normal(jacobian, tau)[0])
    covariance = (covariance + covariance.T) / 2
    spent = float(np.einsum("np,pr,nr->", jacobian[0], covariance, jacobian[0]))
    return covariance, spent


def _scales(start: FloatArray, logs: FloatArray) -> FloatArray:
    made = np.tile(start, (logs.shape[0], 1))
    if logs.shape[1]:
        made[:, 1:] *= np.exp(logs)
    return made


def _linear(seen: Observations, signed: FloatArray, scales: FloatArray, tau: FloatArray) -> FloatArray:
    """Node values at fixed scales, shape (B, M)."""
    design = seen.weights * (scales[seen.which] / seen.sigma)[:, None]
    normal = design.T @ design + np.diag(1 / tau)
    return np.asarray(np.linalg.solve(normal, design.T @ (signed / seen.sigma).T).T)


def _system(
    seen: Observations, signed: FloatArray, start: FloatArray, values: FloatArray, logs: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Derivatives of the fitted amplitudes over σ, shape (B, N, M + K), and residuals, shape (B, N)."""
    own = _scales(start, logs)[:, seen.which] / seen.sigma
    fitted = own * (values @ seen.weights.T)
    nodes = seen.weights.shape[1]
    jacobian = np.empty((signed.shape[0], seen.count, nodes + logs.shape[1]))
    jacobian[:, :, :nodes] = own[:, :, None] * seen.weights
    mine = seen.which[:, None] == np.arange(1, logs.shape[1] + 1)
    jacobian[:, :, nodes:] = np.where(mine, fitted[:, :, None], 0.0)
    return jacobian, signed / seen.sigma - fitted


def _normal(jacobian: FloatArray, tau: FloatArray) -> FloatArray:
    """Normal matrices with what is known beforehand, shape (B, M + K, M + K)."""
    made = np.swapaxes(jacobian, 1, 2) @ jacobian
    spread = np.concatenate([1 / tau, np.full(jacobian.shape[2] - tau.size, SCALE_SPREAD**-2)])
    place = np.arange(spread.size)
    made[:, place, place] += spread
    return np.asarray(made)
