"""Phases of a prepared set: from distributions, and from a trial model."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import integrate

from engine import sampling
from engine.errors import InputError
from engine.evaluate import evaluate
from engine.lattice import Lattice
from engine.preparation import Recipe, TrialModel, prepare_reflections, with_distributions
from engine.reflections import Reflections
from engine.symmetry import classify, space_group, unique_reflections
from tests.samples_raw import ATOMS, B_OVERALL, CRYSTAL, GROUP, structure_factors

LATTICE = Lattice.from_parameters(**CRYSTAL)
SYMMETRY = space_group(GROUP)


@pytest.fixture(scope="module")
def measured():
    """Unique amplitudes of OR-4 in electrons with 1 % noise, and no phases."""
    indices = unique_reflections(LATTICE, SYMMETRY, 0.85, friedel=True)
    true = np.abs(structure_factors(LATTICE, indices))
    sigma = 0.01 * true + 0.02
    noise = np.random.default_rng(6).normal(size=true.size)
    return Reflections(
        lattice=LATTICE,
        indices=np.asfortranarray(indices),
        quantity="amplitude",
        observed=np.abs(true + sigma * noise),
        sigma=sigma,
        phase=None,
        phase_sigma=None,
        merit=None,
        row=np.arange(len(indices)),
        scale="absolute",
    )


def trial(kept, kind):
    chosen = [ATOMS[place] for place in kept]
    return TrialModel(
        elements=tuple(element for element, _ in chosen),
        positions=np.array([position for _, position in chosen]),
        occupancy=np.ones(len(chosen)),
        b_iso=np.full(len(chosen), B_OVERALL),
        kind=kind,
    )


def heights(prepared):
    """The density at all six atoms of the asymmetric unit."""
    where = sampling.points(LATTICE, [position for _, position in ATOMS])
    return evaluate(prepared.coefficients(), where).values


def test_whole_model_gives_phases_and_agrees(measured):
    made = prepare_reflections(measured, Recipe(group=SYMMETRY, model=trial(range(6), "observed")))
    assert made.model is not None
    # The noise alone separates the amplitudes: its mean modulus is 0.8 σ.
    assert made.model.r < 0.02
    assert made.unique.phase is not None
    true = np.angle(structure_factors(LATTICE, made.unique.indices))
    np.testing.assert_allclose(np.exp(1j * made.unique.phase), np.exp(1j * true), atol=1e-9)
    assert np.mean(made.unique.merit) > 0.95
    assert any("trial model of 6 atoms" in words for words in made.applied)


def test_difference_map_shows_the_atom_that_is_missing(measured):
    made = prepare_reflections(measured, Recipe(group=SYMMETRY, model=trial([0, 1, 2, 3, 4], "difference")))
    values = heights(made)
    # Of an atom left out of a map with the others' phases about half the height is seen in an
    # acentric structure, more where many reflections are centric; at the others nothing.
    assert np.argmax(values) == 5
    assert values[5] > 5 * np.abs(values[:5]).max()
    assert made.zero_term is None


def test_calculated_map_lacks_it_and_combination_shows_it(measured):
    calculated = heights(prepare_reflections(measured, Recipe(group=SYMMETRY, model=trial(range(5), "calculated"))))
    combined = heights(prepare_reflections(measured, Recipe(group=SYMMETRY, model=trial(range(5), "combination"))))
    assert abs(calculated[5]) < 0.1 * calculated[4]
    assert combined[5] > 0.5 * combined[4]


def test_model_of_an_unknown_atom_is_refused(measured):
    wrong = replace(trial(range(6), "observed"), elements=("Xx",) * 6)
    with pytest.raises(InputError, match="Xx"):
        prepare_reflections(measured, Recipe(group=SYMMETRY, model=wrong))


def test_distributions_give_centroids_by_integration(measured):
    """Best phase and merit against numerical integration of exp(A cos φ + …) (scipy.integrate)."""
    some = measured.select(np.arange(40, 80))
    coefficients = np.random.default_rng(8).normal(size=(40, 4)) * 2
    made = with_distributions(some, coefficients, SYMMETRY)
    assert made.phase is not None
    restricted = classify(some.indices, SYMMETRY).restricted_phase
    assert 0 < np.count_nonzero(np.isnan(restricted)) < 40
    for (a, b, c, d), fixed, phase, merit in zip(coefficients, restricted, made.phase, made.merit, strict=True):

        def weight(phi, a=a, b=b, c=c, d=d):
            return np.exp(a * np.cos(phi) + b * np.sin(phi) + c * np.cos(2 * phi) + d * np.sin(2 * phi))

        if np.isnan(fixed):
            total = integrate.quad(weight, 0, 2 * np.pi, epsabs=1e-12)[0]
            real = integrate.quad(lambda phi: weight(phi) * np.cos(phi), 0, 2 * np.pi, epsabs=1e-12)[0]
            imag = integrate.quad(lambda phi: weight(phi) * np.sin(phi), 0, 2 * np.pi, epsabs=1e-12)[0]
            centroid = (real + 1j * imag) / total
        else:
            one, other = weight(fixed), weight(fixed + np.pi)
            centroid = (one - other) / (one + other) * np.exp(1j * fixed)
        assert merit * np.exp(1j * phase) == pytest.approx(centroid, abs=1e-8)


def test_unknown_coefficients_leave_the_phase_unknown(measured):
    some = measured.select(np.arange(3))
    coefficients = np.array([[1.0, 0.5, 0, 0], [np.nan, 0, 0, 0], [0.3, 2.0, 0.1, 0]])
    made = with_distributions(some, coefficients, SYMMETRY)
    assert np.isnan(made.phase).tolist() == [False, True, False]
    assert np.isnan(made.merit).tolist() == [False, True, False]
    np.testing.assert_array_equal(made.observed, some.observed)
