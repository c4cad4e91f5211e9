"""What topology says of the critical points of a periodic function.

On a torus of dimension d a function without degenerate critical points has c_k of them with k negative
curvatures, with c_k − c_{k−1} + … ± c_0 ≥ b_k − b_{k−1} + … ± b_0 for each k and equality for k = d, where
b_k = d!/(k!(d−k)!) (Morse, Trans. Am. Math. Soc. 27 (1925) 345). So Σ (−1)^k c_k = 0, and c_k ≥ b_k.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Morse:
    """Numbers of critical points in a cell, and whether they can be all there are.

    Attributes
    ----------
    counts : tuple of int
        With 0, 1, … d negative curvatures: minima first, maxima last; all equivalents counted.
    alternating : int
        Σ (−1)^k c_k; zero of a complete list.
    holds : bool
        Whether the equality and all inequalities do. False: some are missing, or degenerate.
    """

    counts: tuple[int, ...]
    alternating: int
    holds: bool


def morse(counts: Sequence[int]) -> Morse:
    """Judge the numbers c_0 … c_d of a whole cell."""
    dimension = len(counts) - 1
    partial, bound, fair = 0, 0, True
    for order, count in enumerate(counts):
        partial = int(count) - partial
        bound = math.comb(dimension, order) - bound
        fair &= partial >= bound
    alternating = partial if dimension % 2 == 0 else -partial
    return Morse(tuple(int(count) for count in counts), alternating, fair and alternating == 0)
