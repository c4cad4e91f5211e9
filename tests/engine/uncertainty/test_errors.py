"""The variance of one measurement against exact integrals, and how measurements are told apart."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate, special

from engine import Columns, InputError, assemble
from engine.coefficients import PlaneErrors
from engine.symmetry import space_group
from engine.uncertainty import PointDerivatives, covariance, errors_of
from engine.uncertainty.errors import phasors, plane_errors
from tests.engine.uncertainty.measured import CRYSTALS, GENERAL, ORTHORHOMBIC, TRICLINIC, measured


def one_orbit(position, *, sigma=0.7, phase_sigma=None, merit=None, kappa=None):
    """A set of one acentric orbit of P2₁2₁2₁, and its density at a position for any amplitude and deviation."""
    data = measured(space_group("P212121"), ORTHORHOMBIC, 2.0, seed=4)
    chosen = int(np.flatnonzero(~data.centric)[0])
    reflections = data.reflections.select(np.array([chosen]))
    column = None if phase_sigma is None else np.array([phase_sigma])
    figures = None if merit is None else np.array([merit])
    data = replace(
        data,
        reflections=replace(
            reflections, sigma=np.array([sigma]), phase_sigma=column, merit=figures, row=np.zeros(1, dtype=np.int64)
        ),
        centric=data.centric[[chosen]],
    )
    straight, sideways = (data.sums([position], turned=turned)[0, 0] for turned in (0.0, np.pi / 2))
    amplitude = float(data.reflections.observed[0])

    def density(deviation):
        return straight * np.cos(deviation) + sideways * np.sin(deviation)

    return data.coefficients(), density, amplitude


def moments(weight, density, amplitude, sigma, reach):
    """Mean and variance of A·density(δ), A with mean `amplitude` and σ, δ with the density `weight`."""
    norm, first, second = (
        integrate.quad(
            lambda d, f=f: weight(d) * f(d), -reach, reach, limit=400, epsabs=1e-12, epsrel=1e-10, points=[0.0]
        )[0]
        for f in (lambda _: 1.0, density, lambda d: density(d) ** 2)
    )
    mean = amplitude * first / norm
    return mean, (amplitude**2 + sigma**2) * second / norm - mean**2


def variance_at(coefficients, position):
    return float(covariance(errors_of(coefficients), PointDerivatives(np.array([position])))[0, 0])


@pytest.mark.parametrize("kappa", [1e-3, 0.2, 1.0, 3.0, 20.0, 400.0])
@pytest.mark.parametrize("position", GENERAL[:2])
def test_von_mises_phases_exactly(kappa, position):
    merit = float(special.ive(1, kappa) / special.ive(0, kappa))
    coefficients, density, amplitude = one_orbit(position, merit=merit)
    mean, variance = moments(lambda d: np.exp(kappa * (np.cos(d) - 1)), density, amplitude, 0.7, np.pi)
    assert variance_at(coefficients, position) == pytest.approx(variance, rel=1e-8)
    assert mean == pytest.approx(merit * amplitude * density(0.0), rel=1e-9)


@pytest.mark.parametrize("phase_sigma", [0.01, 0.3, 1.0, 2.0, 4.0])
@pytest.mark.parametrize("position", GENERAL[:2])
def test_wrapped_normal_phases_exactly(phase_sigma, position):
    coefficients, density, amplitude = one_orbit(position, phase_sigma=phase_sigma)
    # Wrapping changes no integral of a periodic function.
    mean, variance = moments(lambda d: np.exp(-(d**2) / (2 * phase_sigma**2)), density, amplitude, 0.7, 9 * phase_sigma)
    assert variance_at(coefficients, position) == pytest.approx(variance, rel=1e-7)
    assert mean == pytest.approx(np.exp(-(phase_sigma**2) / 2) * amplitude * density(0.0), rel=1e-7, abs=1e-10)


@pytest.mark.parametrize("small", [1e-2, 1e-5, 1e-9])
def test_sharp_phases_obey_the_law_of_propagation(small):
    """σ_A² C² + A² σ_φ² S², with digits left where 1 − m is near the last place of 1."""
    coefficients, density, amplitude = one_orbit(GENERAL[0], sigma=0.0, phase_sigma=small)
    expected = (amplitude * small * density(np.pi / 2)) ** 2
    assert variance_at(coefficients, GENERAL[0]) == pytest.approx(expected, rel=5 * small**2 + 1e-9)


def test_the_unused_power_of_a_phase_that_is_not_known_is_all_of_it():
    coefficients, density, amplitude = one_orbit(GENERAL[0], sigma=0.0, merit=0.0)
    expected = amplitude**2 * (density(0.0) ** 2 + density(np.pi / 2) ** 2) / 2
    assert variance_at(coefficients, GENERAL[0]) == pytest.approx(expected, rel=1e-12)


def test_a_phase_that_is_certain_adds_nothing():
    sharp, _, _ = one_orbit(GENERAL[0], merit=1.0)
    bare, _, _ = one_orbit(GENERAL[0])
    none, _, _ = one_orbit(GENERAL[0], phase_sigma=0.0)
    expected = variance_at(bare, GENERAL[0])
    assert variance_at(sharp, GENERAL[0]) == pytest.approx(expected, rel=1e-12)
    assert variance_at(none, GENERAL[0]) == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize("column", ["merit", "phase_sigma"])
def test_centric_phases_change_sign(column):
    """Two values with ⟨cos δ⟩ = m: var = (A² + σ²) − m²A², all of it along the phasor."""
    data = measured(space_group("P-1"), TRICLINIC, 2.2, kappa=1.0, phase_sigma=0.8, sigma=0.2)
    kept = {"merit": data.reflections.merit, "phase_sigma": data.reflections.phase_sigma}
    kept = {name: kept[name] if name == column else None for name in kept}
    data = replace(data, reflections=replace(data.reflections, **kept))
    r = data.reflections
    m = r.merit if column == "merit" else np.exp(-(r.phase_sigma**2) / 2)
    per_orbit = r.observed**2 * (1 - m**2) + r.sigma**2
    made = data.coefficients()
    for position in ([0.0, 0, 0], GENERAL[0]):
        expected = per_orbit @ data.sums([position])[:, 0] ** 2
        assert variance_at(made, position) == pytest.approx(expected, rel=1e-10)
    assert not errors_of(made).across.any()


def test_a_zero_term_changes_sign_too_and_never_turns():
    data = measured(space_group("P1"), TRICLINIC, 3.0, zero=True, phase_sigma=1.0)
    for group in (data.group, None):
        made = errors_of(replace(data.coefficients(), group=group))
        at_zero = ~made.indices.any(axis=1)
        assert at_zero.sum() == 1
        assert made.across[at_zero] == 0
        assert np.all(made.across[~at_zero] > 0)


@pytest.mark.parametrize("real", [True, False])
@pytest.mark.parametrize("name", CRYSTALS)
def test_measurements_are_the_reflections_that_were_measured(name, real):
    group, lattice, d_min, _ = CRYSTALS[name]
    data = measured(group, lattice, d_min, real=real)
    made = data.coefficients()
    errors = errors_of(made)
    assert errors.measurements == data.reflections.count
    assert errors.count == made.count
    np.testing.assert_array_equal(errors.values, made.values[errors.order])
    np.testing.assert_array_equal(errors.indices, made.indices[errors.order])
    # Those of one measurement have one amplitude, and no two have the same here.
    amplitudes = np.abs(errors.values)
    sizes = np.diff(errors.starts, append=errors.count)
    np.testing.assert_allclose(amplitudes, np.repeat(amplitudes[errors.starts], sizes), rtol=1e-9)
    assert np.unique(np.round(amplitudes[errors.starts], 9)).size == errors.measurements


def test_phases_of_a_measurement_turn_together():
    """A small turn of every measured phase moves the coefficients along `turned`."""
    data = measured(space_group("Pa-3"), CRYSTALS["Pa-3"][1], 1.1, sigma=None, phase_sigma=1e-6)
    made = data.coefficients()
    errors = errors_of(made)
    step = 1e-6 * np.random.default_rng(1).normal(size=data.reflections.count)
    moved = data.coefficients(data.reflections.observed, data.reflections.phase + np.where(data.centric, 0, step))
    change = (moved.values - made.values)[errors.order]
    sizes = np.diff(errors.starts, append=errors.count)
    # How far each measurement turned, by its first coefficient: the others follow.
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio = np.nan_to_num(change / errors.turned())
    np.testing.assert_allclose(ratio, np.repeat(ratio[errors.starts].real, sizes), atol=1e-4 * np.abs(ratio).max())
    assert np.count_nonzero(errors.sense < 0) > 10


@pytest.mark.parametrize("name", CRYSTALS)
@pytest.mark.parametrize("real", [True, False])
def test_phasors_of_vanishing_coefficients_are_related_as_coefficients_are(name, real):
    """Each measurement's phasors differ from those of a set with strength by one common turn, a sign where centric."""
    group, lattice, d_min, _ = CRYSTALS[name]
    data = measured(group, lattice, d_min, real=real)
    made = data.coefficients()
    strong, weak = errors_of(made), errors_of(replace(made, values=np.zeros(made.count, dtype=np.complex128)))
    np.testing.assert_array_equal(strong.order, weak.order)
    sizes = np.diff(strong.starts, append=strong.count)
    turn = strong.phasor * weak.phasor.conj()
    turn = np.where(strong.sense > 0, turn, turn.conj())
    np.testing.assert_allclose(turn, np.repeat(turn[strong.starts], sizes), atol=1e-9)
    np.testing.assert_allclose(np.hypot(weak.along, weak.across), strong.along, rtol=1e-12)
    centric = weak.across == 0
    np.testing.assert_allclose(np.abs(turn[centric].real), 1, atol=1e-9)
    np.testing.assert_allclose(weak.along[~centric], weak.across[~centric], rtol=1e-12)
    if name in ("P-1", "centred stack"):
        assert centric.all() == real


@given(st.integers(0, 2**16))
@settings(max_examples=30)
def test_roots_of_covariances_have_these_covariances(seed):
    rng = np.random.default_rng(seed)
    count = 7
    data = measured(space_group("P1"), TRICLINIC, 3.2, seed=seed).coefficients()
    data = data.select(np.arange(data.count) < count)
    along, across = rng.uniform(0, 2, (2, count))
    across[0], along[1] = 0.0, 0.0
    mixed = rng.uniform(-1, 1, count) * along * across
    mixed[2] = along[2] * across[2]
    phasor = np.exp(1j * rng.uniform(0, 2 * np.pi, count))
    given_errors = PlaneErrors(
        phasor=phasor, along=along, across=across, mixed=mixed, contains=("something",), omits=("the rest",)
    )
    made = errors_of(replace(data, plane_errors=given_errors))
    one, other = made.spread(), made.turned()
    back = np.argsort(made.order)
    local = np.stack([one, other])[:, back] * phasor.conj()
    np.testing.assert_allclose(np.sum(local.real**2, axis=0), along**2, atol=1e-12)
    np.testing.assert_allclose(np.sum(local.imag**2, axis=0), across**2, atol=1e-12)
    np.testing.assert_allclose(np.sum(local.real * local.imag, axis=0), mixed, atol=1e-12)
    assert made.contains[0] == "something"
    assert made.omits[0] == "the rest"


def test_plane_errors_say_the_same_as_the_columns():
    data = measured(space_group("P212121"), ORTHORHOMBIC, 1.3, phase_sigma=0.7)
    weak = np.arange(data.reflections.count) % 5 == 0
    data = replace(data, reflections=replace(data.reflections, observed=np.where(weak, 0, data.reflections.observed)))
    made = data.coefficients()
    by_plane = replace(made, plane_errors=plane_errors(made), sigma=None, phase_sigma=None)
    where = PointDerivatives(np.array(GENERAL))
    np.testing.assert_allclose(covariance(errors_of(by_plane), where), covariance(errors_of(made), where), atol=1e-12)
    assert plane_errors(by_plane) is by_plane.plane_errors
    assert plane_errors(replace(made, sigma=None, phase_sigma=None)) is None
    assert errors_of(by_plane).contains == errors_of(made).contains


def test_phasor_of_zero_is_one():
    np.testing.assert_array_equal(phasors(np.array([0, 3j, -2])), [1, 1j, -1])


def rows(*kept, **more):
    """Up to three rows, the last of them the zero term."""
    held = {"amplitude": [5.0, 6.0, 7.0], "phase_deg": [10.0, 20.0, 0.0], **more}
    kept = list(kept)
    indices = np.array([[1, 0, 1], [0, 1, 2], [0, 0, 0]])[kept].T
    return Columns(indices=tuple(indices), **{name: np.array(column)[kept] for name, column in held.items()})


def test_nothing_but_a_scale_is_enough_and_nothing_at_all_is_not():
    bare = assemble(TRICLINIC, rows(0, 1), values="density_coefficient")
    with pytest.raises(InputError) as caught:
        errors_of(bare)
    assert caught.value.path == ("sigma",)
    made = errors_of(replace(bare, scale_sigma=0.02))
    assert not made.along.any()
    assert not made.across.any()
    assert any("2 %" in one for one in made.contains)
    assert "the uncertainty of the scale" not in made.omits
    assert {"errors of the amplitudes: none were given", "errors of the phases: none were given"} <= set(made.omits)


def test_words_follow_the_columns_and_the_zero_term():
    def told(*kept, mean=None, **more):
        return errors_of(assemble(TRICLINIC, rows(*kept, **more), values="density_coefficient", mean=mean))

    both = told(0, 1, 2, sigma=[0.1] * 3, merit=[0.5] * 3)
    assert any("figures of merit" in one for one in both.contains)
    assert any("a measurement of its own" in one for one in both.contains)
    assert not any("phases: none" in one or "mean density" in one or "zero term" in one for one in both.omits)
    given_mean = told(0, 1, sigma=[0.1] * 3, mean=4.0)
    assert "the uncertainty of the zero term, taken as exact" in given_mean.omits
    assert given_mean.fixed == 4.0
    absent = told(0, 1, phase_sigma_deg=[3.0] * 3)
    assert "the mean density, which is not known" in absent.omits
    assert absent.fixed == 0
    assert any("wrapped normal" in one for one in absent.contains)
