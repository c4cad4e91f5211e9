"""From a laboratory's columns to a CoefficientSet.

Here, and nowhere else, the sign convention is resolved, Friedel mates are joined and rows that
contradict each other are refused.

Convention (International Tables for Crystallography B, chapter 1.2): a structure factor is
F(h) = ∫_cell ρ(r) exp(+2πi h·x) dV, so that ρ(r) = (1/V) Σ F(h) exp(−2πi h·x) and the
coefficient of exp(+2πi m·x) is n_m = F(−m)/V.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import MAX_INDEX, BoolArray, ComplexArray, FloatArray, IntArray, as_choice, refuse_rows
from engine.coefficients import CoefficientSet, Tally
from engine.errors import InputError
from engine.lattice import Lattice
from engine.series import faces_backward

Convention = Literal["structure_factor", "density_coefficient"]
MissingPhase = Literal["omit", "refuse"]

INDEX_COLUMNS = {1: ("l",), 2: ("h", "k"), 3: ("h", "k", "l")}
"""Names of the index columns of a stack, a planar lattice and a crystal."""

MATE_AGREEMENT = 4.0
"""Friedel mates agree when they differ by at most this many combined standard uncertainties."""
ROUNDING = 1e-6
"""Relative difference that the rounding of printed numbers explains."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Columns:
    """Columns of a table, one entry a reflection; NaN in ``phase_deg`` means unknown.

    ``indices`` holds the columns h, k, l (crystal), h, k (planar lattice) or l (stack). The
    strengths are ``amplitude`` with ``phase_deg`` (degrees), or ``real`` with ``imag``.
    """

    indices: Sequence[ArrayLike]
    amplitude: ArrayLike | None = None
    phase_deg: ArrayLike | None = None
    real: ArrayLike | None = None
    imag: ArrayLike | None = None
    sigma: ArrayLike | None = None
    phase_sigma_deg: ArrayLike | None = None
    merit: ArrayLike | None = None


@dataclass(slots=True)
class _Rows:
    """Rows under treatment; every array has the same length."""

    indices: IntArray
    values: ComplexArray
    known: BoolArray
    sigma: FloatArray | None
    phase_sigma: FloatArray | None
    merit: FloatArray | None
    row: IntArray
    flipped: BoolArray

    def take(self, chosen: IntArray | BoolArray) -> _Rows:
        def part(column: FloatArray | None) -> FloatArray | None:
            return None if column is None else column[chosen]

        return _Rows(
            self.indices[chosen],
            self.values[chosen],
            self.known[chosen],
            part(self.sigma),
            part(self.phase_sigma),
            part(self.merit),
            self.row[chosen],
            self.flipped[chosen],
        )


def assemble(
    lattice: Lattice,
    columns: Columns,
    *,
    values: Convention,
    density: Literal["real", "complex"] = "real",
    mean: float | complex | None = None,
    missing_phase: MissingPhase = "omit",
    unit: str = "arbitrary",
) -> CoefficientSet:
    """Check the columns, resolve their convention and join what says the same.

    Parameters
    ----------
    lattice : Lattice
        Of dimension d; decides which index columns are wanted.
    columns : Columns
        Strengths in electrons or the like (``structure_factor``: F, whose σ is divided by V
        along with it) or in the density's unit (``density_coefficient``: n).
    values : {"structure_factor", "density_coefficient"}
        What the columns carry. Never guessed.
    density : {"real", "complex"}
        A real density obeys Friedel's law and half of each pair suffices; with a complex one
        every coefficient stands for itself.
    mean : float or complex, optional
        The zero term, F(000) or n_0 by `values`, where no row carries it.
    missing_phase : {"omit", "refuse"}
        Rows without phase stay in the set, marked; ``refuse`` makes them an error.
    unit : str
        Unit of the density.

    Raises
    ------
    InputError
        Naming the column and the rows: unequal lengths, indices that are not whole or too
        large, numbers that are not finite, negative amplitude or σ, figure of merit outside
        0…1, repeated rows or Friedel mates that contradict each other, a zero term given
        twice or not real, missing phases where they are refused.
    """
    as_choice(values, get_args(Convention), "values")
    as_choice(density, ("real", "complex"), "density")
    as_choice(missing_phase, get_args(MissingPhase), "missing_phase")
    rows = _read(lattice, columns, missing_phase)
    read = rows.values.size
    if values == "structure_factor":
        rows.indices = -rows.indices
        rows.values = rows.values / lattice.volume
        if rows.sigma is not None:
            rows.sigma = rows.sigma / lattice.volume
    if density == "real":
        rows.flipped = faces_backward(rows.indices)
        rows.indices = np.where(rows.flipped[:, None], -rows.indices, rows.indices)
        rows.values = np.where(rows.flipped, rows.values.conj(), rows.values)
    rows = rows.take(np.lexsort((rows.row, rows.flipped, *rows.indices.T[::-1])))
    rows, repeats = _join_repeats(rows)
    rows, mates = _join_mates(rows)
    rows, zero_term = _place_zero(rows, mean, lattice, values, density)
    return CoefficientSet(
        lattice=lattice,
        # Column after column: each index is read by itself far more often than row by row.
        indices=np.asfortranarray(rows.indices),
        values=rows.values,
        phase_known=rows.known,
        sigma=rows.sigma,
        phase_sigma=rows.phase_sigma,
        merit=rows.merit,
        real=density == "real",
        unit=unit,
        tally=Tally(rows=read, repeats_joined=repeats, mates_joined=mates, zero_term=zero_term),
    )


def _read(lattice: Lattice, columns: Columns, missing_phase: MissingPhase) -> _Rows:
    names = INDEX_COLUMNS[lattice.dimension]
    if len(columns.indices) != len(names):
        raise InputError(
            names[0],
            f"a lattice of dimension {lattice.dimension} has the index columns {', '.join(names)}",
            f"give {len(names)} index columns",
        )
    given = [_numbers(column, name) for column, name in zip(columns.indices, names, strict=True)]
    size = _common_length(given, names)
    indices = np.stack([_index_column(column, name) for column, name in zip(given, names, strict=True)], axis=1)
    values, known = _strengths(columns, size, missing_phase)
    sigma = _column(columns.sigma, "sigma", size)
    phase_sigma = _column(columns.phase_sigma_deg, "phase_sigma_deg", size)
    merit = _column(columns.merit, "merit", size)
    for column, name in ((sigma, "sigma"), (phase_sigma, "phase_sigma_deg")):
        if column is not None:
            refuse_rows(column < 0, name, "is negative", "give standard uncertainties of 0 or more")
    if merit is not None:
        refuse_rows((merit < 0) | (merit > 1), "merit", "lies outside 0…1", "give figures of merit from 0 to 1")
    return _Rows(
        indices,
        values,
        known,
        sigma,
        None if phase_sigma is None else np.deg2rad(phase_sigma),
        merit,
        np.arange(size),
        np.zeros(size, dtype=np.bool_),
    )


def _common_length(columns: Sequence[FloatArray], names: Sequence[str]) -> int:
    sizes = [column.shape for column in columns]
    for name, size in zip(names, sizes, strict=True):
        if len(size) != 1:
            raise InputError(name, "is not a plain column of numbers", "give one number a row")
        if size != sizes[0]:
            raise InputError(
                name,
                f"has {size[0]} rows where {names[0]} has {sizes[0][0]}",
                "give columns of equal length",
            )
    if sizes[0] == (0,):
        raise InputError(names[0], "is empty", "give at least one coefficient")
    return int(sizes[0][0])


def _numbers(column: ArrayLike, name: str) -> FloatArray:
    try:
        array = np.asarray(column)
    except ValueError as fault:
        raise InputError(name, "is not a plain column of numbers", "give one number a row") from fault
    if array.dtype.kind not in "iuf":
        raise InputError(name, "is not a column of real numbers", "give numbers only")
    return np.asarray(array, dtype=np.float64)


def _index_column(array: FloatArray, name: str) -> IntArray:
    refuse_rows(~np.isfinite(array), name, "is not a finite number", "give integer indices")
    whole = np.rint(array)
    refuse_rows(whole != array, name, "is not a whole number", "give integer indices")
    refuse_rows(np.abs(whole) > MAX_INDEX, name, f"lies beyond ±{MAX_INDEX}", "check the indices and the cell")
    return whole.astype(np.int64)


def _column(column: ArrayLike | None, name: str, size: int) -> FloatArray | None:
    if column is None:
        return None
    array = _numbers(column, name)
    if array.shape != (size,):
        have = array.size if array.ndim == 1 else "an array of"
        raise InputError(name, f"has {have} rows where the indices have {size}", "give columns of equal length")
    if name != "phase_deg":
        refuse_rows(~np.isfinite(array), name, "is not a finite number", "give finite numbers")
    return array


def _strengths(columns: Columns, size: int, missing_phase: MissingPhase) -> tuple[ComplexArray, BoolArray]:
    polar = columns.amplitude is not None or columns.phase_deg is not None
    cartesian = columns.real is not None or columns.imag is not None
    if polar and cartesian:
        raise InputError(
            "amplitude", "is given along with real and imag", "give amplitude and phase_deg, or real and imag"
        )
    if cartesian:
        real = _column(columns.real, "real", size)
        imag = _column(columns.imag, "imag", size)
        if real is None or imag is None:
            raise InputError("imag" if imag is None else "real", "is absent", "give both real and imag")
        return real + 1j * imag, np.ones(size, dtype=np.bool_)
    amplitude = _column(columns.amplitude, "amplitude", size)
    if amplitude is None:
        raise InputError("amplitude", "is absent", "give amplitude and phase_deg, or real and imag")
    refuse_rows(amplitude < 0, "amplitude", "is negative", "give the magnitude and add 180 to the phase")
    phase = _column(columns.phase_deg, "phase_deg", size)
    if phase is None:
        phase = np.full(size, np.nan)
    refuse_rows(np.isinf(phase), "phase_deg", "is infinite", "give degrees, or null where unknown")
    known = ~np.isnan(phase)
    if missing_phase == "refuse":
        refuse_rows(~known, "phase_deg", "is missing", 'give every phase, or ask for missing_phase "omit"')
    return amplitude * _unit_phasor(np.where(known, phase, 0.0)), known


def _unit_phasor(degrees: FloatArray) -> ComplexArray:
    """exp(iφ), exact at multiples of 90°, where the phases of centric sets lie."""
    turns = np.remainder(degrees, 360.0)
    quarter, rest = np.divmod(turns, 90.0)
    quarters = np.array([1, 1j, -1, -1j], dtype=np.complex128)
    return quarters[quarter.astype(np.int64) % 4] * np.exp(1j * np.deg2rad(rest))


def _join_repeats(rows: _Rows) -> tuple[_Rows, int]:
    """Keep the first of rows that repeat each other in all columns; refuse those that differ."""
    same = np.all(rows.indices[1:] == rows.indices[:-1], axis=1) & (rows.flipped[1:] == rows.flipped[:-1])
    if not same.any():
        return rows, 0
    first = np.concatenate([[True], ~same])
    leader = np.flatnonzero(first)[np.cumsum(first) - 1]
    differs = (np.abs(rows.values - rows.values[leader]) > 1e-12 * np.abs(rows.values)) | (
        rows.known != rows.known[leader]
    )
    for column in (rows.sigma, rows.phase_sigma, rows.merit):
        if column is not None:
            differs |= column != column[leader]
    if differs.any():
        offending = np.unique(np.concatenate([rows.row[differs], rows.row[leader[differs]]]))
        raise InputError.for_rows(
            (),
            offending,
            "the same indices come again with different values",
            "merge repeated measurements first, or remove all but one",
        )
    return rows.take(first), int(np.count_nonzero(~first))


def _join_mates(rows: _Rows) -> tuple[_Rows, int]:
    """Average Friedel mates that agree within their errors; refuse those that do not."""
    pair = np.flatnonzero(np.all(rows.indices[1:] == rows.indices[:-1], axis=1))
    if not pair.size:
        return rows, 0
    left, right = rows.take(pair), rows.take(pair + 1)
    both = left.known & right.known
    gap = np.where(both, np.abs(left.values - right.values), np.abs(np.abs(left.values) - np.abs(right.values)))
    size = np.maximum(np.abs(left.values), np.abs(right.values))
    allowed = MATE_AGREEMENT * np.hypot(_spread(left, both), _spread(right, both)) + ROUNDING * size
    apart = np.flatnonzero(gap > allowed)
    if apart.size:
        worst = apart[np.argsort(-(gap[apart] / size[apart]), kind="stable")]
        offending = np.stack([left.row[worst], right.row[worst]], axis=1).ravel()
        raise InputError.for_rows(
            (),
            offending,
            f"{apart.size} Friedel pairs disagree beyond {MATE_AGREEMENT:g} standard uncertainties; "
            "a real density has F(−h) = conj F(h)",
            'correct or merge the pairs, or ask for "density": "complex"',
        )
    left.values, left.sigma, left.phase_sigma = _averaged(left, right, both)
    left.known = left.known | right.known
    if left.merit is not None and right.merit is not None:
        left.merit = (left.merit + right.merit) / 2
    kept = np.ones(rows.values.size, dtype=np.bool_)
    kept[pair + 1] = False
    place = (np.cumsum(kept) - 1)[pair]
    joined = rows.take(kept)
    joined.values[place], joined.known[place] = left.values, left.known
    for target, source in (
        (joined.sigma, left.sigma),
        (joined.phase_sigma, left.phase_sigma),
        (joined.merit, left.merit),
    ):
        if target is not None and source is not None:
            target[place] = source
    return joined, int(pair.size)


def _spread(rows: _Rows, with_phase: BoolArray) -> FloatArray:
    """Standard uncertainty of the complex value, or of its modulus where a phase is missing."""
    amplitude = np.zeros(rows.values.size) if rows.sigma is None else rows.sigma
    if rows.phase_sigma is None:
        return amplitude
    across = np.where(with_phase, np.abs(rows.values) * rows.phase_sigma, 0.0)
    return np.hypot(amplitude, across)


def _averaged(left: _Rows, right: _Rows, both: BoolArray) -> tuple[ComplexArray, FloatArray | None, FloatArray | None]:
    """Mean of two mates weighted by 1/σ² (equally where a σ is missing or zero), and its σ."""
    share, sigma = _weights(left.sigma, right.sigma)
    modulus = share * np.abs(left.values) + (1 - share) * np.abs(right.values)
    phasor = np.where(left.known, left.values, right.values)
    length = np.abs(phasor)
    one_known = modulus * np.where(length > 0, phasor / np.where(length > 0, length, 1), 1)
    values = np.where(both, share * left.values + (1 - share) * right.values, one_known)
    _, phase_sigma = _weights(left.phase_sigma, right.phase_sigma)
    if phase_sigma is not None and left.phase_sigma is not None and right.phase_sigma is not None:
        single = np.where(left.known, left.phase_sigma, right.phase_sigma)
        phase_sigma = np.where(both, phase_sigma, single)
    return values, sigma, phase_sigma


def _weights(left: FloatArray | None, right: FloatArray | None) -> tuple[FloatArray | float, FloatArray | None]:
    if left is None or right is None:
        return 0.5, None
    usable = (left > 0) & (right > 0)
    square_left, square_right = np.where(usable, left, 1) ** 2, np.where(usable, right, 1) ** 2
    share = square_right / (square_left + square_right)
    return share, np.hypot(share * left, (1 - share) * right)


def _place_zero(
    rows: _Rows,
    mean: float | complex | None,
    lattice: Lattice,
    values: Convention,
    density: Literal["real", "complex"],
) -> tuple[_Rows, str]:
    at_zero = np.flatnonzero(~rows.indices.any(axis=1))
    if at_zero.size:
        place = int(at_zero[0])
        if mean is not None:
            raise InputError(
                "mean",
                f"is given, but row {int(rows.row[place])} carries the zero term too",
                "give the zero term once",
            )
        value = rows.values[place]
        if density == "real" and abs(value.imag) > ROUNDING * abs(value):
            raise InputError.for_rows(
                "phase_deg",
                rows.row[at_zero],
                "the zero term of a real density must be real",
                "give it the phase 0 or 180",
            )
        if density == "real":
            rows.values[place] = value.real
        return rows, "measured"
    if mean is None:
        return rows, "absent"
    number = complex(mean)
    if not np.isfinite(number):
        raise InputError("mean", "is not a finite number", "give a finite number")
    if density == "real" and number.imag:
        raise InputError("mean", "of a real density must be real", "give a real number")
    scale = lattice.volume if values == "structure_factor" else 1.0
    # The lexical order of the rows is kept: the zero term goes where its indices belong.
    place = int(np.searchsorted(_lexical_sign(rows.indices), 0))

    def insert(column: FloatArray | None, value: float) -> FloatArray | None:
        return None if column is None else np.insert(column, place, value)

    return (
        _Rows(
            np.insert(rows.indices, place, 0, axis=0),
            np.insert(rows.values, place, number / scale),
            np.insert(rows.known, place, True),
            insert(rows.sigma, 0.0),
            insert(rows.phase_sigma, 0.0),
            insert(rows.merit, 1.0),
            np.insert(rows.row, place, -1),
            np.insert(rows.flipped, place, False),
        ),
        "given",
    )


def _lexical_sign(indices: IntArray) -> IntArray:
    """Sign of the first index other than zero; ascending where the rows are in lexical order."""
    sign = np.sign(indices[:, -1])
    for column in indices.T[-2::-1]:
        sign = np.where(column == 0, sign, np.sign(column))
    return np.asarray(sign)
