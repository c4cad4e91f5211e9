"""Fourier transforms on commensurate grids, axis after axis, doing only what is occupied.

1. Transform along axis 1 only the columns (k, l) that hold coefficients.
2. For each small block of planes: transform along axis 2 only the occupied columns l, then along
   axis 3 straight into the output.

The full complex cube never exists; a block fits the processor's cache; blocks are independent, so
they can be shared among threads, streamed or computed one by one. Planes and lines have fewer
stages of the same kind.
"""

from __future__ import annotations

import math
import threading
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from typing import cast

import numpy as np
from scipy import fft

from engine.arrays import AnyArray, BoolArray, FloatArray, IntArray
from engine.sampling.grids import AffineGrid
from engine.series import Series
from engine.synthesis.estimate import Demand, Estimate, Source, largest_turns, result_dtype, rounding
from engine.synthesis.folding import Fold, Modes, fold

BLOCK_BYTES = 1 << 21
"""Size of a block of planes before the last stage: about a core's second-level cache."""
MATRIX_GAIN = {"double": 5.5, "single": 16.0}
"""The last stage is a matrix product where the occupied l are fewer than this many times log2 N.
The real transform costs the same however few they are, and in single precision as much as in
double; measured, the product is faster below these ratios."""
ROWS_PER_TERM = 8
"""And where it has at least this many rows to each occupied l: below, making the matrix costs more
than it saves, and it would be large beside the output."""
CHUNK = 1 << 15
"""Most coefficients scattered at a time, so that temporaries stay in cache."""
SHARED_FROM = 1 << 18
"""Coefficients from which on threads share the first stage: with fewer, they wait for each other longer than they
work, each needing the interpreter between its many short calls."""
SECONDS_PER_COEFFICIENT = 3.0e-8
SECONDS_PER_BUTTERFLY = 1.1e-9


def estimate(series: Series, grid: AffineGrid, found: Fold, demand: Demand) -> Estimate:
    """Cost of a cascade; the extents bound what the folded coefficients can occupy."""
    item = 16 if demand.precision == "double" else 8
    lengths = found.lengths
    spans = _spans(series, found)
    columns = math.prod(spans[1:])
    first = columns * lengths[0] if len(lengths) > 1 else spans[0]
    plane_in = lengths[-2] * spans[-1] if len(lengths) == 3 else spans[-1]
    plane_out = math.prod(lengths[1:]) if len(lengths) > 1 else lengths[0]
    planes = grid.shape[0] if len(lengths) > 1 else 1
    block = _block_planes(plane_in, item, planes, demand.threads)
    seconds = series.count * SECONDS_PER_COEFFICIENT
    if len(lengths) > 1:
        seconds += first * math.log2(lengths[0] + 1) * SECONDS_PER_BUTTERFLY
    if len(lengths) == 3:
        seconds += planes * plane_in * math.log2(lengths[1] + 1) * SECONDS_PER_BUTTERFLY
    seconds += planes * plane_out * math.log2(lengths[-1] + 1) * SECONDS_PER_BUTTERFLY / 2
    return Estimate(
        method="cascade",
        seconds=seconds / demand.threads + 1e-4,
        workspace=_workspace(series, grid, found, demand, spans, block),
        # On the grid itself phases are whole fractions; only those of its origin are computed.
        accuracy=rounding(demand.precision, largest_turns(series, grid.origin, np.zeros(grid.origin.size))),
    )


def _workspace(
    series: Series, grid: AffineGrid, found: Fold, demand: Demand, spans: tuple[int, ...], block: int
) -> int:
    """Bytes held at the peak beside the output; `block` planes are computed at a time."""
    item = 16 if demand.precision == "double" else 8
    number = item // 2 if series.real else item
    lengths, shape = found.lengths, grid.shape
    down = lengths[0] if len(lengths) > 1 else 1
    across = lengths[1] if len(lengths) == 3 else 1
    last, deep = lengths[-1], spans[-1]
    stage = item * down * math.prod(spans[1:]) if len(lengths) > 1 else item * deep
    # In the first stage each thread holds a column's transform, in the last one a block of planes.
    held = item * max(down * deep, block * across * deep) + (0 if series.real else item * block * last)
    if shape != lengths:
        uncut = (across + shape[1]) * last if len(lengths) == 3 else across * last
        held += number * block * (uncut + math.prod(shape[1:])) if len(lengths) > 1 else 0
    if len(lengths) == 1:
        held += number * last + (number + 24) * shape[0]
    if series.real:
        widest = min(deep, int(MATRIX_GAIN[demand.precision] * math.log2(last + 1)))
        rows = shape[0] * across if len(lengths) > 1 else 1
        held += 2 * number * last * min(widest, rows // ROWS_PER_TERM)
    # A fold makes indices, values and targets of its own for every coefficient.
    untouched = (
        np.array_equal(found.translations, np.eye(series.lattice.dimension))
        and not grid.origin.any()
        and bool(np.all(2 * np.maximum(series.high, -series.low) <= lengths))
    )
    tables = 0 if untouched else series.count * (24 * len(lengths) + 56)
    chunks = demand.threads * _chunk(series.count, demand.threads) * 128
    return int(stage + demand.threads * held + tables + chunks)


def prepare(series: Series, grid: AffineGrid, found: Fold, demand: Demand) -> Source:
    """A cascade ready to be computed; the first stage is done here."""
    deep = _spans(series, found)[-1]
    return _Cascade(fold(series, grid, found), series.real, grid, found, demand, deep)


def _spans(series: Series, found: Fold) -> tuple[int, ...]:
    """Bounds of the extents of the folded indices along each axis."""
    low, high = series.low, series.high
    spans = []
    for axis, (translation, length) in enumerate(zip(found.translations, found.lengths, strict=True)):
        ends = np.stack([translation * low, translation * high])
        # The extents always take in the zero.
        bottom, top = min(int(ends.min(axis=0).sum()), 0), max(int(ends.max(axis=0).sum()), 0)
        # At a length that is even the index N/2 may be held on both sides.
        most = 2 * (length // 2) + 1
        last = axis == len(found.lengths) - 1
        if series.real and last:
            spans.append(min(max(abs(bottom), abs(top)), length // 2) + 1)
        elif series.real:
            # Mates of terms with l = 0 lie on the other side.
            spans.append(min(2 * max(abs(bottom), abs(top)) + 1, most))
        else:
            spans.append(min(top - bottom + 1, most))
    return tuple(spans)


def _block_planes(plane_in: int, item: int, planes: int, threads: int) -> int:
    # A few blocks to each thread, so that the threads end together.
    return max(1, min(BLOCK_BYTES // (item * plane_in), -(-planes // (8 * threads))))


def _chunk(count: int, threads: int) -> int:
    """Coefficients scattered at a time: of a small set a small part, beside whose grid they would be large."""
    return max(1 << 12, min(CHUNK, count // (16 * threads)))


class _Cascade:
    """The stages of one sum. Axis p−1 is the last, contiguous one."""

    def __init__(self, modes: Modes, real: bool, grid: AffineGrid, found: Fold, demand: Demand, widest: int) -> None:
        lengths = found.lengths
        self._real = real
        self._out_dtype = result_dtype(real, demand.precision)
        self._dtype = result_dtype(False, demand.precision)
        # A line is one plane of one row, a plane a stack of planes of one row each.
        self._dimensions = len(lengths)
        self._last = lengths[-1]
        self._across = lengths[1] if len(lengths) == 3 else 1
        self._down = lengths[0] if len(lengths) > 1 else 1
        self._shape = grid.shape
        self._lengths = lengths
        self._threads = demand.threads
        self._count = modes.values.size
        self._low_k, self._low_l, self._stage, occupied = self._scatter(modes)
        self._first_stage(occupied)
        deep = self._stage.shape[2]
        self.planes = grid.shape[0]
        rows = self.planes * self._across if len(lengths) > 1 else 1
        self._basis = _cosines(self._last, deep, rows, demand.precision, self._out_dtype) if real else None
        if len(lengths) == 1:
            self.block = self.planes
        else:
            # By the bound `widest` of what is held along the last axis, as in the estimate.
            plane = self._across * widest
            self.block = _block_planes(plane, self._dtype.itemsize, self.planes, demand.threads)
        self.concurrent = True
        self._buffers = threading.local()

    def compute(self, start: int, stop: int, out: AnyArray) -> None:
        if self._dimensions == 1:
            row = np.empty((1, 1, self._last), dtype=self._out_dtype)
            self._planes(np.zeros(1, dtype=np.int64), row)
            out[...] = row[0, 0, np.arange(start, stop) % self._last]
            return
        rows = np.arange(start, stop) % self._down
        whole_planes = self._shape[1:] == self._lengths[1:]
        if whole_planes and out.flags.c_contiguous:
            self._planes(rows, out.reshape(stop - start, self._across, self._last))
            return
        planes = np.empty((stop - start, self._across, self._last), dtype=self._out_dtype)
        self._planes(rows, planes)
        if self._dimensions == 3:
            planes = planes[:, np.arange(self._shape[1]) % self._across]
        planes = planes[..., np.arange(self._shape[-1]) % self._last]
        out[...] = planes.reshape(out.shape)

    def _scatter(self, modes: Modes) -> tuple[int, int, AnyArray, BoolArray]:
        """Coefficients into the columns that are transformed first, and which of those are occupied.

        Returns the lowest k and l held, the array (k, axis 1, l), in which the columns of one k
        are neighbours, and a table (k, l).
        """
        h, k, l = _padded(modes.indices)
        if self._real:
            # Mates of terms with l = 0 lie at −k.
            bound = max(abs(int(k.max())), abs(int(k.min())))
            low_k, high_k, low_l, high_l = -bound, bound, 0, int(l.max())
        else:
            low_k, high_k = min(0, int(k.min())), max(0, int(k.max()))
            low_l, high_l = min(0, int(l.min())), max(0, int(l.max()))
        many, deep = high_k - low_k + 1, high_l - low_l + 1
        stage = np.empty((many, self._down, deep), dtype=self._dtype)
        self._each(lambda row: stage[row].fill(0), range(many))
        occupied = np.zeros((many, deep), dtype=np.bool_)
        flat, flat_occupied = stage.reshape(-1), occupied.reshape(-1)

        def add(rows: IntArray, across: IntArray, along: IntArray, strengths: AnyArray) -> None:
            across = across - low_k
            along = along - low_l
            flat_occupied[across * deep + along] = True
            targets = across
            targets *= self._down
            targets += rows
            targets += self._down * (rows < 0)
            targets *= deep
            targets += along
            if modes.distinct:
                flat[targets] = strengths
            else:
                np.add.at(flat, targets, strengths.astype(flat.dtype))

        size = _chunk(modes.values.size, self._threads)

        def put(begin: int) -> None:
            chunk = slice(begin, begin + size)
            rows, across, along, strengths = h[chunk], k[chunk], l[chunk], modes.values[chunk]
            add(rows, across, along, strengths)
            if self._real:
                own = np.flatnonzero((along == 0) | (2 * along == self._last))
                add(-rows[own], -across[own], along[own], strengths[own].conj())

        # Terms that are folded onto each other are added up, which threads must not do at once.
        self._each(put, range(0, modes.values.size, size), alone=not modes.distinct)
        if self._real:
            # The zero term is its own mate: added up it has been put twice.
            zero = -low_k * self._down * deep
            flat[zero] = modes.zero if modes.distinct else flat[zero] - modes.zero
        return low_k, low_l, stage, occupied

    def _first_stage(self, occupied: BoolArray) -> None:
        """Transform along axis 1, in place, a run of neighbouring columns at a time."""

        def transform(k: int) -> None:
            run = np.flatnonzero(occupied[k])
            if run.size:
                _inverse_in_place(self._stage[k, :, run[0] : run[-1] + 1], axis=0)

        if self._dimensions > 1:
            self._each(transform, range(occupied.shape[0]))

    def _each(self, work: Callable[[int], None], items: range, *, alone: bool = False) -> None:
        """Do all items, a run of neighbouring ones to each thread where there is enough to share."""
        if alone or self._threads == 1 or self._count < SHARED_FROM:
            for item in items:
                work(item)
            return

        def share(part: np.ndarray[tuple[int], np.dtype[np.int64]]) -> None:
            for item in part.tolist():
                work(item)

        with ThreadPoolExecutor(self._threads) as pool:
            list(pool.map(share, np.array_split(np.array(items), self._threads)))

    def _planes(self, rows: IntArray, out: AnyArray) -> None:
        """Stages 2 and 3 of the planes `rows` into `out`, contiguous, shape (planes, N_2, N_3)."""
        block = self._block_buffer(rows.size)
        consecutive = rows[-1] - rows[0] == rows.size - 1
        chosen = slice(rows[0], rows[-1] + 1) if consecutive else rows
        source = self._stage[:, chosen].transpose(1, 0, 2)
        if self._across == 1:
            block[...] = source
        else:
            # Rows k < 0 wrap to the end; where k reaches N/2 on both sides the two ends add up.
            upper = -self._low_k
            block[:, : source.shape[1] - upper] = source[:, upper:]
            block[:, source.shape[1] - upper :] = 0
            block[:, self._across - upper :] += source[:, :upper]
            _inverse_in_place(block, axis=1)
        if self._basis is not None:
            numbers = block.reshape(-1, block.shape[2]).view(self._out_dtype)
            np.matmul(numbers, self._basis, out=out.reshape(-1, self._last))
        elif self._real:
            np.fft.irfft(block, n=self._last, axis=2, norm="forward", out=cast("FloatArray", out))
        else:
            _complex_rows(block, self._low_l, out)

    def _block_buffer(self, planes: int) -> AnyArray:
        held: AnyArray | None = getattr(self._buffers, "block", None)
        if held is None or held.shape[0] < planes:
            held = np.empty((planes, self._across, self._stage.shape[2]), dtype=self._dtype)
            self._buffers.block = held
        return held[:planes]


def _inverse_in_place(array: AnyArray, axis: int) -> None:
    made = fft.ifft(array, axis=axis, norm="forward", overwrite_x=True)
    if not np.may_share_memory(made, array):
        array[...] = made


def _complex_rows(block: AnyArray, low: int, out: AnyArray) -> None:
    ahead = block.shape[2] + low
    out[..., :ahead] = block[..., -low:]
    out[..., ahead:] = 0
    # Where l reaches both N/2 and −N/2 the two ends add up.
    out[..., out.shape[2] + low :] += block[..., :-low]
    _inverse_in_place(out, axis=2)


def _cosines(length: int, deep: int, rows: int, precision: str, dtype: np.dtype[np.generic]) -> AnyArray | None:
    """Matrix of the last stage, shape (2 deep, N), where it beats the transform; else None.

    A row (Re X_0, Im X_0, Re X_1, …) times it is Σ_l Re(X_l w^{ln}), terms with 0 < l < N/2 counted
    twice because they stand for their mates too.
    """
    if deep > MATRIX_GAIN[precision] * math.log2(length + 1) or rows < ROWS_PER_TERM * deep:
        return None
    samples = np.arange(length)
    turn = 2 * np.pi * samples / length
    cosine, sine = np.cos(turn), np.sin(turn)
    matrix = np.empty((deep, 2, length), dtype=dtype)
    for l in range(deep):
        weight = 1.0 if l == 0 or 2 * l == length else 2.0
        where = l * samples % length
        matrix[l, 0] = weight * cosine[where]
        matrix[l, 1] = -weight * sine[where]
    return matrix.reshape(2 * deep, length)


def _padded(indices: IntArray) -> tuple[IntArray, IntArray, IntArray]:
    """Columns h, k, l of folded indices of one to three axes; absent ones are zero."""
    none = np.broadcast_to(np.zeros(1, dtype=np.int64), indices.shape[:1])
    if indices.shape[1] == 3:
        return indices[:, 0], indices[:, 1], indices[:, 2]
    if indices.shape[1] == 2:
        return indices[:, 0], none, indices[:, 1]
    return none, none, indices[:, 0]
