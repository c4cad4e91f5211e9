"""Meshes as binary glTF, read back by the rules of the specification."""

from __future__ import annotations

import numpy as np
import pytest

from engine.surfaces import Mesh
from service.encoders import gltf
from service.encoders.gltf import COLOUR, GENERATOR, glb
from tests.service.gltf_files import opened

RNG = np.random.default_rng(17)


def mesh_of(vertices, triangles):
    normals = RNG.normal(size=(vertices, 3))
    normals /= np.linalg.norm(normals, axis=1)[:, None]
    corners = np.stack([RNG.permutation(vertices)[:3] for _ in range(triangles)]).astype(np.int32)
    return Mesh(RNG.uniform(-50, 200, (vertices, 3)), normals, corners, np.zeros(triangles, dtype=bool))


@pytest.mark.parametrize("triangles", [1, 2, 3, 4])
@pytest.mark.parametrize("name", ["density", "Dichte 0,3 e/Å³", "x", "xy"])
def test_what_is_written_is_read_back(triangles, name):
    """Whatever padding the two chunks need."""
    mesh = mesh_of(7, triangles)
    extras = {"level": 0.1, "unit": "e/Å³", "cell": {"vectors": np.eye(3).tolist()}, "volume": None}
    made = opened(b"".join(glb(mesh, extras, name=name)))
    assert made.extras == extras
    assert made.document["asset"]["generator"] == GENERATOR == "densityloom"
    assert made.document["meshes"][0]["name"] == name
    assert made.document["materials"][0]["pbrMetallicRoughness"]["baseColorFactor"] == list(COLOUR)
    assert "matrix" not in made.document["nodes"][0]
    np.testing.assert_array_equal(made.positions, mesh.vertices.astype(np.float32))
    np.testing.assert_array_equal(made.normals, mesh.normals.astype(np.float32))
    np.testing.assert_array_equal(made.triangles, mesh.triangles)


@pytest.mark.parametrize(("vertices", "kind"), [(65_535, 5123), (65_536, 5125)])
def test_indices_are_short_where_they_fit(vertices, kind):
    base = mesh_of(vertices, 1)
    last = np.array([[0, 1, vertices - 1]], dtype=np.int32)
    made = opened(b"".join(glb(Mesh(base.vertices, base.normals, last, base.caps), {}, name="m")))
    assert made.document["accessors"][2]["componentType"] == kind
    np.testing.assert_array_equal(made.triangles, last)


def test_the_colour_is_one():
    assert all(0 <= part <= 1 for part in COLOUR)
    assert gltf.COLOUR[3] == 1
