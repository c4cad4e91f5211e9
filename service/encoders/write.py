"""Compute a costed field straight into its encoded form."""

from __future__ import annotations

import io
import zipfile
from collections.abc import Callable
from typing import Any, BinaryIO, cast

import numpy as np
import orjson
from numpy.lib import format as npy

from engine.arrays import AnyArray
from engine.evaluate import Field, Work, perform
from engine.quantities import Quantity, shown
from engine.synthesis import Progress
from service.encoders.describe import columns, describe
from service.spool import Spool

Describe = Callable[[Field], dict[str, Any]]


def write(
    product: str, work: Work, form: str | None, spool: Spool, progress: Progress | None, quantity: Quantity = "value"
) -> Field:
    """Compute, and write the answer in the given form (None: in none) to the spool; returns what was written.

    The values of a .npy are computed where they will be read from; the other forms copy them once.
    """
    if form == "npy" and quantity == "value":
        spool.append(_npy_header(work.shape, work.dtype))
        return perform(work, out=spool.array(work.shape, work.dtype), progress=progress)
    made = shown(perform(work, progress=progress), quantity)
    if form is None:
        return made
    metadata = describe(product, work.treatment.field, work.coefficients, made, quantity)
    beside = None if made.sigma is None or quantity != "value" else made.sigma.values
    if form == "json":
        spool.append(_json(made, beside, metadata))
    elif form == "npz":
        _npz(made, beside, metadata, spool)
    elif form == "npy":
        spool.append(_npy_header(made.values.shape, made.values.dtype))
        spool.append(_bytes(made.values))
    else:
        spool.append(_csv(work, made, metadata, quantity))
    return made


def _bytes(array: AnyArray) -> memoryview:
    return np.ascontiguousarray(array).reshape(-1).view(np.uint8).data


def _npy_header(shape: tuple[int, ...], dtype: np.dtype[np.generic]) -> bytes:
    buffer = io.BytesIO()
    description = {"descr": npy.dtype_to_descr(dtype), "fortran_order": False, "shape": shape}
    npy.write_array_header_1_0(buffer, description)
    return buffer.getvalue()


def _json(made: Field, sigma: AnyArray | None, metadata: dict[str, Any]) -> bytes:
    """The array goes into the text whole, in compiled code; no Python object per value."""
    values = made.values
    held: Any = values
    if values.dtype.kind == "c":
        held = {"real": np.ascontiguousarray(values.real), "imag": np.ascontiguousarray(values.imag)}
    return orjson.dumps({"values": held, "uncertainty": sigma, **metadata}, option=orjson.OPT_SERIALIZE_NUMPY)


def _npz(made: Field, sigma: AnyArray | None, metadata: dict[str, Any], spool: Spool) -> None:
    arrays: dict[str, AnyArray | np.ndarray[Any, Any]] = {"values": made.values}
    if sigma is not None:
        arrays["uncertainty"] = sigma
    if made.axes:
        arrays |= {f"axis_{number}": axis.coordinates() for number, axis in enumerate(made.axes, start=1)}
    else:
        arrays["positions"] = made.sampling.positions()
    arrays["metadata"] = np.array(orjson.dumps(metadata).decode())
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


def _csv(work: Work, made: Field, metadata: dict[str, Any], quantity: Quantity) -> bytes:
    found = columns(work.coefficients, made, quantity)
    sigma = made.sigma
    told = [
        f"field: {metadata['field']}; quantity: {quantity}; unit: {metadata['unit']}",
        f"method: {metadata['summary']['method']}; coefficients summed: {made.summed}",
        f"sign convention: {metadata['summary']['sign_convention']}",
        *([] if sigma is None else [f"uncertainty contains: {'; '.join(sigma.contains)}"]),
        *([] if sigma is None else [f"uncertainty omits: {'; '.join(sigma.omits)}"]),
        *metadata["applied"],
        *metadata["notes"],
    ]
    head = "".join(f"# {' '.join(line.split())}\n" for line in told) + ",".join(name for name, _ in found) + "\n"
    table = np.ascontiguousarray(np.stack([column for _, column in found], axis=1), dtype=np.float64)
    # The shortest digits that read back as the same number, written by compiled code.
    rows = orjson.dumps(table, option=orjson.OPT_SERIALIZE_NUMPY)[2:-2].replace(b"],[", b"\n")
    return head.encode() + rows + b"\n"
