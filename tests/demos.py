"""The demonstrations of the page, made from invented structures; run as a module to write them anew.

None of these substances exists. Strengths carry errors drawn with fixed seeds at the size of their
standard uncertainties, so that what the page shows is as imperfect as a measurement.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import special

from engine.lattice import Lattice
from tests.samples import half_within

FOLDER = Path(__file__).parent.parent / "service" / "page" / "demos"

PERIOD = 61.2
ORDERS = 13
SHEETS = ((0.0, 3.1, 0.92), (11.4, 2.2, 0.30), (22.6, 3.4, 0.52), (30.6, 2.6, -0.13))
"""Of one half of the stack, which the other mirrors: distance from its middle (Å), rms width (Å), e/Å³ above the
ground."""
GROUND = 0.31

RODS = {"a": 38.5, "b": 29.0, "gamma": 104.0}
ROD_PLACES = ((0.0, 0.0, 8.2, 0.21), (0.5, 0.5, 4.6, 0.34))
"""Fractional place, radius (Å), e/Å³ above the ground."""

MOLECULAR = {"a": 7.84, "b": 6.12, "c": 11.36, "alpha": 90, "beta": 112.4, "gamma": 90}
ATOMS = (
    (16.0, (0.214, 0.131, 0.182)),
    (8.0, (0.092, 0.348, 0.131)),
    (6.0, (0.397, 0.262, 0.301)),
    (6.0, (0.372, 0.471, 0.372)),
    (7.0, (0.538, 0.561, 0.463)),
    (6.0, (0.706, 0.412, 0.492)),
    (8.0, (0.851, 0.496, 0.583)),
    (6.0, (0.583, 0.152, 0.334)),
    (17.0, (0.768, 0.058, 0.231)),
)
"""Electrons and fractional place of the asymmetric unit in P 2₁."""


def build() -> dict[str, dict[str, Any]]:
    """Every demonstration by its file's name: a body for POST /v1/sets."""
    return {
        "stack.json": _demo("Coating LS-3, an invented stack of layers", stack()),
        "planar.json": _demo("Rods PR-5, an invented planar lattice", planar()),
        "crystal.json": _demo("Crystal MO-8, invented molecules in P 2₁", crystal()),
    }


def _demo(name: str, coefficients: dict[str, Any]) -> dict[str, Any]:
    return {"name": name, "tags": ["demonstration", "invented"], "set": coefficients}


def stack() -> dict[str, Any]:
    """Orders of Gaussian sheets that mirror each other, in electrons per Å²."""
    orders = np.arange(1, ORDERS + 1)
    wave = 2 * np.pi * orders / PERIOD
    factors = np.zeros(ORDERS)
    for place, width, height in SHEETS:
        share = 1 if place == 0.0 else 2
        area = share * height * width * np.sqrt(2 * np.pi)
        factors += area * np.cos(wave * place) * np.exp(-0.5 * (wave * width) ** 2)
    sigma = np.hypot(0.04, 0.05 * np.abs(factors))
    measured = np.abs(factors + sigma * np.random.default_rng(61).standard_normal(ORDERS))
    area = sum((1 if place == 0.0 else 2) * height * width * np.sqrt(2 * np.pi) for place, width, height in SHEETS)
    return {
        "cell": {"period": PERIOD},
        "values": "structure_factor",
        "l": orders.tolist(),
        "amplitude": measured.round(4).tolist(),
        "phase_deg": np.where(factors < 0, 180, 0).tolist(),
        "sigma": sigma.round(4).tolist(),
        "mean": round(GROUND * PERIOD + area, 3),
        "scale_sigma": 0.015,
        "unit": "e/Å³",
    }


def planar() -> dict[str, Any]:
    """Softened rods of two kinds on an oblique lattice."""
    lattice = Lattice.from_planar_parameters(**RODS)
    indices = half_within(lattice, 4.0)
    magnitudes = lattice.magnitudes(indices)
    values = np.zeros(len(indices), dtype=np.complex128)
    mean = GROUND
    for x, y, radius, height in ROD_PLACES:
        argument = magnitudes * radius
        share = height * np.pi * radius**2 / lattice.volume
        phases = np.exp(-2j * np.pi * indices @ np.array([x, y]))
        values += share * 2 * special.j1(argument) / argument * np.exp(-0.5 * (1.1 * magnitudes) ** 2) * phases
        mean += share
    real = values.real
    sigma = np.hypot(0.00008, 0.02 * np.abs(real))
    measured = np.abs(real + sigma * np.random.default_rng(38).standard_normal(real.size))
    return {
        "cell": RODS,
        "values": "density_coefficient",
        **dict(zip("hk", indices.T.tolist(), strict=True)),
        "amplitude": measured.round(6).tolist(),
        "phase_deg": np.where(real < 0, 180, 0).tolist(),
        "sigma": sigma.round(6).tolist(),
        "mean": round(mean, 5),
        "unit": "e/Å³",
    }


def crystal() -> dict[str, Any]:
    """The asymmetric part of the structure factors of molecules in P 2₁, with figures of merit."""
    lattice = Lattice.from_parameters(**MOLECULAR)
    indices = _unique(half_within(lattice, 0.92))
    factors = _factors(lattice, indices)
    random = np.random.default_rng(112)
    sigma = np.hypot(0.5, 0.018 * np.abs(factors))
    amplitude = np.abs(np.abs(factors) + sigma * random.standard_normal(factors.size))
    # Phases of strong reflections are surer than those of weak ones; a merit is the mean cosine of their error.
    spread = np.clip(52 * np.exp(-np.abs(factors) / 18), 6, None)
    centric = indices[:, 1] == 0
    error = np.where(centric, 0.0, spread * random.standard_normal(factors.size))
    phase = np.degrees(np.angle(factors)) + error
    merit = np.where(centric, 0.99, np.exp(-0.5 * np.radians(spread) ** 2))
    return {
        "cell": MOLECULAR,
        "values": "structure_factor",
        "symmetry": {"space_group": "P 1 21 1"},
        **dict(zip("hkl", indices.T.tolist(), strict=True)),
        "amplitude": amplitude.round(2).tolist(),
        "phase_deg": np.where(centric, np.degrees(np.angle(factors)), (phase + 180) % 360 - 180).round(1).tolist(),
        "sigma": sigma.round(2).tolist(),
        "merit": merit.round(3).tolist(),
        "mean": 2 * sum(electrons for electrons, _ in ATOMS),
        "unit": "e/Å³",
    }


def _unique(indices: NDArray[np.int64]) -> NDArray[np.int64]:
    """One of each h k l, −h k −l and their Friedel mates; those that a 2₁ axis along b extinguishes left out."""
    mates = np.where(indices[:, 1:2] < 0, -indices, indices)
    turned = mates * np.array([-1, 1, -1])
    pairs = zip(mates.tolist(), turned.tolist(), strict=True)
    first = np.array([min(tuple(one), tuple(other)) for one, other in pairs])
    kept = np.unique(first, axis=0)
    axial = (kept[:, 0] == 0) & (kept[:, 2] == 0)
    return kept[~(axial & (kept[:, 1] % 2 == 1))]


def _factors(lattice: Lattice, indices: NDArray[np.int64]) -> NDArray[np.complex128]:
    electrons = np.array([z for z, _ in ATOMS])
    places = np.array([x for _, x in ATOMS])
    turned = places * np.array([-1, 1, -1]) + np.array([0, 0.5, 0])
    falloff = np.exp(-2.6 * lattice.sine_over_wavelength(indices) ** 2)
    waves = np.exp(2j * np.pi * indices @ places.T) + np.exp(2j * np.pi * indices @ turned.T)
    factors: NDArray[np.complex128] = falloff * (waves @ electrons)
    return factors


def text(demo: dict[str, Any]) -> str:
    """A demonstration as its file holds it."""
    return json.dumps(demo, ensure_ascii=False, separators=(",", ":")) + "\n"


def main() -> None:
    """Write all files."""
    FOLDER.mkdir(exist_ok=True)
    for name, demo in build().items():
        (FOLDER / name).write_text(text(demo))


if __name__ == "__main__":
    main()
