"""Coefficient sets from a trial stack."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import special

from engine import InputError, evaluate, sampling
from engine.films.orders import FilmOrders
from engine.films.trial import Plane, Slab, Stack, calculated, calculated_set, observed_set, refine, residual_set
from engine.films.trial.sets import sign_merit

D = 19.4
L = np.arange(1, 15)
FRAME = (
    Plane.of("core", 0.0, strength=8.0, width=0.5),
    Slab.between("gallery", 3.5, 8.0, density=0.4, roughness=0.5),
)
ION = Plane.of("ion", D / 2, strength=2.0, width=0.6)
WHOLE = Stack.of(D, [*FRAME, ION], symmetry="m", unit="e/Å³")
PART = Stack.of(D, FRAME, symmetry="m", unit="e/Å³")


def profile(coefficients, z):
    """n(z) from its definition, without the engine's sums."""
    n = np.zeros(z.size)
    for (l,), value in zip(coefficients.indices, coefficients.values, strict=True):
        n += (1 if l == 0 else 2) * (value * np.exp(2j * np.pi * l * z / D)).real
    return n


def data(scale=1.0, sigma=0.02):
    size = np.abs(calculated(WHOLE, L))
    made = FilmOrders.of(D, L, scale * size, np.full(L.size, scale * sigma))
    return made if scale != 1 else FilmOrders.of(D, L, size, made.sigma, scale="absolute", unit="e/Å³")


def test_the_model_as_a_set_is_its_density():
    z = np.linspace(0, D, 201)
    made = profile(calculated_set(WHOLE, 60), z)
    ion = 2 * np.exp(-((z - D / 2) ** 2) / 0.72) / np.sqrt(2 * np.pi) / 0.6
    core = sum(8 * np.exp(-((z - place) ** 2) / 0.5) / np.sqrt(2 * np.pi) / 0.5 for place in (0, D))
    root = np.sqrt(2) * 0.5
    edges = [(3.5, 8.0), (D - 8.0, D - 3.5)]
    gallery = sum(0.2 * (special.erf((z - a) / root) - special.erf((z - b) / root)) for a, b in edges)
    np.testing.assert_allclose(made, ion + core + gallery, atol=1e-6)


def test_an_asymmetric_model_keeps_its_hand():
    lone = Stack.of(D, [Plane.of("a", 4.0, strength=1.0, width=0.8)])
    z = np.linspace(0, D, 400)
    assert z[profile(calculated_set(lone, 30), z).argmax()] == pytest.approx(4.0, abs=0.05)


def test_observed_amplitudes_with_the_models_phases():
    made = observed_set(PART, data())
    signs = np.sign(calculated(PART, L).real)
    expected = signs * np.abs(calculated(WHOLE, L)) / D
    np.testing.assert_allclose(made.values[1:], expected, atol=1e-12)
    assert made.indices[0, 0] == 0
    assert made.values[0].real == pytest.approx(calculated(PART, [0])[0].real / D)
    assert made.unit == "e/Å³"
    assert made.merit[0] == 1.0


def test_what_the_model_lacks_shows_where_it_is_missing():
    z = np.linspace(0, D, 389)
    lacking = profile(residual_set(PART, data()), z)
    peak = z[lacking.argmax()]
    assert peak == pytest.approx(D / 2, abs=0.05)
    # The signs of the frame are those of the whole but for weak orders: most of the height is there.
    ion = profile(calculated_set(Stack.of(D, [ION], symmetry="m"), 14, zero_term=False), z)
    assert lacking.max() == pytest.approx(ion.max(), rel=0.25)


def test_residual_and_model_add_up_to_the_observed():
    z = np.linspace(0, D, 97)
    both = profile(residual_set(PART, data()), z) + profile(calculated_set(PART, 14), z)
    np.testing.assert_allclose(both, profile(observed_set(PART, data()), z), atol=1e-12)


def test_a_refined_scale_makes_the_amplitudes_absolute_and_is_uncertain():
    start = Stack.of(D, [*FRAME, ION], symmetry="m", unit="e/Å³", scale=2.0)
    fitted = refine(start, data(scale=2.5), ["scale", "ion.occupancy"])
    made = observed_set(fitted)
    np.testing.assert_allclose(np.abs(made.values[1:]), np.abs(calculated(WHOLE, L)) / D, rtol=1e-6)
    assert made.scale_sigma == pytest.approx(fitted.sigma[0] / 2.5)
    np.testing.assert_allclose(made.sigma[1:], 0.02 / D, rtol=1e-6)
    where = sampling.line(made.lattice, [0.0], [1.0], 64)
    assert evaluate(made, where, uncertainty=True).sigma is not None


def test_merit_is_the_mean_sign_of_normal_errors():
    """Simulated: signed truth = model + normal error; the share of right signs at the same |F_o|, less the wrong."""
    rng = np.random.default_rng(3)
    calc, spread = 0.8, 1.1
    truth = calc + spread * rng.normal(size=2_000_000)
    near = np.abs(np.abs(truth) - 1.0) < 0.02
    expected = np.sign(truth[near]).mean()
    orders = FilmOrders.of(D, [1], [1.0], [spread])
    assert sign_merit(orders, np.array([calc + 0j]), symmetric=True)[0] == pytest.approx(expected, abs=0.01)


def test_merit_of_a_phase_is_that_of_an_error_in_the_plane():
    rng = np.random.default_rng(4)
    calc, spread = 0.8, 1.1
    truth = calc + spread * (rng.normal(size=1_000_000) + 1j * rng.normal(size=1_000_000))
    near = np.abs(np.abs(truth) - 1.0) < 0.02
    expected = np.cos(np.angle(truth[near])).mean()
    orders = FilmOrders.of(D, [1], [1.0], [spread])
    assert sign_merit(orders, np.array([calc + 0j]), symmetric=False)[0] == pytest.approx(expected, abs=0.01)


def test_merit_falls_where_the_model_misses():
    sure = observed_set(WHOLE, data()).merit
    unsure = observed_set(PART, data()).merit
    assert sure[1:].min() > 0.9
    assert unsure[1:].min() < 0.9
    assert observed_set(PART, data(), merit=False).merit is None


def test_a_perfect_model_without_errors_is_certain():
    orders = FilmOrders.of(D, [1, 2], [1.0, 0.0])
    np.testing.assert_array_equal(sign_merit(orders, np.array([1.0, 0.0j]), symmetric=True), [1.0, 0.0])


def test_orders_are_wanted_with_a_stack():
    with pytest.raises(InputError, match="orders"):
        observed_set(PART)
