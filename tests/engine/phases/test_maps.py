"""Map coefficients by their definition, and end to end: a left-out atom shows where it is."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from engine import Lattice, Treatment, evaluate, sampling
from engine.phases import Model, coefficient_set, estimated_weights, map_reflections, sim_weights, structure_factors
from tests.engine.phases.trial import INVERSION, SCREWS, classes, measured, scattered, sphere, triclinic
from tests.strategies import refusal_of

BOX = Lattice.from_parameters(9.1, 10.3, 11.7, 90, 90, 90)
IDENTITY = (np.eye(3)[None], np.zeros((1, 3)))


def case(lattice, operations, count, d_min):
    """A structure of carbon atoms, the model that lacks the first, measured amplitudes and weights."""
    x = scattered(count, 19, lattice)
    symmetry = {"rotations": operations[0], "translations": operations[1]}
    atoms = Model.from_atoms(lattice, ("C",) * count, x, b_iso=np.full(count, 3.0), **symmetry)
    h = sphere(lattice, d_min)
    true = structure_factors(atoms, h)
    # Systematic absences are no measurements.
    h, true = h[np.abs(true) > 1e-6], true[np.abs(true) > 1e-6]
    model = structure_factors(atoms.without(np.arange(count) == 0), h)
    centric, epsilon = classes(h, *operations)
    given = measured(lattice, h, np.abs(true), sigma=0.01 * np.abs(true) + 0.1)
    weights = estimated_weights(given, model, centric=centric, epsilon=epsilon, shell_count=5)
    return x[0], given, weights


CASES = {
    "P1": case(triclinic(), IDENTITY, 25, 1.3),
    "P-1": case(triclinic(), INVERSION, 12, 1.3),
    "P2₁2₁2₁": case(BOX, SCREWS, 8, 1.1),
}


def values(reflections):
    """Complex coefficients of Reflections."""
    return reflections.observed * np.exp(1j * reflections.phase)


@pytest.mark.parametrize("name", CASES)
def test_coefficients_by_their_definition(name):
    """Reflection by reflection, with a branch for centric ones."""
    _, given, weights = CASES[name]
    columns = zip(given.observed, given.sigma, weights.merit, weights.scaled_model, weights.centric, strict=True)
    expected = {"observed": [], "calculated": [], "difference": [], "combination": []}
    sigma = {"observed": [], "difference": [], "combination": []}
    for f_o, s, m, df_c, centric in columns:
        expected["observed"].append(f_o)
        expected["calculated"].append(df_c)
        expected["difference"].append(m * f_o - df_c)
        expected["combination"].append(m * f_o if centric else 2 * m * f_o - df_c)
        sigma["observed"].append(s)
        sigma["difference"].append(m * s)
        sigma["combination"].append(m * s if centric else 2 * m * s)
    for kind, signed in expected.items():
        made = map_reflections(given, weights, kind)
        np.testing.assert_allclose(values(made), np.array(signed) * np.exp(1j * weights.phase), atol=1e-10)
        assert made.observed.min() >= 0
        if kind == "calculated":
            assert made.sigma is None
        else:
            np.testing.assert_allclose(made.sigma, sigma[kind])
        assert (made.merit is None) == (kind != "observed")
    plain = map_reflections(replace(given, sigma=None), weights, "difference")
    assert plain.sigma is None


def density(given, weights, kind, positions):
    made = coefficient_set(map_reflections(given, weights, kind), unit="e/Å³")
    treatment = Treatment(apply_merit=kind == "observed")
    return evaluate(made, sampling.points(given.lattice, positions), treatment).values


def highest(given, weights, kind):
    """Fractional position of the highest point: a grid of 0.25 Å, then one of 0.02 Å about its maximum."""
    lattice = given.lattice
    made = coefficient_set(map_reflections(given, weights, kind))
    shape = tuple(int(length / 0.25) for length in lattice.lengths)
    coarse = evaluate(made, sampling.full_cell(lattice, shape)).values
    top = np.array(np.unravel_index(coarse.argmax(), shape)) / shape
    steps = np.arange(-12, 13) * 0.02
    around = np.stack(np.meshgrid(steps, steps, steps, indexing="ij"), axis=-1).reshape(-1, 3)
    fine = top + lattice.to_fractional(around)
    return fine[evaluate(made, sampling.points(lattice, fine)).values.argmax()]


@pytest.mark.parametrize("name", CASES)
def test_the_difference_map_shows_a_left_out_atom(name):
    """Its highest peak lies within 0.1 Å of the atom, or of one of its images."""
    atom, given, weights = CASES[name]
    rotations, translations = {"P1": IDENTITY, "P-1": INVERSION, "P2₁2₁2₁": SCREWS}[name]
    gap = highest(given, weights, "difference") - (rotations @ atom + translations)
    distance = np.linalg.norm(given.lattice.to_cartesian(gap - np.rint(gap)), axis=1)
    assert distance.min() < 0.1


@pytest.mark.parametrize(("name", "low", "high"), [("P1", 0.35, 0.65), ("P-1", 0.8, 1.1)])
def test_heights(name, low, high):
    """A missing atom is seen at half its height by acentric differences, at its own by centric ones; the
    combination restores it (Main 1979). The height is that of an atom of the calculated map's kind:
    the structure factors of the atom alone, summed over the same reflections.
    """
    atom, given, weights = CASES[name]
    one = Model.from_atoms(given.lattice, ("C",), [[0, 0, 0]], b_iso=[3.0])
    alone = replace(given, observed=structure_factors(one, given.indices).real, phase=np.zeros(given.count))
    whole = evaluate(coefficient_set(alone), sampling.points(given.lattice, [[0, 0, 0]])).values[0]
    assert low < density(given, weights, "difference", [atom])[0] / whole < high
    assert 0.75 < density(given, weights, "combination", [atom])[0] / whole < 1.25
    assert density(given, weights, "calculated", [atom])[0] < 0.3 * whole


def test_observed_map_takes_its_merit_from_the_treatment():
    """m|F_o| summed by hand at one point."""
    atom, given, weights = CASES["P1"]
    best = weights.merit * given.observed * np.exp(1j * weights.phase)
    by_hand = 2 / given.lattice.volume * np.sum(best * np.exp(-2j * np.pi * given.indices @ atom)).real
    assert density(given, weights, "observed", [atom])[0] == pytest.approx(by_hand, abs=1e-9)


def test_zero_term_and_unit():
    _, given, weights = CASES["P1"]
    made = coefficient_set(map_reflections(given, weights, "calculated"), unit="e/Å³", mean=144.0)
    assert made.unit == "e/Å³"
    assert made.tally.zero_term == "given"
    assert made.values[~made.indices.any(axis=1)][0] == pytest.approx(144 / given.lattice.volume)


def test_reflections_without_phase_stay_unphased():
    h = np.array([[1, 0, 0], [0, 1, 0], [0, 0, 1]])
    given = replace(
        measured(BOX, h, [1.0, 2.0, 3.0]),
        phase=np.array([0.5, np.nan, 1.0]),
        merit=np.array([0.9, np.nan, 0.5]),
        phase_sigma=np.array([0.2, np.nan, 0.3]),
    )
    made = coefficient_set(given)
    assert made.unphased == 1
    assert sorted(made.merit[made.phase_known].tolist()) == [0.5, 0.9]
    np.testing.assert_allclose(sorted(made.phase_sigma[made.phase_known]), [0.2, 0.3])
    # F(h) belongs to exp(−2πi h·x): conventions, section 2.
    at = np.array([0.1, 0.2, 0.3])
    by_hand = sum(2 / BOX.volume * a * np.cos(p - 2 * np.pi * x) for a, p, x in [(1, 0.5, 0.1), (3, 1.0, 0.3)])
    assert evaluate(made, sampling.points(BOX, [at])).values[0] == pytest.approx(by_hand, abs=1e-12)


def test_complex_density_keeps_both_mates():
    h = np.array([[1, 0, 0], [-1, 0, 0]])
    given = replace(measured(BOX, h, [1.0, 2.0]), phase=np.array([0.5, 1.0]))
    assert coefficient_set(given, density="complex").count == 2


SMALL = measured(BOX, np.array([[1, 0, 0], [0, 1, 0]]), [1.0, 2.0])
WEIGHTS = sim_weights(SMALL, np.ones(2, dtype=complex), [1.0, 1.0], centric=np.zeros(2, dtype=bool), epsilon=[1, 1])
PHASED = replace(SMALL, phase=np.array([0.1, 0.2]))


@pytest.mark.parametrize(
    ("call", "path"),
    [
        (lambda: map_reflections(SMALL, WEIGHTS, "sum"), ("kind",)),
        (lambda: map_reflections(SMALL.select(np.array([0])), WEIGHTS, "observed"), ("weights",)),
        (lambda: map_reflections(replace(SMALL, quantity="intensity"), WEIGHTS, "observed"), ("quantity",)),
        (lambda: coefficient_set(SMALL), ("phase",)),
        (lambda: coefficient_set(replace(PHASED, quantity="intensity")), ("quantity",)),
        (lambda: coefficient_set(replace(PHASED, merit=np.array([0.5, np.nan]))), ("merit",)),
        (lambda: coefficient_set(replace(PHASED, phase_sigma=np.array([0.5, np.nan]))), ("phase_sigma",)),
    ],
)
def test_refusals(call, path):
    assert refusal_of(call).path == path
