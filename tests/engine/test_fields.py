"""A density and its relatives, against analysis, differences and direct correlation."""

from __future__ import annotations

import math

import numpy as np
import pytest

from engine import Columns, Treatment, Window, assemble, averages, evaluate
from engine.fields import FIELD_KINDS, summands
from engine.sampling import full_cell, points
from tests.strategies import CRYSTAL, LATTICES, PLANAR, STACK, Listing, listing, refusal_of

BOUND = 1e-12
"""Relative to the largest |value|: sums of some hundred terms by the direct method."""


def reciprocal(lattice):
    """Rows g_i, by the inverse of the direct vectors."""
    return 2 * np.pi * np.linalg.inv(lattice.vectors).T


def field_at(wanted, x, treatment):
    return evaluate(wanted.coefficients(), points(wanted.lattice, x), treatment, method="direct").values


def sites(dimension, count=40):
    return np.random.default_rng(7).uniform(-1, 1, (count, dimension))


def assert_close(found, expected, bound=BOUND):
    assert found.shape == expected.shape
    assert np.abs(found - expected).max() < bound * np.abs(expected).max()


cases = pytest.mark.parametrize(
    ("dimension", "real"),
    [(d, real) for d in (1, 2, 3) for real in (True, False)],
    ids=lambda value: {True: "real", False: "complex"}.get(value, value) if isinstance(value, bool) else f"{value}-D",
)


# Derivatives.


@cases
def test_the_gradient_is_that_of_each_wave(dimension, real):
    lattice = LATTICES[dimension]
    wanted, x = listing(lattice, real=real, seed=71), sites(dimension)
    g = wanted.indices @ reciprocal(lattice)
    parts = [Listing(lattice, wanted.indices, 1j * g[:, j] * wanted.values, real).at(x) for j in range(dimension)]
    found = field_at(wanted, x, Treatment(field="gradient"))
    assert_close(found, np.stack(parts, axis=-1))
    length = field_at(wanted, x, Treatment(field="gradient_magnitude"))
    assert length.dtype == np.float64
    assert_close(length, np.sqrt(sum(np.abs(part) ** 2 for part in parts)))


@cases
def test_the_laplacian_is_that_of_each_wave(dimension, real):
    lattice = LATTICES[dimension]
    wanted, x = listing(lattice, real=real, seed=72), sites(dimension)
    square = ((wanted.indices @ reciprocal(lattice)) ** 2).sum(axis=1)
    expected = Listing(lattice, wanted.indices, -square * wanted.values, real).at(x)
    assert_close(field_at(wanted, x, Treatment(field="laplacian")), expected)


@cases
def test_derivatives_are_those_of_the_density_along_cartesian_axes(dimension, real):
    """Central differences of fourth order over steps of 0.005 Å: with |G| h = 0.03 at most the rest is
    (|G| h)⁴/30, below 1e-7, and rounding 1e-16/h² as small; 1e-5 leaves room."""
    lattice, h = LATTICES[dimension], 0.005
    wanted, x = listing(lattice, real=real, seed=73), sites(dimension)
    steps = h * np.linalg.inv(lattice.vectors)
    density = Treatment()

    def at(j, k):
        return field_at(wanted, x + k * steps[j], density)

    gradient, laplacian = [], 0.0
    for j in range(dimension):
        gradient.append((8 * (at(j, 1) - at(j, -1)) - (at(j, 2) - at(j, -2))) / (12 * h))
        laplacian = laplacian + (16 * (at(j, 1) + at(j, -1)) - (at(j, 2) + at(j, -2)) - 30 * at(j, 0)) / (12 * h**2)
    assert_close(field_at(wanted, x, Treatment(field="gradient")), np.stack(gradient, axis=-1), 1e-5)
    assert_close(field_at(wanted, x, Treatment(field="laplacian")), laplacian, 1e-5)


def test_components_of_a_gradient_are_named():
    for d, names in ((1, ("x",)), (2, ("x", "y")), (3, ("x", "y", "z"))):
        made = summands(listing(LATTICES[d]).coefficients(), Treatment(field="gradient"))
        assert made.components == names
        assert not made.magnitude
        length = summands(listing(LATTICES[d]).coefficients(), Treatment(field="gradient_magnitude"))
        assert length.components == ()
        assert length.magnitude


def test_the_mean_alone_has_no_slope():
    mean = assemble(
        CRYSTAL, Columns(indices=((0,), (0,), (0,)), amplitude=[3.0], phase_deg=[0.0]), values="density_coefficient"
    )
    sampling = full_cell(CRYSTAL, (3, 4, 5))
    assert not evaluate(mean, sampling, Treatment(field="gradient")).values.any()
    assert not evaluate(mean, sampling, Treatment(field="gradient_magnitude")).values.any()
    assert not evaluate(mean, sampling, Treatment(field="laplacian")).values.any()
    np.testing.assert_allclose(evaluate(mean, sampling).values, 3.0)


# Autocorrelation.


@pytest.mark.parametrize("shape", [(60,), (14, 15), (9, 8, 12)], ids=str)
@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
def test_the_autocorrelation_is_that_of_the_density_on_a_grid(shape, real):
    """P(u) = ∫ n*(r) n(r+u) dV; the sum over a grid finer than twice the indices is exact."""
    d = len(shape)
    lattice = LATTICES[d]
    wanted = listing(lattice, real=real, seed=74, reach={1: (24,), 2: (6, 5), 3: (3, 3, 5)}[d])
    sampling = full_cell(lattice, shape)
    density = evaluate(wanted.coefficients(), sampling).values
    axes = tuple(range(d))
    expected = np.empty(shape, dtype=density.dtype)
    for shift in np.ndindex(*shape):
        moved = np.roll(density, tuple(-s for s in shift), axis=axes)
        expected[shift] = (density.conj() * moved).sum() * lattice.volume / density.size
    found = evaluate(wanted.coefficients(), sampling, Treatment(field="autocorrelation")).values
    assert_close(found, expected)


@pytest.mark.parametrize("missing", [[1], [0, 2], [0, 1, 2, 3]])
def test_the_autocorrelation_needs_no_phases(missing):
    amplitude, phase = np.array([3.0, 5.0, 2.0, 7.0]), np.array([10.0, 40.0, -80.0, 120.0])
    known, part = phase.copy(), phase.copy()
    part[missing] = np.nan
    fields = []
    for degrees in (known, part):
        columns = Columns(indices=((1, 2, 3, 5),), amplitude=amplitude, phase_deg=degrees)
        made = assemble(STACK, columns, values="density_coefficient")
        fields.append(evaluate(made, full_cell(STACK, (32,)), Treatment(field="autocorrelation")))
    np.testing.assert_allclose(fields[0].values, fields[1].values, rtol=1e-13, atol=1e-10)
    assert fields[1].unphased == 0
    x = np.arange(32)[:, None] / 32
    expected = STACK.volume * 2 * np.cos(2 * np.pi * x * np.array([1, 2, 3, 5])) @ amplitude**2
    np.testing.assert_allclose(fields[1].values, expected, atol=1e-12 * expected.max())


def test_a_self_term_is_taken_off_every_square():
    wanted = listing(PLANAR, seed=75)
    x = sites(2)
    term = float(np.mean(np.abs(wanted.values) ** 2))
    expected = Listing(PLANAR, wanted.indices, (np.abs(wanted.values) ** 2 - term) * PLANAR.volume + 0j, True).at(x)
    assert_close(field_at(wanted, x, Treatment(field="autocorrelation", self_term=term)), expected)
    # With the mean square taken off nothing is left of the origin's peak.
    at_origin = field_at(wanted, np.zeros((1, 2)), Treatment(field="autocorrelation", self_term=term))
    whole = field_at(wanted, np.zeros((1, 2)), Treatment(field="autocorrelation"))
    assert abs(at_origin[0]) < 1e-12 * whole[0]


# Response.


@cases
def test_the_response_is_the_mean_wave_with_peak_one(dimension, real):
    wanted, x = listing(LATTICES[dimension], real=real, seed=76), sites(dimension)
    found = field_at(wanted, np.concatenate([np.zeros((1, dimension)), x]), Treatment(field="response"))
    assert found[0] == pytest.approx(1.0, abs=1e-14)
    expected = np.exp(2j * np.pi * x @ wanted.indices.T).mean(axis=1)
    assert np.abs(found[1:] - expected).max() < 1e-13
    assert np.abs(found).max() <= 1 + 1e-14


def test_the_response_knows_window_and_average_and_keeps_its_peak():
    wanted = listing(CRYSTAL, seed=77)
    for treatment in (
        Treatment(field="response", window=Window("lanczos")),
        Treatment(field="response", average=averages.lateral(CRYSTAL, [0, 0, 1])),
        Treatment(field="response", sharpen=-3.0),
    ):
        assert field_at(wanted, np.zeros((1, 3)), treatment)[0] == pytest.approx(1.0, abs=1e-14)


def test_the_response_is_of_what_is_summed():
    """Coefficients without a phase are left out of a density, hence of its response too."""
    columns = Columns(indices=((1, 2, 3),), amplitude=[1.0, 2.0, 3.0], phase_deg=[0.0, np.nan, 50.0])
    made = assemble(STACK, columns, values="density_coefficient")
    field = evaluate(made, full_cell(STACK, (40,)), Treatment(field="response"))
    x = np.arange(40) / 40
    np.testing.assert_allclose(field.values, (np.cos(2 * np.pi * x) + np.cos(6 * np.pi * x)) / 2, atol=1e-13)
    assert field.unphased == 1


# Treatments.


@pytest.mark.parametrize("window", [Window("lanczos"), Window("raised_cosine"), Window("gaussian", 3.0)], ids=str)
def test_a_window_multiplies_each_coefficient(window):
    wanted, x = listing(CRYSTAL, seed=78), sites(3)
    u = np.linalg.norm(wanted.indices @ reciprocal(CRYSTAL), axis=1)
    s = u / (4 * np.pi)
    u = u / u.max()
    factor = {
        "lanczos": np.sinc(u),
        "raised_cosine": (1 + np.cos(np.pi * u)) / 2,
        "gaussian": np.exp(-3.0 * s**2),
    }[window.kind]
    expected = Listing(CRYSTAL, wanted.indices, factor * wanted.values, True).at(x)
    assert_close(field_at(wanted, x, Treatment(window=window)), expected)


@pytest.mark.parametrize("b", [4.0, -4.0])
def test_sharpening_and_smoothing(b):
    wanted, x = listing(CRYSTAL, seed=79), sites(3)
    s = np.linalg.norm(wanted.indices @ reciprocal(CRYSTAL), axis=1) / (4 * np.pi)
    expected = Listing(CRYSTAL, wanted.indices, np.exp(b * s**2) * wanted.values, True).at(x)
    assert_close(field_at(wanted, x, Treatment(sharpen=b)), expected)


def test_factors_multiply_each_other():
    wanted, x = listing(CRYSTAL, seed=80), sites(3)
    treatment = Treatment(window=Window("lanczos"), sharpen=2.0, average=averages.ball(0.7))
    g = np.linalg.norm(wanted.indices @ reciprocal(CRYSTAL), axis=1)
    y = np.where(g > 0, 0.7 * g, 1.0)
    ball = np.where(g > 0, 3 * (np.sin(y) - y * np.cos(y)) / y**3, 1.0)
    factor = np.sinc(g / g.max()) * np.exp(2.0 * (g / (4 * np.pi)) ** 2) * ball
    expected = Listing(CRYSTAL, wanted.indices, factor * wanted.values, True).at(x)
    assert_close(field_at(wanted, x, treatment), expected)


def with_merit(field="density", *, apply_merit):
    columns = Columns(
        indices=((0, 1, 2),), amplitude=[5.0, 2.0, 3.0], phase_deg=[0.0, 30.0, 70.0], merit=[1.0, 0.5, 0.2]
    )
    made = assemble(STACK, columns, values="density_coefficient")
    return made, summands(made, Treatment(field=field, apply_merit=apply_merit))


def test_figures_of_merit_multiply_where_they_are_asked_to():
    made, plain = with_merit(apply_merit=False)
    np.testing.assert_array_equal(plain.series[0].values, made.values)
    assert "figures of merit were given and not applied" in plain.applied
    _, best = with_merit(apply_merit=True)
    np.testing.assert_allclose(best.series[0].values, made.values * [1.0, 0.5, 0.2], rtol=1e-15)
    assert any("multiplied by its figure of merit" in word for word in best.applied)


@pytest.mark.parametrize("field", ["autocorrelation", "response"])
def test_figures_of_merit_have_no_say_without_phases(field):
    _, plain = with_merit(field, apply_merit=False)
    _, asked = with_merit(field, apply_merit=True)
    np.testing.assert_array_equal(plain.series[0].values, asked.series[0].values)


def test_terms_that_a_factor_makes_zero_are_not_summed():
    whole = listing(CRYSTAL, seed=81)
    made = summands(whole.coefficients(), Treatment(average=averages.lateral(CRYSTAL, [0, 0, 1])))
    assert not made.series[0].indices[:, :2].any()
    assert made.series[0].count < 10


def test_units():
    columns = Columns(indices=((0, 1), (0, 0), (0, 0)), amplitude=[5.0, 2.0], phase_deg=[0.0, 30.0])
    expected = {
        "density": "e/Å³",
        "gradient": "e/Å³/Å",
        "gradient_magnitude": "e/Å³/Å",
        "laplacian": "e/Å³/Å²",
        "autocorrelation": "(e/Å³)²·Å³",
        "response": "1",
    }
    assert set(expected) == set(FIELD_KINDS)
    made = assemble(CRYSTAL, columns, values="density_coefficient", unit="e/Å³")
    plain = assemble(CRYSTAL, columns, values="density_coefficient")
    for field, unit in expected.items():
        assert summands(made, Treatment(field=field)).unit == unit
        assert summands(plain, Treatment(field=field)).unit == ("1" if field == "response" else "arbitrary")


def test_every_step_is_put_in_words():
    treatment = Treatment(
        field="autocorrelation", window=Window("lanczos"), sharpen=-2.0, average=averages.ball(1.0), self_term=0.5
    )
    words = " / ".join(summands(listing(CRYSTAL).coefficients(), treatment).applied)
    for word in ("lanczos", "smoothed", "B = -2", "radius of 1 Å", "self term 0.5"):
        assert word in words
    assert "sharpened" in " ".join(summands(listing(CRYSTAL).coefficients(), Treatment(sharpen=2.0)).applied)


# Refusals.

UNPHASED = Columns(indices=((1, 2, 3),), amplitude=[1.0, 2.0, 3.0])

REFUSED = [
    (Treatment(self_term=1.0), ("self_term",)),
    (Treatment(field="response", self_term=1.0), ("self_term",)),
    (Treatment(apply_merit=True), ("apply_merit",)),
    (Treatment(sharpen=math.nan), ("sharpen",)),
    (Treatment(sharpen=math.inf), ("sharpen",)),
    (Treatment(sharpen=1e6), ("sharpen",)),
    (Treatment(field="densité"), ("field",)),
    (Treatment(), ("phase_deg",)),
    (Treatment(field="gradient"), ("phase_deg",)),
    (Treatment(field="response"), ("phase_deg",)),
]


@pytest.mark.parametrize(("treatment", "path"), REFUSED)
def test_treatments_that_are_refused(treatment, path):
    unphased = path == ("phase_deg",)
    made = assemble(STACK, UNPHASED, values="density_coefficient") if unphased else listing(STACK).coefficients()
    assert refusal_of(lambda: summands(made, treatment)).path == path


def test_a_response_that_a_factor_leaves_nothing_of():
    columns = Columns(indices=((0,), (0,), (1,)), amplitude=[1.0], phase_deg=[0.0])
    made = assemble(CRYSTAL, columns, values="density_coefficient")
    treatment = Treatment(field="response", average=averages.lateral(CRYSTAL, [1, 0, 0]))
    refusal_of(lambda: summands(made, treatment))
