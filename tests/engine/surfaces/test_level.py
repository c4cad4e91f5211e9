from __future__ import annotations

import math

import numpy as np
import pytest

from engine import Columns, InputError, Treatment, assemble, perform, prepare
from engine.quantities import shown
from engine.sampling import box, full_cell
from engine.surfaces.level import Level, Scale, scale_of
from tests.engine.surfaces.shapes import TRICLINIC, rough

GRID = full_cell(TRICLINIC, (20, 20, 20))
SCALE = Scale(2.0, 0.5, 0.1, whole_cell=True)


@pytest.mark.parametrize(
    ("level", "value"),
    [
        (Level("level", -3.0), -3),
        (Level("level_rms", -2.0), 1),
        (Level("level_rms", 4), 4),
        (Level("level_sigmas", 3), 0.3),
    ],
)
def test_values(level, value):
    assert SCALE.value(level) == pytest.approx(value)


def test_uncertainties_that_are_not_there_are_refused():
    with pytest.raises(InputError) as caught:
        Scale(2.0, 0.5, None, whole_cell=True).value(Level("level_sigmas", 3))
    assert caught.value.path == ("level_sigmas",)


@pytest.mark.parametrize("number", [math.nan, math.inf])
def test_numbers_are_finite(number):
    with pytest.raises(InputError, match="finite"):
        Level("level_rms", number)


def test_kinds_are_known():
    with pytest.raises(InputError):
        Level("level_mean", 1.0)


def test_words():
    assert Level("level", 0.5).words("e/Å³") == "0.5 e/Å³"
    assert Level("level", 0.5).words("1") == "0.5"
    assert Level("level_rms", -1.5).words("1") == "the mean - 1.5 times the rms deviation from it"
    assert "uncertainty" in Level("level_sigmas", 3).words("e/Å³")


@pytest.mark.parametrize("field", ["density", "laplacian", "autocorrelation", "response"])
def test_scale_is_that_of_the_cell_whatever_the_samples(field):
    """By Parseval; a fine grid over the cell has the same mean and deviation."""
    coefficients, treatment = rough(), Treatment(field=field)
    part = box(TRICLINIC, [0.1, 0.1, 0.1], 0.2 * np.eye(3), (5, 5, 5))
    scales = []
    for grid in (GRID, part):
        work = prepare(coefficients, grid, treatment)
        made = perform(work)
        scales.append(scale_of(work, made, "value"))
        if grid is GRID:
            assert scales[0].mean == pytest.approx(made.values.mean(), abs=1e-9 * made.statistics.rms)
            assert scales[0].deviation == pytest.approx(made.values.std(), rel=1e-9)
    assert scales[0] == scales[1]
    assert scales[0].whole_cell


def test_scale_of_a_length_is_that_of_the_samples():
    work = prepare(rough(), GRID, Treatment(field="gradient_magnitude"))
    made = perform(work)
    scale = scale_of(work, made, "value")
    assert (scale.mean, scale.deviation) == (pytest.approx(made.values.mean()), pytest.approx(made.values.std()))
    assert not scale.whole_cell


@pytest.mark.parametrize("quantity", ["sigma", "significance"])
def test_scale_of_a_quantity_is_that_of_its_samples(quantity):
    columns = Columns(
        indices=[[0, 1, 0], [0, 0, 1], [0, 0, 1]], real=[2.0, 1.0, 0.0], imag=[0.0, 0.0, 0.5], sigma=[0.1, 0.1, 0.2]
    )
    work = prepare(assemble(TRICLINIC, columns, values="density_coefficient"), GRID, uncertainty=True)
    plain = perform(work)
    made = shown(plain, quantity)
    scale = scale_of(work, made, quantity)
    assert scale.mean == pytest.approx(made.values.mean(), abs=1e-12)
    assert scale.deviation == pytest.approx(made.values.std(), abs=1e-9)
    assert scale.sigma == plain.sigma.rms
    assert not scale.whole_cell
