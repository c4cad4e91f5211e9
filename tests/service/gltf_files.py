"""A reader of binary glTF for tests: it refuses what the specification forbids.

Khronos glTF 2.0 (ISO/IEC 12113:2022): § 4.4 the container, § 3.6 buffers, views and accessors, § 3.7 meshes.
"""

from __future__ import annotations

import json
import struct
from dataclasses import dataclass

import numpy as np

COMPONENTS = {5123: np.dtype("<u2"), 5125: np.dtype("<u4"), 5126: np.dtype("<f4")}
WIDTHS = {"SCALAR": 1, "VEC3": 3}
ARRAY_BUFFER, ELEMENT_ARRAY_BUFFER = 34962, 34963


@dataclass(frozen=True)
class Opened:
    document: dict
    positions: np.ndarray
    normals: np.ndarray
    triangles: np.ndarray

    @property
    def extras(self):
        return self.document["asset"]["extras"]


def opened(content: bytes) -> Opened:
    magic, version, length = struct.unpack_from("<4sII", content)
    assert (magic, version, length) == (b"glTF", 2, len(content))
    (text_length, kind), start = struct.unpack_from("<I4s", content, 12), 20
    assert kind == b"JSON"
    assert text_length % 4 == 0
    text = content[start : start + text_length]
    assert text[:1] == b"{"
    assert text.rstrip(b" ")[-1:] == b"}"
    (numbers_length, kind), start = struct.unpack_from("<I4s", content, start + text_length), start + text_length + 8
    assert kind == b"BIN\0"
    assert numbers_length % 4 == 0
    numbers = content[start:]
    assert len(numbers) == numbers_length
    document = json.loads(text)
    assert document["asset"]["version"] == "2.0"
    (buffer,) = document["buffers"]
    assert "uri" not in buffer
    assert 0 <= numbers_length - buffer["byteLength"] <= 3
    arrays, end = [], 0
    for accessor in document["accessors"]:
        view = document["bufferViews"][accessor["bufferView"]]
        kind, width = COMPONENTS[accessor["componentType"]], WIDTHS[accessor["type"]]
        begin = view["byteOffset"] + accessor.get("byteOffset", 0)
        assert view["buffer"] == 0
        assert begin % max(kind.itemsize, 4 if view["target"] == ARRAY_BUFFER else 1) == 0
        assert view["byteOffset"] >= end, "views overlap"
        end = view["byteOffset"] + view["byteLength"]
        assert end <= buffer["byteLength"]
        assert accessor["count"] * width * kind.itemsize <= view["byteLength"]
        arrays.append(np.frombuffer(numbers, kind, accessor["count"] * width, begin).reshape(-1, width))
    assert sum(view["byteLength"] for view in document["bufferViews"]) <= buffer["byteLength"]
    (scene,), (node,), (mesh,) = (document[name] for name in ("scenes", "nodes", "meshes"))
    assert (document["scene"], scene["nodes"], node["mesh"]) == (0, [0], 0)
    (primitive,) = mesh["primitives"]
    assert primitive["mode"] == 4
    assert document["materials"][primitive["material"]]["doubleSided"] is True
    places = (*(primitive["attributes"][name] for name in ("POSITION", "NORMAL")), primitive["indices"])
    positions, normals, indices = (arrays[place] for place in places)
    targets = [document["bufferViews"][document["accessors"][place]["bufferView"]]["target"] for place in places]
    assert targets == [ARRAY_BUFFER, ARRAY_BUFFER, ELEMENT_ARRAY_BUFFER]
    bounds = document["accessors"][places[0]]
    np.testing.assert_array_equal(np.float32(bounds["min"]), positions.min(axis=0))
    np.testing.assert_array_equal(np.float32(bounds["max"]), positions.max(axis=0))
    assert [float(np.float32(number)) for number in bounds["min"] + bounds["max"]] == bounds["min"] + bounds["max"]
    assert len(positions) == len(normals)
    assert np.isfinite(positions).all()
    np.testing.assert_allclose(np.linalg.norm(normals.astype(float), axis=1), 1, atol=1e-6)
    assert len(indices) % 3 == 0
    assert indices.max() < len(positions)
    # The largest number of its type stands for a restart, which lists of triangles may not hold.
    assert indices.max() < np.iinfo(indices.dtype).max
    return Opened(document, positions, normals, indices.reshape(-1, 3).astype(np.int64))
