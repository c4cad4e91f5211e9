"""Fields of a series of sets side by side: profiles, slices or boxes that share their axes."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from engine.arrays import AnyArray
from engine.coefficients import CoefficientSet
from engine.combination.combine import combination
from engine.combination.matching import keys_of, positions_in
from engine.combination.modes import SCALES_OMITTED, scale_sigma_of
from engine.combination.scales import AS_GIVEN
from engine.combination.series import Aligned, Variable
from engine.errors import InputError, TooLargeError
from engine.evaluate import perform, prepare
from engine.fields import Treatment
from engine.sampling.grids import AffineGrid, Axis, Sampling
from engine.synthesis import Demand, Progress


@dataclass(frozen=True, slots=True, kw_only=True)
class StackedField:
    """Fields of a series on the same samples.

    Attributes
    ----------
    values : array, shape (S, *samples), or (S, *samples, components)
    sigma : array of the same shape, or None
        Standard uncertainties, those of the scales included.
    variable : Variable
        Of the first axis.
    sampling : Sampling
    axes : tuple of Axis
        Of the samples; empty for free points.
    components : tuple of str
    unit : str
    reference : int
    difference : bool
        Whether the reference was subtracted from all.
    applied, notes : tuples of str, one tuple a set
    contains, omits : tuples of str, one tuple a set
        Which errors are in its σ, and which are not.
    """

    values: AnyArray
    sigma: AnyArray | None
    variable: Variable
    sampling: Sampling
    axes: tuple[Axis, ...]
    components: tuple[str, ...]
    unit: str
    reference: int
    difference: bool
    applied: tuple[tuple[str, ...], ...]
    notes: tuple[tuple[str, ...], ...]
    contains: tuple[tuple[str, ...], ...]
    omits: tuple[tuple[str, ...], ...]


def evaluate_stack(
    series: Aligned,
    sampling: Sampling,
    treatment: Treatment | None = None,
    demand: Demand | None = None,
    *,
    difference: bool = False,
    uncertainty: bool = False,
    max_bytes: int | None = None,
    progress: Progress | None = None,
) -> StackedField:
    """The field of every set of a series on the same samples.

    Parameters
    ----------
    difference : bool
        The field of each set less the reference, coefficient by coefficient: of the density and all that is
        linear in it the difference of the fields, of the autocorrelation that of the difference. The row of the
        reference itself is zero and exact.
    uncertainty : bool
        Whether σ is wanted too.
    max_bytes : int, optional
        Bound of all values and the workspace together.
    progress : callable, optional
        Called with the sets done and in all; may raise to end the work.

    Raises
    ------
    InputError
        A difference of responses, σ of scales in a field that is not linear, or as `engine.evaluate.prepare`.
    TooLargeError
        More than `max_bytes` would be needed.
    """
    treatment = treatment or Treatment()
    if difference and treatment.field == "response":
        raise InputError("difference", "of responses has no meaning", "leave it out, or choose another field")
    count = len(series.sets)
    sources = [_Row(one, modes, treatment) for one, modes in zip(series.sets, series.scale_modes, strict=True)]
    if difference:
        sources = [_less(series, number, treatment) for number in range(count)]
    first = prepare(series.sets[0], sampling, treatment, demand)
    whole = count * first.bytes_output * (1 + uncertainty)
    if max_bytes is not None and whole > max_bytes:
        raise TooLargeError(
            "samples",
            f"the values of {count} sets would take {whole / 2**20:,.0f} MiB, more than the limit of "
            f"{max_bytes / 2**20:,.0f} MiB",
            "ask for fewer samples or single precision, or raise the limit",
        )
    room = None if max_bytes is None else max_bytes - whole + first.bytes_output * (1 + uncertainty)
    values = np.zeros((count, *first.shape), dtype=first.dtype)
    sigma: AnyArray | None = np.zeros(values.shape, dtype=values.real.dtype) if uncertainty else None
    told: list[tuple[tuple[str, ...], ...]] = []
    for number, row in enumerate(sources):
        if row.exact:
            told.append((("the reference less itself",), (), (), ()))
        else:
            work = prepare(row.source, sampling, row.treatment, demand, uncertainty=uncertainty, max_bytes=room)
            made = perform(work, out=values[number])
            contains, omits = ((), ()) if made.sigma is None else (made.sigma.contains, made.sigma.omits)
            if sigma is not None and made.sigma is not None:
                sigma[number] = made.sigma.values
                if row.modes:
                    by_scale = scale_sigma_of(row.modes, sampling, row.treatment, demand)
                    sigma[number] = np.hypot(sigma[number], by_scale)
                    contains = (*contains, "the scales of the sets to each other")
                    omits = tuple(one for one in omits if one not in (SCALES_OMITTED, "the uncertainty of the scale"))
            told.append((made.applied, made.notes, contains, omits))
        if progress is not None:
            progress(number + 1, count)
    return StackedField(
        values=values,
        sigma=sigma,
        variable=series.variable,
        sampling=sampling,
        axes=sampling.axes(series.sets[0].lattice) if isinstance(sampling, AffineGrid) else (),
        components=first.parts.components,
        unit=first.parts.unit,
        reference=series.reference,
        difference=difference,
        applied=tuple(one[0] for one in told),
        notes=tuple(one[1] for one in told),
        contains=tuple(one[2] for one in told),
        omits=tuple(one[3] for one in told),
    )


@dataclass(frozen=True, slots=True)
class _Row:
    """What is summed for one set."""

    source: CoefficientSet
    modes: tuple[CoefficientSet, ...]
    treatment: Treatment
    exact: bool = False


def _less(series: Aligned, number: int, treatment: Treatment) -> _Row:
    """A set less the reference."""
    reference = series.sets[series.reference]
    if number == series.reference:
        return _Row(reference, (), treatment, exact=True)
    own = series.phases == "own"
    # The merits of complex numbers must be applied before these are subtracted.
    early = own and treatment.apply_merit
    both = [replace(one, scale_sigma=0.0) for one in (series.sets[number], reference)]
    made = combination(
        both,
        (1.0, -1.0),
        scale=AS_GIVEN,
        phases="own" if own else 1,
        apply_merit=early,
        names=(series.variable.label(number), series.variable.label(series.reference)),
    )
    source = replace(made.coefficients, scale_sigma=reference.scale_sigma if series.fitted else 0.0)
    modes = [
        _on(mode, source, apply_merit=early)
        for mode in (*series.scale_modes[number], *series.scale_modes[series.reference])
    ]
    return _Row(source, tuple(modes), replace(treatment, apply_merit=treatment.apply_merit and not early))


def _on(mode: CoefficientSet, source: CoefficientSet, *, apply_merit: bool) -> CoefficientSet:
    """A mode of a scale, of either sign, on the terms of a difference."""
    keys, wanted = keys_of((mode, source))
    rows, _ = positions_in(keys, wanted)
    values = mode.values[rows]
    if apply_merit and mode.merit is not None:
        values = values * mode.merit[rows]
    return replace(
        source, values=values, sigma=None, phase_sigma=None, plane_errors=None, scale_sigma=0.0, tally=mode.tally
    )
