"""From a file of raw intensities to atoms: published simple structures through the whole engine.

Structure factors by a plain sum over all atoms of the cell, form factors by xraydb (Waasmaier &
Kirfel, Acta Cryst. A51 (1995) 416), images by spglib's operations. They become noisy intensities on
an arbitrary scale in a CIF and in delimited text; what the engine makes of these is searched for
maxima. Structures, all handbook values from memory, to be corrected against a copy:

rock salt  Fm-3m, a = 5.6402 Å; Na 0,0,0, Cl ½,½,½
rutile     P4₂/mnm, a = 4.5937, c = 2.9587 Å; Ti 0,0,0, O u,u,0, u = 0.3048 (Abrahams & Bernstein,
           J. Chem. Phys. 55 (1971) 3206)
α-quartz   P3₂21, a = 4.9134, c = 5.4052 Å; Si 0.4697,0,0, O 0.4135,0.2669,0.1191 (Levien, Prewitt &
           Weidner, Am. Mineral. 65 (1980) 920), here with ⅔ added to z, which brings the twofold
           axis through Si to where International Tables A, No. 154, have it

That the coordinates fit the operations, hand and origin included, follows from their bond lengths,
which tests/external/test_model_factors.py compares with the published ones.
"""

from __future__ import annotations

import io
import itertools
from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest
import xraydb

from engine import InputError, Lattice, evaluate, sampling
from engine.preparation import Recipe, prepare_reflections, summarize_set
from engine.readers import read, to_reflections
from engine.scattering import composition
from engine.symmetry import Group, space_group
from tests.external.test_model_factors import STRUCTURES, whole_cell

D_MIN = 0.6
"""Å. Peaks are some 0.8 × 0.6 = 0.5 Å wide (James 1948), a third of the shortest bond."""
B = 1.0
"""Å², of every atom: leaves exp(−B/4d²) = 0.50 of the form factor where the series ends."""
NEAR = 0.01
"""Å from the atom. The ripples of its neighbours' termination displace a maximum: with exact F the worst,
O of quartz beside Si, is off by 0.0044 Å, O of rutile by 0.0026 Å."""
NEARER = 0.001
"""Å from the maximum that exact F to the same d_min have: what noise of 1 % and rounding in the file do."""
SCALE = 0.0371
"""k of the intensities k|F|²."""
NOISE = 0.01
PEAKS = 0.12
"""Å between the samples that are searched for maxima: a quarter of a peak's width."""


@dataclass(frozen=True)
class Published:
    """What the file says of a structure beside the reflections, and what the laboratory knows."""

    symmetry: str
    formula: str
    units: int
    order: tuple[str, ...]
    """Elements by falling numbers of electrons."""


QUARTZ_OPERATIONS = ("x,y,z", "-y,x-y,z+2/3", "-x+y,-x,z+1/3", "y,x,-z", "x-y,-y,-z+1/3", "-x,-x+y,-z+2/3")
"""International Tables for Crystallography A, No. 154, memory."""
PUBLISHED = {
    "rock salt": Published("_space_group_IT_number 225", "NaCl", 4, ("Cl", "Na")),
    "rutile": Published("_space_group_name_H-M_alt 'P 42/m n m'", "TiO2", 2, ("Ti", "O")),
    "quartz": Published(
        "loop_\n_space_group_symop_operation_xyz\n" + "\n".join(f"'{text}'" for text in QUARTZ_OPERATIONS),
        "SiO2",
        3,
        ("Si", "O"),
    ),
}


@cache
def sphere(name):
    """All indices but zero with d ≥ D_MIN, and s = 1/2d."""
    cell = STRUCTURES[name].cell
    # Å⁻¹, without 2π; rock salt and rutile have right angles, quartz has γ = 120°.
    a, _, c, _, _, gamma = cell
    reach = [int(length / D_MIN) + 1 for length in cell[:3]]
    every = np.array(list(itertools.product(*(range(-n, n + 1) for n in reach))), dtype=np.int64)
    h, k, l = every.T
    if gamma == 120:
        squares = 4 / 3 * (h * h + h * k + k * k) / a**2 + (l / c) ** 2
    else:
        squares = (h * h + k * k) / a**2 + (l / c) ** 2
    kept = every.any(axis=1) & (squares <= 1 / D_MIN**2)
    return every[kept], np.sqrt(squares[kept]) / 2


@cache
def factors(name):
    """F(hkl) = Σ f exp(−B s²) exp(+2πi h·x) over the atoms of the cell, electrons."""
    indices, s = sphere(name)
    total = np.zeros(len(indices), dtype=complex)
    for element, x, _ in whole_cell(name):
        total += xraydb.f0(element, s) * np.exp(-B * s**2) * np.exp(2j * np.pi * (indices @ np.asarray(x)))
    return total


@cache
def measurements(name):
    """Rows (h, k, l, k|F|², σ, φ in degrees): one of each pair ±h and a third of the others, with 1 % of noise.

    So every orbit is measured, most of them many times. Forbidden reflections are among them.
    """
    rng = np.random.default_rng(20)
    indices, _ = sphere(name)
    # One number to an index, its negative to the mate; which of a pair is always taken changes from pair to pair.
    key = indices @ (10_000, 100, 1)
    taken = (key > 0) == (key % 3 == 0)
    taken |= rng.random(len(key)) < 1 / 3
    true = SCALE * np.abs(factors(name)[taken]) ** 2
    sigma = np.hypot(NOISE * true, NOISE * 0.02 * true.mean())
    values = true + sigma * rng.normal(size=true.size)
    phases = np.degrees(np.angle(factors(name)[taken]))
    return [
        (*h, value, error, phase)
        for h, value, error, phase in zip(
            indices[taken].tolist(), values.tolist(), sigma.tolist(), phases.tolist(), strict=True
        )
    ]


def cif(name, sign=1):
    text = io.StringIO()
    text.write("data_published\n")
    parts = ("length_a", "length_b", "length_c", "angle_alpha", "angle_beta", "angle_gamma")
    for part, value in zip(parts, STRUCTURES[name].cell, strict=True):
        text.write(f"_cell_{part} {value}\n")
    text.write(PUBLISHED[name].symmetry + "\n")
    text.write("loop_\n_refln_index_h\n_refln_index_k\n_refln_index_l\n")
    text.write("_refln_F_squared_meas\n_refln_F_squared_sigma\n_refln_phase_calc\n")
    for h, k, l, value, sigma, phase in measurements(name):
        text.write(f"{h} {k} {l} {value:.5f} {sigma:.5f} {sign * phase:.3f}\n")
    return text.getvalue().encode()


def csv(name):
    text = io.StringIO()
    text.write("h,k,l,f_squared,f_squared_sigma,phase_deg\n")
    for h, k, l, value, sigma, phase in measurements(name):
        text.write(f"{h},{k},{l},{value:.5f},{sigma:.5f},{phase:.3f}\n")
    return text.getvalue().encode()


def group_of(symmetry):
    """As a laboratory would: the operations, else the symbol, else the number."""
    if symmetry.operations:
        return Group.from_operations(symmetry.operations, 3)
    return space_group(symmetry.hermann_mauguin or symmetry.number)


def prepared_from(table, lattice, group, name, scale):
    reflections, left = to_reflections(table, lattice=lattice)
    assert left == ()
    one = PUBLISHED[name]
    return prepare_reflections(
        reflections,
        Recipe(
            group=group,
            scale=scale,
            factor=SCALE**-0.5 if scale == "factor" else None,
            content=composition(one.formula),
            units=one.units,
        ),
    )


@cache
def prepared(name, scale="factor"):
    table = read(cif(name), name="published.cif")
    return prepared_from(table, None, group_of(table.crystal.symmetry), name, scale)


@cache
def density(name):
    return prepared(name).coefficients(unit="e/Å³")


STENCIL = np.array(list(itertools.product((-1, 0, 1), repeat=3)))
"""27 points of a cube."""


def refined(coefficients, start):
    """The maximum near `start` (n, 3), fractional, and its height: a quadric through 27 points 0.03 Å apart, thrice."""
    lattice = coefficients.lattice
    x, y, z = STENCIL.T
    design = np.stack([np.ones(27), x, y, z, x * x, y * y, z * z, x * y, x * z, y * z], axis=1)
    place = np.array(start, dtype=float)
    for step in (0.03, 0.03, 0.03):
        around = place[:, None] + step * STENCIL @ np.linalg.inv(lattice.vectors)
        values = evaluate(coefficients, sampling.points(lattice, around.reshape(-1, 3))).values.reshape(-1, 27)
        c = np.linalg.lstsq(design, values.T, rcond=None)[0]
        hessian = np.array([[2 * c[4], c[7], c[8]], [c[7], 2 * c[5], c[9]], [c[8], c[9], 2 * c[6]]])
        shift = -step * np.linalg.solve(hessian.transpose(2, 0, 1), c[1:4].T[..., None])[..., 0]
        place += shift @ np.linalg.inv(lattice.vectors)
    return place, evaluate(coefficients, sampling.points(lattice, place)).values


def maxima(coefficients, count):
    """The `count` highest maxima of the cell, refined, and all others' highest value; by falling height."""
    grid = sampling.full_cell_by_spacing(coefficients.lattice, PEAKS)
    values = evaluate(coefficients, grid).values
    top = np.ones(values.shape, dtype=bool)
    for shift in STENCIL.tolist():
        if any(shift):
            # Of neighbours that are equal but for rounding both are kept, and found to be one below.
            top &= values >= np.roll(values, shift, axis=(0, 1, 2)) - 1e-9 * values.max()
    places = np.argwhere(top) / values.shape
    places = places[np.argsort(-values[top])][: 2 * count + 10]
    refined_places, heights = refined(coefficients, places)
    found = []
    for row in np.argsort(-heights):
        gap = np.array([refined_places[other] for other in found]).reshape(-1, 3) - refined_places[row]
        if not np.any(np.linalg.norm((gap - np.rint(gap)) @ coefficients.lattice.vectors, axis=1) < 0.1):
            found.append(row)
    return refined_places[found[:count]], heights[found[:count]], heights[found[count:]].max()


def exact_maximum(name, start):
    """Newton's method on Σ F exp(−2πi h·x), from `start`, with the sums of first and second derivatives written out."""
    indices, _ = sphere(name)
    waves = 2 * np.pi * indices
    place = np.array(start, dtype=float)
    for _ in range(20):
        terms = factors(name) * np.exp(-1j * (waves @ place))
        slope = (-1j * terms @ waves).real
        curvature = -((waves * terms[:, None]).T @ waves).real
        place -= np.linalg.solve(curvature, slope)
    return place


@pytest.mark.parametrize("name", PUBLISHED)
def test_the_highest_maxima_are_the_atoms(name):
    """As many as the cell has atoms: each within 0.01 Å of one, the heavier element's above the lighter's,
    and nothing else half as high.
    """
    atoms = whole_cell(name)
    places, heights, ripple = maxima(density(name), len(atoms))
    lattice = density(name).lattice
    elements = [element for element, _, _ in atoms]
    gap = places[:, None] - np.array([x for _, x, _ in atoms])
    distance = np.linalg.norm((gap - np.rint(gap)) @ lattice.vectors, axis=2)
    nearest = distance.argmin(axis=1)
    assert sorted(nearest.tolist()) == list(range(len(atoms)))
    assert distance.min(axis=1).max() < NEAR
    off = places - np.array([exact_maximum(name, atoms[place][1]) for place in nearest])
    assert np.linalg.norm((off - np.rint(off)) @ lattice.vectors, axis=1).max() < NEARER
    expected = [element for wanted in PUBLISHED[name].order for element in elements if element == wanted]
    assert [elements[place] for place in nearest] == expected
    assert ripple < 0.5 * heights.min()


@pytest.mark.parametrize("name", PUBLISHED)
def test_the_density_is_absolute(name):
    """At atoms and elsewhere ρ = (Σ F exp(−2πi h·x) + F(000))/V, summed plainly from the exact F, e/Å³.

    Noise of 1 % in each |F|² of N equivalents is ½ % N^−½ in F, at random from one to the next: 0.1 % of the
    highest value is allowed.
    """
    rng = np.random.default_rng(3)
    places = np.concatenate([np.array([x for _, x, _ in whole_cell(name)], dtype=float), rng.random((30, 3))])
    indices, _ = sphere(name)
    volume = density(name).lattice.volume
    waves = np.exp(-2j * np.pi * (places @ indices.T))
    electrons = STRUCTURES[name].electrons
    expected = (waves @ factors(name) + electrons).real / volume
    found = evaluate(density(name), sampling.points(density(name).lattice, places)).values
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-3 * expected.max())
    cell = evaluate(density(name), sampling.full_cell(density(name).lattice, (24, 25, 27)))
    assert cell.values.mean() * volume == pytest.approx(electrons, rel=1e-9)
    assert cell.unit == "e/Å³"


@pytest.mark.parametrize("name", PUBLISHED)
def test_both_forms_of_file_say_the_same(name):
    """Delimited text has no cell and no symmetry: the laboratory gives both."""
    lattice = Lattice.from_parameters(*STRUCTURES[name].cell)
    table = read(csv(name), name="published.csv")
    other = prepared_from(table, lattice, space_group(STRUCTURES[name].number), name, "factor").coefficients()
    one = density(name)
    np.testing.assert_array_equal(other.indices, one.indices)
    # Operations listed in another order may add phases up differently.
    np.testing.assert_allclose(other.values, one.values, rtol=1e-12)
    np.testing.assert_allclose(other.sigma, one.sigma, rtol=1e-12)


@pytest.mark.parametrize("name", PUBLISHED)
def test_the_summary_fits_the_structure(name):
    """Complete, no more noise than was put in, absences without signal, and the words that belong."""
    made = summarize_set(prepared(name))
    assert made.rows == len(measurements(name))
    # Special positions may extinguish more than the group does.
    assert made.expanded >= np.count_nonzero(np.abs(factors(name)) > 1e-6) // 2
    assert made.completeness == 1.0
    assert made.phased == made.unique
    assert made.agreement.redundancy > 4
    # ⟨|I − Ī|⟩/⟨I⟩ of a Gaussian is √(2/π) σ/I: 0.8 %, and of few strong intensities uncertain by some tenths.
    assert made.agreement.r_meas == pytest.approx(np.sqrt(2 / np.pi) * NOISE, rel=0.25)
    assert made.agreement.cc_half > 0.999
    assert abs(made.absence_signal) < 0.5
    assert made.scale == "absolute"
    assert made.warnings[0].startswith("No correction was asked for")
    assert not any("wrong" in words or "missing" in words or "poorly" in words for words in made.warnings)


def test_wilsons_plot_finds_the_scale_of_quartz():
    """k and B within 2 of their uncertainties, 21 % of k: three formula units are few for Wilson's statistics.

    The others are left to a known factor. With all atoms at special positions F is a sum in phase or in
    antiphase and nothing in between, which is far from atoms at random: k of rutile comes out at 0.6, of
    rock salt at 0.3 of what it is. tests/engine/preparation/test_chain_scale.py holds the plot against structures
    at random.
    """
    made = prepared("quartz", "wilson")
    plot = made.plot
    assert abs(plot.scale - SCALE) < 2 * plot.scale_sigma
    assert plot.scale_sigma < SCALE / 4
    assert abs(plot.b - B) < 2 * plot.b_sigma
    # All but the zero term, which is the content's on any scale, carry the root of the scale found.
    found, known = made.coefficients(unit="e/Å³"), density("quartz")
    others = known.indices.any(axis=1)
    ratio = found.values[others] / known.values[others]
    np.testing.assert_allclose(ratio, np.sqrt(SCALE / plot.scale), rtol=1e-9)
    assert found.values[~others] == known.values[~others]
    places, _, _ = maxima(found, 9)
    np.testing.assert_allclose(np.sort(places % 1, axis=0), np.sort(maxima(known, 9)[0] % 1, axis=0), atol=1e-4)


def test_the_other_hand_is_refused():
    """Phases of the opposite sign are those of left-handed quartz, P3₁21: equivalents by 3₂ contradict them."""
    table = read(cif("quartz", sign=-1), name="published.cif")
    with pytest.raises(InputError) as caught:
        prepared_from(table, None, group_of(table.crystal.symmetry), "quartz", "factor")
    assert caught.value.path == ("phase",)
    # With the mirror image's group they are accepted, and the atoms lie at −x.
    mirrored = prepared_from(table, None, space_group(152), "quartz", "factor").coefficients(unit="e/Å³")
    atoms = np.array([x for _, x, _ in whole_cell("quartz")], dtype=float)
    places, _ = refined(mirrored, -atoms)
    assert np.linalg.norm((places + atoms) @ mirrored.lattice.vectors, axis=1).max() < NEAR
