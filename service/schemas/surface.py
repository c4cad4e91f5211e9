"""Which surface of a grid is wanted as a mesh."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field

from engine.surfaces.isosurface import FEWEST_TRIANGLES, MOST_TRIANGLES, TRIANGLES
from service.schemas.base import Strict


class SurfaceIn(Strict):
    """Of a grid as model/gltf-binary: the surface on which the field has one value; give exactly one of the levels.

    Normals point towards lower values: out of the region above the level."""

    level: float | None = Field(None, ge=-1e30, le=1e30, description="value in the unit of the field")
    level_rms: float | None = Field(
        None, ge=-1e6, le=1e6, description="multiples of the rms deviation from the mean, counted from the mean"
    )
    level_sigmas: float | None = Field(
        None, ge=-1e6, le=1e6, description="multiples of the rms standard uncertainty, counted from zero; needs errors"
    )
    closed: bool = Field(
        False, description="caps in the faces of the cell or box close the mesh round what lies above the level"
    )
    max_triangles: Annotated[int, Field(ge=FEWEST_TRIANGLES, le=MOST_TRIANGLES)] = Field(
        TRIANGLES, description="a finer mesh is made again on a coarser grid, and the answer says so"
    )
