"""Files as a laboratory sends them, small and invented, and the forms that carry them."""

from __future__ import annotations

import io
import json
from collections.abc import Mapping
from typing import Any

import numpy as np

from service.intake import check
from service.parts import Part
from tests.service import bodies

CELL = {"a": 5.1, "b": 6.2, "c": 7.3, "alpha": 90, "beta": 90, "gamma": 90}
CIF = """data_x
_cell_length_a 5.1
_cell_length_b 6.2
_cell_length_c 7.3
_cell_angle_alpha 90
_cell_angle_beta 90
_cell_angle_gamma 90
_space_group_name_H-M_alt 'P 21 21 21'
loop_
_refln_index_h
_refln_index_k
_refln_index_l
_refln_F_squared_meas
_refln_F_squared_sigma
_refln_phase_calc
1 1 1 100.0 2.0 30
1 1 2 50.0 2.0 60
0 0 2 70.0 2.0 0
1 2 3 -3.0 2.0 100
"""
TABLE = """h,k,l,intensity,intensity_sigma,phase_deg
1,1,1,100,2,30
1,1,2,50,2,60
0,0,2,70,2,0
1,2,3,-3,2,100
"""
"""The rows of `CIF`, and nothing of its cell, symmetry and radiation."""
AMPLITUDES = """h,k,l,amplitude,sigma,phase_deg
1,1,1,10,0.2,30
1,1,2,7,0.2,60
0,0,2,8,0.2,0
"""
WITHOUT_CELL = "".join(line + "\n" for line in CIF.splitlines() if "_cell" not in line)
GRID = {"set": {"values": "structure_factor"}, "shape": [4, 4, 4]}


def archive(text: str) -> bytes:
    """A delimited text as a NumPy archive."""
    names, *rows = [line.split(",") for line in text.split()]
    packed = io.BytesIO()
    columns = zip(*rows, strict=True)
    np.savez_compressed(packed, **{name: np.array(column, float) for name, column in zip(names, columns, strict=True)})
    return packed.getvalue()


def sent(request: Mapping[str, Any] | None, file: str | bytes | None, media_type: str = "chemical/x-cif") -> bytes:
    """A form of a request and a file of reflections, each of which may be left out."""
    parts = [] if request is None else [("request", "application/json", json.dumps(request).encode())]
    if file is not None:
        parts.append(("reflections", media_type, file.encode() if isinstance(file, str) else file))
    return bodies.form(*parts)


def with_set(request: Mapping[str, Any], **members: Any) -> dict[str, Any]:
    """A request with members of its set replaced or added."""
    return {**request, "set": {**request["set"], **members}}


def asked(file: str | bytes, product: str = "inspect", name: str = "", **members: Any) -> Any:
    """The checked model of a request with a file."""
    request = {"set": members} if product == "inspect" else with_set(GRID, **members)
    data = file.encode() if isinstance(file, str) else file
    return check(product, request, {"reflections": Part("", data, name)}, max_body_bytes=2**20)[1]
