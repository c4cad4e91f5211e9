"""A full set of coefficients and the group its density is said to have."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from engine.arrays import as_positive
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.symmetry.group import Group
from engine.symmetry.metric import check_metric
from engine.symmetry.reflections import classify, orbits

TOLERANCE = 1e-3
"""Of values that symmetry makes equal, relative to the largest coefficient."""


def related(coefficients: CoefficientSet, group: Group, *, tolerance: float = TOLERANCE) -> CoefficientSet:
    """The same set, its coefficients known to be related by a group that its density has.

    From F(hR) = F(h) exp(−2πi h·t); the set's n_m is F(−m)/V.

    Raises
    ------
    InputError
        A cell without the group's symmetry; coefficients whose equivalents are absent, or differ from
        them by more than `tolerance` of the largest, or that must vanish; of a real density phases
        that centric coefficients cannot have.
    """
    as_positive(tolerance, "tolerance", "of the largest coefficient")
    check_metric(coefficients.lattice, group)
    indices = -coefficients.indices
    kinds = classify(indices, group)
    gathered = orbits(indices, group, friedel=coefficients.real)
    largest = float(np.abs(coefficients.values).max(initial=0.0))
    amplitude = np.abs(coefficients.values)
    if (kinds.absent & (amplitude > tolerance * largest)).any():
        raise InputError("symmetry", f"{group.name} forbids coefficients that the set has", "check group and origin")
    held = np.bincount(gathered.orbit, minlength=gathered.count)[gathered.orbit]
    wanted = kinds.multiplicity // 2 if coefficients.real else kinds.multiplicity // np.where(kinds.centric, 1, 2)
    zero = ~indices.any(axis=1)
    lacking = ~zero & ~kinds.absent & (held != wanted)
    if lacking.any():
        row = coefficients.indices[np.flatnonzero(lacking)[0]].tolist()
        raise InputError(
            "symmetry",
            f"{group.name} relates ({' '.join(map(str, row))}) to coefficients that the set lacks",
            "give all equivalents, or one of each and let symmetry expand them",
        )
    # Each brought to its representative must be what the first of its orbit is there.
    phase = gathered.carried(np.angle(coefficients.values))
    brought = amplitude * np.where(coefficients.phase_known, np.exp(1j * phase), 1.0)
    _, first = np.unique(gathered.orbit, return_index=True)
    apart = np.abs(brought - brought[first][gathered.orbit])
    apart[kinds.absent] = 0.0
    if (apart > tolerance * largest).any():
        row = coefficients.indices[int(apart.argmax())].tolist()
        raise InputError(
            "symmetry",
            f"{group.name} relates ({' '.join(map(str, row))}) to a coefficient from which it differs by "
            f"{apart.max() / largest:.2g} of the largest",
            "check group and origin, or leave the symmetry out",
        )
    if coefficients.real:
        # A centric coefficient is its own mate's equivalent: of F exp(−iφ), φ the phase allowed, nothing is imaginary.
        centric = kinds.centric & ~kinds.absent & coefficients.phase_known
        turned = coefficients.values * np.exp(-1j * np.where(centric, kinds.restricted_phase, 0.0))
        aside = np.where(centric, np.abs(turned.imag), 0.0)
        if (aside > tolerance * largest).any():
            row = coefficients.indices[int(aside.argmax())].tolist()
            raise InputError(
                "symmetry",
                f"{group.name} leaves ({' '.join(map(str, row))}) two phases, from which it differs by "
                f"{aside.max() / largest:.2g} of the largest coefficient",
                "check group, origin and the sign convention of the phases",
            )
    return replace(coefficients, group=group)
