"""The scale that brings one set's amplitudes to another's: none, a number, or fitted on the common terms."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np

from engine.amplitudes.scaling import RelativeScale, relative_scale
from engine.arrays import FloatArray, IntArray, as_choice, as_positive
from engine.coefficients import CoefficientSet
from engine.combination.matching import Matched, match
from engine.errors import InputError
from engine.lattice import Lattice
from engine.reflections import Reflections
from engine.symmetry.reflections import orbits

ScaleKind = Literal["as_given", "given", "fitted"]


@dataclass(frozen=True, slots=True, kw_only=True)
class ScaleChoice:
    """How a set is brought to the scale of another; make one with `given_scale`, `fitted_scale`, or take `AS_GIVEN`.

    Attributes
    ----------
    kind : {"as_given", "given", "fitted"}
    k, k_sigma : float
        Of a given scale.
    b : float
        Of a given scale, Å².
    displacement, robust : bool
        Of a fitted one: whether B is fitted too, and whether the pull of outliers is bounded.
    """

    kind: ScaleKind
    k: float = 1.0
    k_sigma: float = 0.0
    b: float = 0.0
    displacement: bool = False
    robust: bool = False

    def __post_init__(self) -> None:
        as_choice(self.kind, get_args(ScaleKind), "scale")
        as_positive(self.k, ("scale", "k"), "amplitude of the first over that of the other")
        if not (math.isfinite(self.k_sigma) and self.k_sigma >= 0):
            raise InputError(("scale", "k_sigma"), "is negative or not finite", "give a standard uncertainty")
        if not math.isfinite(self.b):
            raise InputError(("scale", "b"), "is not a finite number", "give B in Å²")


AS_GIVEN = ScaleChoice(kind="as_given")


def given_scale(k: float, *, k_sigma: float = 0.0, b: float = 0.0) -> ScaleChoice:
    """k exp(−B s²), s = |G|/4π, known from elsewhere.

    Raises
    ------
    InputError
        k is not above zero, its σ negative, or a number not finite.
    """
    return ScaleChoice(kind="given", k=k, k_sigma=k_sigma, b=b)


def fitted_scale(*, displacement: bool = False, robust: bool = False) -> ScaleChoice:
    """k, and with `displacement` B, by least squares on the common amplitudes; see `engine.amplitudes.scaling`."""
    return ScaleChoice(kind="fitted", displacement=displacement, robust=robust)


@dataclass(frozen=True, slots=True, kw_only=True)
class Scale:
    """k exp(−B s²), s = |G|/4π, that multiplies a set's coefficients.

    Attributes
    ----------
    k, k_sigma : float
    b, b_sigma : float
        Å²; zero where B was not asked for.
    covariance : float64, shape (2, 2)
        Of (ln k, B).
    fit : RelativeScale or None
        Of a fitted scale: terms used, agreement, outliers.
    words : str
        What was done.
    """

    k: float
    k_sigma: float
    b: float
    b_sigma: float
    covariance: FloatArray
    fit: RelativeScale | None
    words: str

    def factors(self, lattice: Lattice, indices: IntArray) -> FloatArray:
        """k exp(−B s²) of each term; (N, d) -> (N,)."""
        if self.b == 0:
            return np.full(len(indices), self.k)
        return np.asarray(self.k * np.exp(-self.b * lattice.sine_over_wavelength(indices) ** 2))

    def displacements(self, lattice: Lattice, indices: IntArray) -> tuple[FloatArray, ...]:
        """Relative change of each term by each of the independent errors of the scale, one σ; each (N,)."""
        if not self.covariance.any():
            return ()
        (ln_k, both), (_, b) = self.covariance.tolist()
        if b == 0:
            return (np.full(len(indices), math.sqrt(ln_k)),)
        # The Cholesky root of the covariance of (ln k, B), B first: k alone is left for the second.
        s_squared = lattice.sine_over_wavelength(indices) ** 2
        along_b = both / math.sqrt(b) - math.sqrt(b) * s_squared
        rest = math.sqrt(max(ln_k - both**2 / b, 0.0))
        return (np.asarray(along_b), np.full(len(indices), rest))


REFERENCE = Scale(
    k=1.0, k_sigma=0.0, b=0.0, b_sigma=0.0, covariance=np.zeros((2, 2)), fit=None, words="the scale of the others"
)


def find_scale(
    reference: CoefficientSet,
    other: CoefficientSet,
    choice: ScaleChoice,
    *,
    matched: Matched | None = None,
    name: str = "second",
) -> Scale:
    """The scale that brings the other set to the reference.

    A fit takes one term of each orbit that symmetry common to both makes, since the others repeat the same
    measurement, and leaves the zero term out. Its σ's are those of both sets' amplitudes.

    Parameters
    ----------
    matched : Matched, optional
        Of the two sets, where it is known already.
    name : str
        Of the other set, in words.

    Raises
    ------
    InputError
        Different units with nothing that converts them, or as `engine.amplitudes.scaling.relative_scale`.
    TransformError
        The fit did not converge.
    """
    if choice.kind == "as_given":
        if other.unit != reference.unit:
            raise InputError(
                "scale",
                f"is left as given, but {name} is in {other.unit} and the first in {reference.unit}",
                "fit a scale or give the number that converts",
            )
        return Scale(
            k=1.0,
            k_sigma=0.0,
            b=0.0,
            b_sigma=0.0,
            covariance=np.zeros((2, 2)),
            fit=None,
            words=f"{name}: scale taken as given",
        )
    if choice.kind == "given":
        covariance = np.zeros((2, 2))
        covariance[0, 0] = (choice.k_sigma / choice.k) ** 2
        falling = f" and by exp(−B s²) with B = {choice.b:.4g} Å²" if choice.b else ""
        return Scale(
            k=choice.k,
            k_sigma=choice.k_sigma,
            b=choice.b,
            b_sigma=0.0,
            covariance=covariance,
            fit=None,
            words=f"{name}: multiplied by the given scale {choice.k:.6g}{falling}",
        )
    found = _fitted(reference, other, choice, matched or match(reference, other), name)
    falling = ""
    if choice.displacement:
        falling = f" and by exp(−B s²) with B = {found.b:.4g} ± {found.b_sigma:.2g} Å²"
    bounded = f", {found.down_weighted} of them down-weighted" if choice.robust else ""
    # A fit without σ's weighs all alike, which is told.
    told = "".join(f"; {note}" for note in found.notes)
    return Scale(
        k=found.scale,
        k_sigma=found.scale_sigma,
        b=found.b,
        b_sigma=found.b_sigma,
        covariance=found.covariance,
        fit=found,
        words=f"{name}: multiplied by {found.scale:.6g} ± {found.scale_sigma:.2g}{falling}, fitted on {found.common} "
        f"independent amplitudes{bounded} (agreement {100 * found.agreement:.3g} %){told}",
    )


def _fitted(
    reference: CoefficientSet, other: CoefficientSet, choice: ScaleChoice, matched: Matched, name: str
) -> RelativeScale:
    rows, places = matched.first, matched.second
    indices = reference.indices[rows]
    kept = np.flatnonzero(indices.any(axis=1))
    if matched.group is not None and kept.size:
        gathered = orbits(indices[kept], matched.group, friedel=reference.real)
        member = np.zeros(gathered.count, dtype=np.int64)
        # Any member will do; the last written is kept.
        member[gathered.orbit] = kept
        kept = np.sort(member)
    rows, places = rows[kept], places[kept]
    try:
        return relative_scale(
            _amplitudes(reference, reference, rows),
            _amplitudes(other, reference, places, rows),
            displacement=choice.displacement,
            robust=choice.robust,
        )
    except InputError as fault:
        where = name if fault.path == ("other",) else ".".join(str(part) for part in fault.path)
        raise InputError(("scale", where), fault.reason, fault.cure, fault.rows) from fault


def _amplitudes(
    source: CoefficientSet, reference: CoefficientSet, rows: IntArray, at_reference: IntArray | None = None
) -> Reflections:
    """Amplitudes of the chosen rows, under the cell and the indices of the reference."""
    named = rows if at_reference is None else at_reference
    return Reflections(
        lattice=reference.lattice,
        indices=reference.indices[named],
        quantity="amplitude",
        observed=np.abs(source.values[rows]),
        sigma=None if source.sigma is None else source.sigma[rows],
        phase=None,
        phase_sigma=None,
        merit=None,
        row=named,
        scale="arbitrary",
    )
