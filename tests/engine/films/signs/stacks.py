"""Invented symmetric stacks with closed-form amplitudes, and measurements of them; nothing here is the engine's."""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np
from scipy import special

from engine.films.orders import FilmOrders
from engine.films.signs import Criteria, Flat, KnownDensity, LeastStructure, NonNegative, rank_signs


@dataclass(frozen=True)
class InventedStack:
    """Slabs and Gaussian planes over half a period, z from 0 to d/2, and their mirror images.

    ``slabs``: start, stop, density; ``planes``: position, σ, content per area. ``blur``: σ of a Gaussian that all
    edges are smeared with. ``gallery``, ``core``: where the density is uniform around the mirrors at 0 and at d/2,
    from, to, value; no core where planes or thin slabs leave none.
    """

    period: float
    slabs: tuple[tuple[float, float, float], ...]
    planes: tuple[tuple[float, float, float], ...]
    blur: float
    gallery: tuple[float, float, float]
    core: tuple[float, float, float] | None

    def factors(self, order):
        """F_l in closed form."""
        q = 2 * np.pi * np.asarray(order, dtype=float) / self.period
        total = np.zeros(q.shape)
        for start, stop, density in self.slabs:
            # The slab and its image: 2 ρ ∫ cos(qz) dz.
            total += (
                2
                * density
                * np.where(q > 0, (np.sin(q * stop) - np.sin(q * start)) / np.where(q > 0, q, 1), stop - start)
            )
        total *= np.exp(-0.5 * (q * self.blur) ** 2)
        for position, sigma, content in self.planes:
            total += 2 * content * np.cos(q * position) * np.exp(-0.5 * (q * sigma) ** 2)
        return total

    @property
    def mean(self):
        return float(self.factors(np.zeros(1))[0] / self.period)

    def density(self, z):
        """n(z) itself, of the stack and its images nearby."""
        total = np.zeros(np.shape(z))
        for image in np.arange(-2, 3) * self.period:
            for side in (1, -1):
                for start, stop, density in self.slabs:
                    a, b = sorted((side * start, side * stop))
                    low, high = (np.asarray(z) - image - edge for edge in (a, b))
                    total += (
                        0.5 * density * (special.erf(low / self.blur / 2**0.5) - special.erf(high / self.blur / 2**0.5))
                    )
                for position, sigma, content in self.planes:
                    u = (np.asarray(z) - image - side * position) / sigma
                    total += content * np.exp(-0.5 * u * u) / sigma / (2 * np.pi) ** 0.5
        return total


def invented(generator) -> InventedStack:
    """A sheet of some slabs and planes around the mirror at d/2, a gallery of low density around that at 0."""
    period = generator.uniform(14, 55)
    half = period / 2
    open_to = half * generator.uniform(0.25, 0.5)
    edges = np.sort(generator.uniform(open_to, half, generator.integers(0, 3)))
    edges = np.concatenate([[open_to], edges, [half]])
    gallery = generator.uniform(0.05, 0.4)
    slabs = [(0.0, float(open_to), float(gallery))]
    slabs += [(float(a), float(b), float(generator.uniform(0.5, 1.6))) for a, b in itertools.pairwise(edges)]
    planes = []
    for _ in range(generator.integers(0, 3)):
        sigma = float(generator.uniform(0.01, 0.025) * period)
        position = generator.uniform(min(open_to + 3.5 * sigma, half), half)
        planes.append((float(position), sigma, float(generator.uniform(0.02, 0.1) * period)))
    blur = float(generator.uniform(0.008, 0.02) * period)
    core_from = max([slabs[-1][0] + 3 * blur, *(position + 4 * sigma for position, sigma, _ in planes)])
    core = (core_from, period - core_from, slabs[-1][2]) if core_from < 0.9 * half else None
    reach = open_to - 3 * blur
    return InventedStack(period, tuple(slabs), tuple(planes), blur, (-reach, reach, float(gallery)), core)


def knowledge(stack, level, generator) -> Criteria:
    """What a laboratory may know: 0 mean and least structure, 1 a flat gallery, 2 its density too, 3 the core's too.

    Known densities are off by a normal error of their σ, 5 % + 0.01.
    """
    flat, densities = [], []
    for place, needed in ((stack.gallery, 1), (stack.core, 3)):
        if place is None or level < needed:
            continue
        start, stop, value = place
        flat.append(Flat(start=start, stop=stop))
        if level >= 2:
            sigma = 0.05 * value + 0.01
            said = float(value + sigma * generator.normal())
            densities.append(KnownDensity(value=said, sigma=sigma, start=start, stop=stop))
    return Criteria(
        mean=stack.mean,
        non_negative=NonNegative(),
        flat=tuple(flat),
        densities=tuple(densities),
        least_structure=LeastStructure(),
    )


def measured(stack, generator, count, noise):
    """Amplitudes of orders 1 … count from intensities with relative normal errors; the true ones; true signs."""
    order = np.arange(1, count + 1)
    true = stack.factors(order)
    intensity = true**2 * (1 + noise * generator.normal(size=count))
    amplitude = np.sqrt(np.maximum(intensity, 0))
    sigma = 0.5 * noise * np.abs(true)
    make = [
        FilmOrders.of(stack.period, order, values, sigma, scale="absolute", unit="e/Å³")
        for values in (amplitude, np.abs(true))
    ]
    return make[0], make[1], np.where(true < 0, -1, 1)


@dataclass(frozen=True)
class Trial:
    """One stack judged from noisy and from noise-free amplitudes: was the first answer right, and how clear was it.

    ``sure``, ``sure_wrong``: orders whose sign was said to be the same in all sets within the decisive margin, and
    those of them that are not the truth's (as seen from the mirror that fits better).
    """

    level: int
    right: bool
    margin: float
    decided: bool
    right_without_noise: bool
    margin_without_noise: float
    sure: int
    sure_wrong: int
    free: int


def trials(seed, count, *, least=5, most=12, decisive=None):
    """Random stacks with random knowledge, seeded."""
    generator = np.random.default_rng(seed)
    options = {} if decisive is None else {"decisive": decisive}
    made = []
    for _ in range(count):
        stack = invented(generator)
        level = int(generator.integers(0, 4))
        noisy, clean, true = measured(
            stack, generator, int(generator.integers(least, most + 1)), generator.uniform(0.03, 0.08)
        )
        criteria = knowledge(stack, level, generator)
        ranked, ideal = (rank_signs(orders, criteria, **options) for orders in (noisy, clean))
        differing = ranked.signs[0] != true
        if ranked.equivalent is not None:
            differing = min(differing, ranked.equivalent[0] != true, key=np.count_nonzero)
        sure = ranked.order_margin >= ranked.decisive
        made.append(
            Trial(
                level=level,
                right=not differing.any(),
                margin=float(ranked.margins[0]),
                decided=ranked.decided,
                right_without_noise=is_true(ideal, true),
                margin_without_noise=float(ideal.margins[0]),
                sure=int(sure.sum()),
                sure_wrong=int((sure & differing).sum()),
                free=int(np.isfinite(ranked.order_margin).sum()),
            )
        )
    return made


def is_true(ranked, true):
    """Whether the first sign set is the true one, from either mirror where these are not told apart."""
    first = [ranked.signs[0]] if ranked.equivalent is None else [ranked.signs[0], ranked.equivalent[0]]
    return any(np.array_equal(one, true) for one in first)
