"""Compute a costed field straight into its encoded form."""

from __future__ import annotations

import io
import zipfile
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any, BinaryIO, Literal, cast

import numpy as np
import orjson
from numpy.lib import format as npy

from engine.arrays import AnyArray
from engine.errors import InputError
from engine.evaluate import Field, Work, perform
from engine.fields import summands
from engine.quantities import Quantity, shown
from engine.resolution.advice import advice
from engine.resolution.change import ChangeWork, perform_change
from engine.resolution.coverage import coverage
from engine.resolution.response import point_response
from engine.synthesis import Progress
from service.encoders.describe import SIGN_CONVENTION, Shown, columns, describe, point_words
from service.encoders.negotiation import PICTURE_FORMATS, SAMPLE_FORMATS
from service.encoders.picture import picture
from service.encoders.samples import samples
from service.pictures.options import PictureOptions
from service.spool import Spool


@dataclass(frozen=True, slots=True, kw_only=True)
class Wanted:
    """What an answer shall hold beside the values of the work.

    Attributes
    ----------
    product : str
    quantity : Quantity
        What its values are.
    change : ChangeWork or None
        What unmeasured terms could do.
    picture : PictureOptions or None
        How it is drawn, where a picture is wanted.
    """

    product: str
    quantity: Quantity = "value"
    change: ChangeWork | None = None
    picture: PictureOptions | None = None


def write(wanted: Wanted, work: Work, form: str | None, spool: Spool, progress: Progress | None = None) -> Shown:
    """Compute, and write the answer in the given form (None: in none) to the spool; returns what was written.

    The values of a .npy are computed where they will be read from; the other forms copy them once.
    """
    if form == "npy" and wanted.quantity == "value":
        spool.append(_npy_header(work.shape, work.dtype))
        return _shown(wanted, work, perform(work, out=spool.array(work.shape, work.dtype), progress=progress))
    made = shown(perform(work, progress=progress), wanted.quantity)
    if form == "npy":
        spool.append(_npy_header(made.values.shape, made.values.dtype))
        spool.append(_bytes(made.values))
        return _shown(wanted, work, made)
    if form in SAMPLE_FORMATS:
        spool.append(_bytes(samples(made, form)))
        return _shown(wanted, work, made)
    told = explained(_shown(wanted, work, made), wanted, work)
    if form == "json":
        spool.append(_json(told))
    elif form == "npz":
        _npz(told, spool)
    elif form == "csv":
        spool.append(_csv(told))
    elif form in PICTURE_FORMATS:
        spool.append(picture(told, cast("Literal['png', 'svg']", form), wanted.picture))
    return told


def _shown(wanted: Wanted, work: Work, made: Field) -> Shown:
    return Shown(
        product=wanted.product,
        kind=work.treatment.field,
        quantity=wanted.quantity,
        coefficients=work.coefficients,
        field=made,
    )


def explained(told: Shown, wanted: Wanted, work: Work) -> Shown:
    """With what an array alone has no place for: unmeasured terms, resolution, advice."""
    change = None if wanted.change is None else perform_change(wanted.change)
    given, treatment = work.coefficients, work.treatment
    if treatment.field == "autocorrelation":
        return replace(told, change=change)
    plain = replace(treatment, field="response", apply_merit=False, self_term=0.0)
    try:
        response = point_response(summands(given, plain).series[0])
    except InputError:
        # A window or an average that leaves nothing of a point; the values are told all the same.
        response = None
    covered = coverage(given)
    words = advice(response, work.sampling, given.lattice, average=treatment.average, coverage=covered)
    return replace(told, change=change, response=response, coverage=covered, advice=words)


def _bytes(array: AnyArray) -> memoryview:
    return np.ascontiguousarray(array).reshape(-1).view(np.uint8).data


def _npy_header(shape: tuple[int, ...], dtype: np.dtype[np.generic]) -> bytes:
    buffer = io.BytesIO()
    description = {"descr": npy.dtype_to_descr(dtype), "fortran_order": False, "shape": shape}
    npy.write_array_header_1_0(buffer, description)
    return buffer.getvalue()


def _json(told: Shown) -> bytes:
    """Arrays go into the text whole, in compiled code; no Python object per value."""
    values = told.field.values
    held: Any = values
    if values.dtype.kind == "c":
        held = {"real": np.ascontiguousarray(values.real), "imag": np.ascontiguousarray(values.imag)}
    arrays = {
        "values": held,
        "uncertainty": None if told.sigma is None else told.sigma.values,
        "unmeasured": None if told.change is None else told.change.values,
    }
    return orjson.dumps({**arrays, **describe(told)}, option=orjson.OPT_SERIALIZE_NUMPY)


def _npz(told: Shown, spool: Spool) -> None:
    made = told.field
    arrays: dict[str, AnyArray | np.ndarray[Any, Any]] = {"values": made.values}
    if told.sigma is not None:
        arrays["uncertainty"] = told.sigma.values
    if told.change is not None:
        arrays["unmeasured"] = told.change.values
    if made.axes:
        arrays |= {f"axis_{number}": axis.coordinates() for number, axis in enumerate(made.axes, start=1)}
    else:
        arrays["positions"] = made.sampling.positions()
    arrays["metadata"] = np.array(orjson.dumps(describe(told)).decode())
    with zipfile.ZipFile(cast("BinaryIO", _Appending(spool)), "w", zipfile.ZIP_STORED) as archive:
        for name, array in arrays.items():
            with archive.open(f"{name}.npy", "w", force_zip64=True) as member:
                member.write(_npy_header(array.shape, array.dtype))
                member.write(_bytes(array))


class _Appending(io.RawIOBase):
    """A spool as a file that can only grow, which is all that an archive needs."""

    def __init__(self, spool: Spool) -> None:
        self._spool = spool

    def writable(self) -> bool:
        return True

    def write(self, data: Any) -> int:  # noqa: ANN401
        self._spool.append(data)
        return memoryview(data).nbytes

    def tell(self) -> int:
        return self._spool.size

    def seekable(self) -> bool:
        return False


def _csv(told: Shown) -> bytes:
    found = columns(told)
    made, sigma, change = told.field, told.sigma, told.change
    lines = [
        f"field: {told.kind}; quantity: {told.quantity}; unit: {made.unit}",
        f"method: {'+'.join(made.methods)}; coefficients summed: {made.summed}",
        f"sign convention: {SIGN_CONVENTION}",
        *([] if told.response is None else [f"resolution: {point_words(told.response)}"]),
        *([] if sigma is None else [f"uncertainty contains: {'; '.join(sigma.contains)}"]),
        *([] if sigma is None else [f"uncertainty omits: {'; '.join(sigma.omits)}"]),
        *([] if change is None else [f"unmeasured terms, rms change: {'; '.join(change.words)}"]),
        *made.applied,
        *made.notes,
        *told.advice,
    ]
    return csv_bytes(lines, found)


def csv_bytes(lines: Sequence[str], columns: Sequence[tuple[str, AnyArray]]) -> bytes:
    """Named columns of numbers under comment lines."""
    head = "".join(f"# {' '.join(line.split())}\n" for line in lines) + ",".join(name for name, _ in columns) + "\n"
    table = np.ascontiguousarray(np.stack([column for _, column in columns], axis=1), dtype=np.float64)
    # The shortest digits that read back as the same number, written by compiled code.
    rows = orjson.dumps(table, option=orjson.OPT_SERIALIZE_NUMPY)[2:-2].replace(b"],[", b"\n")
    # What is not a number leaves its cell empty, as in the tables of reports.
    rows = rows.replace(b"null", b"")
    return head.encode() + rows + b"\n"
