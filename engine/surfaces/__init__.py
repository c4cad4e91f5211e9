"""Surfaces on which a field in a crystal has one value, as meshes of triangles."""

from engine.surfaces.isosurface import Surface, SurfaceTask, SurfaceWork, perform_surface, prepare_surface
from engine.surfaces.level import Level
from engine.surfaces.mesh import Mesh
from engine.surfaces.region import Region

__all__ = [
    "Level",
    "Mesh",
    "Region",
    "Surface",
    "SurfaceTask",
    "SurfaceWork",
    "perform_surface",
    "prepare_surface",
]
