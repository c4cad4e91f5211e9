"""From a request to its coefficient set: the one it holds, or that combined with a second one."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import replace
from typing import Literal

import numpy as np

from engine.coefficients import CoefficientSet
from engine.combination import (
    AS_GIVEN,
    Combined,
    ScaleChoice,
    average,
    difference,
    fitted_scale,
    given_scale,
    with_scale_errors,
)
from engine.combination.modes import SCALES_APART
from engine.errors import InputError, TransformError
from engine.fields import STEEPEST
from service.interpret_set import one_set
from service.problems import at, located, moved
from service.schemas.coefficient_set import CoefficientSetIn
from service.schemas.combination import CombinationIn, RelativeScaleIn
from service.schemas.treatment import SetRequestIn

NOT_FITTED = ("scale", "cannot be fitted: the fit did not converge", "check the two sets, or give the scale")


def coefficient_set(request: SetRequestIn, *, max_coefficients: int) -> CoefficientSet:
    """The set of a request: expanded by its symmetry, cut to its resolution limits, combined with a second one.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    made = one_set(request, request.set, max_coefficients=max_coefficients)
    if request.combination is None:
        return made
    return combined(request, request.combination, made, max_coefficients)


def other_set(
    request: SetRequestIn, given: CoefficientSetIn, place: tuple[str | int, ...], *, max_coefficients: int
) -> CoefficientSet:
    """A further set of a request, at another place in its body, under the same limits.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    with moved(*place):
        return one_set(request, given, max_coefficients=max_coefficients)


def combined(
    request: SetRequestIn, asked: CombinationIn, first: CoefficientSet, max_coefficients: int
) -> CoefficientSet:
    """A difference or an average.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    second = other_set(request, asked.other, ("combination", "with"), max_coefficients=max_coefficients)
    if (asked.third is None) == (asked.phases == "third"):
        raise at(
            ("combination", "third"),
            "is absent" if asked.third is None else "is given, and its phases are not asked for",
            'give it together with "phases": "third", or leave both out',
        )
    if asked.kind == "difference" and "weights" in asked.model_fields_set:
        raise at(("combination", "weights"), "is for averages", "leave it out")
    merit = bool(getattr(request, "apply_merit", False))
    with _placed(asked):
        scale = scale_choice(asked.scale, (first, second))
        if asked.kind == "average":
            if asked.phases not in ("own", "first"):
                raise at(("combination", "phases"), f"{asked.phases} is not for averages", "choose own or first")
            if asked.missing != "omit":
                raise InputError(
                    "missing", "is for differences", "leave it out: each term is averaged over what there is"
                )
            averaged = average(
                (first, second),
                weights=asked.weights,
                scale=scale,
                phases="own" if asked.phases == "own" else "first",
                apply_merit=merit,
            )
            agreement = "not known without uncertainties"
            if averaged.chi_squared is not None:
                agreement = f"chi squared {averaged.chi_squared:.3g} per degree of freedom ({averaged.degrees})"
            return _told(averaged.combined, f"agreement of the sets: {agreement}")
        phases: Literal["own", "first", "second"] | CoefficientSet
        if asked.third is not None:
            phases = other_set(request, asked.third, ("combination", "third"), max_coefficients=max_coefficients)
        else:
            phases = "own" if asked.phases == "own" else "second" if asked.phases == "second" else "first"
        return _told(difference(first, second, scale=scale, phases=phases, missing=asked.missing, apply_merit=merit))


@contextmanager
def _placed(asked: CombinationIn) -> Iterator[None]:
    """Faults of a combination, where the sets stand in the body."""
    other: tuple[str | int, ...] = ("combination", "with")
    with located(
        renamed={
            **{name: ("combination", name) for name in ("scale", "missing", "weights", "phases")},
            **dict.fromkeys(("first", "set 1"), ("set",)),
            **dict.fromkeys(("second", "set 2", "sets"), other),
            "phases": ("combination", "phases" if asked.third is None else "third"),
        }
    ):
        try:
            yield
        except InputError as fault:
            if fault.path[:1] == ("scale",) and fault.path[1:] in (("second",), ("set 2",)):
                # A scale that cannot be fitted to a set: the set is at fault.
                raise InputError("second", fault.reason, fault.cure) from fault
            raise
        except (TransformError, np.linalg.LinAlgError) as fault:
            raise InputError(*NOT_FITTED) from fault


def scale_choice(asked: RelativeScaleIn, sets: Sequence[CoefficientSet]) -> ScaleChoice:
    """How a set is brought to the scale of another.

    Raises
    ------
    InputError
        A member that does not belong to the kind, one that is absent, or a B beyond all measure for the sets.
    """
    allowed = {"as_given": set(), "given": {"k", "k_sigma", "b"}, "fitted": {"displacement", "robust"}}[asked.kind]
    for name in sorted(asked.model_fields_set - {"kind"} - allowed):
        raise InputError(("scale", name), f"has no meaning for the kind {asked.kind}", "leave it out")
    if asked.kind == "fitted":
        return fitted_scale(displacement=asked.displacement, robust=asked.robust)
    if asked.kind == "as_given":
        return AS_GIVEN
    if asked.k is None:
        raise InputError(("scale", "k"), "is absent", "give it: amplitude of the first over that of the second")
    if (asked.k_sigma or 0.0) > asked.k:
        raise InputError(("scale", "k_sigma"), "exceeds k", "give the standard uncertainty of k, in its own unit")
    steepest = max(float(one.lattice.sine_over_wavelength(one.indices).max(initial=0.0)) for one in sets) ** 2
    if -(asked.b or 0.0) * steepest > STEEPEST:
        raise InputError(
            ("scale", "b"), f"multiplies the outermost coefficients by more than exp({STEEPEST:g})", "give B in Å²"
        )
    return given_scale(asked.k, k_sigma=asked.k_sigma or 0.0, b=asked.b or 0.0)


def _told(made: Combined, *more: str) -> CoefficientSet:
    """The combined set with all that is to be known of it in its history."""
    result = with_scale_errors(made.coefficients, made.scale_modes)
    notes = [note for note in made.notes if note != SCALES_APART]
    return replace(result, history=(*result.history, *more, *notes))
