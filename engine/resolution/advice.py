"""Plain words where what is asked for and what the data resolve do not fit each other."""

from __future__ import annotations

import math

import numpy as np

from engine.arrays import BoolArray, FloatArray
from engine.averages import Average, BallAverage, BoxAverage, SlabAverage
from engine.lattice import Lattice
from engine.resolution.coverage import Coverage
from engine.resolution.response import PointResponse
from engine.sampling.grids import AffineGrid, Sampling

FINE = 20
COARSE = 2
THIN = 4
ANISOTROPIC = 1.5
COMPLETE = 0.95
LOW_ORDER = 4


def advice(
    response: PointResponse | None,
    sampling: Sampling,
    lattice: Lattice,
    *,
    average: Average | None = None,
    coverage: Coverage | None = None,
) -> tuple[str, ...]:
    """What a reader should know of a request; nothing for an ordinary one.

    Parameters
    ----------
    response : PointResponse or None
        Of the series that is summed, its window and average included. None: nothing is said about
        it.
    sampling : Sampling
    lattice : Lattice
    average : Average, optional
        That each sample is averaged over.
    coverage : Coverage, optional
        Of the set.

    Returns
    -------
    tuple of str
        One sentence each, with w the full width at half maximum of the response along the direction
        in question, where

        - samples are closer than w/20 along every axis of a grid that has more than one sample and a
          finite w, or farther apart than w/2 along one (named, the worst);
        - a grid spans less than w along every such axis;
        - the thickness of a slab, every edge of a box or the diameter of a ball is below w/4, or one
          of them (of a box every edge) is below w;
        - the widths along the principal directions differ by more than a factor of 1.5, or one is
          infinite and another is not;
        - less than 95 % of the possible terms are there with a phase;
        - a term of low order, d ≥ 4 d_min, is not.
    """
    said: list[str] = []
    if response is not None:
        if isinstance(sampling, AffineGrid):
            said += _samples(response, sampling, lattice)
        said += _averages(response, average, lattice)
        said += _anisotropy(response)
    if coverage is not None:
        said += _gaps(coverage)
    return tuple(said)


def _samples(response: PointResponse, grid: AffineGrid, lattice: Lattice) -> list[str]:
    axes = [
        axis
        for axis in grid.axes(lattice)
        if axis.count > 1 and axis.step > 0 and math.isfinite(response.width_along(axis.direction))
    ]
    if not axes:
        return []
    said = []
    steps = np.array([axis.step for axis in axes])
    widths = np.array([response.width_along(axis.direction) for axis in axes])
    spans = steps * np.array([axis.count - 1 for axis in axes])
    ratio = steps / widths
    if np.all(ratio < 1 / FINE):
        said.append(
            f"Samples are up to {steps.max():.3g} Å apart, less than a twentieth of the {_range(widths)} that a point "
            "is wide in these data: a grid that fine shows no more detail."
        )
    elif ratio.max() > 1 / COARSE:
        worst = int(ratio.argmax())
        said.append(
            f"Samples are {steps[worst]:.3g} Å apart along {axes[worst].label}, where a point is {widths[worst]:.3g} Å "
            "wide: detail between the samples is missed."
        )
    if np.all(spans < widths):
        said.append(
            f"The samples span {_range(spans)}, less than the {_range(widths)} that a point is wide in these data: "
            "they show one feature at most."
        )
    return said


def _averages(response: PointResponse, average: Average | None, lattice: Lattice) -> list[str]:
    if isinstance(average, SlabAverage):
        sizes = np.array([average.thickness])
        widths = np.array([response.width_along(lattice.wavevectors(average.normal[None, :])[0])])
        name = "slab"
    elif isinstance(average, BoxAverage):
        edges = lattice.to_cartesian(average.edges)
        edges = edges[np.linalg.norm(edges, axis=1) > 0]
        sizes = np.linalg.norm(edges, axis=1)
        widths = np.array([response.width_along(edge) for edge in edges])
        name = "box"
    elif isinstance(average, BallAverage):
        # A ball reaches as far in each direction: the sharpest decides.
        sizes, widths, name = np.array([2 * average.radius]), response.widths[:1], "ball"
    else:
        return []
    if not sizes.size or not np.all(sizes < widths):
        return []
    across = f"The {name} averaged over is {_range(sizes)} across, where a point is {_range(widths)} wide in these data"
    if np.all(sizes < widths / THIN):
        return [f"{across}: the average changes next to nothing."]
    return [f"{across}: it takes in what lies around it, as far as a point is wide."]


def _anisotropy(response: PointResponse) -> list[str]:
    widths = response.widths
    finite = widths[np.isfinite(widths)]
    if 0 < finite.size < widths.size:
        return [
            f"The data resolve {_range(finite)} along {_directions(response, np.isfinite(widths))}; across "
            "that nothing is told apart: the terms vary too little there."
        ]
    if finite.size and widths[-1] > ANISOTROPIC * widths[0]:
        return [
            f"A point is {widths[0]:.3g} Å wide along {_vector(response.directions[0])} and {widths[-1]:.3g} Å along "
            f"{_vector(response.directions[-1])}: the resolution depends on the direction."
        ]
    return []


def _gaps(coverage: Coverage) -> list[str]:
    said = []
    if coverage.fraction < COMPLETE:
        about = "about " if coverage.estimated else ""
        left = f", {coverage.without_phase} more lack a phase" if coverage.without_phase else ""
        said.append(
            f"{coverage.present} of {about}{coverage.possible} terms down to {coverage.d_min:.3g} Å are in the sum "
            f"({100 * coverage.fraction:.3g} %){left}."
        )
    low = coverage.gap_spacings >= LOW_ORDER * coverage.d_min
    if low.any():
        named = ", ".join(
            f"({' '.join(str(i) for i in row)}) {d:.3g} Å"
            for row, d in zip(coverage.gaps[low].tolist(), coverage.gap_spacings[low].tolist(), strict=True)
        )
        said.append(f"Terms of low order are not in the sum: {named}; broad features may be wrong.")
    return said


def _range(values: FloatArray) -> str:
    low, high = float(values.min()), float(values.max())
    if math.isclose(low, high, rel_tol=0.01):
        return f"{high:.3g} Å"
    return f"{low:.3g} to {high:.3g} Å" if math.isfinite(high) else f"{low:.3g} Å or more"


def _directions(response: PointResponse, chosen: BoolArray) -> str:
    return " and ".join(_vector(row) for row in response.directions[chosen])


def _vector(direction: FloatArray) -> str:
    return "(" + " ".join(f"{x:.3g}" for x in np.round(direction, 3) + 0.0) + ")"
