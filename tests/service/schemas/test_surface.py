"""Surfaces in requests."""

from __future__ import annotations

import pytest
from pydantic import ValidationError

from engine.surfaces import SurfaceTask
from engine.surfaces.level import Level
from service.schemas.products import GridIn, ProfileIn
from service.schemas.surface import SurfaceIn


def test_defaults_are_those_of_the_engine():
    task, made = SurfaceTask(level=Level("level", 0.0)), SurfaceIn(level=0.0)
    assert (made.closed, made.max_triangles) == (task.closed, task.max_triangles)


@pytest.mark.parametrize(
    "members",
    [
        {"level": "1"},
        {"level": True},
        {"level_rms": float("nan")},
        {"level": 1e31},
        {"closed": 1},
        {"max_triangles": 99},
        {"max_triangles": 5_000_001},
        {"max_triangles": 1000.0},
        {"levels": 1.0},
    ],
)
def test_bad_members(members):
    with pytest.raises(ValidationError):
        SurfaceIn.model_validate(members)


@pytest.mark.parametrize("most", [100, 5_000_000])
def test_bounds_are_taken(most):
    assert SurfaceIn.model_validate({"level": 1, "max_triangles": most}).max_triangles == most


def test_of_a_grid_alone():
    assert "surface" in GridIn.model_fields
    assert "surface" not in ProfileIn.model_fields
