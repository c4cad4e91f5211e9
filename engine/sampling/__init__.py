"""Where a density is wanted."""

from engine.sampling.boxes import box, full_cell, full_cell_by_spacing
from engine.sampling.grids import AffineGrid, Axis, FreePoints, Sampling
from engine.sampling.lines import lattice_line, line, normal_line
from engine.sampling.planes import in_plane_axes, lattice_plane, plane
from engine.sampling.points import points
from engine.sampling.positions import Coordinates

__all__ = [
    "AffineGrid",
    "Axis",
    "Coordinates",
    "FreePoints",
    "Sampling",
    "box",
    "full_cell",
    "full_cell_by_spacing",
    "in_plane_axes",
    "lattice_line",
    "lattice_plane",
    "line",
    "normal_line",
    "plane",
    "points",
]
