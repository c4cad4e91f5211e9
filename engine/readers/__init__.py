"""Laboratory files to columns of numbers."""

from engine.readers.conversion import to_columns, to_reflections
from engine.readers.delimited import read_delimited
from engine.readers.files import read
from engine.readers.npz import read_npz
from engine.readers.table import ReadTable

__all__ = ["ReadTable", "read", "read_delimited", "read_npz", "to_columns", "to_reflections"]
