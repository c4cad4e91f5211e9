"""What is shown of a field: values, uncertainties, significance, and contour levels in units of σ."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from engine import InputError, Treatment, evaluate, sampling
from engine.quantities import FIRST_MULTIPLE, contour_levels, shown
from tests.engine.uncertainty.measured import CRYSTALS, measured

GROUP, LATTICE, D_MIN, _ = CRYSTALS["P212121"]
SET = measured(GROUP, LATTICE, D_MIN, phase_sigma=0.1, mean=30.0).coefficients()
GRID = sampling.full_cell(LATTICE, (6, 7, 8))
FIELD = evaluate(SET, GRID, uncertainty=True)


def test_values_are_the_field_itself():
    assert shown(FIELD, "value") is FIELD
    bare = evaluate(SET, GRID)
    assert shown(bare, "value") is bare


@pytest.mark.parametrize("treatment", [Treatment(), Treatment(field="gradient"), Treatment(field="gradient_magnitude")])
def test_sigma_and_significance(treatment):
    field = evaluate(SET, GRID, treatment, uncertainty=True)
    sigma = shown(field, "sigma")
    np.testing.assert_array_equal(sigma.values, field.sigma.values)
    assert sigma.unit == field.unit
    ratio = shown(field, "significance")
    np.testing.assert_allclose(ratio.values, field.values / field.sigma.values, rtol=1e-12)
    assert ratio.unit == "σ"
    for made in (sigma, ratio):
        assert made.sigma is field.sigma
        assert made.statistics.minimum == made.values.min()
        assert made.statistics.maximum == made.values.max()
        assert made.statistics.rms == pytest.approx(np.sqrt(np.mean(made.values**2)), rel=1e-12)
        assert made.axes == field.axes
        assert made.applied == field.applied


def test_a_complex_value_is_as_significant_as_its_length():
    made = measured(GROUP, LATTICE, D_MIN, real=False).coefficients()
    field = evaluate(made, GRID, uncertainty=True)
    found = shown(field, "significance")
    np.testing.assert_allclose(found.values, np.abs(field.values) / field.sigma.values, rtol=1e-12)
    assert found.values.dtype == np.float64


def test_where_nothing_is_uncertain_nothing_is_significant():
    """At the centre of Pm-3m the gradient vanishes by symmetry."""
    exact = FIELD.sigma.values.copy()
    exact[0, 0, :3] = 0.0
    field = replace(FIELD, sigma=replace(FIELD.sigma, values=exact))
    found = shown(field, "significance")
    assert np.isnan(found.values[0, 0, :3]).all()
    assert np.isnan(found.values).sum() == 3
    assert found.statistics.rms == pytest.approx(np.sqrt(np.nanmean(found.values**2)), rel=1e-12)
    assert any(note.startswith("3 values have the uncertainty 0") for note in found.notes)
    nothing = shown(replace(FIELD, sigma=replace(FIELD.sigma, values=np.zeros_like(exact))), "significance")
    assert np.isnan(nothing.values).all()
    assert np.isfinite(nothing.statistics.rms)


@pytest.mark.parametrize("quantity", ["sigma", "significance"])
def test_a_field_without_uncertainty_has_neither(quantity):
    with pytest.raises(InputError) as caught:
        shown(evaluate(SET, GRID), quantity)
    assert caught.value.path == ("quantity",)
    assert quantity in caught.value.reason


def test_an_unknown_quantity_is_refused():
    with pytest.raises(InputError) as caught:
        shown(FIELD, "doubt")
    assert caught.value.path == ("quantity",)


def test_contour_levels_double_from_three_sigma_as_far_as_the_values_reach():
    multiples, values = contour_levels(FIELD)
    assert np.all(np.diff(multiples) > 0)
    np.testing.assert_allclose(values, multiples * FIELD.sigma.rms, rtol=1e-12)
    steps = np.log2(np.abs(multiples) / FIRST_MULTIPLE)
    np.testing.assert_array_equal(steps, np.rint(steps))
    assert FIELD.statistics.minimum < values.min()
    assert values.max() < FIELD.statistics.maximum
    positive = multiples[multiples > 0]
    assert positive[0] == 3.0
    # The next one would lie beyond the values.
    assert 2 * positive[-1] * FIELD.sigma.rms >= FIELD.statistics.maximum
    lowest = -multiples.min() if multiples.min() < 0 else FIRST_MULTIPLE / 2
    assert -2 * lowest * FIELD.sigma.rms <= FIELD.statistics.minimum


def test_no_uncertainty_no_contour_levels():
    for field in (evaluate(SET, GRID), replace(FIELD, sigma=replace(FIELD.sigma, rms=0.0))):
        multiples, values = contour_levels(field)
        assert multiples.size == values.size == 0
