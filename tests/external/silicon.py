"""The static deformation density of silicon, from measured structure factors: input of check 11.

Source of the measured factors: Aldred & Hart, Proc. R. Soc. A 332 (1973) 223, and later
Pendellösung work, memory. Source of the free atom: Waasmaier & Kirfel, Acta Cryst. A51 (1995)
416, by the library periodictable. Written from memory means: to be corrected against a copy.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import periodictable

EDGE = 5.43102
"""Edge of the cubic cell, Å."""
DEBYE_WALLER = 0.4613
"""B of silicon at room temperature, Å²."""
BOND_MIDPOINT = (0.125, 0.125, 0.125)
"""Halfway between the atoms at (0,0,0) and (¼,¼,¼), fractional."""
FACE_CENTRING = np.array([[0, 0, 0], [0, 0.5, 0.5], [0.5, 0, 0.5], [0.5, 0.5, 0]])
ATOMS = np.concatenate([FACE_CENTRING, FACE_CENTRING + 0.25])
"""The eight atoms of the diamond structure, fractional, the origin on an atom."""
FORBIDDEN = (2, 2, 2)
"""The family whose sum over free atoms vanishes: it measures the bond alone."""

_MEASURED = Path(__file__).parent / "data" / "silicon_room_temperature.csv"


@dataclass(frozen=True)
class SiliconSet:
    """Structure factors F(hkl) = ∫ Δρ exp(+2πi h·x) dV of the deformation density, in electrons.

    One row for each of the reflections of a family, both of each Friedel pair among them; ``sigma`` is the
    standard uncertainty of the measured factors, the free atom and B taken as exact.
    ``cell`` holds a, b, c (Å), α, β, γ (degrees).
    """

    cell: tuple[float, float, float, float, float, float]
    h: list[int]
    k: list[int]
    l: list[int]
    amplitude: list[float]
    phase_deg: list[float]
    sigma: list[float]


def deformation_set(*, forbidden_adds: bool) -> SiliconSet:
    """Measured minus free-atom structure factors, the motion of the atoms taken out.

    Parameters
    ----------
    forbidden_adds : bool
        Sign of F(222): whether it adds to the density at the bond's midpoint or takes away.
    """
    rows: list[tuple[int, int, int]] = []
    factors: list[complex] = []
    sigmas: list[float] = []
    for family, measured, sigma in _measured():
        s_squared = sum(index**2 for index in family) / (2 * EDGE) ** 2
        damping = np.exp(-DEBYE_WALLER * s_squared)
        static = measured / damping
        for member in _members(family):
            if family == FORBIDDEN:
                sign = 1 if forbidden_adds else -1
                geometry = 8 * np.exp(2j * np.pi * np.dot(member, BOND_MIDPOINT))
                factor = sign * static * geometry
            else:
                deformation = static - free_atom(float(np.sqrt(s_squared)))
                geometry = np.exp(2j * np.pi * ATOMS @ member).sum()
                factor = deformation * geometry
            sigmas.append(float(abs(geometry) * sigma / damping))
            rows.append(member)
            factors.append(complex(factor))
    h, k, l = (list(column) for column in zip(*rows, strict=True))
    return SiliconSet(
        (EDGE, EDGE, EDGE, 90.0, 90.0, 90.0),
        h,
        k,
        l,
        np.abs(factors).tolist(),
        np.degrees(np.angle(factors)).tolist(),
        sigmas,
    )


def free_atom(s: float) -> float:
    """Form factor f0 of the free silicon atom, electrons, at s = sin θ/λ (Å⁻¹)."""
    return float(periodictable.Si.xray.f0(4 * np.pi * s))


def _measured() -> list[tuple[tuple[int, int, int], float, float]]:
    """Families (hkl), their factor per atom and its standard uncertainty, electrons."""
    table = np.loadtxt(_MEASURED, delimiter=",", comments="#", skiprows=3)
    return [((int(h), int(k), int(l)), float(f), float(sigma)) for h, k, l, f, sigma in table]


def _members(family: tuple[int, int, int]) -> list[tuple[int, int, int]]:
    """All reflections that the cubic Laue class m-3m makes equal: every order, every sign."""
    return sorted(
        {
            (order[0] * signs[0], order[1] * signs[1], order[2] * signs[2])
            for order in itertools.permutations(family)
            for signs in itertools.product((1, -1), repeat=3)
        }
    )
