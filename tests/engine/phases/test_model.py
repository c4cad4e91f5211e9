"""Structure factors of models: against plain sums, and the laws they obey."""

from __future__ import annotations

import numpy as np
import pytest
import xraydb
from hypothesis import given, settings
from hypothesis import strategies as st

from engine.lattice import Lattice
from engine.phases import Model, beta_from_u, structure_factors
from tests.engine.phases.trial import INVERSION, SCREWS, plain_factors, scattered, sphere, triclinic, whole_cell
from tests.strategies import refusal_of

LATTICE = triclinic()
BOX = Lattice.from_parameters(7.1, 8.3, 9.7, 90, 90, 90)
NAMES = ("C", "O", "Fe3+", "C", "S")
H = sphere(LATTICE, 2.5, half=False)
BOX_H = sphere(BOX, 2.0, half=False)
POSITIONS = scattered(5, 11, LATTICE)
OCCUPANCY = np.array([1.0, 0.4, 1.0, 0.5, 0.9])
B = np.array([1.0, 2.0, 0.5, 3.0, 0.0])


def f0(name, s):
    return xraydb.f0(name, s)


def plain(lattice, indices, atoms):
    return plain_factors(indices, np.linalg.norm(indices @ lattice.reciprocal, axis=1) / (4 * np.pi), atoms, f0)


def in_box(**more):
    return Model.from_atoms(
        BOX, NAMES, POSITIONS, occupancy=OCCUPANCY, b_iso=B, rotations=SCREWS[0], translations=SCREWS[1], **more
    )


def test_against_a_plain_sum():
    """Form factors by xraydb, term by term; the tables of the two libraries agree to 1e-6 of an atom."""
    atoms = Model.from_atoms(LATTICE, NAMES, POSITIONS, occupancy=OCCUPANCY, b_iso=B)
    expected = plain(LATTICE, H, list(zip(NAMES, POSITIONS, OCCUPANCY, B, strict=True)))
    np.testing.assert_allclose(structure_factors(atoms, H), expected, atol=5e-6)


def test_symmetry_makes_the_whole_cell():
    """General positions, all written out: the same sum."""
    every = [
        (name, image, o, b)
        for name, x, o, b in zip(NAMES, POSITIONS, OCCUPANCY, B, strict=True)
        for image in whole_cell(x, *SCREWS)
    ]
    assert len(every) == 20
    made = in_box()
    np.testing.assert_allclose(structure_factors(made, BOX_H), plain(BOX, BOX_H, every), atol=2e-5)
    assert made.multiplicity.tolist() == [4] * 5


def test_special_positions_count_once():
    """P-1: the centre at ½,½,0 is one atom, the general position two; also with a rounded coordinate."""
    for x in (0.5, 0.50002):
        atoms = Model.from_atoms(
            LATTICE,
            ("S", "O"),
            [[x, 0.5, 0.0], [0.1, 0.2, 0.3]],
            b_iso=[1.0, 2.0],
            rotations=INVERSION[0],
            translations=INVERSION[1],
        )
        assert atoms.site_order.tolist() == [2, 1]
        assert atoms.multiplicity.tolist() == [1, 2]
        written = [("S", [0.5, 0.5, 0], 1, 1), ("O", [0.1, 0.2, 0.3], 1, 2), ("O", [-0.1, -0.2, -0.3], 1, 2)]
        # A phase of 2π·5·2e-5 on sixteen electrons changes the real part in second order only.
        found = structure_factors(atoms, H)
        np.testing.assert_allclose(found, plain(LATTICE, H, written), atol=5e-6 + 16 * (2 * np.pi * 6e-5) ** 2)
        # The sum has the symmetry to rounding, however rounded the coordinate.
        np.testing.assert_allclose(found.imag, 0, atol=1e-12)


def test_a_disordered_pair_about_a_centre_stays_two():
    """Half an atom 0.3 Å off the centre is a general position: further than on_site."""
    off = 0.3 / LATTICE.lengths[0]
    options = {"b_iso": [1.0], "rotations": INVERSION[0], "translations": INVERSION[1]}
    assert Model.from_atoms(LATTICE, ("O",), [[off / 2, 0, 0]], **options).multiplicity[0] == 2
    assert Model.from_atoms(LATTICE, ("O",), [[off / 2, 0, 0]], on_site=0.4, **options).multiplicity[0] == 1


@settings(max_examples=30)
@given(st.tuples(*[st.floats(-2, 2)] * 3))
def test_origin_shift(shift):
    """F′(h) = F(h) exp(2πi h·t)."""
    options = {"occupancy": OCCUPANCY, "b_iso": B}
    fixed = structure_factors(Model.from_atoms(LATTICE, NAMES, POSITIONS, **options), H)
    moved = structure_factors(Model.from_atoms(LATTICE, NAMES, POSITIONS + shift, **options), H)
    np.testing.assert_allclose(moved, fixed * np.exp(2j * np.pi * H @ np.array(shift)), atol=1e-11)


@pytest.mark.parametrize("operation", range(4))
def test_symmetry_of_structure_factors(operation):
    """F(hR) = F(h) exp(−2πi h·t): conventions, section 3."""
    r, t = SCREWS[0][operation], SCREWS[1][operation]
    atoms = in_box()
    found = structure_factors(atoms, (BOX_H @ r).astype(np.int64))
    np.testing.assert_allclose(found, structure_factors(atoms, BOX_H) * np.exp(-2j * np.pi * BOX_H @ t), atol=1e-11)


def test_an_atom_may_be_any_of_its_images():
    """Anisotropic too: the tensor of the image at Rx + t is RβRᵀ."""
    beta = beta_from_u(BOX, np.tile([[0.03, 0.01, -0.01], [0.01, 0.02, 0.005], [-0.01, 0.005, 0.04]], (5, 1, 1)))
    r, t = SCREWS[0][2], SCREWS[1][2]
    options = {"rotations": SCREWS[0], "translations": SCREWS[1]}
    one = Model.from_atoms(BOX, NAMES, POSITIONS, beta=beta, **options)
    other = Model.from_atoms(BOX, NAMES, POSITIONS @ r.T + t, beta=r @ beta @ r.T, **options)
    np.testing.assert_allclose(structure_factors(one, BOX_H), structure_factors(other, BOX_H), atol=1e-11)
    unlike = Model.from_atoms(BOX, NAMES, POSITIONS @ r.T + t, beta=beta, **options)
    assert np.abs(structure_factors(one, BOX_H) - structure_factors(unlike, BOX_H)).max() > 1


def test_anisotropic_equals_isotropic_where_it_is():
    unit = LATTICE.reciprocal / np.linalg.norm(LATTICE.reciprocal, axis=1)[:, None]
    u = B[:, None, None] / (8 * np.pi**2) * (unit @ unit.T)
    isotropic = Model.from_atoms(LATTICE, NAMES, POSITIONS, b_iso=B)
    tensors = Model.from_atoms(LATTICE, NAMES, POSITIONS, beta=beta_from_u(LATTICE, u))
    np.testing.assert_allclose(structure_factors(tensors, H), structure_factors(isotropic, H), atol=1e-11)


def test_anisotropic_by_a_plain_product():
    """One atom at the origin: F = f exp(−2π² Σ U^ik a*_i a*_k h_i h_k), written out."""
    u = np.array([[0.03, 0.01, -0.01], [0.01, 0.02, 0.005], [-0.01, 0.005, 0.04]])
    found = structure_factors(Model.from_atoms(LATTICE, ("C",), [[0, 0, 0]], beta=beta_from_u(LATTICE, u[None])), H)
    star = np.linalg.norm(LATTICE.reciprocal, axis=1) / (2 * np.pi)
    for h, value in zip(H[::7], found[::7], strict=True):
        q = sum(u[i, k] * star[i] * star[k] * h[i] * h[k] for i in range(3) for k in range(3))
        s = np.linalg.norm(h @ LATTICE.reciprocal) / (4 * np.pi)
        assert value == pytest.approx(f0("C", s)[0] * np.exp(-2 * np.pi**2 * q), abs=2e-6)


def test_zero_term_is_the_number_of_electrons():
    """The tabulated sums are whole to 0.5 % of an atom."""
    zero = structure_factors(in_box(), np.zeros((1, 3), dtype=np.int64))[0]
    electrons = 4 * (OCCUPANCY @ [6, 8, 23, 6, 16])
    assert zero.real == pytest.approx(electrons, rel=2e-3)
    assert zero.imag == 0


def test_dispersion_breaks_friedels_law():
    """Two atoms, one of which absorbs: |F(h)|² − |F(−h)|² = −4 f_C f″_S sin 2π h·(x_S − x_C)."""
    atoms = Model.from_atoms(LATTICE, ("C", "S"), [[0, 0, 0], [0.13, 0.29, 0.41]], b_iso=[0.0, 0.0])
    anomalous = {"C": 0j, "S": 0.3 + 0.6j}
    plus, minus = (structure_factors(atoms, sign * H, dispersion=anomalous) for sign in (1, -1))
    s = np.linalg.norm(H @ LATTICE.reciprocal, axis=1) / (4 * np.pi)
    carbon = f0("C", s)
    # |f_C + (a + ib) e^{iα}|²: the part odd in α is −2 f_C b sin α.
    expected = -4 * carbon * 0.6 * np.sin(2 * np.pi * H @ [0.13, 0.29, 0.41])
    np.testing.assert_allclose(np.abs(plus) ** 2 - np.abs(minus) ** 2, expected, atol=1e-4)
    plain_two = structure_factors(atoms, H)
    np.testing.assert_allclose(structure_factors(atoms, -H), plain_two.conj(), atol=1e-12)


def test_planes_and_stacks():
    """A planar lattice and a layer stack take atoms in two coordinates and in one."""
    plane = Lattice.from_planar_parameters(2.46, 2.46, 120.0)
    h = np.array([[1, 0], [1, 1], [2, 0]])
    found = structure_factors(Model.from_atoms(plane, ("C", "C"), [[1 / 3, 2 / 3], [2 / 3, 1 / 3]], b_iso=[0, 0]), h)
    s = np.linalg.norm(h @ plane.reciprocal, axis=1) / (4 * np.pi)
    # Two atoms about a centre: 2 cos 2π(h + 2k)/3 is −1, 2 and −1.
    np.testing.assert_allclose(found, f0("C", s) * [-1, 2, -1], atol=1e-5)
    stack = Lattice.from_period(60.0)
    centred = {"rotations": [[[1]], [[-1]]], "translations": [[0], [0]]}
    layers = Model.from_atoms(stack, ("O", "C"), [[0.0], [0.2]], b_iso=[5.0, 5.0], **centred)
    l = np.arange(1, 6)[:, None]
    s = l[:, 0] / 120
    by_hand = (f0("O", s) + 2 * f0("C", s) * np.cos(0.4 * np.pi * l[:, 0])) * np.exp(-5 * s**2)
    np.testing.assert_allclose(structure_factors(layers, l), by_hand, atol=1e-5)


def test_other_scattering_and_chunks(monkeypatch):
    """Neutrons by a function of one's own; tiles of any size give the same sum."""
    lengths = {"C": 6.646, "O": 5.803, "Fe3+": 9.45, "S": 2.847}
    atoms = in_box()
    whole = structure_factors(atoms, BOX_H, form_factor=lambda name, s: np.full(s.size, lengths[name]))
    zero = structure_factors(atoms, np.zeros((1, 3), dtype=int), form_factor=lambda name, s: np.full(1, lengths[name]))
    assert zero[0].real == pytest.approx(4 * sum(lengths[n] * o for n, o in zip(NAMES, OCCUPANCY, strict=True)))
    monkeypatch.setattr("engine.phases.model.ATOMS_AT_A_TIME", 3)
    monkeypatch.setattr("engine.phases.model.ROWS_AT_A_TIME", 50)
    small = structure_factors(atoms, BOX_H, form_factor=lambda name, s: np.full(s.size, lengths[name]))
    np.testing.assert_allclose(small, whole, atol=1e-11)


def test_leaving_atoms_out():
    atoms = in_box()
    gone = np.array([False, True, False, True, False])
    parts = structure_factors(atoms.without(gone), BOX_H) + structure_factors(atoms.without(~gone), BOX_H)
    np.testing.assert_allclose(parts, structure_factors(atoms, BOX_H), atol=1e-11)
    assert not structure_factors(atoms.without(np.ones(5, dtype=bool)), BOX_H).any()


def build(**changed):
    options = {"elements": ("C", "O"), "positions": [[0.1, 0.2, 0.3], [0.4, 0.5, 0.6]], "b_iso": [1.0, 1.0], **changed}
    return Model.from_atoms(LATTICE, **options)


EYE = np.eye(3)
ZERO = np.zeros((2, 3))


@pytest.mark.parametrize(
    ("call", "path"),
    [
        (lambda: build(elements=()), ("elements",)),
        (lambda: build(elements=("C", 8)), ("elements",)),
        (lambda: build(elements=("C",)), ("positions",)),
        (lambda: build(positions=[[0, 0, 0], [0, 0, np.nan]]), ("positions", 1, 2)),
        (lambda: build(occupancy=[1.0, 1.2]), ("occupancy",)),
        (lambda: build(occupancy=[-0.1, 1.0]), ("occupancy",)),
        (lambda: build(rotations=[EYE]), ("translations",)),
        (lambda: build(translations=[[0, 0, 0]]), ("rotations",)),
        (lambda: build(rotations=[EYE], translations=ZERO), ("rotations",)),
        # The identity twice; no identity; a fourfold axis without its powers; half of a centring; not whole.
        (lambda: build(rotations=[EYE, EYE], translations=ZERO), ("rotations",)),
        (lambda: build(rotations=[-EYE], translations=ZERO[:1]), ("rotations",)),
        (lambda: build(rotations=[EYE, [[0, -1, 0], [1, 0, 0], [0, 0, 1]]], translations=ZERO), ("rotations",)),
        (lambda: build(rotations=[EYE, EYE], translations=[[0, 0, 0], [0.25, 0, 0]]), ("rotations",)),
        (lambda: build(rotations=[EYE, EYE / 2], translations=ZERO), ("rotations",)),
        (lambda: build(on_site=0.0), ("on_site",)),
        (lambda: build().without(np.array([True])), ("left_out",)),
        (lambda: structure_factors(build(), np.array([[1, 0]])), ("indices",)),
        (lambda: structure_factors(build(), np.array([[1, 0, 0.5]])), ("indices",)),
        (lambda: structure_factors(build(), H, dispersion={"C": 0.1j}), ("dispersion", "O")),
        (lambda: structure_factors(build(), H, dispersion={"C": 0.1j, "O": np.nan}), ("dispersion", "O")),
        (lambda: structure_factors(build(), H, form_factor=lambda name, s: s * np.nan), ("form_factor", "C")),
        (lambda: structure_factors(build(), H, form_factor=lambda name, s: np.ones(3)), ("form_factor", "C")),
    ],
)
def test_refusals(call, path):
    assert refusal_of(call).path == path


def test_rounded_thirds_lie_on_the_axis():
    hexagonal = Lattice.from_parameters(5, 5, 7, 90, 90, 120)
    third = np.array([[0, -1, 0], [1, -1, 0], [0, 0, 1]], dtype=float)
    site = {"b_iso": [1.0], "rotations": [EYE, third, third @ third], "translations": np.zeros((3, 3))}
    for x, y, places in ((1 / 3, 2 / 3, 1), (0.3333, 0.6667, 1), (0.30, 0.66, 3)):
        assert Model.from_atoms(hexagonal, ("C",), [[x, y, 0.1]], **site).multiplicity[0] == places


def test_unknown_element():
    assert "Xx" in str(refusal_of(lambda: structure_factors(build(elements=("C", "Xx")), H)))


def test_a_site_symmetry_that_cannot_be_is_refused():
    """Four collinear images, three of them within on_site: no subgroup of order three in one of four."""
    cell = Lattice.from_parameters(2, 2, 2, 90, 90, 90)
    shifts = np.array([[0, 0, 0], [0.25, 0, 0], [0.5, 0, 0], [0.75, 0, 0]])
    options = {"b_iso": [1.0], "rotations": np.array([EYE] * 4), "translations": shifts}
    assert Model.from_atoms(cell, ("C",), [[0, 0, 0]], **options).multiplicity[0] == 4
    refusal = refusal_of(lambda: Model.from_atoms(cell, ("C",), [[0, 0, 0]], on_site=0.6, **options))
    assert (refusal.path, refusal.rows) == (("positions",), (0,))
