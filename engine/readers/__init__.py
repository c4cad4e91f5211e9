"""Laboratory files to columns of numbers."""

from engine.readers.delimited import read_delimited
from engine.readers.npz import read_npz

__all__ = ["read_delimited", "read_npz"]
