"""What the tests of combinations share: sets by symmetry, random sets, and plain sums.

Numbers are invented. The plain sums use nothing of the engine but the matrices of a group.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from engine import CoefficientSet, Lattice
from engine.phases import coefficient_set
from engine.symmetry import Group
from engine.symmetry.expand import expand
from tests.engine.symmetry.crystals import cell_of, indices_within, plain_asymmetric, plain_orbit, reflections_of
from tests.strategies import LATTICES, listing

GROUPS = {
    "P1": Group.from_operations(["x,y,z"], 3, name="P1"),
    "P-1": Group.from_operations(["x,y,z", "-x,-y,-z"], 3, name="P-1"),
    "P212121": Group.from_operations(["x+1/2,-y+1/2,-z", "-x,y+1/2,-z+1/2"], 3, name="P 21 21 21"),
}


@dataclass(frozen=True, eq=False)
class Measured:
    """One of each orbit: F, and what is not certain of it."""

    lattice: Lattice
    group: Group
    indices: np.ndarray
    centric: np.ndarray
    values: np.ndarray
    sigma: np.ndarray
    phase_sigma: np.ndarray

    def coefficients(self, **changes) -> CoefficientSet:
        """The engine's set of all equivalents."""
        reflections = reflections_of(
            self.lattice, self.indices, self.values, sigma=self.sigma, phase_sigma=self.phase_sigma
        )
        made = coefficient_set(expand(reflections, self.group).reflections, unit="e/Å³")
        return replace(made, group=self.group, **changes)

    def kernels(self, positions):
        """κ(r) of each orbit with n(r) = Σ Re(F κ(r)); (O, P)."""
        made = np.zeros((len(self.indices), len(positions)), dtype=complex)
        for row, h in enumerate(self.indices):
            written = set()
            for r, t in zip(self.group.rotations, self.group.translations, strict=True):
                for sign in (1, -1):
                    member = tuple((sign * (h @ r)).tolist())
                    if member in written:
                        continue
                    written.add(member)
                    # F(hR) = F(h) exp(−2πi h·t); F(−h) = conj F(h); n_h multiplies exp(−2πi h·x).
                    wave = np.exp(-2j * np.pi * sign * (h @ t)) * np.exp(-2j * np.pi * (positions @ np.array(member)))
                    made[row] += (wave if sign > 0 else wave.conj()) / self.lattice.volume
        return made

    def drawn(self, rng, times):
        """F with errors; (times, O)."""
        amplitude = np.abs(self.values) + self.sigma * rng.normal(size=(times, len(self.values)))
        turned = self.phase_sigma * rng.normal(size=(times, len(self.values)))
        return amplitude * np.exp(1j * (np.angle(self.values) + turned))


def measured(name, seed, *, relative=0.1, phase=0.2, reach=(2, 2, 2)):
    """A random crystal of a group: its amplitudes, phases, and errors of about that size."""
    rng = np.random.default_rng(seed)
    group = GROUPS[name]
    indices = plain_asymmetric(indices_within(reach), group, friedel=True)
    values = rng.uniform(5, 20, len(indices)) * np.exp(2j * np.pi * rng.random(len(indices)))
    centric = np.array([tuple((-h).tolist()) in plain_orbit(h, group, friedel=False) for h in indices])
    for row in np.flatnonzero(centric):
        h = indices[row]
        for r, t in zip(group.rotations, group.translations, strict=True):
            if np.array_equal(h @ r, -h):
                values[row] = np.abs(values[row]) * np.exp(1j * np.pi * (h @ t)) * rng.choice((-1, 1))
    return Measured(
        lattice=cell_of(group, seed=1),
        group=group,
        indices=indices,
        centric=centric,
        values=values,
        sigma=relative * np.abs(values) * rng.uniform(0.5, 1.5, len(indices)),
        phase_sigma=np.where(centric, 0.0, phase * rng.uniform(0.5, 1.5, len(indices))),
    )


def random_set(dimension=3, *, seed=0, real=True, share=0.6, sigma=0.05, phase_sigma=0.1, zero=True, reach=None):
    """A set without symmetry, on the common lattice of the dimension."""
    made = listing(LATTICES[dimension], real=real, seed=seed, share=share, zero=zero, reach=reach).coefficients()
    rng = np.random.default_rng(seed + 1)
    size = made.count

    def spread(typical):
        return None if typical is None else typical * rng.uniform(0.5, 1.5, size)

    at_zero = ~made.indices.any(axis=1)
    phases = spread(phase_sigma)
    if phases is not None and real:
        phases[at_zero] = 0.0
    return replace(made, sigma=spread(sigma), phase_sigma=phases)


def table(coefficients):
    """{indices: value}."""
    return dict(zip(map(tuple, coefficients.indices.tolist()), coefficients.values.tolist(), strict=True))
