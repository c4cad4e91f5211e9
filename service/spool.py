"""Bytes between processes: an unnamed file that lives while somebody holds it.

On Linux it is memory (memfd), elsewhere a temporary file that is unlinked already. Either way it
has no name to clean up, can be mapped as an array to compute into, and its descriptor can be
handed to another process.
"""

from __future__ import annotations

import mmap
import os
import tempfile
from pathlib import Path
from types import TracebackType
from typing import Self

import numpy as np

from engine.arrays import AnyArray


class Spool:
    """A file descriptor to write to, map, and read back; usable as a context manager."""

    def __init__(self, descriptor: int) -> None:
        self._descriptor = descriptor

    @classmethod
    def unnamed(cls) -> Self:
        """A new, empty spool."""
        if hasattr(os, "memfd_create"):
            return cls(os.memfd_create("densityloom", os.MFD_CLOEXEC))
        with tempfile.TemporaryFile() as file:
            return cls(os.dup(file.fileno()))

    @classmethod
    def at(cls, path: Path) -> Self:
        """A spool over a new file at `path`."""
        return cls(os.open(path, os.O_RDWR | os.O_CREAT | os.O_TRUNC | getattr(os, "O_CLOEXEC", 0), 0o644))

    @property
    def descriptor(self) -> int:
        return self._descriptor

    @property
    def size(self) -> int:
        """Bytes held."""
        return os.fstat(self._descriptor).st_size

    def append(self, data: bytes | bytearray | memoryview) -> None:
        """Write all of `data` at the end."""
        view = memoryview(data).cast("B")
        while view:
            view = view[os.write(self._descriptor, view) :]

    def array(self, shape: tuple[int, ...], dtype: np.dtype[np.generic]) -> AnyArray:
        """Room for an array at the end, mapped: what is written into it is in the spool."""
        offset = self.size
        count = int(np.prod(shape, dtype=np.int64))
        os.ftruncate(self._descriptor, offset + count * dtype.itemsize)
        os.lseek(self._descriptor, 0, os.SEEK_END)
        # Populated at once: page by page the kernel would interrupt the computation at every 4 KiB.
        flags = mmap.MAP_SHARED | getattr(mmap, "MAP_POPULATE", 0)
        mapping = mmap.mmap(self._descriptor, offset + count * dtype.itemsize, flags=flags)
        mapped: AnyArray = np.frombuffer(mapping, dtype=dtype, count=count, offset=offset).reshape(shape)
        return mapped

    def view(self) -> memoryview:
        """All bytes, mapped for reading; empty where there are none."""
        size = self.size
        if size == 0:
            return memoryview(b"")
        return memoryview(mmap.mmap(self._descriptor, size, access=mmap.ACCESS_READ))

    def close(self) -> None:
        """Let go of the descriptor; mappings stay valid. A second call does nothing."""
        if self._descriptor >= 0:
            os.close(self._descriptor)
            self._descriptor = -1

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, fault: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()
