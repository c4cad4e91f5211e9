"""Fourier series summed in 50 digits with mpmath: the reference of check 16.

A double holds a rational number, so positions and the products h·x are exact fractions; only
the exponential, the products and the sum are rounded, in the 50th digit.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction

import mpmath
import numpy as np

DIGITS = 50


def series_at(
    reflections: Sequence[Sequence[int]],
    factors: Sequence[mpmath.mpc],
    positions: Iterable[Sequence[Fraction]],
    volume: mpmath.mpf,
) -> np.ndarray:
    """(1/V) Σ F(h) exp(−2πi h·x) over the rows given, nothing left to be supplied by symmetry.

    reflections (N, d) and factors (N,) with d-fold positions (M, d) -> complex128 (M,).
    """
    summed = []
    with mpmath.workdps(DIGITS):
        for position in positions:
            axes = [
                {index: _phasor(index * x) for index in {row[axis] for row in reflections}}
                for axis, x in enumerate(position)
            ]
            total = mpmath.mpc(0)
            for row, factor in zip(reflections, factors, strict=True):
                term = factor
                for axis, index in enumerate(row):
                    term *= axes[axis][index]
                total += term
            summed.append(complex(total / volume))
    return np.array(summed)


def factors_from(amplitude: Iterable[float], phase_deg: Iterable[float]) -> list[mpmath.mpc]:
    """F = A exp(iφ) in 50 digits, φ in degrees."""
    with mpmath.workdps(DIGITS):
        return [
            mpmath.mpf(float(a)) * mpmath.expjpi(mpmath.mpf(float(phi)) / 180)
            for a, phi in zip(amplitude, phase_deg, strict=True)
        ]


def with_mates(
    reflections: Sequence[tuple[int, ...]], factors: Sequence[mpmath.mpc]
) -> tuple[list[tuple[int, ...]], list[mpmath.mpc]]:
    """Both of each Friedel pair, F(−h) = conj F(h)."""
    with mpmath.workdps(DIGITS):
        conjugate = [mpmath.conj(factor) for factor in factors]
    mates = [tuple(-index for index in row) for row in reflections]
    return [*reflections, *mates], [*factors, *conjugate]


def cell_volume(cell: Sequence[float]) -> mpmath.mpf:
    """Period; area from a, b, γ; or volume from a, b, c, α, β, γ; Å and degrees."""
    with mpmath.workdps(DIGITS):
        exact = [mpmath.mpf(number) for number in cell]
        if len(exact) == 1:
            return exact[0]
        if len(exact) == 3:
            return exact[0] * exact[1] * mpmath.sinpi(exact[2] / 180)
        a, b, c = exact[:3]
        u, v, w = (mpmath.cospi(angle / 180) for angle in exact[3:])
        return a * b * c * mpmath.sqrt(1 - u**2 - v**2 - w**2 + 2 * u * v * w)


def fractions(position: Iterable[float]) -> tuple[Fraction, ...]:
    """The rational numbers that the doubles hold."""
    return tuple(Fraction(float(x)) for x in position)


def on_grid(
    origin: Iterable[float], edges: Sequence[Iterable[float]], divisions: Sequence[int], samples: np.ndarray
) -> list[tuple[Fraction, ...]]:
    """Positions origin + Σ_j (s_j / divisions_j) edges_j for rows s of ``samples``, exact."""
    start = fractions(origin)
    spans = [fractions(edge) for edge in edges]
    return [
        tuple(
            x + sum(Fraction(int(s), n) * span[axis] for s, n, span in zip(row, divisions, spans, strict=True))
            for axis, x in enumerate(start)
        )
        for row in samples
    ]


def _phasor(turns: Fraction) -> mpmath.mpc:
    """exp(−2πi turns), reduced to one turn without rounding."""
    rest = turns % 1
    return mpmath.expjpi(-2 * mpmath.mpf(rest.numerator) / rest.denominator)
