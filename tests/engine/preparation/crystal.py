"""An invented crystal for the tests of preparation, measurements of it, and what must come out; nothing of the
engine's arithmetic.

Form factors by xraydb (Waasmaier & Kirfel, Acta Cryst. A51 (1995) 416), structure factors by the sum written out.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass, replace

import numpy as np
import xraydb

from engine.lattice import Lattice
from engine.preparation import Recipe
from engine.reflections import Reflections
from engine.scattering import composition
from engine.symmetry import Group, space_group

ATOMS = ("S", "Cl", "O", "O", "N", "C", "C", "C")
FORMULA = "SClO2NC3"
ELECTRONS = 16 + 17 + 2 * 8 + 7 + 3 * 6
"""Of one formula unit."""
B = 1.8
"""Å², of every atom."""


@dataclass(frozen=True)
class Crystal:
    """Atoms at general positions of a group; ``units`` formula units in the cell."""

    lattice: Lattice
    group: Group
    sites: np.ndarray

    @property
    def units(self):
        return self.group.order

    def factors(self, indices):
        """F(h) = Σ f exp(−B s²) exp(2πi h·x), electrons."""
        s = np.linalg.norm(indices @ self.lattice.reciprocal, axis=1) / (4 * np.pi)
        total = np.zeros(len(indices), dtype=complex)
        for name, site in zip(ATOMS, self.sites, strict=True):
            images = self.group.rotations @ site + self.group.translations
            total += xraydb.f0(name, s) * np.exp(-B * s**2) * np.exp(2j * np.pi * (indices @ images.T)).sum(axis=1)
        return total

    def sphere(self, d_min, *, half=False):
        """All indices but zero with d ≥ d_min; one of each pair ±h where `half`."""
        reach = [int(length / d_min) + 1 for length in self.lattice.lengths]
        every = np.array(list(itertools.product(*(range(-n, n + 1) for n in reach))), dtype=np.int64)
        every = every[every.any(axis=1)]
        every = every[2 * np.pi / np.linalg.norm(every @ self.lattice.reciprocal, axis=1) >= d_min]
        if half:
            every = every[[next(x for x in reversed(row) if x) > 0 for row in every.tolist()]]
        return np.asfortranarray(every)


def crystal(symbol="P 21 21 21", *, seed=3, lengths=(7.1, 8.9, 10.4), angles=(90.0, 90.0, 90.0)):
    """Sites at random; the cell must have the symmetry."""
    sites = np.random.default_rng(seed).random((len(ATOMS), 3))
    return Crystal(Lattice.from_parameters(*lengths, *angles), space_group(symbol), sites)


def measured(one, indices, *, scale=1.0, relative=0.0, floor=0.0, quantity="intensity", phases=True, seed=11):
    """|F|² (or |F|) times `scale`, with noise of σ² = (relative·true)² + floor².

    σ is None where there is no noise. Exactly forbidden reflections are zero, which the sum says to
    1e-13 of an electron, and have no phase.
    """
    factors = one.factors(indices)
    factors[np.abs(factors) < 1e-9] = 0
    true = scale * (np.abs(factors) ** 2 if quantity == "intensity" else np.abs(factors))
    sigma = np.hypot(relative * true, floor)
    noisy = bool(sigma.any())
    noise = sigma * np.random.default_rng(seed).normal(size=true.size)
    return Reflections(
        lattice=one.lattice,
        indices=np.asfortranarray(indices),
        quantity=quantity,
        observed=true + noise,
        sigma=sigma if noisy else None,
        phase=np.where(factors == 0, np.nan, np.angle(factors)) if phases else None,
        phase_sigma=None,
        merit=None,
        row=np.arange(len(indices)),
        scale="arbitrary",
    )


def with_row(reflections, indices, observed, phase=None, sigma=None):
    """One more row at the end."""

    def longer(column, value):
        return None if column is None else np.append(column, np.nan if value is None else value)

    return replace(
        reflections,
        indices=np.asfortranarray(np.vstack([reflections.indices, [indices]])),
        observed=np.append(reflections.observed, observed),
        sigma=longer(reflections.sigma, sigma),
        phase=longer(reflections.phase, phase),
        row=np.append(reflections.row, reflections.row.max() + 1),
    )


OR = crystal()
"""P2₁2₁2₁, 7.1 × 8.9 × 10.4 Å."""
D_MIN = 1.1
CONTENT = composition(FORMULA)
P1 = space_group(1)
ROUNDING = 1e-10
"""Of sums of some thousand terms of some hundred electrons, relative to the largest."""


def recipe(**more):
    return Recipe(**({"group": OR.group} | more))


def exact(**more):
    """|F|² of every reflection of OR, without noise and without σ."""
    return measured(OR, OR.sphere(D_MIN), **more)


def noisy(**more):
    return measured(OR, OR.sphere(D_MIN), **({"scale": 0.02, "relative": 0.03, "floor": 0.3} | more))


def by_index(made):
    """m -> n_m of a coefficient set."""
    return dict(zip(map(tuple, made.indices.tolist()), made.values.tolist(), strict=True))


def agrees_with_the_structure(made, one):
    """n_m = F(−m)/V for every coefficient, and none is missing of those the group allows (conventions, section 2)."""
    factors = one.factors(-made.indices) / one.lattice.volume
    others = made.indices.any(axis=1)
    worst = np.abs(made.values - factors)[others].max()
    assert worst <= ROUNDING * np.abs(factors).max()
    spacing = 2 * np.pi / np.linalg.norm(made.indices[others] @ one.lattice.reciprocal, axis=1)
    all_of = one.sphere(spacing.min() * (1 - 1e-9), half=True)
    allowed = np.abs(one.factors(all_of)) > 1e-9
    assert np.count_nonzero(others) == np.count_nonzero(allowed)


def plain_kinds(indices):
    """ε and centric of P2₁2₁2₁ by what its twofold axes do: 2 on an axis, centric where an index is zero."""
    return np.where(np.count_nonzero(indices, axis=1) == 1, 2, 1), np.any(indices == 0, axis=1)
