"""Densities whose surfaces are known in closed form; invented."""

from __future__ import annotations

import itertools
import math

import numpy as np

from engine import CoefficientSet, Columns, Lattice, assemble
from engine.sampling import full_cell
from engine.surfaces import Level, Region, Surface, SurfaceTask, perform_surface, prepare_surface
from engine.surfaces.marching import Samples, march
from engine.surfaces.volume import above

TRICLINIC = Lattice.from_parameters(9.0, 10.0, 11.0, 82.0, 97.0, 106.0)
CUBE = Lattice.from_parameters(10.0, 10.0, 10.0, 90.0, 90.0, 90.0)


def from_terms(lattice, indices, values, **more) -> CoefficientSet:
    """A real density from coefficients of exp(2πi m·x)."""
    values = np.asarray(values, dtype=complex)
    columns = Columns(indices=list(np.asarray(indices).T), real=values.real, imag=values.imag)
    return assemble(lattice, columns, values="density_coefficient", **more)


def gaussian(lattice, *, width=1.0, centre=(0.5, 0.5, 0.5), reach=6.5) -> CoefficientSet:
    """One Gaussian exp(−r²/2 width²) in each cell: its level sets are spheres. The series ends where it is over."""
    most = [int(reach * length / (2 * math.pi)) + 1 for length in lattice.lengths]
    indices = np.array(list(itertools.product(*(range(-m, m + 1) for m in most))))
    wave = lattice.magnitudes(indices)
    indices, wave = indices[wave < reach], wave[wave < reach]
    height = (2 * math.pi * width**2) ** 1.5 / lattice.volume
    values = height * np.exp(-((wave * width) ** 2) / 2 - 2j * np.pi * indices @ np.array(centre))
    return from_terms(lattice, indices, values)


def radius_to_level(radius, width=1.0) -> Level:
    return Level("level", math.exp(-((radius / width) ** 2) / 2))


def wave(lattice, index=(1, 0, 0)) -> CoefficientSet:
    """cos(2π m·x)."""
    return from_terms(lattice, [index], [0.5])


def gyroid(lattice=CUBE) -> CoefficientSet:
    """sin x cos y + sin y cos z + sin z cos x, which a translation by half a cell turns into its negative."""
    indices, values = [], []
    for turn in range(3):
        first, second = np.roll([1, 0, 0], turn), np.roll([0, 1, 0], turn)
        for sign, other in itertools.product((1, -1), repeat=2):
            indices.append(sign * first + other * second)
            values.append(sign / 4j)
    return from_terms(lattice, indices, values)


def rough(lattice=TRICLINIC, seed=5, reach=4) -> CoefficientSet:
    """Random terms: a density full of ambiguous places, with a mean."""
    rng = np.random.default_rng(seed)
    indices = np.array(list(itertools.product(range(-reach, reach + 1), repeat=3)))
    indices = indices[(indices @ [100, 10, 1]) >= 0]
    values = rng.normal(size=len(indices)) + 1j * rng.normal(size=len(indices))
    values[~indices.any(axis=1)] = 0.7
    return from_terms(lattice, indices, values)


def surface_of(coefficients, shape, level, *, closed=False, **more) -> Surface:
    region = Region.of(full_cell(coefficients.lattice, shape))
    task = SurfaceTask(level=level, closed=closed, max_triangles=more.pop("max_triangles", 5_000_000))
    return perform_surface(prepare_surface(coefficients, region, task, **more))


def meshed(values, level=0.0, *, wrapped=(False, False, False), closed=False, steps=None, tie=0.0):
    """The mesh of plain numbers on a grid of steps of 1 Å, or of those given."""
    steps = np.eye(3) if steps is None else np.asarray(steps, dtype=float)
    samples = Samples(np.asarray(values, dtype=float), wrapped, np.zeros(3), steps, 1e-4)
    return march(samples, level, above(samples.values, level, wrapped, closed=closed, tie=tie))
