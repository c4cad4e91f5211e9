"""Difference and linear combination of coefficient sets on one cell.

With phases of their own coefficients are combined as complex numbers, Σ c_j k_j n_j. With given phases the
amplitudes are, and (Σ c_j k_j |n_j|) exp(iφ) is the map of amplitude differences (Henderson & Moffat, Acta
Cryst. B27 (1971) 1414, for its errors and its heights).
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

import numpy as np

from engine.arrays import BoolArray, as_choice, as_vector
from engine.coefficients import CoefficientSet
from engine.combination.build import Combined, build
from engine.combination.gathering import Gathered, gather
from engine.combination.matching import CELL_TOLERANCE
from engine.combination.scales import ScaleChoice
from engine.errors import InputError

Phases = Literal["own", "first", "second"]
Missing = Literal["omit", "zero_first", "zero_second", "zero_both"]


def difference(
    first: CoefficientSet,
    second: CoefficientSet,
    *,
    scale: ScaleChoice,
    phases: Phases | CoefficientSet = "own",
    missing: Missing = "omit",
    apply_merit: bool = False,
    cell_tolerance: float = CELL_TOLERANCE,
) -> Combined:
    """first − second, the second brought to the scale of the first.

    Parameters
    ----------
    scale : ScaleChoice
        `AS_GIVEN`, `given_scale(k)` or `fitted_scale()`.
    phases : {"own", "first", "second"} or CoefficientSet
        ``own``: n_1 − k n_2 as complex numbers. Else (|n_1| − k |n_2|) exp(iφ) with the phases of one set or of a
        third; a negative difference turns the phase by π.
    missing : {"omit", "zero_first", "zero_second", "zero_both"}
        Terms in one set alone are left out, or the named set is taken as zero there. A zero term that one set
        lacks is always left out: a mean that is not known is not zero.
    apply_merit : bool
        Whether coefficients with phases of their own are multiplied by their figures of merit.

    Raises
    ------
    InputError
        Sets that cannot be combined (`match`), a scale that cannot be found (`find_scale`), phases that do not
        fit, or no term left.
    """
    as_choice(missing, ("omit", "zero_first", "zero_second", "zero_both"), "missing")
    zeros = {"omit": (), "zero_first": (0,), "zero_second": (1,), "zero_both": (0, 1)}[missing]
    if isinstance(phases, str):
        as_choice(phases, ("own", "first", "second"), "phases")
    given: Literal["own"] | int | CoefficientSet = "own"
    if phases != "own":
        given = int(phases == "second") if isinstance(phases, str) else phases
    return combination(
        (first, second),
        (1.0, -1.0),
        scale=scale,
        phases=given,
        absent_is_zero=zeros,
        apply_merit=apply_merit,
        cell_tolerance=cell_tolerance,
        names=("first", "second"),
    )


def combination(
    sets: Sequence[CoefficientSet],
    weights: Sequence[float],
    *,
    scale: ScaleChoice,
    phases: Literal["own"] | int | CoefficientSet = "own",
    absent_is_zero: Sequence[int] = (),
    apply_merit: bool = False,
    cell_tolerance: float = CELL_TOLERANCE,
    names: Sequence[str] | None = None,
) -> Combined:
    """Σ c_j k_j n_j of sets brought to the scale of the first.

    Parameters
    ----------
    weights : sequence of float, length S
        c_j.
    phases : "own", int or CoefficientSet
        ``own``, or the number of the set, from 0, or a further set whose phases all amplitudes take.
    absent_is_zero : sequence of int
        Sets whose absent terms count as zero; terms that any other set lacks are left out.
    names : sequence of str, optional
        What messages call the sets.

    Other parameters, what is raised and what comes back: as `difference`.
    """
    if names is None:
        names = [f"set {number + 1}" for number in range(len(sets))]
    factors = as_vector(weights, len(sets), "weights")
    check_merit(sets, phases, apply_merit)
    gathered = gather(sets, names, scale, cell_tolerance=cell_tolerance)
    optional = np.isin(np.arange(len(sets)), np.asarray(absent_is_zero, dtype=np.int64))
    kept = np.all(gathered.present | optional[:, None], axis=0)
    # Mean densities that are not known are not zero.
    kept &= ~gathered.zero | gathered.present.all(axis=0)
    terms = np.flatnonzero(kept).astype(np.int64)
    shares = [np.full(terms.size, factor) for factor in factors]
    operation = " + ".join(f"{factor:g} × {name}" for factor, name in zip(factors, names, strict=True))
    words = [operation.replace("+ -", "− "), *_missing_words(gathered, optional)]
    return build(gathered, terms, shares, phases, words, apply_merit=apply_merit, cell_tolerance=cell_tolerance)


def check_merit(sets: Sequence[CoefficientSet], phases: object, apply_merit: bool) -> None:
    """Refuse figures of merit where they cannot be applied."""
    if not apply_merit:
        return
    if not isinstance(phases, str):
        raise InputError(
            "apply_merit",
            "belongs to coefficients with phases of their own; those with given phases keep the figure of merit",
            "apply it when the result is summed",
        )
    if all(one.merit is None for one in sets):
        raise InputError("apply_merit", "the sets have no figures of merit", "leave it out")


def _missing_words(gathered: Gathered, optional: BoolArray) -> list[str]:
    made = []
    for number, held in enumerate(gathered.present):
        lacking = int(np.count_nonzero(~held))
        if lacking:
            fate = "taken as zero there" if optional[number] else "left out"
            made.append(f"{lacking} terms that {gathered.names[number]} lacks are {fate}")
    return made
