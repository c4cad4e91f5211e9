"""Small invented fields, and what can be read back from a picture of them."""

from __future__ import annotations

import re
import struct
import zlib
from xml.etree import ElementTree

import numpy as np

from engine import sampling
from engine.assembly import Columns, assemble
from engine.coefficients import CoefficientSet
from engine.evaluate import Field, evaluate
from engine.fields import Treatment
from engine.lattice import Lattice

SVG = "{http://www.w3.org/2000/svg}"
STACK = Lattice.from_period(40.0)
OBLIQUE = Lattice.from_planar_parameters(10.0, 14.0, 100.0)
TRICLINIC = Lattice.from_parameters(6.1, 7.4, 9.3, 82.0, 97.0, 105.0)


def coefficients(lattice: Lattice, *, density="real", mean=1.0, unit="e/Å³", sigma=0.02) -> CoefficientSet:
    """Coefficients that fall off with the index, of random phases."""
    reach = np.arange(-3, 4)
    mesh = np.stack([axis.ravel() for axis in np.meshgrid(*[reach] * lattice.dimension, indexing="ij")])
    mesh = mesh[:, np.any(mesh != 0, axis=0)]
    if density == "real":
        mesh = mesh[:, mesh[-1] > 0]
    size = mesh.shape[1]
    columns = Columns(
        indices=list(mesh),
        amplitude=np.exp(-0.2 * np.sum(mesh**2, axis=0)),
        phase_deg=np.random.default_rng(5).uniform(-180, 180, size),
        sigma=None if sigma is None else np.full(size, sigma),
    )
    return assemble(lattice, columns, values="density_coefficient", density=density, mean=mean, unit=unit)


def profile(*, field="density", samples=200, **options) -> tuple[CoefficientSet, Field]:
    made = coefficients(STACK, **options)
    where = sampling.line(STACK, [0], [1], samples)
    return made, evaluate(made, where, Treatment(field=field), uncertainty=made.sigma is not None)


def cell(*, field="density", shape=(40, 50), **options) -> tuple[CoefficientSet, Field]:
    """One cell of the oblique planar lattice."""
    made = coefficients(OBLIQUE, **options)
    where = sampling.full_cell(OBLIQUE, shape)
    return made, evaluate(made, where, Treatment(field=field), uncertainty=made.sigma is not None)


def crystal(*, field="density", shape=(12, 16, 24), **options) -> tuple[CoefficientSet, Field]:
    """One cell of the triclinic crystal."""
    made = coefficients(TRICLINIC, **options)
    return made, evaluate(made, sampling.full_cell(TRICLINIC, shape), Treatment(field=field))


def parsed(picture: bytes) -> ElementTree.Element:
    return ElementTree.fromstring(picture)


def group(root: ElementTree.Element, name: str) -> list[ElementTree.Element]:
    """Every group of a name."""
    return [element for element in root.iter() if element.get("id") == name]


def named(root: ElementTree.Element, prefix: str) -> list[str]:
    """Names of groups that begin with a prefix, in order."""
    return [name for element in root.iter() if (name := element.get("id") or "").startswith(prefix)]


def texts(root: ElementTree.Element) -> list[str]:
    """Every piece of text drawn."""
    return ["".join(element.itertext()).strip() for element in root.iter(f"{SVG}text")]


def paths(element: ElementTree.Element) -> list[np.ndarray]:
    """Corners of every path below an element, in points, y upwards; (n, 2) each."""
    found = []
    for path in element.iter(f"{SVG}path"):
        numbers = [float(number) for number in re.findall(r"-?\d+(?:\.\d+)?(?:e-?\d+)?", path.get("d") or "")]
        found.append(np.array(numbers).reshape(-1, 2) * [1, -1])
    return found


def chunks(picture: bytes) -> dict[str, list[bytes]]:
    """Chunks of a PNG, each checked against its sum."""
    assert picture[:8] == b"\x89PNG\r\n\x1a\n"
    found: dict[str, list[bytes]] = {}
    place = 8
    while place < len(picture):
        length, kind = struct.unpack(">I4s", picture[place : place + 8])
        data = picture[place + 8 : place + 8 + length]
        (checksum,) = struct.unpack(">I", picture[place + 8 + length : place + 12 + length])
        assert checksum == zlib.crc32(kind + data)
        found.setdefault(kind.decode(), []).append(data)
        place += 12 + length
    return found


def size(picture: bytes) -> tuple[int, int]:
    """Width and height of a PNG, pixels."""
    width, height = struct.unpack(">II", chunks(picture)["IHDR"][0][:8])
    return width, height
