"""An asymmetric set with its symmetry gives the density of the full set, over HTTP.

The full set does not come from our expansion: its structure factors are plain sums over all atoms of the cell, whose
places are those of the general positions in International Tables for Crystallography, volume A (2016), chapters 2.2
and 2.3.
"""

from __future__ import annotations

import itertools
import re
from typing import NamedTuple

import numpy as np
import pytest

from tests.service.raw_files import CELL

ATOMS = 3


class Kind(NamedTuple):
    name: str
    symmetry: dict
    cell: dict
    volume: float
    positions: list[str]


KINDS = [
    Kind(
        "P-1",
        {"space_group": "P-1"},
        {"a": 5.1, "b": 6.2, "c": 7.3, "alpha": 90, "beta": 90, "gamma": 120},
        5.1 * 6.2 * 7.3 * np.sqrt(3) / 2,
        ["x,y,z", "-x,-y,-z"],
    ),
    Kind(
        "P212121",
        {"space_group": "P 21 21 21"},
        CELL,
        5.1 * 6.2 * 7.3,
        ["x,y,z", "-x+1/2,-y,z+1/2", "-x,y+1/2,-z+1/2", "x+1/2,-y+1/2,-z"],
    ),
    Kind(
        "p6mm",
        {"plane_group": "p6mm"},
        {"a": 31.0, "b": 31.0, "gamma": 120},
        31.0**2 * np.sqrt(3) / 2,
        ["x,y", "-y,x-y", "-x+y,-x", "-x,-y", "y,-x+y", "x-y,x",
         "-y,-x", "-x+y,y", "x,x-y", "y,x", "x-y,-y", "-x,-x+y"],
    ),
    Kind("stack", {"stack_group": "-1"}, {"period": 17.4}, 17.4, ["z", "-z"]),
]  # fmt: skip


def operation(text, names):
    """R and t of x' = R x + t, spelt like -x+1/2,y,-z."""
    rows, shifts = [], []
    for part in text.split(","):
        signs = dict.fromkeys(names, 0)
        for sign, name in re.findall(r"([+-]?)([xyz])", part):
            signs[name] = -1 if sign == "-" else 1
        rows.append([signs[name] for name in names])
        shifts.append(0.5 if "1/2" in part else 0.0)
    return np.array(rows), np.array(shifts)


class Structure:
    """A few Gaussian atoms in general positions, real or absorbing, and all that follows by plain sums."""

    def __init__(self, kind, density):
        names = {1: "z", 2: "xy", 3: "xyz"}[len(kind.positions[0].split(","))]
        rng = np.random.default_rng(6)
        self.kind, self.density, self.names = kind, density, {"z": "l", "xy": "hk", "xyz": "hkl"}[names]
        self.operations = [operation(text, names) for text in kind.positions]
        places = rng.uniform(0, 1, (ATOMS, len(names)))
        self.atoms = np.concatenate([places @ r.T + t for r, t in self.operations])
        strengths = rng.uniform(3, 9, ATOMS) * (1 if density == "real" else np.exp(1j * rng.uniform(-1, 1, ATOMS)))
        self.strengths = np.tile(strengths, len(self.operations))

    def factor(self, h):
        h = np.array(h)
        return (self.strengths * np.exp(2j * np.pi * self.atoms @ h)).sum() * np.exp(-0.05 * self.length(h))

    def length(self, h):
        """A measure of |h|² that the group leaves as it is."""
        return np.mean([((h @ r) ** 2).sum() for r, _ in self.operations])

    def orbit(self, h):
        """Indices that symmetry relates, and their mates where the density is real; the zero term apart."""
        found = {tuple(map(int, np.array(h) @ r)) for r, _ in self.operations}
        return found | {tuple(-i for i in one) for one in found} if self.density == "real" else found

    def indices(self):
        """One of each orbit, and all members of all orbits; those without strength left out."""
        unique, full = [], []
        for h in itertools.product(range(-3, 4), repeat=len(self.names)):
            if any(h) and h not in full and abs(self.factor(h)) > 1e-9:
                unique.append(h)
                full += sorted(self.orbit(h))
        return unique, full

    def columns(self, indices, values, form):
        sign, scale = (1, 1.0) if values == "structure_factor" else (-1, 1 / self.kind.volume)
        # n_m is F(−m)/V.
        strengths = np.array([self.factor(h) for h in indices]) * scale
        made = dict(zip(self.names, (sign * np.array(indices)).T.tolist(), strict=True))
        if form == "amplitude":
            return {**made, "amplitude": abs(strengths).tolist(), "phase_deg": np.degrees(np.angle(strengths)).tolist()}
        return {**made, "real": strengths.real.tolist(), "imag": strengths.imag.tolist()}

    def body(self, indices, values, form, positions, **members):
        zero = self.factor([0] * len(self.names)) / (1 if values == "structure_factor" else self.kind.volume)
        mean = {"mean": zero.real} if self.density == "real" else {"mean": zero.real, "mean_imag": zero.imag}
        given = {"cell": self.kind.cell, "values": values, "density": self.density, **mean}
        return {"set": {**given, **self.columns(indices, values, form), **members}, "positions": positions.tolist()}

    def summed(self, indices, positions):
        """ρ(r) = (1/V) Σ F exp(−2πi h·x), the zero term included."""
        h = np.array([*indices, [0] * len(self.names)])
        factors = np.array([self.factor(one) for one in h])
        return np.exp(-2j * np.pi * positions @ h.T) @ factors / self.kind.volume


def values_of(client, body):
    answer = client.post("/v1/points", json=body)
    assert answer.status_code == 200, answer.text
    values = answer.json()["values"]
    return np.array(values["real"]) + 1j * np.array(values["imag"]) if isinstance(values, dict) else np.array(values)


POSITIONS = np.random.default_rng(8).uniform(-1, 1, (7, 3))


@pytest.mark.parametrize("form", ["amplitude", "real"])
@pytest.mark.parametrize("values", ["structure_factor", "density_coefficient"])
@pytest.mark.parametrize("density", ["real", "complex"])
@pytest.mark.parametrize("kind", KINDS, ids=lambda kind: kind.name)
def test_asymmetric_set_gives_what_the_full_one_gives(client, kind, density, values, form):
    structure = Structure(kind, density)
    unique, full = structure.indices()
    assert len(unique) < len(full)
    positions = POSITIONS[:, : len(structure.names)]
    asymmetric = values_of(client, structure.body(unique, values, form, positions, symmetry=kind.symmetry))
    whole = values_of(client, structure.body(full, values, form, positions))
    expected = structure.summed(full, positions)
    # A few hundred terms of doubles, phases in degrees among them: 1e-12 of the sum of their sizes is ample.
    bound = 1e-12 * sum(abs(structure.factor(h)) for h in full) / kind.volume
    np.testing.assert_allclose(whole, expected if density == "complex" else expected.real, rtol=0, atol=bound)
    np.testing.assert_allclose(asymmetric, whole, rtol=0, atol=bound)


@pytest.mark.parametrize(
    "symmetry",
    [
        {"space_group": 19},
        {"space_group": "P212121"},
        {"hall": "P 2ac 2ab"},
        {"operations": ["-x+1/2,-y,z+1/2", "-x,y+1/2,-z+1/2"]},
        {"operations": KINDS[1].positions},
    ],
)
def test_a_group_has_many_names(client, symmetry):
    structure = Structure(KINDS[1], "real")
    unique, full = structure.indices()
    asked = structure.body(unique, "structure_factor", "amplitude", POSITIONS, symmetry=symmetry)
    expected = structure.summed(full, POSITIONS).real
    np.testing.assert_allclose(values_of(client, asked), expected, rtol=0, atol=1e-12 * abs(expected).max() * len(full))


def test_inverted_structure_is_another(client):
    """Were it not, the tests above could not tell the sign of the exponent."""
    structure = Structure(KINDS[1], "real")
    unique, full = structure.indices()
    asked = structure.body(unique, "structure_factor", "amplitude", -POSITIONS, symmetry={"space_group": 19})
    inverted = structure.summed(full, POSITIONS).real
    assert abs(values_of(client, asked) - inverted).max() > 0.1 * abs(inverted).max()


def test_unknown_phases_stay_unknown(client):
    """Amplitudes alone give the autocorrelation, and it has the expanded set's mates and images in it."""
    structure = Structure(KINDS[2], "real")
    unique, full = structure.indices()
    positions = POSITIONS[:, :2]
    asymmetric = structure.body(unique, "structure_factor", "amplitude", positions, symmetry={"plane_group": 17})
    whole = structure.body(full, "structure_factor", "amplitude", positions)
    for body in (asymmetric, whole):
        body["set"]["phase_deg"] = [None] * len(body["set"]["phase_deg"])
        body["field"] = "autocorrelation"
    h = np.array(full)
    squares = np.array([abs(structure.factor(one)) ** 2 for one in full]) / structure.kind.volume
    zero = abs(structure.factor([0, 0])) ** 2 / structure.kind.volume
    expected = zero + np.cos(2 * np.pi * positions @ h.T) @ squares
    bound = 1e-12 * (squares.sum() + zero)
    np.testing.assert_allclose(values_of(client, whole), expected, rtol=0, atol=bound)
    np.testing.assert_allclose(values_of(client, asymmetric), expected, rtol=0, atol=bound)


def test_answer_says_what_was_expanded(client):
    structure = Structure(KINDS[1], "real")
    unique, full = structure.indices()
    body = structure.body(unique, "structure_factor", "amplitude", POSITIONS, symmetry={"space_group": 19})
    # A row that the screw axis forbids is left out, and said to be.
    for name, value in zip(("h", "k", "l", "amplitude", "phase_deg"), (0, 0, 1, 3.0, 0.0), strict=True):
        body["set"][name].append(value)
    told = client.post("/v1/points", json=body).json()
    words = f"expanded by P 21 21 21 from {len(unique) + 1} to {len(full) // 2} reflections"
    assert any(words in one and "1 systematically absent" in one for one in told["applied"]), told["applied"]
    assert told["summary"]["coefficients"]["rows"] == len(unique) + 1
