"""σ of fields against draws of the measured values, and the laws it obeys."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine import Demand, InputError, Lattice, TooLargeError, Treatment, Window, evaluate, prepare, sampling
from engine.averages import ball, lateral, slab
from engine.combination import AS_GIVEN, difference
from engine.symmetry import space_group
from engine.uncertainty import PointDerivatives, covariance, errors_of
from engine.uncertainty import sigma as module
from engine.uncertainty.sigma import perform_sigma, prepare_sigma, significance
from tests.engine.uncertainty.measured import (
    CRYSTALS,
    GENERAL,
    ORTHORHOMBIC,
    TRICLINIC,
    assert_spread,
    drawn,
    measured,
    simulated,
)

DRAWS = 10_000
ERRORS = {
    "amplitudes": {},
    "sharp phases": {"sigma": None, "phase_sigma": 0.05},
    "broad phases": {"sigma": None, "phase_sigma": 1.2},
    "both": {"sigma": 0.2, "phase_sigma": 0.6},
    "merits": {"sigma": 0.2, "kappa": 1.5},
    "poor merits": {"sigma": None, "kappa": 0.3},
}


def crystal(name, **options):
    group, lattice, d_min, positions = CRYSTALS[name]
    return measured(group, lattice, d_min, **options), positions


def sigma_at(coefficients, positions, treatment=None, demand=None):
    made = evaluate(coefficients, sampling.points(coefficients.lattice, positions), treatment, demand, uncertainty=True)
    return made.sigma.values


# Monte Carlo


@pytest.mark.parametrize("errors", ERRORS)
@pytest.mark.parametrize("name", CRYSTALS)
def test_sigma_is_the_spread_of_drawn_densities(name, errors):
    data, positions = crystal(name, **ERRORS[errors])
    amplitude, deviation = drawn(data, DRAWS)
    draws = simulated(data, amplitude, deviation, positions)
    assert_spread(draws, sigma_at(data.coefficients(), positions))


@pytest.mark.parametrize("name", CRYSTALS)
def test_the_draws_are_those_of_the_real_chain(name):
    data, positions = crystal(name, phase_sigma=0.6, mean=3.0)
    amplitude, deviation = drawn(data, 3)
    expected = simulated(data, amplitude, deviation, positions) + 3.0 / data.lattice.volume
    where = sampling.points(data.lattice, positions)
    for number in range(3):
        made = data.coefficients(amplitude[number], data.reflections.phase + deviation[number])
        np.testing.assert_allclose(evaluate(made, where).values, expected[number], rtol=0, atol=1e-10)


TREATMENTS = {
    "window": lambda _: Treatment(window=Window("lanczos")),
    "sharpened ball": lambda _: Treatment(sharpen=1.5, average=ball(0.4)),
    "slab": lambda lattice: Treatment(average=slab(lattice, np.eye(lattice.dimension, dtype=int)[-1], 0.8)),
    "lateral": lambda lattice: Treatment(average=lateral(lattice, np.eye(lattice.dimension, dtype=int)[-1])),
}


@pytest.mark.parametrize("kind", TREATMENTS)
@pytest.mark.parametrize("name", ["P-1", "P212121", "Pa-3", "p6mm", "centred stack"])
def test_windows_and_averages(name, kind):
    data, positions = crystal(name, phase_sigma=0.3)
    lattice = data.lattice
    treatment = TREATMENTS[kind](lattice)
    largest = lattice.magnitudes(data.reflections.indices).max()

    def multiply(m):
        q = lattice.magnitudes(m)
        factors = treatment.window.factors(q, largest) * np.exp(treatment.sharpen * (q / (4 * np.pi)) ** 2)
        return factors if treatment.average is None else factors * treatment.average.factors(lattice, m)

    draws = simulated(data, *drawn(data, DRAWS), positions, multiply)
    assert_spread(draws, sigma_at(data.coefficients(), positions, treatment))


@pytest.mark.parametrize("errors", ["amplitudes", "both"])
@pytest.mark.parametrize("name", ["P1", "P212121", "Pm-3m", "p3", "stack"])
def test_gradient_and_laplacian(name, errors):
    data, positions = crystal(name, **ERRORS[errors])
    lattice = data.lattice
    amplitude, deviation = drawn(data, DRAWS)
    components = [
        simulated(data, amplitude, deviation, positions, lambda m, j=j: 1j * (m @ lattice.reciprocal)[:, j])
        for j in range(lattice.dimension)
    ]
    found = sigma_at(data.coefficients(), positions, Treatment(field="gradient"))
    assert_spread(np.stack(components, axis=-1), found)
    draws = simulated(data, amplitude, deviation, positions, lambda m: -(lattice.magnitudes(m) ** 2))
    assert_spread(draws, sigma_at(data.coefficients(), positions, Treatment(field="laplacian")))


@pytest.mark.parametrize("name", ["P1", "P212121", "Pa-3", "p3", "stack"])
def test_length_of_the_gradient_to_first_order(name):
    data, positions = crystal(name, sigma=0.01, phase_sigma=0.01)
    positions = positions[:2]
    lattice = data.lattice
    amplitude, deviation = drawn(data, DRAWS)
    components = [
        simulated(data, amplitude, deviation, positions, lambda m, j=j: 1j * (m @ lattice.reciprocal)[:, j])
        for j in range(lattice.dimension)
    ]
    draws = np.sqrt(np.sum(np.square(components), axis=0))
    found = sigma_at(data.coefficients(), positions, Treatment(field="gradient_magnitude"))
    assert_spread(draws, found, allowance=0.005)


def test_length_of_a_gradient_that_vanishes_is_uncertain_by_the_mean_over_all_directions():
    data, _ = crystal("Pm-3m")
    # By symmetry it vanishes whatever the errors.
    found = sigma_at(data.coefficients(), [[0, 0, 0]], Treatment(field="gradient_magnitude"))
    assert found[0] < 1e-6
    data, _ = crystal("p3")
    flat = replace(data.reflections, observed=np.zeros(data.reflections.count), sigma=np.ones(data.reflections.count))
    made = replace(data, reflections=flat).coefficients()
    where = [[0.2, 0.7]]
    length = sigma_at(made, where, Treatment(field="gradient_magnitude"))
    components = sigma_at(made, where, Treatment(field="gradient"))
    np.testing.assert_allclose(length, np.sqrt(np.mean(components**2, axis=-1)), rtol=1e-9)


def test_autocorrelation_is_that_of_squared_amplitudes():
    data, positions = crystal("Pa-3", sigma=0.4)
    volume = data.lattice.volume
    amplitude, _ = drawn(data, DRAWS)
    draws = (amplitude**2 / volume) @ data.sums(positions, lambda m: np.full(len(m), volume), phaseless=True)
    made = data.coefficients()
    assert_spread(draws, sigma_at(made, positions, Treatment(field="autocorrelation")))
    # Phases and their errors do not matter to it, a self term is exact.
    with_phases, _ = crystal("Pa-3", sigma=0.4, phase_sigma=0.7)
    np.testing.assert_allclose(
        sigma_at(with_phases.coefficients(), positions, Treatment(field="autocorrelation", self_term=0.01)),
        sigma_at(made, positions, Treatment(field="autocorrelation")),
        rtol=1e-12,
    )


def test_autocorrelation_of_vanishing_amplitudes_keeps_their_errors_real():
    data, positions = crystal("P212121")
    count = data.reflections.count
    data = replace(data, reflections=replace(data.reflections, observed=np.zeros(count), sigma=np.ones(count)))
    volume = data.lattice.volume
    amplitude, _ = drawn(data, DRAWS)
    draws = (amplitude**2 / volume) @ data.sums(positions, lambda m: np.full(len(m), volume), phaseless=True)
    assert_spread(draws, sigma_at(data.coefficients(), positions, Treatment(field="autocorrelation")))


@pytest.mark.parametrize("sigma", [None, 0.05])
@pytest.mark.parametrize("self_term", [0.0, 0.004])
def test_a_scale_counts_twice_in_an_autocorrelation_and_not_in_its_self_term(self_term, sigma):
    data, positions = crystal("P212121", sigma=sigma, scale_sigma=0.02, mean=40.0)
    volume = data.lattice.volume
    nominal = (data.reflections.observed**2 / volume) @ data.sums(
        positions, lambda m: np.full(len(m), volume), phaseless=True
    )
    treatment = Treatment(field="autocorrelation", self_term=self_term)
    found = sigma_at(data.coefficients(), positions, treatment)
    alone = sigma_at(replace(data.coefficients(), scale_sigma=0.0), positions, treatment) if sigma else 0.0
    np.testing.assert_allclose(found, np.hypot(alone, 2 * 0.02 * nominal), rtol=1e-9)


@pytest.mark.parametrize("name", ["P1", "P-1", "P212121", "Pa-3", "p2gg", "stack"])
@pytest.mark.parametrize("errors", ["amplitudes", "broad phases", "both"])
def test_complex_densities(name, errors):
    data, positions = crystal(name, real=False, **ERRORS[errors])
    amplitude, deviation = drawn(data, DRAWS)
    draws = (amplitude * np.exp(1j * deviation)) @ data.sums(positions)
    field = evaluate(data.coefficients(), sampling.points(data.lattice, positions), uncertainty=True)
    assert field.values.dtype == np.complex128
    assert field.sigma.values.dtype == np.float64
    assert_spread(draws, field.sigma.values)


@pytest.mark.parametrize("treatment", ["density", "gradient_magnitude"])
@pytest.mark.parametrize("sigma", [None, 0.05])
def test_the_error_of_the_scale_is_common_to_all_but_a_given_mean(treatment, sigma):
    data, positions = crystal("P212121", sigma=sigma, mean=40.0, scale_sigma=0.03)
    amplitude, deviation = drawn(data, DRAWS)
    scale = 1 + 0.03 * np.random.default_rng(8).normal(size=(DRAWS, 1))
    if treatment == "density":
        draws = scale * simulated(data, amplitude, deviation, positions)
    else:
        reciprocal = data.lattice.reciprocal
        parts = [
            simulated(data, amplitude, deviation, positions, lambda m, j=j: 1j * (m @ reciprocal)[:, j])
            for j in range(3)
        ]
        draws = scale * np.sqrt(np.sum(np.square(parts), axis=0))
    found = sigma_at(data.coefficients(), positions, Treatment(field=treatment))
    assert_spread(draws, found, allowance=0.0 if treatment == "density" else 0.01)


def test_a_measured_zero_term_shares_the_scale_and_has_its_own_sigma():
    data, positions = crystal("P212121", zero=True, scale_sigma=0.1, phase_sigma=0.2)
    assert not data.reflections.indices[-1].any()
    amplitude, deviation = drawn(data, DRAWS)
    scale = 1 + 0.1 * np.random.default_rng(8).normal(size=(DRAWS, 1))
    nominal = simulated(data, data.reflections.observed[None], np.zeros((1, data.reflections.count)), positions)
    found = sigma_at(data.coefficients(), positions)
    # To first order: (1 + ε)(n + δ) without the product εδ.
    draws = simulated(data, amplitude, deviation, positions) + (scale - 1) * nominal
    assert_spread(draws, found)


def test_merits_weight_values_and_are_in_the_uncertainty_either_way():
    data, positions = crystal("P212121", kappa=1.0)
    made = data.coefficients()
    where = sampling.points(made.lattice, positions)
    weighted = evaluate(made, where, Treatment(apply_merit=True), uncertainty=True)
    bare = evaluate(made, where, uncertainty=True)
    draws = simulated(data, *drawn(data, DRAWS), positions)
    np.testing.assert_array_equal(weighted.sigma.values, bare.sigma.values)
    assert_spread(draws, weighted.sigma.values)
    # The weighted values are the mean of the draws.
    apart = np.abs(draws.mean(axis=0) - weighted.values)
    assert np.all(apart < 5 * weighted.sigma.values / np.sqrt(DRAWS))
    assert any("weighted by their figures of merit; the values are not so" in note for note in bare.notes)
    assert not any("the values are not so" in note for note in weighted.notes)


@pytest.mark.parametrize("errors", ["amplitudes", "both", "merits"])
@pytest.mark.parametrize("name", ["P1", "P212121", "Pa-3", "p3", "centred stack"])
def test_difference_of_two_measured_sets(name, errors):
    """Its errors lie neither along its phasors nor across them."""
    first, positions = crystal(name, **ERRORS[errors])
    second, _ = crystal(name, seed=1, **ERRORS[errors])
    made = difference(first.coefficients(), second.coefficients(), scale=AS_GIVEN).coefficients
    draws = simulated(first, *drawn(first, DRAWS, 1), positions) - simulated(
        second, *drawn(second, DRAWS, 2), positions
    )
    assert_spread(draws, sigma_at(made, positions))


def test_vanishing_amplitudes_have_errors_in_both_directions():
    """A direction chosen for them would make σ depend on the origin, or break the symmetry."""
    data, positions = crystal("P212121")
    count = data.reflections.count
    data = replace(data, reflections=replace(data.reflections, observed=np.zeros(count), sigma=np.full(count, 2.0)))
    rng = np.random.default_rng(3)
    draws = 2.0 * rng.normal(size=(DRAWS, count))
    turn = np.where(data.centric, rng.choice([0, np.pi], (DRAWS, count)), rng.uniform(0, 2 * np.pi, (DRAWS, count)))
    assert_spread(simulated(data, draws, turn, positions), sigma_at(data.coefficients(), positions))


# Laws


def grid_sigma(coefficients, shape=(8, 8, 8), **options):
    return evaluate(coefficients, sampling.full_cell(coefficients.lattice, shape), uncertainty=True, **options).sigma


names = st.sampled_from(sorted(CRYSTALS))
kinds = st.sampled_from(sorted(ERRORS))
seeds = st.integers(0, 2**16)


def random_positions(dimension, seed, count=5):
    return np.random.default_rng(seed).uniform(-1, 1, (count, dimension))


@given(names, seeds, st.floats(1e-3, 1e3))
@settings(max_examples=15)
def test_sigma_scales_with_the_sigmas(name, seed, factor):
    data, _ = crystal(name, seed=seed, scale_sigma=0.01)
    one = data.coefficients()
    other = replace(one, sigma=factor * one.sigma, scale_sigma=factor * one.scale_sigma)
    positions = random_positions(one.lattice.dimension, seed)
    np.testing.assert_allclose(sigma_at(other, positions), factor * sigma_at(one, positions), rtol=1e-9)


@given(names, kinds, seeds)
@settings(max_examples=25)
def test_sigma_has_the_symmetry_of_the_group(name, errors, seed):
    data, _ = crystal(name, seed=seed, **ERRORS[errors])
    rng = np.random.default_rng(seed)
    weak = rng.random(data.reflections.count) < 0.3
    data = replace(data, reflections=replace(data.reflections, observed=np.where(weak, 0, data.reflections.observed)))
    made, group = data.coefficients(), data.group
    positions = random_positions(group.dimension, seed)
    expected = sigma_at(made, positions)
    number = rng.integers(group.order)
    shift = rng.integers(-3, 4, group.dimension)
    moved = positions @ group.rotations[number].T + group.translations[number] + shift
    np.testing.assert_allclose(sigma_at(made, moved), expected, rtol=1e-7, atol=1e-9 * expected.max())


@given(names, kinds, seeds)
@settings(max_examples=15)
def test_sigma_is_that_of_the_negative_too(name, errors, seed):
    data, _ = crystal(name, seed=seed, **ERRORS[errors])
    made = data.coefficients()
    positions = random_positions(made.lattice.dimension, seed)
    np.testing.assert_allclose(
        sigma_at(replace(made, values=-made.values), positions), sigma_at(made, positions), rtol=1e-9
    )


@given(kinds, seeds)
@settings(max_examples=15)
def test_a_shift_of_the_origin_shifts_sigma(errors, seed):
    """In P1 with vanishing amplitudes among the others: none has a direction of its own."""
    data, _ = crystal("P1", seed=seed, **ERRORS[errors])
    made = data.coefficients()
    rng = np.random.default_rng(seed)
    made = replace(made, values=np.where(rng.random(made.count) < 0.3, 0, made.values))
    shift = rng.random(3)
    moved = replace(made, values=made.values * np.exp(2j * np.pi * made.indices @ shift))
    positions = random_positions(3, seed)
    np.testing.assert_allclose(sigma_at(moved, positions - shift), sigma_at(made, positions), rtol=1e-9)


@given(names, kinds, seeds)
@settings(max_examples=15)
def test_the_order_of_the_rows_does_not_matter(name, errors, seed):
    data, _ = crystal(name, seed=seed, **ERRORS[errors])
    made = data.coefficients()
    order = np.random.default_rng(seed).permutation(made.count)
    positions = random_positions(made.lattice.dimension, seed)
    np.testing.assert_allclose(sigma_at(made.select(order), positions), sigma_at(made, positions), rtol=1e-9)


@given(names, kinds, seeds)
@settings(max_examples=15)
def test_variances_of_independent_measurements_add(name, errors, seed):
    data, _ = crystal(name, seed=seed, **ERRORS[errors])
    rng = np.random.default_rng(seed)
    chosen = rng.random(data.reflections.count) < 0.5
    chosen[:2] = True, False
    positions = random_positions(data.lattice.dimension, seed)
    parts = [
        replace(data, reflections=data.reflections.select(part), centric=data.centric[part]).coefficients()
        for part in (chosen, ~chosen)
    ]
    one, other = (sigma_at(part, positions) for part in parts)
    np.testing.assert_allclose(np.hypot(one, other), sigma_at(data.coefficients(), positions), rtol=1e-9)


@pytest.mark.parametrize("errors", ERRORS)
@pytest.mark.parametrize("real", [True, False])
def test_the_group_p1_is_no_group(errors, real):
    data, positions = crystal("P1", real=real, zero=True, **ERRORS[errors])
    made = data.coefficients()
    np.testing.assert_allclose(sigma_at(made, positions), sigma_at(replace(made, group=None), positions), rtol=1e-12)
    assert made.group is not None


def test_without_the_group_equivalents_are_taken_as_independent():
    data, positions = crystal("Pm-3m")
    made = data.coefficients()
    bare = sigma_at(replace(made, group=None), positions)
    assert sigma_at(made, positions)[3] > 3 * bare[3]


# Samples of every kind, by every method


def lines_and_planes(lattice):
    return {
        "cell": sampling.full_cell(lattice, (6, 9, 8)),
        "coarse cell": sampling.full_cell(lattice, (2, 3, 2)),
        "box": sampling.box(lattice, [0.1, 0.2, 0.3], [[0.31, 0, 0], [0, 0.27, 0.05], [0, 0, 0.7]], (3, 4, 5)),
        "plane": sampling.plane(lattice, [0, 0, 0.25], [1, 0, 0], [0, 1, 0], (6, 7)),
        "oblique plane": sampling.plane(lattice, [0.1, 0.2, 0.3], [1.0, 0.13, 0.21], [0.07, 0.9, -0.33], (5, 7)),
        "line": sampling.line(lattice, [0.1, 0, 0], [0.73, 0.31, 1.0], 23),
        "points": sampling.points(lattice, random_positions(3, 5, 12)),
    }


SAMPLES = lines_and_planes(ORTHORHOMBIC)


WAYS = [(kind, method) for kind in SAMPLES for method in ("direct", "nonuniform", "cascade")][:-1]
"""All but the last: free points are no grid, which the cascade needs."""


@pytest.mark.parametrize(("kind", "method"), WAYS)
def test_every_sampling_and_method_gives_the_covariance_at_its_points(kind, method, monkeypatch):
    data, _ = crystal("P212121", phase_sigma=0.5, scale_sigma=0.02, mean=20.0)
    made, where = data.coefficients(), SAMPLES[kind]
    planned = module.plan
    monkeypatch.setattr(module, "plan", lambda *given, **more: planned(*given, **{**more, "method": method}))
    found = evaluate(made, where, uncertainty=True)
    errors = errors_of(made)
    expected = np.sqrt(np.diag(covariance(errors, PointDerivatives(where.positions().reshape(-1, 3)))))
    np.testing.assert_allclose(found.sigma.values.reshape(-1), expected, rtol=1e-7, atol=1e-7 * expected.max())
    np.testing.assert_array_equal(found.values, evaluate(made, where).values)


def test_single_precision_stays_within_its_accuracy():
    data, _ = crystal("Pm-3m", phase_sigma=0.3)
    made = data.coefficients()
    for field in ("density", "gradient", "gradient_magnitude"):
        double, single = (
            grid_sigma(made, treatment=Treatment(field=field), demand=Demand(precision=precision))
            for precision in ("double", "single")
        )
        assert single.values.dtype == np.float32
        assert np.abs(single.values - double.values).max() < single.accuracy * double.maximum
        assert double.accuracy < single.accuracy < 0.02


@pytest.mark.parametrize("threads", [1, 2])
def test_threads_give_the_same(threads):
    data, _ = crystal("P212121")
    one = grid_sigma(data.coefficients())
    np.testing.assert_allclose(grid_sigma(data.coefficients(), demand=Demand(threads=threads)).values, one.values)


def test_figures_are_those_of_the_values():
    data, _ = crystal("P212121", phase_sigma=0.1)
    for field, shape in (("density", (8, 8, 8)), ("gradient", (8, 8, 8, 3)), ("gradient_magnitude", (8, 8, 8))):
        made = evaluate(
            data.coefficients(), sampling.full_cell(ORTHORHOMBIC, (8, 8, 8)), Treatment(field=field), uncertainty=True
        )
        found = made.sigma
        assert found.values.shape == shape == made.values.shape
        assert (found.minimum, found.maximum) == (found.values.min(), found.values.max())
        assert found.rms == pytest.approx(np.sqrt(np.mean(found.values**2)), rel=1e-12)


def test_a_gradient_of_a_stack_has_one_component():
    data, _ = crystal("stack")
    where = sampling.full_cell(data.lattice, (9,))
    made = evaluate(data.coefficients(), where, Treatment(field="gradient"), uncertainty=True)
    assert made.sigma.values.shape == made.values.shape == (9, 1)


def test_mean_variance_over_the_cell_follows_from_the_coefficients():
    """Parseval: ⟨σ²⟩ = Σ σ_G² over all G, whatever relates them."""
    data, _ = crystal("Pa-3")
    made = data.coefficients()
    found = grid_sigma(made, (40, 40, 40))
    assert found.rms**2 == pytest.approx(2 * np.sum(made.sigma**2), rel=1e-9)


def test_significance_is_the_ratio_and_undefined_without_an_error():
    data, _ = crystal("Pm-3m")
    field = evaluate(
        data.coefficients(),
        sampling.points(data.lattice, [[0, 0, 0], *GENERAL]),
        Treatment(field="gradient"),
        uncertainty=True,
    )
    exact = replace(field.sigma, values=np.where(np.arange(4)[:, None] == 0, 0.0, field.sigma.values))
    found = significance(field.values, exact)
    assert np.isnan(found[0]).all()
    np.testing.assert_array_equal(found[1:], field.values[1:] / field.sigma.values[1:])
    complex_values = np.array([3 + 4j])
    one = replace(field.sigma, values=np.array([2.0]))
    np.testing.assert_array_equal(significance(complex_values, one), [2.5])


# Words and refusals


def test_words_name_what_is_in_and_what_is_not():
    data, _ = crystal("P212121", phase_sigma=0.1)
    made = grid_sigma(data.coefficients(), (3, 3, 3))
    assert "standard uncertainties of the amplitudes" in made.contains
    assert any("wrapped normal" in one for one in made.contains)
    assert any(f"({data.reflections.count} in all)" in one for one in made.contains)
    assert {"termination and missing coefficients", "the uncertainty of the scale"} <= set(made.omits)
    assert "the mean density, which is not known" in made.omits


@pytest.mark.parametrize(
    ("field", "path"),
    [
        ("response", ("uncertainty",)),
        ("density", ("sigma",)),
        ("gradient", ("sigma",)),
        ("autocorrelation", ("sigma",)),
    ],
)
def test_what_has_no_uncertainty_is_refused(field, path):
    data, _ = crystal("P212121", sigma=0.1 if field == "response" else None)
    with pytest.raises(InputError) as caught:
        prepare(data.coefficients(), SAMPLES["cell"], Treatment(field=field), uncertainty=True)
    assert caught.value.path == path


def test_coefficients_without_phase_do_not_count():
    data, positions = crystal("P212121")
    made = data.coefficients()
    known = np.arange(made.count) % 3 > 0
    np.testing.assert_allclose(
        sigma_at(replace(made, phase_known=known), positions), sigma_at(made.select(known), positions), rtol=1e-12
    )


def test_progress_is_told_of_both_sums_and_may_end_them():
    data, _ = crystal("P212121")
    told = []
    grid_sigma(data.coefficients(), progress=lambda done, total: told.append(done / total))
    assert told == sorted(told)
    assert told[-1] == 1.0
    assert any(0.4 < one < 0.6 for one in told)


@pytest.mark.parametrize("field", ["density", "gradient", "gradient_magnitude"])
def test_a_limit_is_kept_to_the_byte(field):
    big = measured(space_group("P212121"), Lattice.from_parameters(9, 10, 11, 90, 90, 90), 1.0, phase_sigma=0.1)
    made, where = big.coefficients(), sampling.full_cell(big.lattice, (60, 50, 40))
    treatment = Treatment(field=field)

    def fits(limit):
        try:
            return prepare_sigma(made, where, treatment, max_bytes=limit)
        except TooLargeError:
            return None

    low, high = 1, prepare_sigma(made, where, treatment).bytes * 2
    assert fits(high) is not None
    while high - low > 1000:
        middle = (low + high) // 2
        low, high = (low, middle) if fits(middle) else (middle, high)
    work = fits(high)
    assert work.bytes <= 1.02 * high
    assert high <= 1.02 * work.bytes
    # What the whole request is costed at holds the values too.
    assert prepare(made, where, treatment, uncertainty=True).bytes >= work.bytes + 8 * int(np.prod(work.shape))
    sigma = perform_sigma(work, np.zeros(work.shape))
    np.testing.assert_allclose(
        sigma.values,
        perform_sigma(prepare_sigma(made, where, treatment), np.zeros(work.shape)).values,
        atol=1e-6 * sigma.maximum,
    )


def test_too_much_is_refused_before_anything_is_made(monkeypatch):
    data = measured(space_group("Pm-3m"), Lattice.from_parameters(12, 12, 12, 90, 90, 90), 0.7)
    monkeypatch.setattr(module, "fill", None)
    monkeypatch.setattr("engine.uncertainty.pairs._Table", None)
    monkeypatch.setattr("engine.uncertainty.pairs._Pile", None)
    made, where = data.coefficients(), sampling.full_cell(data.lattice, (4, 4, 4))
    enough = prepare(made, where).bytes + 4**3 * 8
    with pytest.raises(TooLargeError) as caught:
        prepare(made, where, uncertainty=True, max_bytes=enough)
    assert caught.value.path == ("uncertainty",)
    assert "pairs of related coefficients" in caught.value.reason


@pytest.mark.parametrize("field", ["density", "gradient", "gradient_magnitude"])
@pytest.mark.parametrize("name", ["P1", "Pa-3"])
def test_memory_stays_within_the_estimate(name, field):
    import tracemalloc

    group, lattice = CRYSTALS[name][0], {"P1": TRICLINIC, "Pa-3": Lattice.from_parameters(12, 12, 12, 90, 90, 90)}[name]
    data = measured(group, lattice, 0.32 if name == "P1" else 0.6, phase_sigma=0.1)
    made, where = data.coefficients(), sampling.full_cell(lattice, (16, 16, 16))
    treatment = Treatment(field=field)
    evaluate(made, where, treatment, uncertainty=True)
    values = np.zeros(where.shape if field != "gradient" else (*where.shape, 3))
    tracemalloc.start()
    try:
        before = tracemalloc.get_traced_memory()[0]
        work = prepare_sigma(made, where, treatment)
        perform_sigma(work, values)
        peak = tracemalloc.get_traced_memory()[1] - before
    finally:
        tracemalloc.stop()
    assert peak <= work.bytes <= 2 * peak
