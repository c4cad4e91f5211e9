"""Sample files as they come from an instrument: raw intensities, noise, equivalents and absences.

Made by a seeded generator from invented structures; run tests.samples to write them anew.
"""

from __future__ import annotations

import io
from typing import Any

import numpy as np
from numpy.typing import NDArray

from engine.lattice import Lattice
from engine.scattering import form_factors
from engine.symmetry import classify, equivalents, space_group, unique_reflections

CRYSTAL = {"a": 7.12, "b": 8.95, "c": 10.43, "alpha": 90.0, "beta": 90.0, "gamma": 90.0}
GROUP = "P 21 21 21"
ATOMS = [
    ("S", (0.112, 0.205, 0.331)),
    ("Cl", (0.402, 0.518, 0.247)),
    ("O", (0.655, 0.281, 0.103)),
    ("N", (0.253, 0.877, 0.152)),
    ("C", (0.871, 0.634, 0.418)),
    ("C", (0.540, 0.802, 0.473)),
]
"""The asymmetric unit of OR-4, which no chemist has made."""
FORMULA, UNITS = "SClONC2", 4
B_OVERALL = 2.4
SCALE = 0.0137
WAVELENGTH = 0.7107

FILM_PERIOD = 52.0
FILM_WAVELENGTH = 1.5418
FILM_SCALE = 480.0


def structure_factors(lattice: Lattice, indices: NDArray[np.int64]) -> NDArray[np.complex128]:
    """F of OR-4, electrons, by a plain sum over all atoms of the cell."""
    group = space_group(GROUP)
    s = lattice.sine_over_wavelength(indices)
    factors = form_factors([element for element, _ in ATOMS], s) * np.exp(-B_OVERALL * s**2)
    total = np.zeros(len(indices), dtype=np.complex128)
    for f, (_, position) in zip(factors, ATOMS, strict=True):
        images = group.rotations @ np.array(position) + group.translations
        total += f * np.exp(2j * np.pi * indices @ images.T).sum(axis=1)
    return total


def crystal_cif() -> str:
    """Every reflection of OR-4 to 0.9 Å, each measured at two to four of its equivalents, absences too."""
    generator = np.random.default_rng(4)
    lattice, group = Lattice.from_parameters(**CRYSTAL), space_group(GROUP)
    unique = unique_reflections(lattice, group, 0.9, friedel=True)
    absent = np.array([[0, 0, 1], [0, 0, 3], [0, 3, 0], [0, 5, 0], [1, 0, 0], [3, 0, 0]])
    all_of, _ = equivalents(np.concatenate([unique, absent]), group)
    rows = []
    for members in all_of.transpose(1, 0, 2):
        distinct = np.unique(np.concatenate([members, -members]), axis=0)
        count = min(len(distinct), int(generator.integers(2, 5)))
        rows.append(generator.choice(distinct, count, replace=False))
    indices = np.concatenate(rows)
    factors = structure_factors(lattice, indices)
    factors[classify(indices, group).absent] = 0
    true = np.abs(factors) ** 2 * SCALE
    sigma = np.hypot(0.12, 0.03 * true)
    measured = true + sigma * generator.normal(size=true.size)
    text = io.StringIO()
    text.write("# Invented data: crystal OR-4, raw intensities at several equivalents, phases of its trial model\n")
    text.write("data_OR4\n")
    for name, value in zip(("length_a", "length_b", "length_c"), ("7.120(2)", "8.950(2)", "10.430(3)"), strict=True):
        text.write(f"_cell_{name} {value}\n")
    text.write("_cell_angle_alpha 90\n_cell_angle_beta 90\n_cell_angle_gamma 90\n")
    text.write(f"_space_group_name_H-M_alt '{GROUP}'\n_diffrn_radiation_wavelength {WAVELENGTH}\n")
    text.write("loop_\n_refln_index_h\n_refln_index_k\n_refln_index_l\n_refln_intensity_meas\n")
    text.write("_refln_intensity_sigma\n_refln_phase_calc\n")
    phases = np.degrees(np.angle(factors)) + 0.0
    for (h, k, l), value, error, phase in zip(indices.tolist(), measured, sigma, phases, strict=True):
        text.write(f"{h} {k} {l} {value:.3f} {error:.3f} {phase:.2f}\n")
    return text.getvalue()


def film_factors() -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Twelve orders of the film FG-7 and their F, electrons per Å².

    Its sheets mirror each other about the middle of the period.
    """
    # Electrons per Å² and position in Å of Gaussian sheets; their width is 2.2 Å.
    sheets = [(9.6, 0.0), (1.9, 9.5), (1.9, -9.5), (1.3, 15.0), (1.3, -15.0), (3.0, 26.0)]
    orders = np.arange(1, 13)
    q = 2 * np.pi * orders / FILM_PERIOD
    return orders, sum(e * np.cos(q * z) for e, z in sheets) * np.exp(-(q**2) * 2.2**2 / 2)


def film_scan() -> str:
    """Intensities of the film's orders as recorded: with the geometry's factors in them."""
    generator = np.random.default_rng(7)
    orders, factors = film_factors()
    theta = np.arcsin(FILM_WAVELENGTH * orders / (2 * FILM_PERIOD))
    geometry = 1 / (np.sin(theta) * np.sin(2 * theta)) * (1 + np.cos(2 * theta) ** 2) / 2
    geometry *= 1 - np.exp(-2 * 60.0 * 1.2e-4 / np.sin(theta))
    geometry *= np.minimum(1, 20.0 * np.sin(theta) / 0.8)
    true = FILM_SCALE * factors**2 * geometry
    sigma = np.hypot(2.0, 0.015 * true)
    measured = true + sigma * generator.normal(size=true.size)
    text = io.StringIO()
    text.write("# Invented data: film FG-7, integrated intensities of a scan in symmetric reflection, Cu radiation\n")
    text.write("order,intensity,intensity_sigma,phase_deg\n")
    for order, value, error, factor in zip(orders.tolist(), measured, sigma, factors, strict=True):
        text.write(f"{order},{value:.1f},{error:.1f},{0 if factor > 0 else 180}\n")
    return text.getvalue()


def requests(invented: str) -> dict[str, dict[str, Any]]:
    """Requests that go with the files."""
    return {
        "crystal_from_cif.json": {
            "product": "slice",
            "remark": invented + "Crystal OR-4 from raw intensities in crystal_OR4.cif: a plane through S and Cl.",
            "set": {
                "values": "structure_factor",
                "preparation": {
                    "observed": "intensity",
                    "phase": "phase_calc_deg",
                    "scale": {"kind": "wilson", "formula": FORMULA, "units": UNITS},
                },
                "unit": "e/Å³",
            },
            "plane": [0, 0, 1],
            "centre": [0.25, 0.36, 0.331],
            "width": 8.0,
            "height": 9.0,
            "spacing": 0.1,
        },
        "inspect_crystal.json": {
            "product": "inspect",
            "remark": invented + "How to prepare crystal_OR4.cif.",
            "set": {"preparation": {"scale": {"kind": "wilson", "formula": FORMULA, "units": UNITS}}},
        },
        "film_from_scan.json": {
            "product": "profile",
            "remark": invented + "Film FG-7 from the intensities of a scan in film_scan.csv.",
            "set": {
                "cell": {"period": FILM_PERIOD},
                "values": "structure_factor",
                "symmetry": {"stack_group": "-1"},
                "preparation": {
                    "wavelength": FILM_WAVELENGTH,
                    "corrections": [
                        {"kind": "lorentz", "geometry": "film_part_of_arc"},
                        {"kind": "polarisation"},
                        {"kind": "film_absorption", "thickness_um": 1.2, "mu_per_cm": 60},
                        {"kind": "footprint", "length_mm": 20, "width_mm": 0.8},
                    ],
                    "amplitudes": "root",
                    "scale": {"kind": "factor", "factor": round(FILM_SCALE**-0.5, 6)},
                },
                "unit": "e/Å³",
            },
            "along": [1],
            "samples": 521,
        },
    }
