"""Fall-off of a film's amplitudes with order: displacements of the layers' parts, and cumulative disorder.

Displacements about ideal places damp F_l by exp(−½ q² u²) = exp(−B s²), q = 2π l/d, s = sin θ/λ = q/4π,
B = 8π² u² (Debye 1913, Waller 1923), u² the mean square along the normal. Cumulative disorder does not take
intensity away but spreads it; what a level background through the valleys leaves of a line is 2r/(1 + r),
r = exp(−2π² g² l²) (see `engine.films.paracrystal`): for small g a fall-off like u² = g² d²/4. Amplitudes
alone cannot tell the two apart; line widths can (`engine.films.widths`).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike
from scipy import special

from engine.amplitudes.scaling import relative_scale
from engine.arrays import FloatArray, IntArray, as_vector, refuse_rows
from engine.errors import InputError, TransformError
from engine.films.orders import FilmOrders
from engine.films.paracrystal import share_above_valley, share_within
from engine.lattice import Lattice
from engine.reflections import Reflections

EXACT = 1e-9
"""σ of a reference taken as exact, in that of the measured amplitudes."""
FEW = 8
"""Orders below which an envelope is a guess."""
UNLIKELY = 0.01
"""Probability of the scatter, either way, at which the model is doubted."""
ROUNDS = 200
GROUPS = 3
"""Orders in a group of the envelope's points."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Damping:
    """|F_l| = scale · |reference_l| · exp(−½ q² u²).

    Attributes
    ----------
    scale, scale_sigma : float
        Of amplitudes.
    u_squared, u_squared_sigma : float
        u², Å²; may come out negative within its σ.
    u, u_sigma : float or None
        Å; None where u² is not above zero.
    b, b_sigma : float
        B = 8π² u², Å².
    covariance : float64, shape (2, 2)
        Of (ln scale, u²).
    cumulative : float or None
        The g = σ_d/d that would alone damp the lines as much, if they were integrated above their valleys.
    chi_squared, degrees : float, int
    order : int64, shape (n,)
        The orders used.
    calculated : float64, shape (n,)
        By an amplitude reference |F| there; of an envelope the root of the mean intensity.
    points : float64, shape (m, 3)
        Of an envelope: mean q², mean of |F|²/envelope and its σ in groups of orders; else shape (0, 3).
    assumptions, notes : tuple of str
    """

    scale: float
    scale_sigma: float
    u_squared: float
    u_squared_sigma: float
    u: float | None
    u_sigma: float | None
    b: float
    b_sigma: float
    covariance: FloatArray
    cumulative: float | None
    chi_squared: float
    degrees: int
    order: IntArray
    calculated: FloatArray
    points: FloatArray
    assumptions: tuple[str, ...]
    notes: tuple[str, ...]

    def factors(self, order: ArrayLike, period: float) -> FloatArray:
        """exp(−½ q² u²) at orders of a period (Å), any shape."""
        q = 2 * np.pi * np.asarray(order, dtype=np.float64) / period
        return np.asarray(np.exp(-0.5 * self.u_squared * q**2))

    def undamped(self, orders: FilmOrders) -> FilmOrders:
        """Amplitudes of the stack at rest, scale left as it is; σ leaves out that of u²."""
        factors = 1 / self.factors(orders.order, orders.period)
        return replace(
            orders,
            amplitude=orders.amplitude * factors,
            sigma=None if orders.sigma is None else orders.sigma * factors,
            applied=(*orders.applied, f"divided by exp(−½ q² u²), u² = {self.u_squared:.4g} Å²"),
        )


def damping_by_reference(
    orders: FilmOrders, reference: ArrayLike, reference_sigma: ArrayLike | None = None, *, robust: bool = False
) -> Damping:
    """Scale and u² of amplitudes against those of a trial stack at rest.

    Minimises Σ (|F_l| − k e^{−½q²u²} |R_l|)²/(σ² + k² e^{−q²u²} σ_R²) (see
    `engine.amplitudes.scaling.relative_scale`). Without σ all orders weigh the same and the uncertainties
    follow from the scatter.

    Parameters
    ----------
    orders : FilmOrders
    reference : array_like, shape (n,)
        R_l at the orders, with or without signs or phases.
    reference_sigma : array_like, shape (n,), optional
        Above zero; by default the reference is exact.
    robust : bool
        Whether to bound the pull of outliers.

    Raises
    ------
    InputError
        Fewer than three orders, arrays of another length, σ's not above zero, a reference that is zero
        throughout.
    TransformError
        The fit did not converge.
    """
    trial = as_vector(np.abs(np.asarray(reference)), orders.count, "reference")
    if orders.count < 3:
        raise InputError("order", f"holds {orders.count} orders", "give at least 3 to fit a scale and u²")
    if orders.sigma is None and reference_sigma is not None:
        raise InputError("reference_sigma", "stands beside amplitudes without σ", "give σ of the amplitudes as well")
    other = None
    if orders.sigma is not None:
        refuse_rows(orders.sigma <= 0, "sigma", "is not above zero", "give σ > 0, or leave σ out")
        other = orders.sigma * EXACT
        if reference_sigma is not None:
            other = as_vector(reference_sigma, orders.count, "reference_sigma")
            refuse_rows(other <= 0, "reference_sigma", "is not above zero", "give σ > 0, or leave it out")
    if not trial.any():
        raise InputError("reference", "is zero throughout", "give the amplitudes of a trial stack")
    if orders.sigma is not None and other is not None and reference_sigma is None:
        other = other * trial.max() / orders.amplitude.max() if orders.amplitude.any() else other
    fit = relative_scale(
        _reflections(orders, orders.amplitude, orders.sigma),
        _reflections(orders, trial, other),
        displacement=True,
        robust=robust,
    )
    notes = list(fit.notes)
    degrees = orders.count - 2
    chi_squared = fit.reduced_chi_squared * degrees
    covariance = fit.covariance.copy()
    if orders.sigma is not None and not robust and special.chdtrc(degrees, chi_squared) < UNLIKELY:
        covariance *= fit.reduced_chi_squared
        notes.append(
            f"the reference does not fit within the errors (reduced χ² {fit.reduced_chi_squared:.3g}); "
            "the uncertainties are enlarged by its root"
        )
    if fit.down_weighted:
        notes.append(f"{fit.down_weighted} orders beyond the robust bound count linearly")
    return _made(
        orders,
        fit.scale,
        fit.b / (8 * math.pi**2),
        covariance / np.array([[1, 8 * math.pi**2], [8 * math.pi**2, 64 * math.pi**4]]),
        chi_squared=chi_squared,
        calculated=fit.scale * trial * np.exp(-fit.b * (_q_squared(orders) / (16 * math.pi**2))),
        points=np.zeros((0, 3)),
        assumptions=("the reference is right but for scale and u², and u² is common to all of the stack",),
        notes=notes,
    )


def damping_by_envelope(orders: FilmOrders, envelope: ArrayLike | None = None, *, centric: bool = True) -> Damping:
    """Scale and u² without a reference: |F|² scattered at random about a smooth envelope.

    ⟨|F_l|²⟩ = k² E_l exp(−q² u²), |F|² distributed about its mean as of layers at random places: with a mirror
    of relative variance 2, without of 1 (Wilson, Acta Cryst. 2 (1949) 318). Maximum quasi-likelihood of gamma
    distributions with logarithmic link (McCullagh & Nelder, Generalized Linear Models, 1989, ch. 8), measured
    σ's added to their variance; its covariance holds that scatter, which by far outweighs the σ's.

    Parameters
    ----------
    orders : FilmOrders
    envelope : array_like, shape (n,), optional
        E_l above zero, such as Σ f² of the layer's content; by default the same at all orders.
    centric : bool
        Whether the stack has mirrors.

    Raises
    ------
    InputError
        Fewer than four orders or three that are not zero, an envelope of another length or not above zero.
    TransformError
        The fit did not converge.
    """
    count = orders.count
    if count < 4 or np.count_nonzero(orders.amplitude) < 3:
        raise InputError(
            "amplitude", f"has {count} orders, too few for an envelope", "give a reference, or more orders"
        )
    smooth = np.ones(count) if envelope is None else as_vector(envelope, count, "envelope")
    refuse_rows(smooth <= 0, "envelope", "is not above zero", "give Σf² or another positive envelope")
    q_squared = _q_squared(orders)
    reduced = orders.amplitude**2 / smooth
    errors = np.zeros(count) if orders.sigma is None else orders.sigma
    # Variance of a square: 4F²σ² + 2σ⁴, which does not vanish with F.
    noise = errors * np.sqrt(4 * orders.amplitude**2 + 2 * errors**2) / smooth
    scatter = 2.0 if centric else 1.0
    # q² in its own size, so that the two columns are alike.
    size = float(q_squared.max())
    design = np.stack([np.ones(count), -q_squared / size], axis=1)
    parameters = np.array([math.log(float(reduced.mean())), 0.0])
    for _ in range(ROUNDS):
        mean = np.exp(design @ parameters)
        weight = 1 / (scatter + (noise / mean) ** 2)
        curvature = np.linalg.inv(design.T @ (weight[:, None] * design))
        # The score of one strong order must not throw the next mean to where the exponential overflows.
        step = np.clip(curvature @ design.T @ (weight * (reduced / mean - 1)), -1, 1)
        parameters = parameters + step
        if np.abs(step).max() < 1e-10:
            break
    else:
        raise TransformError("the fit of an envelope did not converge")
    mean = np.exp(design @ parameters)
    z = (reduced / mean - 1) / np.sqrt(scatter + (noise / mean) ** 2)
    chi_squared, degrees = float(z @ z), count - 2
    notes = [
        "an envelope knows nothing of the stack: one strong or weak order moves u² by as much as its σ, and more "
        "where the amplitudes are not those of layers at random"
    ]
    if count < FEW:
        notes.append(f"{count} orders are too few for an envelope: take scale and u² as guesses")
    if special.chdtr(degrees, chi_squared) < UNLIKELY:
        notes.append(
            "the orders follow the envelope more closely than layers at random would: σ's are on the safe side"
        )
    scaling = np.array([0.5, 1 / size])
    starts = np.arange(0, max(count - GROUPS + 1, 1), GROUPS)
    members = np.diff(np.append(starts, count))
    means = np.add.reduceat(reduced, starts) / members
    spread = np.sqrt(np.add.reduceat(scatter * mean**2 + noise**2, starts)) / members
    return _made(
        orders,
        math.exp(parameters[0] / 2),
        float(parameters[1]) / size,
        curvature * np.outer(scaling, scaling),
        chi_squared=chi_squared,
        calculated=np.sqrt(smooth * mean),
        points=np.stack([np.add.reduceat(q_squared, starts) / members, means, spread], axis=1),
        assumptions=(
            "amplitudes are those of layers at random places, " + ("with" if centric else "without") + " mirrors",
            "the envelope is " + ("the same at all orders" if envelope is None else "as given"),
        ),
        notes=notes,
    )


def cumulative_correction(orders: FilmOrders, g: float, *, reach: float | None = None) -> FilmOrders:
    """Amplitudes with what cumulative disorder spread out of the lines put back.

    Parameters
    ----------
    g : float
        σ_d/d of successive spacings, as from `engine.films.widths`.
    reach : float, optional
        The lines were summed within ±reach of the distance between orders (at most ½) without a
        background; by default above a level background through the valleys.

    Raises
    ------
    InputError
        g negative or not finite, reach outside 0…½, or an order of which less than a tenth is left.
    """
    size = float(as_vector([g], 1, "g")[0])
    if size < 0:
        raise InputError("g", "is negative", "give σ_d/d, 0 or more")
    if reach is not None and not 0 < reach <= 0.5:
        raise InputError("reach", "is not within 0 and ½", "give a part of the distance between orders")
    share = share_above_valley(orders.order, size) if reach is None else share_within(orders.order, size, reach)
    refuse_rows(share < 0.1, "order", "has less than a tenth of its intensity in the line", "leave these orders out")
    factors = share**-0.5
    how = "above its valleys" if reach is None else f"within ±{reach:g} of the distance between orders"
    words = f"divided by the root of each line's part {how}, of cumulative disorder g = {size:g}"
    return replace(
        orders,
        amplitude=orders.amplitude * factors,
        sigma=None if orders.sigma is None else orders.sigma * factors,
        applied=(*orders.applied, words),
    )


def _made(
    orders: FilmOrders,
    scale: float,
    u_squared: float,
    covariance: FloatArray,
    *,
    chi_squared: float,
    calculated: FloatArray,
    points: FloatArray,
    assumptions: tuple[str, ...],
    notes: list[str],
) -> Damping:
    spread = math.sqrt(float(covariance[1, 1]))
    u = math.sqrt(u_squared) if u_squared > 0 else None
    if u_squared < -spread:
        notes.append(f"u² = {u_squared:.3g} Å² is negative, which no displacement explains: check the corrections")
    elif u_squared < 2 * spread:
        notes.append(f"u² = {u_squared:.3g} ± {spread:.2g} Å² is not seen beyond its error")
    return Damping(
        scale=scale,
        scale_sigma=scale * math.sqrt(float(covariance[0, 0])),
        u_squared=u_squared,
        u_squared_sigma=spread,
        u=u,
        u_sigma=None if u is None else spread / (2 * u),
        b=8 * math.pi**2 * u_squared,
        b_sigma=8 * math.pi**2 * spread,
        covariance=covariance,
        cumulative=None if u is None else 2 * u / orders.period,
        chi_squared=chi_squared,
        degrees=orders.count - 2,
        order=orders.order,
        calculated=calculated,
        points=points,
        assumptions=assumptions,
        notes=tuple(notes),
    )


def _q_squared(orders: FilmOrders) -> FloatArray:
    return np.asarray((2 * np.pi * orders.order / orders.period) ** 2)


def _reflections(orders: FilmOrders, observed: FloatArray, sigma: FloatArray | None) -> Reflections:
    return Reflections(
        lattice=Lattice.from_period(orders.period),
        indices=orders.order[:, None],
        quantity="amplitude",
        observed=observed,
        sigma=sigma,
        phase=None,
        phase_sigma=None,
        merit=None,
        row=np.arange(orders.count, dtype=np.int64),
        scale="arbitrary",
    )
