"""Checks 1 to 5: spacings, angles and volumes of well-known lattices.

Sources stand beside each value. "memory": written down from memory of the source, to be
corrected against a copy of it. A bound is half a unit of the last digit that the source prints.
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy.signal import argrelmax

from engine import Columns, Lattice, Treatment, assemble, averages, evaluate, sampling

CU_K_ALPHA_1 = 1.5405929
"""Wavelength of the certificates, Å."""


def two_theta(lattice: Lattice, indices: list[int]) -> float:
    """Scattering angle 2θ in degrees, from Bragg's law λ = 2d sin θ."""
    spacing = lattice.spacings(np.array([indices]))[0]
    return float(np.degrees(2 * np.arcsin(CU_K_ALPHA_1 / (2 * spacing))))


def cubic(a: float) -> Lattice:
    return Lattice.from_parameters(a, a, a, 90, 90, 90)


@pytest.mark.parametrize(
    ("a", "indices", "expected"),
    [
        pytest.param(5.431144, [1, 1, 1], 28.441, id="check 1, NIST SRM 640f certificate, memory"),
        pytest.param(4.156826, [1, 0, 0], 21.358, id="check 2, NIST SRM 660c certificate, memory"),
        pytest.param(4.156826, [1, 1, 0], 30.385, id="check 2b, NIST SRM 660c certificate, memory"),
    ],
)
def test_powder_standards_diffract_at_their_certified_angles(a, indices, expected):
    assert two_theta(cubic(a), indices) == pytest.approx(expected, abs=0.5e-3)


def test_quartz_has_the_spacing_and_volume_of_its_cell():
    """Check 3: handbook cell, memory; spacing and volume follow by the trade's formulas."""
    quartz = Lattice.from_parameters(4.9134, 4.9134, 5.4052, 90, 90, 120)
    assert quartz.spacings(np.array([[1, 0, 1]]))[0] == pytest.approx(3.3434, abs=0.5e-4)
    assert quartz.volume == pytest.approx(113.007, abs=0.5e-3)


def test_silver_behenate_orders_lie_at_multiples_of_the_first():
    """Check 4: Huang et al., J. Appl. Cryst. 26 (1993) 180, memory."""
    behenate = Lattice.from_period(58.380)
    q = behenate.magnitudes(np.arange(1, 12)[:, None])
    assert q[0] == pytest.approx(0.10763, abs=0.5e-5)
    np.testing.assert_allclose(q, q[0] * np.arange(1, 12), rtol=1e-14)


GRAPHITE = Lattice.from_parameters(2.464, 2.464, 6.711, 90, 90, 120)
"""Check 5: Trucano & Chen, Nature 258 (1975) 136, memory."""
GRAPHITE_ATOMS = np.array([[0, 0, 1 / 4], [0, 0, 3 / 4], [1 / 3, 2 / 3, 1 / 4], [2 / 3, 1 / 3, 3 / 4]])


def graphite_factors(indices: np.ndarray) -> np.ndarray:
    """Σ exp(2πi h·x) over the atoms, blurred to a density without ripples; a smooth invention that
    leaves the absences and the symmetry of the atoms as they are."""
    s = GRAPHITE.sine_over_wavelength(indices)
    return np.exp(2j * np.pi * indices @ GRAPHITE_ATOMS.T).sum(axis=1) * np.exp(-3.0 * s**2)


def test_graphite_layers_are_half_a_cell_apart():
    """Check 5: c/2 = 3.3555 Å in the lateral average of a density."""
    indices = np.stack(np.meshgrid(*(np.arange(-m, m + 1) for m in (4, 4, 12)), indexing="ij"), -1)
    indices = indices.reshape(-1, 3)
    factors = graphite_factors(indices)
    columns = Columns(indices=list(indices.T), real=factors.real, imag=factors.imag)
    coefficients = assemble(GRAPHITE, columns, values="structure_factor")
    along = sampling.normal_line(GRAPHITE, [0, 0, 1], 13424, include_end=False)
    profile = evaluate(coefficients, along, Treatment(average=averages.lateral(GRAPHITE, [0, 0, 1])))
    assert GRAPHITE.spacings(np.array([[0, 0, 2]]))[0] == pytest.approx(3.3555, abs=0.5e-4)
    largest = profile.values.max()
    peaks = argrelmax(profile.values, mode="wrap")[0]
    # Ripples of termination between the layers reach some 2 % of a layer's height.
    layers = profile.axes[0].coordinates()[peaks[profile.values[peaks] > largest / 2]]
    # A quarter of the cell falls on a sample; the next ones are 0.0005 Å away.
    np.testing.assert_allclose(layers, [6.711 / 4, 3 * 6.711 / 4], atol=0.25e-3)
    # Equal layers: the second half of the profile repeats the first.
    half = profile.values.size // 2
    np.testing.assert_allclose(profile.values[:half], profile.values[half:], atol=1e-9 * largest)


@pytest.mark.parametrize("l", range(1, 10))
def test_graphite_basal_reflections_of_odd_order_are_absent(l):
    """Check 5: 00l with l odd absent, l even present; measured back from a sampled density."""
    indices = np.array([[0, 0, m] for m in range(-9, 10)])
    factors = graphite_factors(indices)
    columns = Columns(indices=list(indices.T), real=factors.real, imag=factors.imag)
    coefficients = assemble(GRAPHITE, columns, values="structure_factor")
    samples = 32
    profile = evaluate(coefficients, sampling.normal_line(GRAPHITE, [0, 0, 1], samples, include_end=False)).values
    z = np.arange(samples) / samples
    back = abs(np.mean(profile * np.exp(2j * np.pi * l * z))) * GRAPHITE.volume
    if l % 2:
        assert back < 1e-9 * 4
    else:
        assert back == pytest.approx(4 * np.exp(-3.0 * (l / (2 * 6.711)) ** 2), rel=1e-9)
