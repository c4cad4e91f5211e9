"""The chain of preparation: absolute scales by a factor and by Wilson's plot."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
import xraydb
from hypothesis import given, settings
from hypothesis import strategies as st

from engine.amplitudes.wilson import wilson_plot
from engine.preparation import Recipe, prepare_reflections
from engine.scattering import composition
from tests.engine.preparation.crystal import (
    ATOMS,
    CONTENT,
    ELECTRONS,
    FORMULA,
    OR,
    P1,
    B,
    agrees_with_the_structure,
    by_index,
    crystal,
    exact,
    measured,
    noisy,
    plain_kinds,
    recipe,
)

NO_SCALE = "The scale is arbitrary: nothing was said that would make it absolute."


def test_the_zero_term_of_the_content_where_the_scale_is_absolute():
    asked = {"amplitudes": "root", "content": CONTENT, "units": 4.0}
    prepared = prepare_reflections(exact(scale=0.04), recipe(scale="factor", factor=5.0, **asked))
    assert prepared.zero_term == 4 * ELECTRONS
    assert f"zero term {4 * ELECTRONS} of the content, {FORMULA} × 4" in prepared.applied
    assert by_index(prepared.coefficients())[0, 0, 0] == pytest.approx(4 * ELECTRONS / OR.lattice.volume)
    assert prepare_reflections(exact(), recipe(**asked)).zero_term is None


def test_a_factor_multiplies_amplitudes():
    """Of amplitudes made from intensities too: on k|F|² it is k^−½."""
    prepared = prepare_reflections(exact(scale=0.04), recipe(amplitudes="root", scale="factor", factor=0.04**-0.5))
    agrees_with_the_structure(prepared.coefficients(), OR)
    assert prepared.unique.scale == "absolute"
    assert prepared.plot is None
    assert "amplitudes multiplied by 5" in prepared.applied
    assert NO_SCALE not in prepared.notes
    noise = prepare_reflections(noisy(), recipe())
    scaled = prepare_reflections(noisy(), recipe(scale="factor", factor=3.0))
    np.testing.assert_allclose(scaled.unique.observed, 3 * noise.unique.observed, rtol=1e-14)
    np.testing.assert_allclose(scaled.unique.sigma, 3 * noise.unique.sigma, rtol=1e-14)


CENTRED = {
    "P 21 21 21": {},
    "C 1 2 1": {"lengths": (14.1, 7.3, 9.2), "angles": (90.0, 101.0, 90.0)},
    "C 1 2/c 1": {"lengths": (14.1, 8.3, 11.2), "angles": (90.0, 101.0, 90.0)},
    "F 2 2 2": {"lengths": (13.1, 15.2, 17.3)},
}


@pytest.mark.parametrize("symbol", CENTRED)
def test_wilsons_plot_recovers_scale_and_b_in_every_centring(symbol):
    """ln k and B of four structures at random: their mean within 4 of its own uncertainties, some 6 % of k.

    A centring left out of the sum of squares would be a factor 2 or 4 in k, ten such uncertainties or more.
    """
    scale = 0.02
    deviations, variances = [], []
    for seed in range(4):
        one = crystal(symbol, seed=seed, **CENTRED[symbol])
        given_ = measured(one, one.sphere(0.9, half=True), scale=scale, relative=0.02, floor=0.05, seed=seed)
        asked = Recipe(group=one.group, scale="wilson", content=CONTENT, units=one.units)
        prepared = prepare_reflections(given_, asked)
        plot = prepared.plot
        deviations.append((math.log(plot.scale / scale), plot.b - B))
        variances.append(((plot.scale_sigma / plot.scale) ** 2, plot.b_sigma**2))
        assert prepared.unique.scale == "absolute"
        assert prepared.zero_term == one.units * ELECTRONS
        assert any("put on the absolute scale by Wilson's plot" in words for words in prepared.applied)
        # What is divided by k as an intensity is divided by √k as an amplitude.
        bare = prepare_reflections(given_, replace(asked, scale="none"))
        np.testing.assert_allclose(prepared.unique.observed, bare.unique.observed / math.sqrt(plot.scale), rtol=1e-13)
    bound = 4 * np.sqrt(np.sum(variances, axis=0)) / 4
    assert np.all(np.abs(np.mean(deviations, axis=0)) < bound)
    assert bound[0] < math.log(2) / 2


def test_wilsons_plot_is_that_of_the_merged_reflections():
    """With Σf² by xraydb, ε and centric by plain counting. The libraries' tables agree to 1e-6 of an atom."""
    prepared = prepare_reflections(noisy(), recipe(scale="wilson", content=CONTENT, units=4))
    merged = prepared.merged.reflections
    s = OR.lattice.sine_over_wavelength(merged.indices)
    squares = 4 * sum(xraydb.f0(name, s) ** 2 for name in ATOMS)
    epsilon, centric = plain_kinds(merged.indices)
    plain = wilson_plot(merged, squares, epsilon=epsilon, centric=centric)
    assert prepared.plot.scale == pytest.approx(plain.scale, rel=1e-5)
    assert prepared.plot.scale_sigma == pytest.approx(plain.scale_sigma, rel=1e-5)
    assert prepared.plot.b == pytest.approx(plain.b, abs=1e-5)
    without = wilson_plot(merged, squares, centric=centric)
    assert without.scale != pytest.approx(plain.scale, rel=1e-3)


@settings(max_examples=10)
@given(exponent=st.integers(-20, 20))
def test_wilsons_scale_follows_the_scale_of_the_data(exponent):
    """Law: intensities times c give the same absolute amplitudes; c is a power of two, but logarithms round."""
    asked = recipe(scale="wilson", content=CONTENT, units=4)
    factor = 2.0**exponent
    one, other = prepare_reflections(noisy(), asked), prepare_reflections(noisy().scaled(factor), asked)
    assert other.plot.scale == pytest.approx(factor * one.plot.scale, rel=1e-9)
    np.testing.assert_allclose(other.unique.observed, one.unique.observed, rtol=1e-9)
    np.testing.assert_allclose(other.unique.sigma, one.unique.sigma, rtol=1e-9)


def test_wilson_against_scattering_lengths():
    """Atoms at random with the b of carbon, which no angle weakens: k|F|² is back on fm²."""
    length = 6.646  # fm, Sears, Neutron News 3 (1992) 26, memory
    sites = np.random.default_rng(5).random((60, 3))
    indices = OR.sphere(0.9, half=True)
    factors = length * np.exp(2j * np.pi * (indices @ sites.T)).sum(axis=1)
    given_ = replace(measured(OR, indices), observed=7.0 * np.abs(factors) ** 2, phase=np.angle(factors))
    asked = Recipe(group=P1, scale="wilson", content=composition("C"), units=60, probe="neutron", amplitudes="root")
    prepared = prepare_reflections(given_, asked)
    assert prepared.plot.scale == pytest.approx(7.0, abs=4 * prepared.plot.scale_sigma)
    assert prepared.plot.scale_sigma < 1
    assert abs(prepared.plot.b) < 4 * prepared.plot.b_sigma
    assert prepared.zero_term == pytest.approx(60 * length, rel=1e-3)
