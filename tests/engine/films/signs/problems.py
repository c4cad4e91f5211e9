"""Seeded problems for the tests of the searches."""

from __future__ import annotations

import itertools

import numpy as np

from engine.films.orders import FilmOrders
from engine.films.signs import Criteria, Flat, KnownDensity, KnownTotal, LeastStructure, NonNegative
from engine.films.signs.terms import build_terms
from engine.films.signs.tolerance import stack_of

EVERYTHING = Criteria(
    mean=0.42,
    mean_sigma=0.01,
    non_negative=NonNegative(floor=0.1, weight=0.7),
    flat=(Flat(start=-4.0, stop=4.0, sigma=0.02, weight=1.3), Flat(start=14.0, stop=19.0)),
    densities=(
        KnownDensity(value=0.3, sigma=0.05, start=0.0, stop=3.0),
        KnownDensity(value=0.9, sigma=0.2, start=11.0, weight=0.5),
    ),
    totals=(KnownTotal(value=3.0, sigma=0.4, start=8.0, stop=13.0, weight=2.0),),
    least_structure=LeastStructure(weight=0.6),
)
SHAPE = Criteria(mean=0.42, non_negative=NonNegative(), least_structure=LeastStructure())
"""Nothing in it tells the mirrors apart."""
POSITIONS = Criteria(flat=EVERYTHING.flat)
"""Quadratic only."""


def film(count, seed, *, missing=()):
    """Random amplitudes that fall off, of orders 1 … but for some missing."""
    generator = np.random.default_rng(seed)
    order = np.setdiff1d(np.arange(1, count + len(missing) + 1), missing)
    amplitude = (generator.exponential(4.0, order.size) + 0.2) / order**0.7
    return FilmOrders.of(42.0, order, amplitude, 0.04 * amplitude + 0.01, scale="absolute", unit="e/Å³")


def problem(count, seed, criteria, *, missing=()):
    """Stack and terms."""
    stack = stack_of(film(count, seed, missing=missing), criteria.envelope)
    return stack, build_terms(stack, criteria)


def all_signs(count):
    """(2^count, count)."""
    return np.array(list(itertools.product((1, -1), repeat=count)), dtype=np.int64)
