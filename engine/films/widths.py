"""Thickness and stacking disorder of a film from the widths of its lines against order.

All widths are compared as integral breadths in units of 1/d, β = δq d/2π:

    thickness alone      β = 1/N                    L = N d = 2π K/Δq  (Scherrer 1918; Δq a FWHM, K its ratio
                                                    to the integral breadth)
    second-kind disorder β = 1/N + (π g l)²          g = σ_d/d  (Hosemann & Bagchi, Direct Analysis of
                                                    Diffraction by Matter, 1962)
    microstrain          β = 1/N + 2ε l              that is 4ε tan θ in 2θ  (Stokes & Wilson, Proc. Phys.
                                                    Soc. 56 (1944) 174)
    stack of N layers    widths of the lattice factor of N layers with second-kind disorder itself (see
                         `engine.films.paracrystal`); no K, no rule of addition

The second form adds what does not add: of a stack β N = 1/D(u), u = 2π² g² l² N, and 1 + u/2 exceeds that by up
to ½, half the part of the thickness; nor is the ratio K the same at all orders. Of widths simulated with
g = 0.01…0.05 and N = 10…100, lines narrower than a quarter of their spacing, ``stack`` gives back N and g within
2 %, ``paracrystal`` with the Gaussian K an N 7…90 % too large and a g 18…40 % too small; with the Lorentzian K
g is up to 25 % too small. Where disorder matters, report ``stack``; the sum is there for published figures.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Literal, get_args

import numpy as np
from scipy import optimize, special

from engine.arrays import FloatArray, as_choice, as_positive
from engine.errors import InputError, TransformError
from engine.films.line_widths import LineWidths, Measure, Rule
from engine.films.paracrystal import breadth, half_width

Shape = Literal["gaussian", "lorentzian", "laue"]
Model = Literal["size", "paracrystal", "strain", "stack"]
Kind = Literal["size", "second-kind", "strain", "undecided"]

RATIO: dict[Shape, float] = {
    "gaussian": 2 * math.sqrt(math.log(2) / math.pi),
    "lorentzian": 2 / math.pi,
    "laue": 0.8858929414,
}
"""FWHM over integral breadth: 0.9394, 0.6366, and 0.8859 of (sin Nx/sin x)² with N large."""
MODELS: tuple[Model, ...] = get_args(Model)
KINDS: dict[Model, Kind] = {"size": "size", "paracrystal": "second-kind", "strain": "strain", "stack": "second-kind"}
SEEN = 2.0
"""Standard uncertainties that a broadening must reach to be one."""
CLEAR = 4.0
"""Difference of χ² below which the data do not decide."""
UNLIKELY = 0.01
"""Probability of χ² below which a model is said not to describe the widths."""
ONE_SIDED = 1.6449
"""Standard uncertainties to a one-sided limit of 95 %."""
WIDE = 0.3
"""Of the spacing of the lines: beyond it neighbours overlap and all forms here lose their meaning."""


@dataclass(frozen=True, slots=True, kw_only=True)
class WidthFit:
    """One model fitted to the widths.

    Attributes
    ----------
    model : {"size", "paracrystal", "strain", "stack"}
    thickness, thickness_sigma : float or None
        L, Å; None where the widths do not bound it from above.
    thickness_least : float
        95 % of the weight lies above, Å.
    layers, layers_sigma : float or None
        N = L/d.
    disorder, disorder_sigma, disorder_most : float or None
        g = σ_d/d, or ε of strain; its σ is None where it came out as zero; 95 % lies below ``disorder_most``.
    spacing_sigma : float or None
        g d, Å.
    parameters : tuple of str
        What was fitted.
    values : float64, shape (p,)
    covariance : float64, shape (p, p)
    calculated : float64, shape (n,)
        Widths with the instrument's, Å⁻¹.
    pull : float64, shape (n,)
        (measured − calculated)/σ; without σ's in the measured widths' unit.
    chi_squared : float
    degrees : int
    assumptions, notes : tuple of str
    """

    model: Model
    thickness: float | None
    thickness_sigma: float | None
    thickness_least: float
    layers: float | None
    layers_sigma: float | None
    disorder: float | None
    disorder_sigma: float | None
    disorder_most: float | None
    spacing_sigma: float | None
    parameters: tuple[str, ...]
    values: FloatArray
    covariance: FloatArray
    calculated: FloatArray
    pull: FloatArray
    chi_squared: float
    degrees: int
    assumptions: tuple[str, ...]
    notes: tuple[str, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class WidthComparison:
    """Several models of the same widths.

    Attributes
    ----------
    fits : tuple of WidthFit
    preferred : {"size", "second-kind", "strain", "undecided"}
    lead : float
        By how much χ² of the preferred kind is better than the next; of ``size``, by how little another is.
    words : str
    notes : tuple of str
    """

    fits: tuple[WidthFit, ...]
    preferred: Kind
    lead: float
    words: str
    notes: tuple[str, ...]


def fit_widths(
    widths: LineWidths,
    period: float,
    model: Model = "stack",
    *,
    shape: Shape = "gaussian",
    k: float | None = None,
    addition: Literal["linear", "squares"] = "linear",
) -> WidthFit:
    """Fit one model by weighted least squares to the widths as measured, the instrument's put on the model.

    Parameters
    ----------
    widths : LineWidths
    period : float
        d, Å; taken as exact.
    model : {"size", "paracrystal", "strain", "stack"}
    shape : {"gaussian", "lorentzian", "laue"}
        Of the lines without the instrument: sets K.
    k : float, optional
        K, the FWHM over the integral breadth, where it is not that of `shape`; of no use to integral
        breadths, whose K is 1, nor to ``stack``, which computes either.
    addition : {"linear", "squares"}
        How thickness and disorder add in ``paracrystal`` and ``strain``.

    Raises
    ------
    InputError
        Fewer lines than parameters (without σ's no more than parameters), no line broader than the
        instrument, or a word or number that is not one.
    TransformError
        The fit did not converge.
    """
    d = as_positive(period, "period", "Å")
    as_choice(model, MODELS, "model")
    as_choice(shape, tuple(RATIO), "shape")
    as_choice(addition, ("linear", "squares"), "addition")
    ratio = RATIO[shape] if k is None else as_positive(k, "k", "a ratio")
    if widths.measure == "integral":
        ratio = 1.0
    count, free = widths.order.size, 1 if model == "size" else 2
    least = free if widths.sigma is not None else free + 1
    if count < least:
        raise InputError("order", f"holds {count} lines, too few for {model}", f"give at least {least}")
    unit = 2 * np.pi / d
    instrument, measured = widths.instrument / unit, widths.width / unit
    errors = np.ones(count) if widths.sigma is None else widths.sigma / unit
    _require_broadening(measured, instrument, widths, d, ratio)
    power = 2 if addition == "squares" and model in ("paracrystal", "strain") else 1
    growth = {"paracrystal": widths.order**2.0, "stack": widths.order**2.0, "strain": 2 * widths.position / unit}
    design = np.stack([np.ones(count), growth.get(model, np.zeros(count))], axis=1)[:, :free] ** power

    def pure(p: FloatArray) -> tuple[FloatArray, FloatArray]:
        if model == "stack":
            u = 2 * p[1] * design[:, 1] / p[0]
            value, slope = half_width(u) if widths.measure == "fwhm" else breadth(u)
            return p[0] * value, np.stack([value - u * slope, 2 * design[:, 1] * slope], axis=1)
        total = design @ p
        made = total ** (1 / power)
        return ratio * made, ratio * design * (made / (power * total))[:, None]

    def with_instrument(p: FloatArray) -> tuple[FloatArray, FloatArray]:
        own, by_p = pure(p)
        if widths.rule == "lorentzian":
            return own + instrument, by_p
        both = np.hypot(own, instrument)
        return both, by_p * (own / both)[:, None]

    start = _start(measured, instrument, widths.rule, design, ratio, power)
    values, at_zero = _minimum(measured, errors, with_instrument, start)
    model_widths, slopes = with_instrument(values)
    pull = (measured - model_widths) / errors
    chi_squared, degrees = float(pull @ pull), count - free
    jacobian = slopes / errors[:, None]
    curvature: FloatArray = np.asarray(np.linalg.inv(jacobian.T @ jacobian), dtype=np.float64)
    covariance = curvature
    notes: list[str] = []
    if widths.sigma is None:
        covariance = curvature * chi_squared / degrees
        notes.append("without σ every line weighs the same, and the uncertainties follow from the scatter")
    elif degrees and special.chdtrc(degrees, chi_squared) < UNLIKELY:
        covariance = curvature * chi_squared / degrees
        notes.append(
            f"{model} does not describe the widths (reduced χ² {chi_squared / degrees:.3g}); "
            "the uncertainties are enlarged by its root"
        )
    by_instrument = np.ones(count) if widths.rule == "lorentzian" else instrument / model_widths
    moved = curvature @ jacobian.T @ (by_instrument * widths.instrument_sigma / unit / errors)
    covariance = covariance + np.outer(moved, moved)
    own = pure(values)[0]
    notes += _doubts(own, values, at_zero, power, widths)
    made = _derived(model, values, covariance, at_zero, power, d)
    return WidthFit(
        model=model,
        thickness=None if made.layers is None else made.layers * d,
        thickness_sigma=None if made.layers_sigma is None else made.layers_sigma * d,
        thickness_least=made.thickness_least,
        layers=made.layers,
        layers_sigma=made.layers_sigma,
        disorder=made.disorder,
        disorder_sigma=made.disorder_sigma,
        disorder_most=made.disorder_most,
        spacing_sigma=None if model == "strain" or made.disorder is None else made.disorder * d,
        parameters=_names(model, power),
        values=values,
        covariance=covariance,
        calculated=model_widths * unit,
        pull=pull * (unit if widths.sigma is None else 1),
        chi_squared=chi_squared if widths.sigma is not None else chi_squared * unit**2,
        degrees=degrees,
        assumptions=(*widths.words, *_assumed(model, widths.measure, ratio, addition)),
        notes=tuple(notes),
    )


def compare_widths(
    widths: LineWidths,
    period: float,
    models: tuple[Model, ...] = MODELS,
    *,
    shape: Shape = "gaussian",
    k: float | None = None,
    addition: Literal["linear", "squares"] = "linear",
) -> WidthComparison:
    """Fit several models and say which the widths prefer.

    Thickness alone stands unless another model lowers χ² by 4, two standard uncertainties of its one more
    parameter; second-kind disorder and strain, which have as many, are told apart only by as much. Without
    σ's, n ln of the sum of squares stands for χ².

    Raises
    ------
    InputError
        As `fit_widths`; no model, or one that is not known.
    """
    if not models:
        raise InputError("models", "are none", "name at least one")
    known = widths.sigma is not None
    room = widths.order.size - (0 if known else 1)
    fitted = [model for model in dict.fromkeys(models) if room >= (1 if model == "size" else 2)]
    notes = [
        f"{model} is left out: {widths.order.size} lines are too few for it" for model in models if model not in fitted
    ]
    chosen = fitted or [models[0]]
    fits = tuple(fit_widths(widths, period, model, shape=shape, k=k, addition=addition) for model in chosen)
    count = widths.order.size
    scores: dict[Kind, float] = {}
    for fit in fits:
        score = fit.chi_squared if known else count * math.log(max(fit.chi_squared, 1e-300))
        kind = KINDS[fit.model]
        scores[kind] = min(score, scores.get(kind, math.inf))
    preferred, lead, words = _verdict(scores)
    return WidthComparison(fits=fits, preferred=preferred, lead=lead, words=words, notes=tuple(notes))


def _verdict(scores: dict[Kind, float]) -> tuple[Kind, float, str]:
    alone = scores.get("size")
    others = sorted((score, kind) for kind, score in scores.items() if kind != "size")
    if not others:
        return "size", 0.0, "only the thickness was fitted; nothing is compared"
    best, kind = others[0]
    named = {"second-kind": "second-kind disorder", "strain": "microstrain"}
    if alone is not None and alone - best < CLEAR:
        gain = max(alone - best, 0.0)
        return "size", gain, f"the thickness alone explains the widths: no disorder lowers χ² by more than {gain:.2g}"
    if len(others) > 1 and others[1][0] - best < CLEAR:
        gap = others[1][0] - best
        return (
            "undecided",
            gap,
            f"the lines broaden with order, but the widths do not decide between {named[kind]} and "
            f"{named[others[1][1]]}: χ² differs by {gap:.2g}, less than {CLEAR:g}",
        )
    runners = [score for score, _ in others[1:]] + ([] if alone is None else [alone])
    if not runners:
        return kind, 0.0, f"only {named[kind]} was fitted; nothing is compared"
    lead = min(runners) - best
    return kind, lead, f"the widths prefer {named[kind]}: χ² is lower by {lead:.3g} than that of the next"


def _require_broadening(
    measured: FloatArray, instrument: FloatArray, widths: LineWidths, d: float, ratio: float
) -> None:
    excess = measured - instrument
    if widths.sigma is None:
        seen, most = bool((excess > 0).any()), None
    else:
        weight = (2 * np.pi / d / widths.sigma) ** 2
        spread = math.sqrt(1 / weight.sum() + (weight @ widths.instrument_sigma * d / 2 / np.pi / weight.sum()) ** 2)
        mean, own = float(weight @ excess / weight.sum()), float(weight @ instrument / weight.sum())
        seen = bool(mean > SEEN * spread or (excess > 2 * SEEN * widths.sigma * d / 2 / np.pi).any())
        limit = max(mean, 0.0) + SEEN * spread
        most = limit if widths.rule == "lorentzian" else math.sqrt((own + limit) ** 2 - own**2)
    if not seen:
        bound = "" if most is None else f"; the film is thicker than about {ratio * d / most:.3g} Å"
        raise InputError(
            "width", f"is not broader than the instrument's beyond its errors{bound}", "resolve the lines better"
        )


def _start(
    measured: FloatArray, instrument: FloatArray, rule: Rule, design: FloatArray, ratio: float, power: int
) -> FloatArray:
    """Thickness by the narrowest line, growth by the broadest, both above zero."""
    gaussian = np.sqrt(np.maximum(measured**2 - instrument**2, 0.0))
    own = measured - instrument if rule == "lorentzian" else gaussian
    own = np.maximum(own, 0.02 * measured.max()) / ratio
    first = np.array([own.min() ** power])
    if design.shape[1] == 1:
        return first
    growth = (own.max() ** power - 0.5 * own.min() ** power) / design[own.argmax(), 1]
    return np.append(first, growth)


def _minimum(
    measured: FloatArray,
    errors: FloatArray,
    function: Callable[[FloatArray], tuple[FloatArray, FloatArray]],
    start: FloatArray,
) -> tuple[FloatArray, list[bool]]:
    """Parameters of 0 or more, and which of them the data press to zero."""
    scale = start.copy()

    def residuals(x: FloatArray) -> FloatArray:
        return np.asarray((function(x * scale)[0] - measured) / errors)

    def slopes(x: FloatArray) -> FloatArray:
        return np.asarray(function(x * scale)[1] * scale / errors[:, None])

    least = np.array([1e-9, *[0.0] * (start.size - 1)])
    found = optimize.least_squares(
        residuals, np.ones(start.size), slopes, bounds=(least, np.inf), xtol=1e-13, ftol=1e-14, gtol=1e-13
    )
    if not found.success:
        raise TransformError("the least-squares fit of the widths did not converge")
    x = np.asarray(found.x, dtype=np.float64)
    at_zero = [bool(one) for one in found.active_mask < 0]
    # A method that stays inside its bounds ends a hair beside them.
    at_zero = [flag or bool(value < 1e-6) for flag, value in zip(at_zero, x, strict=True)]
    return np.where(at_zero, least, x) * scale, at_zero


@dataclass(frozen=True, slots=True, kw_only=True)
class _Derived:
    """What the fitted parameters mean; as in `WidthFit`."""

    thickness_least: float
    layers: float | None = None
    layers_sigma: float | None = None
    disorder: float | None = None
    disorder_sigma: float | None = None
    disorder_most: float | None = None


def _derived(
    model: Model, values: FloatArray, covariance: FloatArray, at_zero: list[bool], power: int, d: float
) -> _Derived:
    sigma = np.sqrt(np.diagonal(covariance))
    held = np.where(at_zero, 0.0, values)
    # The disorder g itself is the root of what is linear in the widths.
    powers = np.array([power, 1 if model == "strain" else 2])[: values.size] * np.array([1, power])[: values.size]
    factors = np.array([1.0, 1.0 if model == "strain" else 1 / math.pi])[: values.size]
    found, most = held ** (1 / powers) * factors, (held + ONE_SIDED * sigma) ** (1 / powers) * factors
    spread = found * sigma / (powers * np.where(held > 0, held, 1.0))
    made = _Derived(thickness_least=d / float(most[0]))
    if not at_zero[0]:
        made = replace(made, layers=1 / float(found[0]), layers_sigma=float(spread[0] / found[0] ** 2))
    if values.size > 1:
        own = None if at_zero[1] else float(spread[1])
        made = replace(made, disorder=float(found[1]), disorder_most=float(most[1]), disorder_sigma=own)
    return made


def _names(model: Model, power: int) -> tuple[str, ...]:
    thickness = "1/N" if power == 1 else "1/N²"
    if model == "size":
        return (thickness,)
    if model == "strain":
        return (thickness, "ε" if power == 1 else "ε²")
    return (thickness, "(πg)²" if power == 1 else "(πg)⁴")


def _assumed(model: Model, measure: Measure, ratio: float, addition: str) -> tuple[str, ...]:
    common: tuple[str, ...] = ("the period is exact", "all columns of layers are equally thick")
    if model == "stack":
        return (*common, "successive spacings are independent", "no strain")
    if measure == "fwhm":
        common = (*common, f"the FWHM is {ratio:.4f} of the integral breadth at every order (K)")
    if model == "size":
        return (*common, "no disorder")
    rule = "plain sum" if addition == "linear" else "root of the sum of squares"
    return (*common, f"thickness and disorder add by {rule}")


def _doubts(own: FloatArray, values: FloatArray, at_zero: list[bool], power: int, widths: LineWidths) -> list[str]:
    doubts = []
    if at_zero[0]:
        doubts.append("the widths give no upper bound of the thickness")
    elif values[0] ** (1 / power) > 0.2:
        doubts.append("fewer than five layers: the layers' own scattering shapes the lines as much as their number")
    if len(at_zero) > 1 and at_zero[1]:
        doubts.append("the widths do not grow with order: the disorder is below its limit")
    if own.max() > WIDE:
        doubts.append(
            f"lines are as wide as {own.max():.2g} of their spacing, where they overlap: leave out the broadest"
        )
    if len(values) == 2 and np.ptp(widths.order) < 2:
        doubts.append("neighbouring orders alone tell thickness and disorder poorly apart")
    return doubts
