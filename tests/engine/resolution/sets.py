"""What the tests of resolution share: sets of given shape, written out with plain numpy."""

from __future__ import annotations

import numpy as np

from engine import CoefficientSet, Lattice, Tally
from engine.series import Series
from tests.strategies import forward

BIG = Lattice.from_parameters(31, 33, 35, 82, 97, 105)


def indices_where(lattice, reach, inside):
    """One of each pair ±m, zero included, whose Cartesian G (N, d) satisfies a condition."""
    axes = [np.arange(-n, n + 1) for n in reach]
    m = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, len(reach))
    m = m[inside(m @ lattice.reciprocal)]
    return m[forward(m)]


def ball_indices(lattice, d_min):
    reach = [int(length / d_min) + 1 for length in lattice.lengths]
    limit = 2 * np.pi / d_min * (1 + 1e-9)
    return indices_where(lattice, reach, lambda g: np.linalg.norm(g, axis=1) <= limit)


def equal_series(lattice, indices, factors=None):
    """Response of these indices (one of each pair), the origin's value 1."""
    strengths = np.ones(len(indices)) if factors is None else factors
    total = float(np.where(indices.any(axis=1), 2, 1) @ strengths)
    return Series(lattice, np.asfortranarray(indices), (strengths / total).astype(complex), True)


def coefficient_set(lattice, indices, *, values=None, known=None, group=None, real=True, unit="arbitrary", **more):
    count = len(indices)
    order = np.lexsort(indices.T[::-1])
    values = np.ones(count, dtype=complex) if values is None else np.asarray(values, dtype=complex)
    known = np.ones(count, dtype=bool) if known is None else known
    return CoefficientSet(
        lattice=lattice,
        indices=np.asfortranarray(indices[order]),
        values=values[order],
        phase_known=known[order],
        sigma=None,
        phase_sigma=None,
        merit=None,
        real=real,
        unit=unit,
        tally=Tally(rows=count),
        group=group,
        **more,
    )


def plain_response(series, cartesian):
    """Σ w cos(G·r) written out, at Cartesian positions (M, d)."""
    g = series.indices @ series.lattice.reciprocal
    w = series.values.real * (np.where(series.indices.any(axis=1), 2, 1) if series.real else 1)
    made = np.empty(len(cartesian))
    for start in range(0, len(cartesian), 64):
        made[start : start + 64] = np.cos(cartesian[start : start + 64] @ g.T) @ w
    return made
