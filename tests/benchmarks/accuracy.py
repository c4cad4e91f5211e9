"""How far the methods are from sums in 50 digits: ``python -m tests.benchmarks.accuracy``.

For each dimension one chiral set on an oblique lattice, summed at free points and on a whole
cell. An error is the largest one found, relative to the largest |value|; "stated" is the
accuracy that the field itself reports.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from engine import Columns, Demand, Lattice, assemble, evaluate, sampling
from engine.coefficients import CoefficientSet
from engine.sampling import Sampling
from engine.synthesis import Method
from tests.benchmarks.machine import describe
from tests.external import exact

VALUES = 200
"""Values compared at free points, and as many on the cell."""
COEFFICIENTS = 300
CELLS = {1: (18.4,), 2: (9.3, 11.8, 103.0), 3: (8.1, 9.7, 12.2, 81.0, 96.0, 104.0)}
MAKE: dict[int, Callable[..., Lattice]] = {
    1: Lattice.from_period,
    2: Lattice.from_planar_parameters,
    3: Lattice.from_parameters,
}
EXTENTS = {1: (400,), 2: (22, 26), 3: (12, 13, 15)}
SHAPES = {1: (1000,), 2: (64, 75), 3: (36, 40, 45)}

DEMANDS: list[tuple[Method, Demand]] = [
    ("direct", Demand()),
    ("direct", Demand(precision="single")),
    ("cascade", Demand()),
    ("cascade", Demand(precision="single")),
    *(("nonuniform", Demand(tolerance=tolerance)) for tolerance in (1e-3, 1e-6, 1e-9, 1e-12)),
    ("nonuniform", Demand(precision="single", tolerance=1e-5)),
]


@dataclass(frozen=True)
class Comparison:
    """A sampling; the samples (flat numbers) at which the exact values are known."""

    where: Sampling
    picked: np.ndarray
    expected: np.ndarray


def main() -> None:
    """Measure and print the table."""
    prepared = {dimension: _prepare(dimension) for dimension in (1, 2, 3)}
    print(
        f"Largest error relative to the largest |value|, {COEFFICIENTS} pairs of coefficients, "
        f"{VALUES} free points and {VALUES} points of a whole cell, against sums in {exact.DIGITS} digits"
    )
    print()
    print("| method | precision | tolerance asked | stated | 1-D | 2-D | 3-D |")
    print("| --- | --- | --- | --- | --- | --- | --- |")
    for method, demand in DEMANDS:
        found = [_measure(*prepared[dimension], method, demand) for dimension in (1, 2, 3)]
        stated = max(accuracy for _, accuracy in found)
        errors = " | ".join(f"{error:.1e}" for error, _ in found)
        asked = f"{demand.tolerance:.0e}" if method == "nonuniform" else "–"
        print(f"| {method} | {demand.precision} | {asked} | {stated:.0e} | {errors} |")


def _measure(
    coefficients: CoefficientSet, comparisons: list[Comparison], method: Method, demand: Demand
) -> tuple[float, float]:
    """Largest relative error over the samplings that the method can do, and the accuracy stated."""
    errors, stated = [], []
    for one in comparisons:
        if method == "cascade" and isinstance(one.where, sampling.FreePoints):
            continue
        field = evaluate(coefficients, one.where, demand=demand, method=method)
        difference = np.abs(field.values.reshape(-1)[one.picked] - one.expected).max()
        errors.append(float(difference / np.abs(field.values).max()))
        stated.append(field.accuracy)
    return max(errors), max(stated)


def _prepare(dimension: int) -> tuple[CoefficientSet, list[Comparison]]:
    random = np.random.default_rng([50, dimension])
    lattice = MAKE[dimension](*CELLS[dimension])
    rows = _half_of_all(EXTENTS[dimension])
    rows = rows[random.permutation(len(rows))[:COEFFICIENTS]]
    amplitude, phase = random.uniform(1, 10, len(rows)), random.uniform(-180, 180, len(rows))
    coefficients = assemble(
        lattice,
        Columns(indices=list(rows.T), amplitude=amplitude, phase_deg=phase),
        values="structure_factor",
    )
    # The mates double the real part.
    factors = exact.factors_from(2 * amplitude, phase)
    volume = exact.cell_volume(CELLS[dimension])

    def summed(positions: list[tuple[Fraction, ...]]) -> np.ndarray:
        return exact.series_at(rows.tolist(), factors, positions, volume).real

    anywhere = random.uniform(-1, 1, (VALUES, dimension))
    shape = SHAPES[dimension]
    picked = random.choice(int(np.prod(shape)), VALUES, replace=False)
    samples = np.stack(np.unravel_index(picked, shape), axis=-1)
    on_cell = exact.on_grid(np.zeros(dimension), np.eye(dimension), shape, samples)
    return coefficients, [
        Comparison(
            sampling.points(lattice, anywhere),
            np.arange(VALUES),
            summed([exact.fractions(position) for position in anywhere]),
        ),
        Comparison(sampling.full_cell(lattice, shape), picked, summed(on_cell)),
    ]


def _half_of_all(extents: tuple[int, ...]) -> np.ndarray:
    """One of each pair ±h within the extents."""
    axes = np.meshgrid(*(np.arange(-extent, extent + 1) for extent in extents), indexing="ij")
    rows = np.stack(axes, axis=-1).reshape(-1, len(extents))
    # In this order the zero term is in the middle and the mates stand in mirrored places.
    return rows[: len(rows) // 2]


if __name__ == "__main__":
    print(describe())
    print()
    main()
