"""Criteria as functions of signs: quadratic forms, and sums over samples of half a period.

With s the signs, n(z) = n̄ + (2/d) Σ_l s_l A_l cos(2π l z/d). A right sign set leaves errors e(z) of known covariance:
(2/d)² Σ v_l cos cos′, v_l the variance of F_l. What a criterion says of linear functionals of n is then
χ² = rᵀ C⁻¹ r, quadratic in s; its determinant is the same for all s.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import linalg

from engine.arrays import FloatArray, IntArray
from engine.films.signs.criteria import Criteria, Flat, KnownDensity, KnownTotal, LeastStructure, NonNegative
from engine.films.signs.tolerance import Stack

PER_ELEMENT = 4
"""Samples in an element of resolution d/2L: a sum over them is exact for products of up to seven factors."""
ROUGH = 0.1
"""Part of the expected variance that is allowed at spacings too fine for the expected strengths to be trusted."""
LEAST_SIGMA = 1e-6
"""Of the profile's rms: errors are never taken as smaller."""


@dataclass(frozen=True, slots=True)
class Quadratic:
    """χ² = sᵀ form s + 2 line·s + constant, or factor · ln(1 + χ²/tail) where there is a tail; shapes (n, n), (n,).

    `freedom`: what the value of right signs comes to.
    """

    form: FloatArray
    line: FloatArray
    constant: float
    freedom: float
    tail: float | None = None
    factor: float = 1.0

    def values(self, signs: FloatArray) -> FloatArray:
        """Of sign sets, shape (S, n) -> (S,)."""
        return self.of_square(np.einsum("si,si->s", signs @ self.form, signs) + 2 * (signs @ self.line) + self.constant)

    def of_square(self, square: FloatArray) -> FloatArray:
        """From χ² to the value."""
        found = np.maximum(square, 0.0)
        return np.asarray(found if self.tail is None else self.factor * np.log1p(found / self.tail))


@dataclass(frozen=True, slots=True)
class Below:
    """Σ_j (limit_j − Σ_l s_l design_lj)²₊; shapes (M,), (n, M)."""

    design: FloatArray
    limit: FloatArray
    freedom: float

    def values(self, signs: FloatArray) -> FloatArray:
        """Of sign sets, shape (S, n) -> (S,)."""
        lack = np.maximum(self.limit - signs @ self.design, 0.0)
        return np.asarray(np.einsum("sj,sj->s", lack, lack))


@dataclass(frozen=True, slots=True)
class Roughness:
    """factor · ln(Σ_j √((Σ_l s_l design_lj)² + soft_j)/least); shapes (n, M), (M,). No sum is below `least`."""

    design: FloatArray
    soft: FloatArray
    least: float
    factor: float

    def values(self, signs: FloatArray) -> FloatArray:
        """Of sign sets, shape (S, n) -> (S,)."""
        slopes = signs @ self.design
        return self.of_sum(np.sqrt(slopes * slopes + self.soft).sum(axis=1))

    def of_sum(self, total: FloatArray) -> FloatArray:
        """From (parts of) the sum to (a lower bound of) the value."""
        return np.asarray(self.factor * np.log(np.maximum(total, self.least) / self.least))


@dataclass(frozen=True, slots=True)
class Terms:
    """All criteria of one stack; every part is 0 or more.

    Attributes
    ----------
    count : int
        Signs, n.
    below : Below or None
    quadratics : tuple of Quadratic
        Flat regions, densities, totals.
    roughness : Roughness or None
    """

    count: int
    below: Below | None
    quadratics: tuple[Quadratic, ...]
    roughness: Roughness | None

    def parts(self, signs: IntArray) -> FloatArray:
        """Every criterion's part, in the order of `Criteria.names`; signs (S, n) -> (S, P)."""
        factors = signs.astype(np.float64)
        terms = (self.below, *self.quadratics, self.roughness)
        return np.stack([term.values(factors) for term in terms if term is not None], axis=1)

    def scores(self, signs: IntArray) -> FloatArray:
        """Sums of the parts; (S, n) -> (S,)."""
        return np.asarray(self.parts(signs).sum(axis=1))

    def forms(self) -> tuple[Quadratic, ...]:
        """The quadratic criteria, those without a tail in one."""
        plain = [one for one in self.quadratics if one.tail is None]
        others = [one for one in self.quadratics if one.tail is not None]
        whole = Quadratic(
            sum((one.form for one in plain), np.zeros((self.count, self.count))),
            sum((one.line for one in plain), np.zeros(self.count)),
            sum(one.constant for one in plain),
            sum(one.freedom for one in plain),
        )
        return (whole, *others)

    def expected(self) -> float:
        """What the parts of right signs come to, least structure aside; of `below` at the most."""
        return sum(one.freedom for one in self.quadratics) + (0.0 if self.below is None else self.below.freedom)

    def blind_to_shift(self, odd: FloatArray) -> bool:
        """Whether turning all signs where `odd`, shape (n,), is 1 changes no part: no position tells the mirrors apart.

        Samples of half a period and the errors on them are the same from either mirror.
        """
        even = 1 - odd
        for one in self.quadratics:
            mixed = np.abs(odd[:, None] * one.form * even).sum() + np.abs(odd * one.line).sum()
            if mixed > 1e-9 * (np.abs(one.form).sum() + np.abs(one.line).sum()):
                return False
        return True


def build_terms(stack: Stack, criteria: Criteria) -> Terms:
    """The criteria as functions of a stack's signs; both have been checked."""
    targets: tuple[KnownDensity | KnownTotal, ...] = (*criteria.densities, *criteria.totals)
    return Terms(
        count=stack.count,
        below=None if criteria.non_negative is None else _below(stack, criteria, criteria.non_negative),
        quadratics=(
            *(_flat(stack, region) for region in criteria.flat),
            *(_known(stack, criteria, one) for one in targets),
        ),
        roughness=None if criteria.least_structure is None else _roughness(stack, criteria.least_structure),
    )


def half_period(stack: Stack) -> tuple[FloatArray, FloatArray]:
    """Positions z/d from mirror to mirror, and how many elements of resolution each stands for; shapes (M,).

    The trapezoidal rule on half a period of an even function is that on the whole, exact for trigonometric
    polynomials.
    """
    count = PER_ELEMENT * stack.top
    weights = np.full(count + 1, 1 / PER_ELEMENT)
    weights[[0, -1]] *= 0.5
    return np.arange(count + 1) / (2 * count), weights


def cosines(order: IntArray, position: FloatArray) -> FloatArray:
    """cos(2π l x), x = z/d; shapes (n,), (M,) -> (n, M)."""
    return np.asarray(np.cos(2 * np.pi * np.outer(order, position)))


def _variance(stack: Stack, position: FloatArray) -> FloatArray:
    """Of a right profile at z/d, that of the mean aside; (M,) -> (M,)."""
    order, variance = stack.errors()
    found = (2 / stack.period) ** 2 * (variance @ cosines(order, position) ** 2)
    return np.asarray(np.maximum(found, _least_variance(stack)))


def _least_variance(stack: Stack) -> float:
    power = float(stack.amplitude @ stack.amplitude + stack.other_variance.sum())
    return LEAST_SIGMA**2 * 2 * power / stack.period**2


def _below(stack: Stack, criteria: Criteria, wanted: NonNegative) -> Below:
    position, weights = half_period(stack)
    scale = np.sqrt(wanted.weight * weights / (_variance(stack, position) + criteria.mean_sigma**2))
    waves = (2 / stack.period) * stack.amplitude[:, None] * cosines(stack.order, position)
    # Where the density is at the floor, its errors are on either side of it alike.
    return Below(waves * scale, (wanted.floor - (criteria.mean or 0.0)) * scale, 0.5 * wanted.weight * stack.top)


def _flat(stack: Stack, region: Flat) -> Quadratic:
    """Deviations from the interval's own mean, which may be any; nearly all of their errors are of unmeasured orders.

    Where the strength of these is estimated from n amplitudes, its scale has the distribution of 1/χ² with n degrees
    of freedom, and integrating over it makes the normal distribution of K deviations a t distribution:
    −2 ln L = (n + K) ln(1 + χ²/(n − 2)), with χ² by the mean strength (Gelman et al., Bayesian Data Analysis, 3rd ed.,
    2013, §3.2 and appendix A).
    """
    width = region.stop - region.start
    elements = max(2 * stack.top * _unlike(region, stack.period), 1.0)
    # Exact for products of two of the waves measured.
    nodes, weights = np.polynomial.legendre.leggauss(int(np.ceil(2 * np.pi * stack.top * width / stack.period)) + 8)
    weights = 0.5 * weights
    position = (region.start + 0.5 * width * (1 + nodes)) / stack.period
    order, variance = stack.errors()
    waves = (2 / stack.period) * cosines(order, position)
    waves = (waves - (waves @ weights)[:, None]) * np.sqrt(weights)
    expected = float(weights @ _variance(stack, position))
    # A white error of variance σ² has σ²/N of it along each of N independent directions.
    white = (ROUGH * expected + region.sigma**2) / elements
    errors = (waves.T * variance) @ waves
    factor = linalg.cho_factor(errors + white * np.eye(weights.size), lower=True)
    made = stack.amplitude[:, None] * waves[: stack.count]
    form = made @ linalg.cho_solve(factor, made.T)
    freedom = float(np.trace(linalg.cho_solve(factor, errors)))
    form, line = 0.5 * (form + form.T), np.zeros(stack.count)
    if stack.known_by is None:
        return Quadratic(region.weight * form, line, 0.0, region.weight * freedom)
    tail, lift = max(stack.known_by - 2.0, 1.0), region.weight * (stack.known_by + freedom)
    return Quadratic(form, line, 0.0, lift * float(np.log1p(freedom / tail)), tail, lift)


def _unlike(region: Flat, period: float) -> float:
    """Part of the period that an interval holds when mirror images are counted once, at most 1/2."""
    first = np.floor(2 * region.start / period)
    # Pieces between mirrors; every other one is seen reversed.
    mirrors = first + np.arange(4)
    low = np.clip(2 * region.start / period - mirrors, 0, 1)
    high = np.clip(2 * region.stop / period - mirrors, 0, 1)
    reversed_ = mirrors % 2 == 1
    low, high = np.where(reversed_, 1 - high, low), np.where(reversed_, 1 - low, high)
    ends = np.unique(np.concatenate([low, high]))
    middles = 0.5 * (ends[:-1] + ends[1:])
    covered = ((low[:, None] <= middles) & (middles <= high[:, None])).any(axis=0)
    return 0.5 * float(np.diff(ends) @ covered)


def _known(stack: Stack, criteria: Criteria, target: KnownDensity | KnownTotal) -> Quadratic:
    """((t·s + n̄·w − value)/σ)², t the functional of each order: a mean, a value or an integral."""
    order, variance = stack.errors()
    factor = (2 / stack.period) * _means(order, target.start, target.stop, stack.period)
    length = target.stop - target.start if isinstance(target, KnownTotal) else 1.0
    factor = factor * length
    whole = target.sigma**2 + float(variance @ factor**2) + (length * criteria.mean_sigma) ** 2
    line = factor[: stack.count] * stack.amplitude
    lack = length * (criteria.mean or 0.0) - target.value
    weight = target.weight / whole
    return Quadratic(weight * np.outer(line, line), weight * lack * line, weight * lack**2, target.weight)


def _means(order: IntArray, start: float, stop: float | None, period: float) -> FloatArray:
    """Mean of cos(2π l z/d) from `start` to `stop` in closed form, or its value at `start`; (n,) -> (n,)."""
    if stop is None:
        return cosines(order, np.array([start / period]))[:, 0]
    half = 0.5 * (stop - start) / period
    middle = cosines(order, np.array([0.5 * (start + stop) / period]))[:, 0]
    return np.asarray(middle * np.sinc(2 * order * half))


def _roughness(stack: Stack, wanted: LeastStructure) -> Roughness:
    """Slopes below their own error are counted as that: ⟨|x + e|⟩ ≈ √(x² + 2σ²/π), right for large x and for none.

    Orders beyond the highest are left out, of the profile and of the error: compared are profiles as cut.
    """
    position, weights = half_period(stack)
    order, variance = stack.errors()
    inside = order <= stack.top
    order, variance = order[inside], variance[inside]
    # Of the slope in density per element of resolution, summed over elements.
    step = 2 / stack.period * np.pi / stack.top * order[:, None] * np.sin(2 * np.pi * np.outer(order, position))
    soft = 2 / np.pi * (variance @ step**2) * weights**2
    design = stack.amplitude[:, None] * step[: stack.count] * weights
    # |∫ n′ sin| ≤ ∫ |n′|: the quadrature of the product is exact, 2π l A_l/d of the whole period.
    least = float((np.pi * stack.order * stack.amplitude / stack.period).max())
    return Roughness(design, soft, least, 2 * wanted.weight * stack.top)
