"""Check 13: normalised intensities of structures of atoms at random.

Source: Wilson, Acta Cryst. 2 (1949) 318; International Tables for Crystallography B, chapter 2.1.
⟨|E²−1|⟩ is 0.736 without a centre of symmetry and 0.968 with one. The intensities are not drawn
from a distribution here but are those of structures: sums of exp(2πi h·x) over atoms.
"""

from __future__ import annotations

import numpy as np
import pytest

from engine.amplitudes.normalised import intensity_statistics, normalise
from engine.amplitudes.pairs import pair_statistics
from tests.engine.amplitudes.simulated import CELL, half_sphere, reflections

INDICES = half_sphere(CELL, 1.3)
PUBLISHED = {"acentric": 0.736, "centric": 0.968}


def structure_intensities(rng: np.random.Generator, centric: bool) -> np.ndarray:
    """|F|² of 160 equal point atoms at random places, in pairs ±x where centric, fallen off with B = 8 Å²."""
    places = rng.random((160, 3))
    if centric:
        places[80:] = -places[:80]
    factors = np.exp(2j * np.pi * INDICES @ places.T).sum(axis=1)
    return np.abs(factors) ** 2 * np.exp(-2 * 8 / (4 * CELL.spacings(INDICES) ** 2))


@pytest.mark.parametrize("kind", PUBLISHED)
def test_mean_deviation_of_e_squared(kind):
    """Check 13. Four structures; four standard uncertainties of their mean, 0.02, against a difference of 0.232."""
    rng = np.random.default_rng(1949)
    found = [
        intensity_statistics(normalise(reflections(INDICES, structure_intensities(rng, kind == "centric"))))
        for _ in range(4)
    ]
    mean = np.mean([each.mean_deviation.value for each in found])
    assert mean == pytest.approx(PUBLISHED[kind], abs=0.02)
    assert {each.verdict for each in found} <= {kind, "undecided"}
    assert [each.verdict for each in found].count(kind) >= 3


def test_twinned_structures():
    """Padilla & Yeates, Acta Cryst. D59 (2003) 1124: ⟨|L|⟩ is 1/2, and 3/8 of a perfect twin."""
    rng = np.random.default_rng(2003)
    whole, other = structure_intensities(rng, False), structure_intensities(rng, False)
    for observed, expected in ((whole, 0.5), (whole + other, 0.375)):
        given = reflections(INDICES, observed)
        found = pair_statistics(given, normalise(given))
        assert found.mean_absolute.value == pytest.approx(expected, abs=0.025)
