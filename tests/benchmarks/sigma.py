"""σ of a density on a full-cell grid, against the density itself and against squaring orbit by orbit.

``density`` and ``with σ`` are `evaluate` without and with the uncertainty; ``σ alone`` is everything between a set
and its σ: which coefficients are one measurement, the series of the variance, its synthesis. ``orbit by orbit`` is the
plain way: the contribution of every measurement by a transform of the whole grid, squared and added up. It is
measured on some of the measurements and scaled to all of them.
"""

from __future__ import annotations

import time
from dataclasses import replace

import numpy as np
from scipy import fft

from engine import CoefficientSet, Demand, Lattice, evaluate, prepare, sampling
from engine.fields import Treatment
from engine.phases import coefficient_set
from engine.reflections import Reflections
from engine.symmetry import classify, expand, space_group, unique_reflections
from engine.synthesis import fill
from engine.uncertainty.errors import errors_of
from engine.uncertainty.pairs import variance_series
from engine.uncertainty.sigma import perform_sigma, prepare_sigma
from tests.benchmarks.timing import CORES, best

COUNT = 128
ORBITS = 12
"""Measurements that the plain way is measured on."""


def cubic_set(symbol: str, d_min: float, *, phases: bool) -> CoefficientSet:
    """Random reflections of a cubic crystal with the given symmetry, seeded, expanded."""
    group, lattice = space_group(symbol), Lattice.from_parameters(20, 20, 20, 90, 90, 90)
    generator = np.random.default_rng(21)
    unique = unique_reflections(lattice, group, d_min, friedel=True)
    kinds = classify(unique, group)
    amplitude = generator.exponential(10, len(unique)) + 1
    free = generator.uniform(-np.pi, np.pi, len(unique))
    reflections = Reflections(
        lattice=lattice,
        indices=unique,
        quantity="amplitude",
        observed=amplitude,
        sigma=0.05 * amplitude,
        phase=np.where(kinds.centric, kinds.restricted_phase, free),
        phase_sigma=np.full(len(unique), 0.3) if phases else None,
        merit=None,
        row=np.arange(len(unique)),
        scale="arbitrary",
    )
    return replace(coefficient_set(expand(reflections, group).reflections), group=group)


def orbit_by_orbit(coefficients: CoefficientSet, measurements: int) -> tuple[np.ndarray, float]:
    """Variance of the first measurements on the grid, the plain way, and the seconds it took."""
    errors = errors_of(coefficients)
    strengths = [errors.spread(), errors.turned()] if errors.across.any() else [errors.spread()]
    total = np.zeros((COUNT,) * 3)
    begin = time.perf_counter()
    ends = np.append(errors.starts[1:], errors.count)
    for start, end in zip(errors.starts[:measurements], ends[:measurements], strict=True):
        places = tuple((errors.indices[start:end] % COUNT).T)
        for strength in strengths:
            cube = np.zeros(total.shape, dtype=np.complex128)
            np.add.at(cube, places, strength[start:end])
            total += (2 * fft.ifftn(cube, norm="forward", workers=CORES, overwrite_x=True).real) ** 2
    return total, time.perf_counter() - begin


def _checked(coefficients: CoefficientSet) -> float:
    """Largest difference of the two ways on the measurements that the plain way did, relative to the largest σ²."""
    errors = errors_of(coefficients)
    kept = np.zeros(coefficients.count, dtype=np.bool_)
    kept[errors.order[: errors.starts[ORBITS]]] = True
    some = coefficients.select(kept)
    where = sampling.full_cell(some.lattice, (COUNT,) * 3)
    field = evaluate(some, where, uncertainty=True)
    assert field.sigma is not None
    plain, _ = orbit_by_orbit(some, ORBITS)
    return float(np.abs(field.sigma.values**2 - plain).max() / plain.max())


def main() -> None:
    """Print the table."""
    print(f"σ on a {COUNT}³ grid of the whole cell, seconds, {CORES} threads")
    print(
        "  group   errors      measurements    terms  density   with σ  σ alone  ×density  (errors   pairs    sum)   "
        "orbit by orbit*  ×σ alone   error  MiB"
    )
    for symbol, d_min in (("Pm-3m", 0.43), ("Pa-3", 0.53)):
        for phases in (False, True):
            _row(symbol, cubic_set(symbol, d_min, phases=phases), "both" if phases else "amplitudes")
    print(f"  * on {ORBITS} of the measurements, time scaled up; error of σ² on these, relative to the largest")


def _row(name: str, coefficients: CoefficientSet, kinds: str) -> None:
    where, demand = sampling.full_cell(coefficients.lattice, (COUNT,) * 3), Demand(threads=CORES)
    values = evaluate(coefficients, where, demand=demand).values
    errors = errors_of(coefficients)
    strengths = (errors.spread(), errors.turned()) if errors.across.any() else (errors.spread(),)
    work = prepare_sigma(coefficients, where, Treatment(), demand)
    out = np.empty((COUNT,) * 3)
    times = best(
        5,
        density=lambda: evaluate(coefficients, where, demand=demand),
        both=lambda: evaluate(coefficients, where, demand=demand, uncertainty=True),
        alone=lambda: perform_sigma(prepare_sigma(coefficients, where, Treatment(), demand), values),
        errors=lambda: errors_of(coefficients),
        pairs=lambda: variance_series(errors, strengths, strengths),
        sum=lambda: fill(work.plans[0].prepare(), out, threads=CORES),
    )
    _, plain = orbit_by_orbit(coefficients, ORBITS)
    plain *= errors.measurements / ORBITS
    memory = prepare(coefficients, where, demand=demand, uncertainty=True).bytes / 2**20
    print(
        f"  {name:7s} {kinds:10s} {errors.measurements:13,d} {work.plans[0].series.count:8,d} {times['density']:8.3f} "
        f"{times['both']:8.3f} {times['alone']:8.3f} {times['alone'] / times['density']:9.1f}  {times['errors']:7.3f} "
        f"{times['pairs']:7.3f} {times['sum']:7.3f} {plain:17.0f} {plain / times['alone']:9.0f}   "
        f"{_checked(coefficients):.0e} {memory:4.0f}",
        flush=True,
    )


if __name__ == "__main__":
    main()
