"""Scales from the zero term, from two known densities, and from another set."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from engine import sampling
from engine.errors import InputError
from engine.evaluate import evaluate
from engine.lattice import Lattice
from engine.preparation import KnownDensities, Recipe, ReferenceSet, prepare_reflections
from engine.preparation.scales import by_zero_term
from engine.reflections import Reflections
from engine.scattering import composition
from engine.symmetry import space_group, stack_group, unique_reflections
from tests.samples_raw import CRYSTAL, FILM_PERIOD, FORMULA, GROUP, UNITS, film_factors, structure_factors

STACK = stack_group("-1")


def film(scale):
    """The film FG-7's amplitudes times a scale, with phases and without noise."""
    orders, factors = film_factors()
    return Reflections(
        lattice=Lattice.from_period(FILM_PERIOD),
        indices=np.asfortranarray(orders[:, None]),
        quantity="amplitude",
        observed=scale * np.abs(factors),
        sigma=None,
        phase=np.where(factors < 0, np.pi, 0.0),
        phase_sigma=None,
        merit=None,
        row=np.arange(orders.size),
        scale="arbitrary",
    )


def true_density(x):
    """ρ(x) = ρ_0 + (2/d) Σ F cos 2πlx with a mean of 0.36 e/Å³, written out."""
    orders, factors = film_factors()
    return 0.36 + 2 / FILM_PERIOD * np.sum(factors * np.cos(2 * np.pi * orders * x))


def test_two_densities_give_scale_and_mean():
    places = np.array([[0.0], [0.37]])
    known = KnownDensities(positions=places, densities=(true_density(0.0), true_density(0.37)), sigmas=(0.02, 0.01))
    made = prepare_reflections(film(137.0), Recipe(group=STACK, scale="two_densities", known=known))
    assert made.unique.scale == "absolute"
    coefficients = made.coefficients(unit="e/Å³")
    where = sampling.line(coefficients.lattice, [0], [1], 101)
    expected = [true_density(x) for x in np.linspace(0, 1, 101)]
    np.testing.assert_allclose(evaluate(coefficients, where).values, expected, atol=1e-10)
    assert any("two known densities" in words for words in made.applied)


def test_two_densities_need_phases():
    known = KnownDensities(positions=np.array([[0.0], [0.4]]), densities=(1.0, 0.1))
    with pytest.raises(InputError, match="phases"):
        prepare_reflections(replace(film(1.0), phase=None), Recipe(group=STACK, scale="two_densities", known=known))


def with_zero(reflections, value):
    return replace(
        reflections,
        indices=np.asfortranarray(
            np.concatenate([[np.zeros(reflections.lattice.dimension, int)], reflections.indices])
        ),
        observed=np.concatenate([[value], reflections.observed]),
        phase=np.concatenate([[0.0], reflections.phase]),
        row=np.arange(reflections.count + 1),
    )


def test_zero_term_against_the_mean():
    given = with_zero(film(9.0), 9.0 * 0.36 * FILM_PERIOD)
    made = prepare_reflections(given, Recipe(group=STACK, scale="zero_term", mean=0.36))
    assert made.zero_term == pytest.approx(0.36 * FILM_PERIOD, rel=1e-12)
    np.testing.assert_allclose(made.unique.observed, np.abs(film_factors()[1]), rtol=1e-12)


def test_zero_term_against_the_content():
    lattice, group = Lattice.from_parameters(**CRYSTAL), space_group(GROUP)
    indices = unique_reflections(lattice, group, 1.5, friedel=True)
    factors = structure_factors(lattice, indices)
    electrons = (16 + 17 + 8 + 7 + 2 * 6) * UNITS
    given = Reflections(
        lattice=lattice,
        indices=np.asfortranarray(indices),
        quantity="amplitude",
        observed=0.02 * np.abs(factors),
        sigma=None,
        phase=np.angle(factors),
        phase_sigma=None,
        merit=None,
        row=np.arange(len(indices)),
        scale="arbitrary",
    )
    recipe = Recipe(group=group, scale="zero_term", content=composition(FORMULA), units=UNITS)
    made = prepare_reflections(with_zero(given, 0.02 * electrons), recipe)
    np.testing.assert_allclose(made.unique.observed, np.abs(structure_factors(lattice, made.unique.indices)), rtol=1e-9)


@pytest.mark.parametrize(("measured", "known"), [(None, 3.0), (2.0, None), (0.0, 3.0), (-2.0, 3.0), (2j, 3.0)])
def test_zero_term_needs_both_and_one_sign(measured, known):
    with pytest.raises(InputError):
        by_zero_term(measured, known)


def test_reference_brings_a_set_to_its_scale_and_fall_off():
    """A second set of the same amplitudes times 1/4 with a further B of 3 Å² comes back to the first."""
    lattice, group = Lattice.from_parameters(**CRYSTAL), space_group(GROUP)
    indices = unique_reflections(lattice, group, 1.0, friedel=True)
    true = np.abs(structure_factors(lattice, indices))
    sigma = 0.01 * true + 0.02
    fall = 0.25 * np.exp(-3.0 * lattice.sine_over_wavelength(indices) ** 2)
    first = Reflections(
        lattice=lattice,
        indices=np.asfortranarray(indices),
        quantity="amplitude",
        observed=true,
        sigma=sigma,
        phase=None,
        phase_sigma=None,
        merit=None,
        row=np.arange(len(indices)),
        scale="absolute",
    )
    second = replace(first, observed=true * fall, sigma=sigma * fall, scale="arbitrary")
    reference = ReferenceSet(reflections=prepare_reflections(first, Recipe(group=group)).unique, displacement=True)
    made = prepare_reflections(second, Recipe(group=group, scale="reference", reference=reference))
    assert made.unique.scale == "absolute"
    np.testing.assert_allclose(made.unique.observed, reference.reflections.observed, rtol=1e-6)


@pytest.mark.parametrize(
    ("options", "path"),
    [
        ({"scale": "two_densities"}, "known"),
        ({"scale": "reference"}, "reference"),
        ({"scale": "factor"}, "factor"),
        ({"mean": 0.3}, "mean"),
        ({"factor": 2.0}, "factor"),
    ],
)
def test_a_scale_takes_what_is_its_own(options, path):
    with pytest.raises(InputError) as caught:
        prepare_reflections(film(1.0), Recipe(group=STACK, **options))
    assert caught.value.path == (path,)
