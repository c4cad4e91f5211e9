"""Scale and R factors against their sums written out, and against numerical minimisation."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import minimize_scalar

from engine.phases import compare, shells
from tests.engine.phases.trial import measured, sphere, triclinic
from tests.strategies import refusal_of

LATTICE = triclinic()
H = sphere(LATTICE, 3.0)
RNG = np.random.default_rng(21)
MODEL = RNG.uniform(1, 100, len(H)) * np.exp(2j * np.pi * RNG.random(len(H)))
SIGMA = RNG.uniform(0.5, 3, len(H))
OBSERVED = np.abs(0.37 * np.abs(MODEL) + SIGMA * RNG.normal(size=len(H)))
GIVEN = measured(LATTICE, H, OBSERVED, sigma=SIGMA)


@pytest.mark.parametrize("weighted", [True, False])
def test_scale_and_factors_by_their_definition(weighted):
    found = compare(GIVEN if weighted else replace(GIVEN, sigma=None), MODEL, shell_count=7)
    weight = 1 / SIGMA**2 if weighted else np.ones(len(H))
    size = np.abs(MODEL)
    best = minimize_scalar(lambda k: float(np.sum(weight * (OBSERVED - k * size) ** 2)), tol=1e-12)
    # A minimum is found to the root of the precision of its value.
    assert found.scale == pytest.approx(best.x, rel=1e-6)
    assert found.weights == ("sigma" if weighted else "unit")

    def factors(rows):
        gap = [abs(OBSERVED[i] - found.scale * size[i]) for i in rows]
        r = sum(gap) / sum(OBSERVED[i] for i in rows)
        above = sum(weight[i] * g * g for i, g in zip(rows, gap, strict=True))
        return r, (above / sum(weight[i] * OBSERVED[i] ** 2 for i in rows)) ** 0.5

    assert (found.r, found.weighted_r) == pytest.approx(factors(range(len(H))))
    for shell in range(7):
        expected = factors(np.flatnonzero(found.shells.member == shell))
        assert (found.shell_r[shell], found.shell_weighted_r[shell]) == pytest.approx(expected)


def test_a_right_model_has_no_residual():
    found = compare(measured(LATTICE, H, 2.5 * np.abs(MODEL)), MODEL)
    assert found.scale == pytest.approx(2.5, rel=1e-14)
    assert found.r < 1e-14


def test_a_random_acentric_model():
    """Amplitudes of one distribution that have nothing in common (Wilson, Acta Cryst. 3 (1950) 397).

    His 2 − √2 = 0.586 has k = 1; with the least-squares k = ⟨F⟩²/⟨F²⟩ = π/4 the same integral over
    the two distributions, P(|x − ky|), is done numerically. Sampling: 0.5 of an amplitude over √N.
    """
    many = sphere(LATTICE, 1.0)
    x, y = np.abs(np.random.default_rng(2).normal(size=(2, len(many), 2)) @ [1, 1j])
    k = np.pi / 4
    grid = (np.arange(4000) + 0.5) * 7 / 4000
    rayleigh = grid * np.exp(-(grid**2) / 2)
    rayleigh /= rayleigh.sum()
    expected = rayleigh @ np.abs(grid[:, None] - k * grid) @ rayleigh / (rayleigh @ grid)
    found = compare(measured(LATTICE, many, x), y)
    bound = 4 * 0.5 / np.sqrt(len(many))
    assert found.scale == pytest.approx(k, abs=bound)
    assert found.r == pytest.approx(expected, abs=bound)


@given(st.integers(1, 40))
def test_shells_share_out_the_reflections(count):
    made = shells(LATTICE, H, count)
    spacing = 2 * np.pi / np.linalg.norm(H @ LATTICE.reciprocal, axis=1)
    assert made.count.sum() == len(H)
    assert made.count.max() - made.count.min() <= 1
    np.testing.assert_array_equal(np.bincount(made.member, minlength=count), made.count)
    for shell in range(count):
        inside = spacing[made.member == shell]
        assert made.d_max[shell] == pytest.approx(inside.max())
        assert made.d_min[shell] == pytest.approx(inside.min())
    # From the inside out.
    assert np.all(made.d_min[:-1] >= made.d_max[1:] * (1 - 1e-12))


def test_a_shell_of_nothing_has_no_factor():
    spacing = 2 * np.pi / np.linalg.norm(H @ LATTICE.reciprocal, axis=1)
    outer = spacing < np.median(spacing)
    found = compare(measured(LATTICE, H, np.where(outer, 0.0, OBSERVED)), MODEL, shell_count=4)
    assert np.isnan(found.shell_r[3])
    assert np.isnan(found.shell_weighted_r[3])
    assert np.isfinite(found.shell_r[:2]).all()


@pytest.mark.parametrize(
    ("call", "path", "rows"),
    [
        (lambda: compare(replace(GIVEN, quantity="intensity"), MODEL), "quantity", ()),
        (lambda: compare(replace(GIVEN, sigma=SIGMA * (np.arange(len(H)) != 3)), MODEL), "sigma", (3,)),
        (lambda: compare(GIVEN, MODEL[:-1]), "calculated", ()),
        (lambda: compare(GIVEN, 0 * MODEL), "calculated", ()),
        (lambda: compare(replace(GIVEN, sigma=0 * SIGMA), MODEL), "sigma", tuple(range(10))),
        (lambda: compare(replace(GIVEN, observed=0 * OBSERVED), MODEL), "observed", ()),
        (lambda: compare(GIVEN, MODEL, shell_count=len(H) + 1), "shells", ()),
        (lambda: shells(LATTICE, H, 0), "shells", ()),
    ],
)
def test_refusals(call, path, rows):
    refusal = refusal_of(call)
    assert (refusal.path, refusal.rows) == ((path,), rows)
