"""A mesh as binary glTF 2.0 (Khronos, ISO/IEC 12113:2022): one file of two chunks, JSON and numbers."""

from __future__ import annotations

import struct
from typing import Any

import numpy as np
import orjson
from numpy.typing import NDArray

from engine.surfaces import Mesh

GENERATOR = "densityloom"
COLOUR = (0.09, 0.35, 0.41, 1.0)
"""Of the surface, linear red, green, blue, and opacity."""

_MAGIC, _VERSION = b"glTF", 2
_JSON, _NUMBERS = b"JSON", b"BIN\0"
_BYTE_ALIGNMENT = 4
_ARRAY_BUFFER, _ELEMENT_ARRAY_BUFFER = 34962, 34963
_FLOAT, _UNSIGNED_SHORT, _UNSIGNED_INT = 5126, 5123, 5125
_TRIANGLES = 4
_MOST_SHORT = 65_535
"""Vertices that short indices can name: the largest short one is reserved."""

Buffer = bytes | memoryview


def glb(mesh: Mesh, extras: dict[str, Any], *, name: str) -> list[Buffer]:
    """The file's parts, in order.

    Positions are the mesh's, Cartesian in Å, below a node without a transform.

    Parameters
    ----------
    extras : dict
        Plain data, for ``asset.extras``.
    name : str
        Of the mesh.
    """
    positions = _single(mesh.vertices)
    # A length of 1 in double precision is one in single precision.
    normals = _single(mesh.normals)
    few = len(positions) <= _MOST_SHORT
    indices = np.ascontiguousarray(mesh.triangles, dtype="<u2" if few else "<u4")
    arrays = (positions, normals, indices)
    views: list[dict[str, int]] = []
    numbers: list[Buffer] = []
    offset = 0
    for array, target in zip(arrays, (_ARRAY_BUFFER, _ARRAY_BUFFER, _ELEMENT_ARRAY_BUFFER), strict=True):
        views.append({"buffer": 0, "byteOffset": offset, "byteLength": array.nbytes, "target": target})
        padding = -array.nbytes % _BYTE_ALIGNMENT
        numbers += [array.reshape(-1).view(np.uint8).data, bytes(padding)]
        offset += array.nbytes + padding
    document = {
        "asset": {"version": "2.0", "generator": GENERATOR, "extras": extras},
        "scene": 0,
        "scenes": [{"nodes": [0]}],
        "nodes": [{"mesh": 0, "name": name}],
        "meshes": [
            {
                "name": name,
                "primitives": [
                    {
                        "attributes": {"POSITION": 0, "NORMAL": 1},
                        "indices": 2,
                        "material": 0,
                        "mode": _TRIANGLES,
                    }
                ],
            }
        ],
        "materials": [
            {
                "name": "surface",
                "doubleSided": True,
                "pbrMetallicRoughness": {"baseColorFactor": COLOUR, "metallicFactor": 0.0, "roughnessFactor": 0.7},
            }
        ],
        "accessors": [
            {
                "bufferView": 0,
                "componentType": _FLOAT,
                "count": len(positions),
                "type": "VEC3",
                "min": positions.min(axis=0).astype(np.float64).tolist(),
                "max": positions.max(axis=0).astype(np.float64).tolist(),
            },
            {"bufferView": 1, "componentType": _FLOAT, "count": len(normals), "type": "VEC3"},
            {
                "bufferView": 2,
                "componentType": _UNSIGNED_SHORT if few else _UNSIGNED_INT,
                "count": indices.size,
                "type": "SCALAR",
            },
        ],
        "bufferViews": views,
        "buffers": [{"byteLength": offset}],
    }
    text = orjson.dumps(document)
    text += b" " * (-len(text) % _BYTE_ALIGNMENT)
    length = 12 + 8 + len(text) + 8 + offset
    head = struct.pack("<4sII", _MAGIC, _VERSION, length) + struct.pack("<I4s", len(text), _JSON) + text
    return [head, struct.pack("<I4s", offset, _NUMBERS), *numbers]


def _single(rows: NDArray[np.float64]) -> NDArray[np.float32]:
    return np.ascontiguousarray(rows, dtype="<f4")
