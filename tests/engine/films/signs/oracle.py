"""The criteria once more, one sign set at a time, on the profile itself: plain sums, no shared code."""

from __future__ import annotations

import numpy as np


def profile(stack, mean, signs, z):
    total = np.full(np.shape(z), 0.0 if mean is None else mean)
    for order, amplitude, sign in zip(stack.order, stack.amplitude, signs, strict=True):
        total = total + 2 / stack.period * sign * amplitude * np.cos(2 * np.pi * order * z / stack.period)
    return total


def variance(stack, z):
    total = np.zeros(np.shape(z))
    for order, square in zip(*stack.errors(), strict=True):
        total = total + square * (2 / stack.period * np.cos(2 * np.pi * order * z / stack.period)) ** 2
    return total


def non_negative(stack, criteria, signs):
    """Over the whole period, of which half counts, on samples of its own: four to an element."""
    count = 8 * stack.top
    z = np.arange(count) * stack.period / count
    lack = np.maximum(criteria.non_negative.floor - profile(stack, criteria.mean, signs, z), 0)
    total = (lack**2 / (variance(stack, z) + criteria.mean_sigma**2)).sum() / 4 / 2
    return criteria.non_negative.weight * total


def known(stack, criteria, signs, target):
    """Mean or integral by the midpoint rule; the error's variance from what each F_l does to it."""
    if target.stop is None:
        z, length = np.array([target.start]), 1.0
    else:
        z = target.start + (target.stop - target.start) * (np.arange(4000) + 0.5) / 4000
        length = target.stop - target.start if type(target).__name__ == "KnownTotal" else 1.0
    value = length * profile(stack, criteria.mean, signs, z).mean()
    spread = target.sigma**2 + (length * criteria.mean_sigma) ** 2
    for order, square in zip(*stack.errors(), strict=True):
        spread += square * (length * 2 / stack.period * np.cos(2 * np.pi * order * z / stack.period).mean()) ** 2
    return target.weight * (value - target.value) ** 2 / spread


def flat(stack, signs, region, count=500):
    """On equal steps; errors with their covariance, and a white one of a tenth of their variance.

    Of sign sets (S, n). Elements are counted on the half period: a region may hold mirror images of itself.
    """
    width = region.stop - region.start
    z = region.start + width * (np.arange(count) + 0.5) / count
    values = np.stack([profile(stack, 0.0, one, z) for one in signs])
    values = values - values.mean(axis=1, keepdims=True)
    waves = np.stack([2 / stack.period * np.cos(2 * np.pi * order * z / stack.period) for order in stack.errors()[0]])
    waves -= waves.mean(axis=1, keepdims=True)
    covariance = waves.T @ (stack.errors()[1][:, None] * waves)
    fine = (np.arange(20000) + 0.5) / 20000 * stack.period / 2
    inside = [
        (region.start <= seen) & (seen <= region.stop)
        for k in (-1, 0, 1)
        for seen in (k * stack.period + fine, k * stack.period - fine)
    ]
    elements = max(np.any(inside, axis=0).mean() * stack.top, 1)
    white = (0.1 * variance(stack, z).mean() + region.sigma**2) * count / elements
    solved = np.linalg.solve(covariance + white * np.eye(count), values.T)
    square = np.einsum("sj,js->s", values, solved)
    if stack.known_by is None:
        return region.weight * square
    freedom = np.trace(np.linalg.solve(covariance + white * np.eye(count), covariance))
    n = stack.known_by
    return region.weight * (n + freedom) * np.log(1 + square / (n - 2))


def least_structure(stack, criteria, signs):
    count = 8 * stack.top
    z = np.arange(count) * stack.period / count
    slope, noise = np.zeros(count), np.zeros(count)
    for order, amplitude, sign in zip(stack.order, stack.amplitude, signs, strict=True):
        slope -= sign * amplitude * (2 / stack.period) * (2 * np.pi * order / stack.period) * np.sin(
            2 * np.pi * order * z / stack.period
        )  # fmt: skip
    for order, square in zip(*stack.errors(), strict=True):
        if order <= stack.top:
            noise += square * ((2 / stack.period) * (2 * np.pi * order / stack.period)) ** 2 * np.sin(
                2 * np.pi * order * z / stack.period
            ) ** 2  # fmt: skip
    variation = np.sqrt(slope**2 + 2 / np.pi * noise).sum() * stack.period / count / 2
    least = max(np.pi * stack.order * stack.amplitude / stack.period)
    return criteria.least_structure.weight * 2 * stack.top * np.log(variation / least)


def parts(stack, criteria, signs):
    """All parts of sign sets (S, n) -> (S, P)."""
    found = []
    if criteria.non_negative is not None:
        found.append([non_negative(stack, criteria, one) for one in signs])
    found += [flat(stack, signs, region) for region in criteria.flat]
    for target in (*criteria.densities, *criteria.totals):
        found.append([known(stack, criteria, one, target) for one in signs])
    if criteria.least_structure is not None:
        found.append([least_structure(stack, criteria, one) for one in signs])
    return np.array(found).T
