"""A trial structure of a layer stack: sheets of atoms and uniform slabs, and its amplitudes in closed form.

With F(q) = ∫ n(z) exp(iqz) dz over one period, q = 2πl/d:

    plane   strength · occupancy · exp(−q²u²/2) exp(iqz)
    slab    density · t · sin(qt/2)/(qt/2) · exp(−q²r²/2) exp(iqz)

u the root mean square displacement of a plane of atoms along z, t the thickness of a slab about z and r the root
mean square roughness of its edges (an edge of the form of an error function is a sharp one convoluted with a
Gaussian). The strength of a plane is a number per area, or Σ f(s)/area of a composition, s = q/4π, with the
form factors f0 of `engine.scattering` for X-rays and scattering lengths for neutrons. A factor exp(−B s²) common to
all parts and a scale complete the amplitude.

Where the stack is symmetric the parts given are one half: each has its image at −z, but for those that are
their own image, centred at z = 0 or z = d/2.

A background (the solvent's density) fills the cell but for the room of the slabs and what planes displace.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import ComplexArray, FloatArray, as_choice, as_positive
from engine.errors import InputError
from engine.films.trial.parts import REFINABLE, Part, Plane, Slab, refuse_not_finite, strengths
from engine.lattice import LONGEST, SHORTEST
from engine.scattering import FORM_FACTOR_LIMIT, Probe

Symmetry = Literal["1", "m", "-1"]

ON_MIRROR = 1e-6
"""Å from z = 0 or d/2 within which a part is its own image."""
OVERALL = ("scale", "B", "background")
"""Numbers of a stack that can be refined, beside those of its parts."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Stack:
    """Parts of one period; make one with `of`.

    Attributes
    ----------
    period : float
        d, Å.
    parts : tuple of Plane or Slab
    symmetry : {"1", "m", "-1"}
        "m" and "-1" say the same of a stack: n(−z) = n(z).
    probe : {"xray", "neutron"}
        What compositions scatter.
    background : float
        Density of what fills the rest.
    B : float
        Å², of exp(−B s²).
    scale : float
        Measured amplitudes over calculated ones.
    unit : str
        Of the density.
    """

    period: float
    parts: tuple[Part, ...]
    symmetry: Symmetry = "1"
    probe: Probe = "xray"
    background: float = 0.0
    B: float = 0.0
    scale: float = 1.0
    unit: str = "arbitrary"

    @property
    def symmetric(self) -> bool:
        """Whether every part has its image."""
        return self.symmetry != "1"

    def value(self, name: str) -> float:
        """The number of a name such as ``sheet.position``, ``scale`` or ``B``.

        Raises
        ------
        InputError
            No such number.
        """
        where = self._find(name)
        return float(getattr(self if where is None else self.parts[where], name.rpartition(".")[2]))

    def with_values(self, names: Sequence[str], values: ArrayLike) -> Stack:
        """The same with other numbers, unchecked but for their names."""
        parts, overall = list(self.parts), {}
        for name, value in zip(names, np.asarray(values, dtype=np.float64).tolist(), strict=True):
            where, member = self._find(name), name.rpartition(".")[2]
            if where is None:
                overall[member] = value
            else:
                parts[where] = replace(parts[where], **{member: value})
        return replace(self, parts=tuple(parts), **overall)

    def with_period(self, period: float) -> Stack:
        """The same in another period: positions stay in Å, but what sits on the mirror at d/2 stays on it."""
        turns = [round(part.position / (self.period / 2)) for part in self.parts]
        parts = tuple(
            replace(part, position=turn * period / 2) if part.central else part
            for part, turn in zip(self.parts, turns, strict=True)
        )
        return replace(self, period=period, parts=parts)

    def _find(self, name: str) -> int | None:
        part, dot, member = name.rpartition(".")
        if not dot and name in OVERALL:
            return None
        for number, entry in enumerate(self.parts):
            if entry.name == part and member in REFINABLE[type(entry)]:
                return number
        known = [f"{entry.name}.{word}" for entry in self.parts for word in REFINABLE[type(entry)]]
        raise InputError("parameters", f"names {name!r}, which is none", f"name of {', '.join([*OVERALL, *known])}")

    @classmethod
    def of(
        cls,
        period: float,
        parts: Sequence[Part],
        *,
        symmetry: Symmetry = "1",
        probe: Probe = "xray",
        background: float = 0.0,
        B: float = 0.0,
        scale: float = 1.0,
        unit: str | None = None,
    ) -> Stack:
        """A trial stack of one period.

        The unit of the density is that of the probe where a part has a formula, and else as given or arbitrary.

        Raises
        ------
        InputError
            No part, a name twice, a slab thicker than the period or across a mirror that it is not centred on,
            a composition without form factor or scattering length, numbers out of range.
        """
        length = as_positive(period, "period", "Å")
        if not SHORTEST <= length <= LONGEST:
            raise InputError("period", f"is {length:g} Å", f"give Å, between {SHORTEST:g} and {LONGEST:g}")
        as_choice(symmetry, get_args(Symmetry), "symmetry")
        as_choice(probe, get_args(Probe), "probe")
        as_positive(scale, "scale", "measured over calculated")
        refuse_not_finite("stack", background=background, B=B)
        if not parts:
            raise InputError("parts", "is empty", "give at least one plane or slab")
        names = [part.name for part in parts]
        if len(set(names)) < len(names):
            raise InputError("parts", "holds a name twice", "give every part a name of its own")
        made = cls(
            period=length,
            parts=tuple(_placed(part, length, symmetry) for part in parts),
            symmetry=symmetry,
            probe=probe,
            background=float(background),
            B=float(B),
            scale=float(scale),
            unit=_unit(parts, probe, unit),
        )
        for part in made.parts:
            _check_place(made, part)
            if isinstance(part, Plane) and part.content is not None:
                strengths(part, np.zeros(1), probe)
        return made


def calculated(model: Stack, orders: ArrayLike) -> ComplexArray:
    """F_l of a stack for orders l (0 and negative ones included), shape (n,); scale and B not left out.

    Raises
    ------
    InputError
        Orders that are not whole, or beyond the reach of the form factors.
    """
    number = np.atleast_1d(np.asarray(orders, dtype=np.float64))
    if number.ndim != 1 or (number != np.rint(number)).any():
        raise InputError("orders", "holds what is not a whole number", "give the orders l of 00l")
    q = 2 * np.pi * number / model.period
    s = np.abs(q) / (4 * np.pi)
    if (s > FORM_FACTOR_LIMIT).any():
        raise InputError("orders", f"reach beyond s = {FORM_FACTOR_LIMIT:g} Å⁻¹", "leave the highest out")
    made = np.where(number == 0, model.background * model.period, 0.0).astype(np.complex128)
    for part in model.parts:
        size = _size(model, part, q, s)
        turn = np.exp(1j * q * part.position)
        if not model.symmetric:
            made += size * turn
        elif part.central:
            # cos(qz) at a mirror is ±1; rounding must not leave a phase.
            made += size * np.rint(turn.real)
        else:
            made += 2 * size * turn.real
    return np.asarray(made * model.scale * np.exp(-model.B * s**2))


def _size(model: Stack, part: Part, q: FloatArray, s: FloatArray) -> FloatArray:
    """Amplitude of a part about its own centre."""
    if isinstance(part, Slab):
        rough = np.exp(-((q * part.roughness) ** 2) / 2)
        # np.sinc is sin(πx)/(πx).
        shape = part.thickness * np.sinc(q * part.thickness / (2 * np.pi))
        return np.asarray((part.density - model.background) * shape * rough)
    spread = np.exp(-((q * part.width) ** 2) / 2)
    return np.asarray(part.occupancy * (strengths(part, s, model.probe) - model.background * part.displaced) * spread)


def _unit(parts: Sequence[Part], probe: Probe, unit: str | None) -> str:
    if not any(isinstance(part, Plane) and part.content is not None for part in parts):
        return unit or "arbitrary"
    known = "e/Å³" if probe == "xray" else "10⁻⁶ Å⁻²"
    if unit not in (None, known):
        raise InputError("unit", f"is {unit}, but formulas scatter in {known}", f"give densities in {known}")
    return known


def _placed(part: Part, period: float, symmetry: Symmetry) -> Part:
    """The part with its place on a mirror found out, which a refinement does not change afterwards."""
    central = symmetry != "1" and abs(math.remainder(part.position, period / 2)) <= ON_MIRROR
    return replace(part, central=central)


def across_mirror(model: Stack, part: Part) -> bool:
    """Whether a slab of a symmetric stack overlaps its own image."""
    if not isinstance(part, Slab) or not model.symmetric or part.central:
        return False
    half = model.period / 2
    lower, upper = part.position - part.thickness / 2, part.position + part.thickness / 2
    return math.floor((lower + ON_MIRROR) / half) != math.floor((upper - ON_MIRROR) / half)


def _check_place(model: Stack, part: Part) -> None:
    if not isinstance(part, Slab):
        return
    path = ("parts", part.name)
    if part.thickness > model.period * (1 + 1e-9):
        raise InputError(path, "is thicker than the period", "give edges within one period")
    if across_mirror(model, part):
        raise InputError(
            path,
            "lies across a mirror of a symmetric stack and is not centred on it",
            "centre it on z = 0 or d/2, or give the part between two mirrors",
        )
