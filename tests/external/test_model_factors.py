"""Structure factors of published structures, against plain sums by other libraries.

Form factors by xraydb (Waasmaier & Kirfel, Acta Cryst. A51 (1995) 416), operations by spglib's
database. Structures, all from memory, which means: to be corrected against a copy.

rock salt  a = 5.6402 Å; Na 0,0,0, Cl ½,½,½ in Fm-3m (handbook)
rutile     a = 4.5937, c = 2.9587 Å; Ti 0,0,0, O u,u,0 with u = 0.3048 in P4₂/mnm (Abrahams &
           Bernstein, J. Chem. Phys. 55 (1971) 3206); Ti–O 1.949 and 1.980 Å
α-quartz   a = 4.9134, c = 5.4052 Å (check 3); Si 0.4697,0,2/3, O 0.4135,0.2669,0.7858 in P3₂21
           (Levien, Prewitt & Weidner, Am. Mineral. 65 (1980) 920); Si–O 1.605 and 1.614 Å
"""

from __future__ import annotations

import cmath
import itertools
import math
import warnings
from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest
import spglib
import xraydb

from engine import evaluate, sampling
from engine.lattice import Lattice
from engine.phases import Model, beta_from_u, coefficient_set, structure_factors
from engine.reflections import Reflections

TABLES = 2e-5
"""The two libraries' form factors agree to 1e-6 of an atom; a cell has at most twelve."""


@dataclass(frozen=True)
class Structure:
    """A published structure; b in Å² is ours, the same for both libraries."""

    cell: tuple[float, float, float, float, float, float]
    number: int
    names: tuple[str, ...]
    positions: tuple[tuple[float, float, float], ...]
    in_cell: tuple[int, ...]
    electrons: int
    b: tuple[float, ...] = (0.4, 0.7)


STRUCTURES = {
    "rock salt": Structure((5.6402,) * 3 + (90.0,) * 3, 225, ("Na", "Cl"), ((0, 0, 0), (0.5, 0.5, 0.5)), (4, 4), 112),
    "rutile": Structure(
        (4.5937, 4.5937, 2.9587, 90.0, 90.0, 90.0),
        136,
        ("Ti", "O"),
        ((0, 0, 0), (0.3048, 0.3048, 0)),
        (2, 4),
        76,
    ),
    "quartz": Structure(
        (4.9134, 4.9134, 5.4052, 90.0, 90.0, 120.0),
        154,
        ("Si", "O"),
        ((0.4697, 0, 2 / 3), (0.4135, 0.2669, 0.7858)),
        (3, 6),
        90,
    ),
}


@cache
def operations(number):
    """Rotations and translations of the first setting of a space-group type, by spglib."""
    with warnings.catch_warnings():
        # The library announces another way to report errors; none is met here.
        warnings.simplefilter("ignore", DeprecationWarning)
        hall = next(n for n in range(1, 531) if spglib.get_spacegroup_type(n).number == number)
        found = spglib.get_symmetry_from_database(hall)
    return np.array(found["rotations"], dtype=float), np.array(found["translations"])


def model(name, **more):
    one = STRUCTURES[name]
    rotations, translations = operations(one.number)
    options = {"b_iso": one.b, **more}
    return Model.from_atoms(
        Lattice.from_parameters(*one.cell),
        one.names,
        one.positions,
        rotations=rotations,
        translations=translations,
        **options,
    )


def whole_cell(name):
    """(name, position, B) of every atom, images told apart one by one."""
    one = STRUCTURES[name]
    atoms = []
    for element, x, b in zip(one.names, one.positions, one.b, strict=True):
        images = []
        for r, t in zip(*operations(one.number), strict=True):
            image = r @ x + t
            if all(np.abs((image - other) - np.rint(image - other)).max() > 1e-3 for other in images):
                images.append(image)
        atoms += [(element, image, b) for image in images]
    return atoms


def reflections_to(lattice, reach):
    every = np.array(list(itertools.product(range(-reach, reach + 1), repeat=3)), dtype=np.int64)
    return every, np.linalg.norm(every @ lattice.reciprocal, axis=1) / (4 * np.pi)


def plain(name, indices, s):
    """F(hkl) = Σ f exp(−B s²) exp(+2πi h·x), term by term."""
    total = []
    atoms = whole_cell(name)
    factor = {element: xraydb.f0(element, s) for element in STRUCTURES[name].names}
    for row, (h, one) in enumerate(zip(indices, s, strict=True)):
        total.append(
            sum(
                factor[element][row] * math.exp(-b * one**2) * cmath.exp(2j * math.pi * float(h @ x))
                for element, x, b in atoms
            )
        )
    return np.array(total)


@pytest.mark.parametrize("name", STRUCTURES)
def test_against_a_plain_sum(name):
    made = model(name)
    indices, s = reflections_to(made.lattice, 4)
    np.testing.assert_allclose(structure_factors(made, indices), plain(name, indices, s), atol=TABLES)
    assert made.multiplicity.tolist() == list(STRUCTURES[name].in_cell)


@pytest.mark.parametrize("name", STRUCTURES)
def test_zero_term_is_the_number_of_electrons(name):
    """The tabulated sums at s = 0 are whole to 0.1 % of an atom's electrons."""
    zero = structure_factors(model(name), np.zeros((1, 3), dtype=np.int64))[0]
    assert zero == pytest.approx(STRUCTURES[name].electrons, rel=1e-3)


def test_rock_salt_in_closed_form():
    """4(f_Na + f_Cl) for even, 4(f_Na − f_Cl) for odd, 0 for mixed indices (common practice)."""
    made = model("rock salt", b_iso=[0.0, 0.0])
    indices = np.array([[2, 0, 0], [2, 2, 0], [1, 1, 1], [3, 1, 1], [1, 0, 0], [2, 1, 1]])
    s = np.linalg.norm(indices, axis=1) / (2 * 5.6402)
    sodium, chlorine = xraydb.f0("Na", s), xraydb.f0("Cl", s)
    sign = np.array([1, 1, -1, -1, 0, 0])
    expected = 4 * (np.abs(sign) * sodium + sign * chlorine)
    np.testing.assert_allclose(structure_factors(made, indices), expected, atol=TABLES)


def test_ions():
    """Na⁺ and Cl⁻ by the names both libraries give them."""
    one = STRUCTURES["rock salt"]
    rotations, translations = operations(one.number)
    made = Model.from_atoms(
        Lattice.from_parameters(*one.cell),
        ("Na1+", "Cl1-"),
        one.positions,
        b_iso=[0, 0],
        rotations=rotations,
        translations=translations,
    )
    found = structure_factors(made, np.array([[2, 0, 0]]))[0]
    s = 1 / 5.6402
    assert found == pytest.approx(4 * float(xraydb.f0("Na1+", s)[0] + xraydb.f0("Cl1-", s)[0]), abs=TABLES)


@pytest.mark.parametrize("name", STRUCTURES)
def test_symmetry_and_absences(name):
    """F(hR) = F(h) exp(−2πi h·t) for every operation; F = 0 where hR = h and h·t is not whole."""
    made = model(name)
    indices, _ = reflections_to(made.lattice, 2)
    found = structure_factors(made, indices)
    rotations, translations = operations(STRUCTURES[name].number)
    images = (indices @ rotations).astype(np.int64)
    phase = indices @ translations.T
    turned = found * np.exp(-2j * np.pi * phase.T)
    of_images = structure_factors(made, images.reshape(-1, 3)).reshape(turned.shape)
    np.testing.assert_allclose(of_images, turned, atol=1e-10)
    absent = np.all(images == indices, axis=2) & (np.abs(phase - np.rint(phase)) > 1e-3).T
    assert absent.any()
    assert np.abs(turned[absent]).max() < 1e-10


@pytest.mark.parametrize(
    ("name", "centre", "partner", "lengths"),
    [("rutile", "Ti", "O", [1.949] * 4 + [1.980] * 2), ("quartz", "Si", "O", [1.605] * 2 + [1.614] * 2)],
)
def test_published_bond_lengths(name, centre, partner, lengths):
    """That the coordinates fit the operations' origin: else a bond would be wrong by tenths of an Å.

    Published to 0.001 Å for cells that differ from these in the fourth digit; 0.003 Å are allowed.
    """
    lattice = Lattice.from_parameters(*STRUCTURES[name].cell)
    atoms = whole_cell(name)
    origin = next(x for element, x, _ in atoms if element == centre)
    found = sorted(
        float(np.linalg.norm((x + shift - origin) @ lattice.vectors))
        for element, x, _ in atoms
        if element == partner
        for shift in itertools.product(range(-2, 3), repeat=3)
    )
    np.testing.assert_allclose(found[: len(lengths)], lengths, atol=3e-3)


def test_isotropic_tensor_on_hexagonal_axes():
    """U12 = U11 cos γ* = U11/2 for an isotropic atom where γ = 120° (International Tables, memory)."""
    one = STRUCTURES["quartz"]
    lattice = Lattice.from_parameters(*one.cell)
    u = np.array([b / (8 * np.pi**2) * np.array([[1, 0.5, 0], [0.5, 1, 0], [0, 0, 1]]) for b in one.b])
    indices, _ = reflections_to(lattice, 3)
    tensors = structure_factors(model("quartz", b_iso=None, beta=beta_from_u(lattice, u)), indices)
    np.testing.assert_allclose(tensors, structure_factors(model("quartz"), indices), atol=1e-10)


def test_the_density_of_quartz_has_its_atoms_and_its_hand():
    """Through assembly and evaluation: peaks at the atoms, none where the mirror image
    has atoms and the structure has none within 0.8 Å.
    """
    made = model("quartz")
    indices, _ = reflections_to(made.lattice, 6)
    factors = structure_factors(made, indices)
    reflections = Reflections(
        lattice=made.lattice,
        indices=indices,
        quantity="amplitude",
        observed=np.abs(factors),
        sigma=None,
        phase=np.angle(factors),
        phase_sigma=None,
        merit=None,
        row=np.arange(len(indices)),
        scale="absolute",
    )
    coefficients = coefficient_set(reflections, unit="e/Å³")
    atoms = np.array([x for _, x, _ in whole_cell("quartz")])
    right = evaluate(coefficients, sampling.points(made.lattice, atoms)).values
    gap = -atoms[:, None] - atoms
    distance = np.linalg.norm((gap - np.rint(gap)) @ made.lattice.vectors, axis=-1).min(axis=1)
    empty = -atoms[distance > 0.8]
    assert len(empty) > 3
    assert right.min() > 6 * evaluate(coefficients, sampling.points(made.lattice, empty)).values.max()
    cell = evaluate(coefficients, sampling.full_cell(made.lattice, (14, 15, 16)))
    assert cell.values.mean() * made.lattice.volume == pytest.approx(90, rel=1e-3)
