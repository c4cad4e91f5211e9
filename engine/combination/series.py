"""Sets of one crystal along a variable of the run (time, temperature, dose), brought to one of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import FloatArray, IntArray, as_choice, as_count, as_vector
from engine.coefficients import CoefficientSet
from engine.combination.build import build
from engine.combination.gathering import Gathered, gather
from engine.combination.matching import CELL_TOLERANCE
from engine.combination.modes import scale_modes
from engine.combination.scales import Scale, ScaleChoice
from engine.errors import InputError

Common = Literal["intersection", "each"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Variable:
    """What a series runs along.

    Attributes
    ----------
    name : str
        Such as ``temperature``.
    values : float64, shape (S,)
        Of each set.
    unit : str
        Empty for a plain number.
    """

    name: str
    values: FloatArray
    unit: str = ""

    @classmethod
    def of(cls, name: str, values: ArrayLike, unit: str = "") -> Variable:
        """Checked.

        Raises
        ------
        InputError
            No list of finite numbers.
        """
        size = np.size(np.asarray(values, dtype=object))
        return cls(name=name, values=as_vector(values, size, "variable"), unit=unit)

    def label(self, number: int) -> str:
        """Name, value and unit of one set, in words."""
        return f"{self.name} = {self.values[number]:g} {self.unit}".rstrip()


@dataclass(frozen=True, slots=True, kw_only=True)
class Aligned:
    """S sets on one cell, on the scale of one of them.

    Attributes
    ----------
    sets : tuple of CoefficientSet
        In the order given; with an intersection all have the same indices.
    variable : Variable
    reference : int
        Number of the set that the others were brought to.
    scales : tuple of Scale
        What multiplied each.
    scale_modes : tuple of tuples of CoefficientSet
        Of each set: see `Combined`.
    phases : {"own", "reference"}
    left_out : tuple of int
        Terms of each set that are not in its aligned one.
    fitted : bool
        Whether the scales were fitted: the scale of the reference is then that of all.
    notes : tuple of str
    """

    sets: tuple[CoefficientSet, ...]
    variable: Variable
    reference: int
    scales: tuple[Scale, ...]
    scale_modes: tuple[tuple[CoefficientSet, ...], ...]
    phases: Literal["own", "reference"]
    left_out: tuple[int, ...]
    fitted: bool
    notes: tuple[str, ...]


def aligned(
    sets: Sequence[CoefficientSet],
    variable: Variable,
    *,
    scale: ScaleChoice,
    reference: int = 0,
    common: Common = "intersection",
    phases: Literal["own", "reference"] = "own",
    cell_tolerance: float = CELL_TOLERANCE,
) -> Aligned:
    """Bring the sets of a series to the cell, the scale and the terms of one of them.

    Parameters
    ----------
    sets : sequence of S CoefficientSet
    variable : Variable
        Of S values.
    scale : ScaleChoice
    reference : int
        Number of the set that the others are brought to, from 0.
    common : {"intersection", "each"}
        Keep the terms that all sets have, or each set's own. Densities of different terms differ by their
        termination as well.
    phases : {"own", "reference"}
        With those of the reference amplitudes alone change along the series.

    Raises
    ------
    InputError
        No sets, a variable of another length, a reference that is none of them, or as `difference`.
    """
    as_choice(common, ("intersection", "each"), "common")
    as_choice(phases, ("own", "reference"), "phases")
    if not sets:
        raise InputError("sets", "is empty", "give at least one set")
    if variable.values.size != len(sets):
        raise InputError("variable", f"has {variable.values.size} values for {len(sets)} sets", "give one a set")
    if as_count(reference, "reference", least=0) >= len(sets):
        raise InputError("reference", f"is {reference} of {len(sets)} sets", "give a set's number, from 0")
    # The reference comes first where sets are gathered.
    order = [reference, *(number for number in range(len(sets)) if number != reference)]
    labels = [variable.label(number) for number in order]
    gathered = gather([sets[number] for number in order], labels, scale, cell_tolerance=cell_tolerance)
    own = phases == "own"
    usable = gathered.present & gathered.phased(0)
    if own:
        usable = np.stack([gathered.phased(place) for place in range(len(order))])
    if common == "intersection":
        usable = np.broadcast_to(usable.all(axis=0), usable.shape)
    if not usable.any(axis=1).all():
        raise InputError("sets", "have no terms with phases in common", "check that they are indexed alike")
    made: dict[int, tuple[CoefficientSet, tuple[CoefficientSet, ...]]] = {}
    for place, number in enumerate(order):
        one, terms = gathered.only(place), np.flatnonzero(usable[place]).astype(np.int64)
        if own:
            made[number] = _brought(one, terms)
            continue
        done = build(one, terms, [np.ones(terms.size)], sets[reference], [], apply_merit=False)
        made[number] = done.coefficients, done.scale_modes
    return Aligned(
        sets=tuple(made[number][0] for number in range(len(sets))),
        variable=variable,
        reference=reference,
        scales=tuple(gathered.scales[order.index(number)] for number in range(len(sets))),
        scale_modes=tuple(made[number][1] for number in range(len(sets))),
        phases=phases,
        left_out=tuple(one.count - made[number][0].count for number, one in enumerate(sets)),
        fitted=scale.kind == "fitted",
        notes=gathered.notes,
    )


def _brought(one: Gathered, terms: IntArray) -> tuple[CoefficientSet, tuple[CoefficientSet, ...]]:
    """A set's terms on the scale of the reference, all columns kept; and the modes of its scale."""
    source, rows, factors = one.sets[0], one.rows[0][terms], one.factors(0, terms)
    own_scale = one.choice.kind != "fitted"

    def part(column: FloatArray | None, times: FloatArray | float = 1.0) -> FloatArray | None:
        return None if column is None else column[rows] * times

    errors = source.plane_errors
    brought = replace(
        source,
        lattice=one.leader.lattice,
        unit=one.leader.unit,
        indices=np.asfortranarray(one.indices[terms]),
        values=source.values[rows] * factors,
        phase_known=source.phase_known[rows],
        sigma=part(source.sigma, factors),
        phase_sigma=part(source.phase_sigma),
        merit=part(source.merit),
        plane_errors=None if errors is None else errors.select(rows).scaled(factors),
        tally=replace(source.tally, zero_term=one.zero_term(terms)),
        history=(*source.history, *one.words()),
        scale_sigma=0.0 if own_scale else one.leader.scale_sigma,
    )
    return brought, scale_modes(one, terms, [brought.values], brought)
