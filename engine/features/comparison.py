"""Two densities on one cell: how alike they are, exactly, from their coefficients.

By Parseval's theorem (1/V) ∫ n₁ n₂ dV = Σ_G n₁(G) conj n₂(G) over all G, so that correlation, scale
and differences over the cell need no grid. By shells of resolution the correlation is that of
Harauz & van Heel, Optik 73 (1986) 146.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np

from engine.arrays import BoolArray, ComplexArray, FloatArray, IntArray, as_choice
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.features.linear import Density, density_of
from engine.fields import Treatment
from engine.lattice import Lattice
from engine.shells import equal_shells

Terms = Literal["all", "common"]
LATTICE_TOLERANCE = 1e-3


@dataclass(frozen=True, slots=True, kw_only=True)
class ShellComparison:
    """By shells of resolution, from low to high; a number that is undefined is NaN.

    Attributes
    ----------
    d_max, d_min : float64, shape (S,)
        Largest and smallest spacing in each, Å.
    both, first_only, second_only : int64, shape (S,)
        Terms, one of each Friedel pair.
    correlation : float64, shape (S,)
        Re Σ n₁ conj n₂ / √(Σ|n₁|² Σ|n₂|²).
    mean_cosine : float64, shape (S,)
        Of the phase differences, weighted by the products of the amplitudes.
    """

    d_max: FloatArray
    d_min: FloatArray
    both: IntArray
    first_only: IntArray
    second_only: IntArray
    correlation: FloatArray
    mean_cosine: FloatArray


@dataclass(frozen=True, slots=True, kw_only=True)
class Comparison:
    """Two densities n₁ and n₂ on one cell.

    Terms are counted one of each Friedel pair, the zero term apart. A number that is undefined,
    because one of the densities does not vary, is NaN.

    Attributes
    ----------
    matched, first_only, second_only : int
        Terms in both, and in one alone.
    correlation : float
        Correlation coefficient of the two over the cell; the zero term has no part in it.
    scale, offset : float
        k and c that make ∫ (n₁ − k n₂ − c)² least; c in the unit of n₁.
    scale_sigma : float or None
        Standard uncertainty of k, the two sets' errors taken as independent of each other.
    rms_difference : float
        Root of the mean of (n₁ − n₂)² over the cell, as the two are.
    rms_residual : float
        The same of n₁ − k n₂ − c.
    r_value : float
        Σ|n₁ − k n₂| / Σ|n₁| over the coefficients as complex numbers, the zero term left out.
    amplitude_scale, amplitude_r_value : float
        k_A = Σ|n₁||n₂| / Σ|n₂|² and Σ||n₁| − k_A|n₂|| / Σ|n₁|.
    mean_cosine : float
        Mean of cos(φ₁ − φ₂) over matched terms, weighted by |n₁||n₂|.
    mean_phase_difference : float
        Mean of |φ₁ − φ₂| with the same weights, degrees.
    shells : ShellComparison
    contains, omits : tuple of str
        What is in the uncertainty of k, and what is not.
    assumptions, notes : tuple of str
    """

    matched: int
    first_only: int
    second_only: int
    correlation: float
    scale: float
    offset: float
    scale_sigma: float | None
    rms_difference: float
    rms_residual: float
    r_value: float
    amplitude_scale: float
    amplitude_r_value: float
    mean_cosine: float
    mean_phase_difference: float
    shells: ShellComparison
    contains: tuple[str, ...]
    omits: tuple[str, ...]
    assumptions: tuple[str, ...]
    notes: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class TermWeights:
    """One number Σ_G t_G n_G with t_G listed by indices, one of each Friedel pair; 0 elsewhere.

    Attributes
    ----------
    indices : int64, shape (T, d)
        Distinct.
    weights : complex128, shape (T,)
    """

    indices: IntArray
    weights: ComplexArray

    @property
    def count(self) -> int:
        return 1

    def factors(self, lattice: Lattice, indices: IntArray) -> ComplexArray:
        number, _ = _numbered(self.indices, indices)
        mine, theirs = number
        made = np.zeros(max(int(mine.max(initial=-1)), int(theirs.max(initial=-1))) + 1, dtype=np.complex128)
        made[mine] = self.weights
        return made[theirs][None, :]


def compare(
    first: CoefficientSet,
    second: CoefficientSet,
    treatment: Treatment | None = None,
    *,
    terms: Terms = "all",
    shells: int | None = None,
    tolerance: float = LATTICE_TOLERANCE,
    names: tuple[str, str] = ("first", "second"),
) -> Comparison:
    """Compare two densities on one lattice.

    Parameters
    ----------
    first, second : CoefficientSet
        Of real densities, without a difference of origin or setting: none is looked for.
    treatment : Treatment, optional
        Of the field density, applied to each; a window ends at each set's own G_max.
    terms : {"all", "common"}
        The densities as they are, a term that is absent from one being zero in it; or both made
        from the terms that they share alone.
    shells : int, optional
        Shells of resolution with equal numbers of terms; as many as hold 50 each, 1 to 10, by default.
    tolerance : float
        Largest difference of lattices that are taken as one: half that of the products a_i·a_j, which
        is about that of a length, relative to the longest direct vector (squared).
    names : tuple of str
        What refusals and notes call the two.

    Raises
    ------
    InputError
        The lattices differ, a density is complex, no term is left, or as
        `engine.fields.multipliers` and `engine.shells.equal_shells`.
    """
    as_choice(terms, get_args(Terms), "terms")
    _same_lattice(first.lattice, second.lattice, tolerance, names)
    one, two = (density_of(given, treatment, name=name) for given, name in zip((first, second), names, strict=True))
    (in_one, in_two), indices = _numbered(one.series.indices, two.series.indices)
    a, b = np.zeros(len(indices), dtype=np.complex128), np.zeros(len(indices), dtype=np.complex128)
    has_one, has_two = np.zeros(len(indices), dtype=np.bool_), np.zeros(len(indices), dtype=np.bool_)
    a[in_one], b[in_two] = one.series.values, two.series.values
    has_one[in_one], has_two[in_two] = True, True
    waves = indices.any(axis=1)
    if not waves.any():
        raise InputError(names[0], f"and {names[1]} hold no terms but the mean", "give sets with more terms")
    mean_one, mean_two = float(a[~waves].real.sum()), float(b[~waves].real.sum())
    a, b, has_one, has_two, indices = a[waves], b[waves], has_one[waves], has_two[waves], indices[waves]
    both = has_one & has_two
    counts = (int(both.sum()), int((has_one & ~both).sum()), int((has_two & ~both).sum()))
    if terms == "common":
        if not both.any():
            raise InputError(names[0], f"and {names[1]} share no term", "compare all terms")
        a, b, indices = a[both], b[both], indices[both]
        has_one = has_two = both = both[both]
    cross, power_one, power_two = float((a @ b.conj()).real), _power(a), _power(b)
    scale = _ratio(cross, power_two)
    residual = a - scale * b
    amplitude_scale = _ratio(float(np.abs(a) @ np.abs(b)), power_two)
    scale_sigma, contains, omits = _scale_sigma((one, two), indices, a, b, scale, names)
    return Comparison(
        matched=counts[0],
        first_only=counts[1],
        second_only=counts[2],
        correlation=_ratio(cross, float(np.sqrt(power_one * power_two))),
        scale=scale,
        offset=mean_one - scale * mean_two,
        scale_sigma=scale_sigma,
        rms_difference=float(np.sqrt(2 * _power(a - b) + (mean_one - mean_two) ** 2)),
        rms_residual=float(np.sqrt(2 * _power(residual))),
        r_value=_ratio(float(np.abs(residual).sum()), float(np.abs(a).sum())),
        amplitude_scale=amplitude_scale,
        amplitude_r_value=_ratio(float(np.abs(np.abs(a) - amplitude_scale * np.abs(b)).sum()), float(np.abs(a).sum())),
        mean_cosine=_ratio(cross, float(np.abs(a) @ np.abs(b))),
        mean_phase_difference=_phase_difference(a, b),
        shells=_by_shell(first.lattice, indices, a, b, has_one, has_two, shells),
        contains=contains,
        omits=omits,
        assumptions=_assumptions(terms),
        notes=_notes(one, two, names),
    )


def _same_lattice(one: Lattice, two: Lattice, tolerance: float, names: tuple[str, str]) -> None:
    if one.dimension != two.dimension:
        raise InputError(
            "lattice",
            f"of {names[0]} has {one.dimension} dimensions, that of {names[1]} has {two.dimension}",
            "compare densities on one lattice",
        )
    # By their metric: densities in fractional coordinates do not know how a cell stands in space.
    metric_one, metric_two = one.vectors @ one.vectors.T, two.vectors @ two.vectors.T
    longest = float(max(one.lengths.max(), two.lengths.max()))
    apart = float(np.abs(metric_one - metric_two).max()) / (2 * longest**2)
    if not apart <= tolerance:
        raise InputError(
            "lattice",
            f"of {names[0]} and that of {names[1]} differ by {apart:.2g} of the longest vector, over {tolerance:g}",
            "compare densities on one lattice, or raise the tolerance",
        )


def _numbered(one: IntArray, two: IntArray) -> tuple[tuple[IntArray, IntArray], IntArray]:
    """Numbers of rows of index among the distinct rows of both, and those rows."""
    distinct, number = np.unique(np.concatenate([one, two]), axis=0, return_inverse=True)
    flat = number.reshape(-1).astype(np.int64)
    return (flat[: len(one)], flat[len(one) :]), distinct


def _power(values: ComplexArray) -> float:
    return float(np.vdot(values, values).real)


def _ratio(above: float, below: float) -> float:
    return above / below if below > 0 else float("nan")


def _phase_difference(a: ComplexArray, b: ComplexArray) -> float:
    product = a * b.conj()
    weight = np.abs(product)
    return _ratio(float(np.rad2deg(weight @ np.abs(np.angle(product)))), float(weight.sum()))


def _scale_sigma(
    pair: tuple[Density, Density],
    indices: IntArray,
    a: ComplexArray,
    b: ComplexArray,
    scale: float,
    names: tuple[str, str],
) -> tuple[float | None, tuple[str, ...], tuple[str, ...]]:
    """σ of k = Re Σ a conj b / Σ|b|²: δk = Re Σ [conj b δa + (conj a − 2k conj b) δb] / Σ|b|²."""
    power = 2 * _power(b)
    known = [density.errors is not None for density in pair]
    if not any(known) or not power > 0:
        return None, (), ()
    variance = 0.0
    contains: list[str] = []
    omits: list[str] = []
    weights = (b.conj() / power, (a - 2 * scale * b).conj() / power)
    for density, name, strengths in zip(pair, names, weights, strict=True):
        found = density.covariance(TermWeights(indices, strengths))
        if found is None:
            omits.append(f"{name}: all errors, of which none were given")
            continue
        variance += float(found[0, 0])
        contains.extend(f"{name}: {words}" for words in density.contains)
        omits.extend(f"{name}: {words}" for words in density.omits)
    contains.append("the errors of the two sets taken as independent of each other")
    return float(np.sqrt(max(variance, 0.0))), tuple(contains), tuple(omits)


def _by_shell(
    lattice: Lattice,
    indices: IntArray,
    a: ComplexArray,
    b: ComplexArray,
    has_one: BoolArray,
    has_two: BoolArray,
    count: int | None,
) -> ShellComparison:
    shells = equal_shells(lattice, indices, count)
    place, size = shells.of(lattice, indices), shells.count
    spacing = lattice.spacings(indices)
    largest, smallest = np.zeros(size), np.full(size, np.inf)
    np.maximum.at(largest, place, spacing)
    np.minimum.at(smallest, place, spacing)

    def summed(values: FloatArray | BoolArray) -> FloatArray:
        return np.asarray(np.bincount(place, values, size), dtype=np.float64)

    def counted(chosen: BoolArray) -> IntArray:
        return np.bincount(place[chosen], minlength=size).astype(np.int64)

    cross = summed((a * b.conj()).real)
    norm = np.sqrt(summed(np.abs(a) ** 2) * summed(np.abs(b) ** 2))
    product = summed(np.abs(a) * np.abs(b))
    undefined = np.full(size, np.nan)
    return ShellComparison(
        d_max=largest,
        d_min=smallest,
        both=counted(has_one & has_two),
        first_only=counted(has_one & ~has_two),
        second_only=counted(has_two & ~has_one),
        correlation=np.divide(cross, norm, out=undefined.copy(), where=norm > 0),
        mean_cosine=np.divide(cross, product, out=undefined.copy(), where=product > 0),
    )


def _assumptions(terms: str) -> tuple[str, ...]:
    domain = (
        "all terms are compared: one that is absent from a set is zero in its density"
        if terms == "all"
        else "only terms that are in both sets are compared"
    )
    return (
        domain,
        "correlation, scale and R values leave the zero term out",
        "the two densities are taken on one origin and in one setting",
    )


def _notes(one: Density, two: Density, names: tuple[str, str]) -> tuple[str, ...]:
    notes = [f"{name}: {words}" for density, name in zip((one, two), names, strict=True) for words in density.notes]
    if one.zero_known != two.zero_known:
        missing = names[1] if one.zero_known else names[0]
        notes.append(f"Offset and rms difference hold a mean density that {missing} does not have.")
    if one.unit != two.unit:
        notes.append(f"The units differ, {one.unit} and {two.unit}: the scale converts, differences without it do not.")
    return tuple(notes)
