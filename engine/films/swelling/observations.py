"""The orders of one layer at several periods, side by side and sorted by q."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from engine.arrays import FloatArray, IntArray
from engine.errors import InputError
from engine.films.orders import FilmOrders
from engine.films.swelling.transform import basis, basis_slope, node_count

MOST_ORDERS = 400
"""Orders of all sets together, a bound on time and memory."""
LEAST_SPREAD = 0.005
"""Relative spread of the periods below which they are one period."""
SAME_PERIOD = 3.0
"""Periods closer than this many combined standard uncertainties are one period."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Observations:
    """All amplitudes of a swelling series, ascending in q.

    Attributes
    ----------
    q : float64, shape (N,)
        2πl/d, Å⁻¹.
    amplitude, sigma : float64, shape (N,)
        |F| and its standard uncertainty, what the model and the period leave uncertain included; each set on
        its own scale.
    which : int64, shape (N,)
        Set of each.
    row : int64, shape (N,)
        Row within its set.
    sets : int
    thickness : float
        D, Å.
    weights : float64, shape (N, M)
        `transform.basis` at q.
    """

    q: FloatArray
    amplitude: FloatArray
    sigma: FloatArray
    which: IntArray
    row: IntArray
    sets: int
    thickness: float
    weights: FloatArray

    @property
    def count(self) -> int:
        """Orders of all sets."""
        return int(self.q.size)

    def by_set(self, values: FloatArray | IntArray) -> tuple[FloatArray | IntArray, ...]:
        """Values of all orders, shape (N,), as one array a set, each in the order of the set's rows."""
        made = []
        for number in range(self.sets):
            mine = np.flatnonzero(self.which == number)
            made.append(values[mine[np.argsort(self.row[mine])]])
        return tuple(made)

    def power(self, scales: FloatArray) -> FloatArray:
        """|F|² on the scale of the first set, shape (N,); scales (J,) of the sets."""
        return np.asarray((self.amplitude / scales[self.which]) ** 2)

    def expected_squares(self, scales: FloatArray) -> FloatArray:
        """Expected T² at each node, shape (M,), from the amplitudes near it; scales (J,) of the sets.

        T(0), which no set measures, is left free to be twice the largest amplitude; what lies beyond the
        last order is expected to be as strong as the outermost quarter of the orders.
        """
        squares = self.power(scales)
        node = 2 * np.pi * np.arange(self.weights.shape[1]) / self.thickness
        nearness = np.exp(-0.5 * ((node[:, None] - self.q) * self.thickness / (2 * np.pi)) ** 2) + 1e-6
        made = nearness @ squares / nearness.sum(axis=1)
        made[node > self.q[-1]] = squares[-max(3, self.count // 4) :].mean()
        made[0] = 4 * squares.max()
        # An expected size of zero would forbid what a weak order does not forbid.
        return np.asarray(np.maximum(made, 1e-4 * squares.max()))


def check_series(orders: Sequence[FilmOrders]) -> None:
    """Refuse what is no series of one layer at several periods.

    Raises
    ------
    InputError
        Fewer than two sets, one period only, too many orders, an amplitude set that is all zero, absolute and
        arbitrary sets or units side by side.
    """
    if len(orders) < 2:
        raise InputError(
            "orders",
            "holds one period only, which leaves every sign open",
            "give the same layer at two or more periods",
        )
    periods = np.array([entry.period for entry in orders])
    errors = np.array([entry.period_sigma for entry in orders])
    low, high = int(periods.argmin()), int(periods.argmax())
    apart = float(periods[high] - periods[low])
    if apart <= max(LEAST_SPREAD * periods[low], SAME_PERIOD * math.hypot(errors[low], errors[high])):
        raise InputError(
            "orders",
            f"have periods that are equal within their uncertainties ({periods[low]:g} to {periods[high]:g} Å)",
            "give periods that differ by more",
        )
    if len({entry.scale for entry in orders}) > 1 or len({entry.unit for entry in orders}) > 1:
        raise InputError("orders", "differ in scale or unit", "bring all sets to the absolute scale, or none")
    total = sum(entry.count for entry in orders)
    if total > MOST_ORDERS:
        raise InputError("orders", f"hold {total} amplitudes", f"give at most {MOST_ORDERS} in all")
    for number, entry in enumerate(orders):
        if not entry.amplitude.any():
            raise InputError(("orders", number, "amplitude"), "is zero throughout", "leave this set out")


def gather(
    orders: Sequence[FilmOrders], thickness: float, *, relative_sigma: float | None, model_error: float
) -> Observations:
    """All orders of a checked series.

    Parameters
    ----------
    relative_sigma : float or None
        σ/|F| of the sets that come without σ.
    model_error : float
        Added in quadrature to each σ, relative to the root mean square amplitude of the set.

    Raises
    ------
    InputError
        A set has no σ and none is assumed, or a σ of zero remains.
    """
    sigma = []
    for number, entry in enumerate(orders):
        given = entry.sigma
        if given is None:
            if relative_sigma is None:
                raise InputError(
                    ("orders", number, "sigma"),
                    "is absent, so that no choice of signs can be told from another",
                    "give standard uncertainties of the amplitudes, or a relative σ to assume",
                )
            given = relative_sigma * entry.amplitude
        floor = model_error * math.sqrt(float(np.mean(entry.amplitude**2)))
        made = np.hypot(given, floor)
        if (made == 0).any():
            raise InputError(
                ("orders", number, "sigma"), "is zero", "give uncertainties above zero, or a model error above zero"
            )
        sigma.append(made)
    q = np.concatenate([2 * np.pi * entry.order / entry.period for entry in orders])
    place = np.argsort(q, kind="stable")
    which = np.repeat(np.arange(len(orders)), [entry.count for entry in orders])
    row = np.concatenate([np.arange(entry.count) for entry in orders])
    count = node_count(float(q.max()), thickness)
    plain = Observations(
        q=q[place],
        amplitude=np.concatenate([entry.amplitude for entry in orders])[place],
        sigma=np.concatenate(sigma)[place],
        which=which[place],
        row=row[place],
        sets=len(orders),
        thickness=thickness,
        weights=basis(q[place], thickness, count),
    )
    return _with_period_errors(plain, np.array([entry.period_sigma / entry.period for entry in orders]))


def _with_period_errors(plain: Observations, relative: FloatArray) -> Observations:
    """σ widened by what an uncertain period does to q: σ_q = q σ_d/d times the expected slope of T."""
    if not relative.any():
        return plain
    slope = basis_slope(plain.q, plain.thickness, plain.weights.shape[1]) ** 2
    slope = slope @ plain.expected_squares(np.ones(plain.sets))
    widened = np.sqrt(plain.sigma**2 + (plain.q * relative[plain.which]) ** 2 * slope)
    return Observations(
        q=plain.q,
        amplitude=plain.amplitude,
        sigma=widened,
        which=plain.which,
        row=plain.row,
        sets=plain.sets,
        thickness=plain.thickness,
        weights=plain.weights,
    )
