"""Which method sums a series on a sampling, and what it costs: known before anything is allocated."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from engine.arrays import AnyArray
from engine.errors import InputError, TooLargeError
from engine.sampling.grids import AffineGrid, FreePoints, Sampling
from engine.series import Series
from engine.synthesis import cascade, direct, nonuniform
from engine.synthesis.estimate import Demand, Estimate, Method, Source, result_dtype
from engine.synthesis.folding import Fold, find_fold


@dataclass(frozen=True, slots=True)
class Plan:
    """A sum that has been costed and can be prepared.

    Attributes
    ----------
    series : Series
    sampling : Sampling
    demand : Demand
    chosen : Estimate
        Of the method taken.
    output : int
        Bytes of the values.
    """

    series: Series
    sampling: Sampling
    demand: Demand
    chosen: Estimate
    output: int
    _fold: Fold | None

    @property
    def method(self) -> Method:
        return self.chosen.method

    @property
    def bytes(self) -> int:
        """Output and workspace together."""
        return self.output + self.chosen.workspace

    def prepare(self) -> Source:
        """Allocate the workspace."""
        if self.series.count == 0:
            return _Nothing(self.sampling.shape[0])
        if self.method == "direct":
            return direct.prepare(self.series, self.sampling, self.demand)
        if self.method == "nonuniform":
            return nonuniform.prepare(self.series, self.sampling, self.demand)
        if self._fold is None or isinstance(self.sampling, FreePoints):
            raise AssertionError("a cascade is planned for commensurate grids alone")
        return cascade.prepare(self.series, self.sampling, self._fold, self.demand)


def plan(
    series: Series,
    sampling: Sampling,
    demand: Demand | None = None,
    *,
    method: Method | None = None,
    max_bytes: int | None = None,
) -> Plan:
    """Choose the cheapest method, or cost the one asked for.

    Parameters
    ----------
    max_bytes : int, optional
        Methods whose output and workspace exceed it are not taken.

    Raises
    ------
    InputError
        The method asked for does not fit the sampling, or a tolerance or thread count is bad.
    TooLargeError
        No method stays within `max_bytes`.
    """
    demand = demand or Demand()
    if not 1e-12 <= demand.tolerance <= 1e-2:
        raise InputError("tolerance", f"is {demand.tolerance:g}", "give a number between 1e-12 and 1e-2")
    if demand.threads < 1:
        raise InputError("threads", f"is {demand.threads}", "give at least 1")
    found = find_fold(sampling) if isinstance(sampling, AffineGrid) else None
    estimates = [
        direct.estimate(series, sampling, demand),
        nonuniform.estimate(series, sampling, demand),
    ]
    if found is not None and isinstance(sampling, AffineGrid):
        estimates.append(cascade.estimate(series, sampling, found, demand))
    if method is not None:
        estimates = [one for one in estimates if one.method == method]
        if not estimates:
            raise InputError("method", f"{method} does not fit this sampling", "leave the method to the plan")
    item = result_dtype(series.real, demand.precision).itemsize
    output = item * math.prod(sampling.shape)
    affordable = [one for one in estimates if max_bytes is None or output + one.workspace <= max_bytes]
    if not affordable:
        least = output + min(one.workspace for one in estimates)
        raise TooLargeError(
            "samples",
            f"the work would take {least / 2**20:,.0f} MiB, more than the limit of {(max_bytes or 0) / 2**20:,.0f} MiB",
            "ask for fewer samples, fewer coefficients or single precision, or raise the limit",
        )
    best = min(affordable, key=lambda one: one.seconds)
    return Plan(series, sampling, demand, best, output, found)


class _Nothing:
    """The sum of no coefficients."""

    def __init__(self, planes: int) -> None:
        self.planes = planes
        self.block = planes
        self.concurrent = False

    def compute(self, start: int, stop: int, out: AnyArray) -> None:
        out[...] = np.zeros(1, dtype=out.dtype)
