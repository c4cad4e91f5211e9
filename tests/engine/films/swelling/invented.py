"""Invented swelling layers, made without the engine: sheets and slabs in closed form, read with noise.

Nothing here is measured. Every layer is symmetric and lies within its dry period, but for tails of sheets and edges
below 1 % of a sheet.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.films.orders import FilmOrders


@dataclass(frozen=True)
class Layer:
    """Pairs of Gaussian sheets at ±z and one slab."""

    half: float
    z: np.ndarray
    width: np.ndarray
    strength: np.ndarray
    edge: float
    rough: float
    step: float

    def transform(self, q):
        q = np.asarray(q, dtype=float)
        waves = 2 * np.cos(np.multiply.outer(q, self.z)) * np.exp(-np.multiply.outer(q**2, self.width**2) / 2)
        safe = np.where(q == 0, 1, q)
        slab = np.where(q == 0, self.edge, np.sin(safe * self.edge) / safe)
        return waves @ self.strength + 2 * self.step * slab * np.exp(-((q * self.rough) ** 2) / 2)

    def contrast(self, z):
        """The density less the solvent's, edges left sharp (for layers without a slab)."""
        made = np.zeros(np.size(z))
        for at, width, strength in zip(self.z, self.width, self.strength, strict=True):
            for place in (at, -at):
                made += strength * np.exp(-((z - place) ** 2) / (2 * width**2)) / np.sqrt(2 * np.pi) / width
        return made


def layer(rng):
    half = rng.uniform(15, 27)
    count = rng.integers(1, 4)
    width = rng.uniform(1.2, 2.5, count)
    return Layer(
        half=half,
        z=rng.uniform(0, 1, count) * (half - 3 * width),
        width=width,
        strength=rng.uniform(1, 6, count) * rng.choice([1, 1, 1, -1], count),
        edge=rng.uniform(0.8, 0.94) * half,
        rough=rng.uniform(0.2, 0.02 * half),
        step=rng.uniform(-0.05, 0.12),
    )


def read(rng, made, periods, *, noise=0.04, scales=None, most=10, least=5):
    """Orders with normal errors of their intensities: a share of each and a floor; and the true F, set by set."""
    sets, truths = [], []
    for number, d in enumerate(periods):
        l = np.arange(1, rng.integers(least, most + 1) + 1)
        truth = made.transform(2 * np.pi * l / d) * (1 if scales is None else scales[number])
        intensity = truth**2
        error = np.hypot(noise * intensity, 2e-4 * intensity.max())
        seen = intensity + error * rng.normal(size=l.size)
        amplitude = np.sqrt(np.maximum(seen, error / 4))
        sets.append(FilmOrders.of(d, l, amplitude, error / (2 * np.sqrt(np.maximum(seen, error)))))
        truths.append(truth)
    return sets, truths


def series(seed, *, swelling=1.4, count=4):
    """A layer at several periods from dry to `swelling` times it, intensities read to 3…5 %, on scales of their own."""
    rng = np.random.default_rng(seed)
    made = layer(rng)
    between = rng.uniform(1 + 0.25 * (swelling - 1), swelling, count - 2)
    periods = 2 * made.half * np.concatenate([[1.0], np.sort(between), [swelling]])
    scales = np.concatenate([[1.0], np.exp(rng.uniform(-1, 1, count - 1))])
    sets, truths = read(rng, made, periods, noise=rng.uniform(0.03, 0.05), scales=scales)
    return made, sets, truths, scales
