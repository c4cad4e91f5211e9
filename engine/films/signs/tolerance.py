"""What the profile of a right sign set may be off by: errors of amplitudes, and orders that were not measured."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from engine.arrays import BoolArray, FloatArray, IntArray
from engine.films.orders import FilmOrders
from engine.resolution.envelope import Envelope

POWERS = (0, 1, 2)
"""p of the fall c l⁻ᵖ exp(−b l²) of the mean F_l²: 0 of a stack of thin sheets, 2 of one of sharp edges."""
FASTEST = 9.0
"""b·L² up to which it is looked for, L the highest order; from (2 − p)/4 on, or there would be no end to it."""
FARTHEST = 8
"""Unmeasured orders are listed up to so many times the highest measured."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Stack:
    """A symmetric stack: orders with a sign to be found, and others that are known by their strength alone.

    Attributes
    ----------
    period : float
        d, Å.
    order, amplitude, variance : shape (n,)
        l, |F_l|, σ² of it.
    other_order, other_variance : shape (m,)
        Orders without a sign and their mean F_l².
    top : int
        Highest order measured, L. d/2L is an element of resolution; half a period has L of them.
    known_by : int or None
        Amplitudes that the strengths of unmeasured orders are estimated from; None where they are given.
    words : tuple of str
        What was assumed.
    """

    period: float
    order: IntArray
    amplitude: FloatArray
    variance: FloatArray
    other_order: IntArray
    other_variance: FloatArray
    top: int
    known_by: int | None = None
    words: tuple[str, ...] = ()

    @property
    def count(self) -> int:
        """Orders with a sign to be found."""
        return int(self.order.size)

    def only(self, chosen: BoolArray) -> Stack:
        """The stack when only the chosen orders, shape (n,), have signs: the rest may have either."""
        rest = ~chosen
        return replace(
            self,
            order=self.order[chosen],
            amplitude=self.amplitude[chosen],
            variance=self.variance[chosen],
            other_order=np.concatenate([self.other_order, self.order[rest]]),
            other_variance=np.concatenate([self.other_variance, self.amplitude[rest] ** 2 + self.variance[rest]]),
        )

    def errors(self) -> tuple[IntArray, FloatArray]:
        """Orders that have errors and the variances of their F_l, both of shape (n + m,)."""
        return (
            np.concatenate([self.order, self.other_order]),
            np.concatenate([self.variance, self.other_variance]),
        )


def expected_strengths(orders: FilmOrders, wanted: IntArray) -> FloatArray:
    """Mean F_l² to expect of orders that were not measured, by those that were; (m,) -> (m,).

    F_l² of thin sheets does not fall at all, that of edges between layers falls as l⁻², and what smears both adds
    exp(−b l²). With F_l normal of variance c l⁻ᵖ exp(−b l²), the distribution of centric structure factors (Wilson,
    Acta Cryst. 2 (1949) 318), and ln c, b and p of uniform prior density, the likelihood of b and p is
    Π lᵖᐟ² exp(b l²/2) S^(−n/2) with S = Σ F² lᵖ exp(b l²), and the mean of c is S/(n − 2). The answer is the mean over
    b and p: a few orders do not show well how fast they fall off, and a fall that is taken as too fast would make true
    signs look false.
    """
    top = float(orders.order.max())
    scaled, reach = (orders.order / top) ** 2, (wanted / top) ** 2
    square = (orders.amplitude / orders.amplitude.max()) ** 2
    likelihoods, means = [], []
    for power in POWERS:
        falls = np.linspace((2 - power) / 4, FASTEST, 181)
        sums = np.exp(falls[:, None] * scaled) @ (square * scaled ** (power / 2))
        likelihood = 0.5 * falls * scaled.sum() + 0.25 * power * np.log(scaled).sum()
        likelihood -= 0.5 * orders.count * np.log(sums)
        # The trapezoidal rule; all powers have the same prior.
        likelihood[[0, -1]] -= math.log(2)
        likelihoods.append(likelihood)
        means.append(sums[:, None] * np.exp(-falls[:, None] * reach) / reach ** (power / 2))
    weight = np.concatenate(likelihoods)
    weight = np.exp(weight - weight.max())
    found = (weight / weight.sum()) @ np.concatenate(means) / max(orders.count - 2, 1)
    return np.asarray(found * float(orders.amplitude.max()) ** 2)


def stack_of(orders: FilmOrders, envelope: Envelope | None) -> Stack:
    """Amplitudes, their errors and what to expect of unmeasured orders; all amplitudes but some are above zero."""
    top = int(orders.order.max())
    listed = np.arange(1, FARTHEST * top + 1, dtype=np.int64)
    missing = np.setdiff1d(listed, orders.order)
    if envelope is None:
        square, source = (
            expected_strengths(orders, missing),
            "as the measured ones fall off (mean over falls l⁻ᵖ exp(−b l²), p 0 to 2)",
        )
    else:
        spacing = missing / (2 * orders.period)
        square = (orders.period * (envelope.amplitude or 0.0) * np.exp(-envelope.b * spacing**2)) ** 2
        source = f"as given, {orders.period * (envelope.amplitude or 0.0):.3g}·exp(−{envelope.b:.3g} Å² l²/4d²)"
    given = np.zeros(orders.count) if orders.sigma is None else orders.sigma
    words = [
        f"Orders that were not measured, up to {int(listed[-1])}, are taken to be of either sign and {source}: "
        f"order {top + 1} as |F| = {math.sqrt(float(square[missing == top + 1][0])):.3g} (rms)."
    ]
    inside = missing[missing < top]
    if inside.size:
        words.append(
            f"Not measured below the highest order: {', '.join(map(str, inside.tolist()))}; if they were too weak to "
            "see, give them with amplitude 0 and σ."
        )
    if orders.sigma is None:
        words.append("No σ of the amplitudes was given: they are taken as exact.")
    if orders.scale_sigma:
        words.append(
            f"The scale's uncertainty, {100 * orders.scale_sigma:.3g} %, is added to the σ of each amplitude as if it "
            "were independent."
        )
    return Stack(
        period=orders.period,
        order=orders.order,
        amplitude=orders.amplitude,
        variance=given**2 + (orders.scale_sigma * orders.amplitude) ** 2,
        other_order=missing,
        other_variance=square,
        top=top,
        known_by=orders.count if envelope is None else None,
        words=tuple(words),
    )
