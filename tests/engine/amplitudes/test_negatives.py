"""The Bayesian estimate of French & Wilson against mpmath, and the plain root."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine.amplitudes.negatives import bayesian_amplitudes, posterior, root_amplitudes
from engine.errors import InputError
from tests.engine.amplitudes.simulated import CELL, half_sphere, reflections, stack, wilson_z

RATIOS = [-50, -4, 0, 1, 9.5, 100]
"""I/σ."""
STRENGTHS = [0.02, 3, 1000]
"""Σ/σ."""


def integrated(ratio, strength, centric):
    """⟨F⟩, σ_F, ⟨J⟩, σ_J for σ = 1 by mpmath's quadrature of prior times likelihood, 20 digits.

    In v = √J, so that the centric prior has no pole; the range is cut into pieces about the
    posterior's maximum, outside of which it is below 1e-40.
    """
    with mpmath.workdps(20):
        i, s = mpmath.mpf(ratio), mpmath.mpf(strength)
        slope = 1 / (2 * s) if centric else 1 / s
        top = i - slope
        reach = mpmath.sqrt(top**2 + 200) + top if top < 0 else top + 14
        bottom = max(mpmath.mpf(0), top - 14)
        ends = [mpmath.sqrt(bottom + (reach - bottom) * k / 4) for k in range(5)]

        def moment(power):
            def integrand(v):
                density = mpmath.exp(-((v * v - top) ** 2 - (top if top < 0 else 0) ** 2) / 2)
                return v**power * density * (1 if centric else v)

            return mpmath.quad(integrand, ends)

        whole = moment(0)
        f, j, j2 = moment(1) / whole, moment(2) / whole, moment(4) / whole
        return [float(value) for value in (f, mpmath.sqrt(j - f**2), j, mpmath.sqrt(j2 - j**2))]


@pytest.mark.parametrize("centric", [False, True])
@pytest.mark.parametrize("strength", STRENGTHS)
def test_posterior_is_that_of_numerical_integration(strength, centric):
    """Asked for: 1e-6. The quadrature reaches 1e-13, so that a slip in it shows; 1e-10 is asserted."""
    sigma = 2.7
    given = stack(sigma * np.array(RATIOS), np.full(len(RATIOS), sigma))
    found = bayesian_amplitudes(
        given,
        expected=np.full(len(RATIOS), strength * sigma / 2),
        epsilon=np.full(len(RATIOS), 2.0),
        centric=np.full(len(RATIOS), centric),
    )
    expected = np.array([integrated(ratio, strength, centric) for ratio in RATIOS]).T
    root = np.sqrt(sigma)
    assert found.reflections.observed == pytest.approx(root * expected[0], rel=1e-10)
    assert found.reflections.sigma == pytest.approx(root * expected[1], rel=1e-10)
    assert found.intensity == pytest.approx(sigma * expected[2], rel=1e-10)
    assert found.intensity_sigma == pytest.approx(sigma * expected[3], rel=1e-10)


@pytest.mark.parametrize("x", [-1e4, -300, -50, -9, -0.1, 0, 2, 7, 9.4, 9.6, 30, 200])
@pytest.mark.parametrize(("centric", "nu"), [(False, 1.0), (True, 0.5)])
def test_moments_are_parabolic_cylinder_functions(x, centric, nu):
    """∫ u^(p−1) exp(−u²/2 + xu) du = Γ(p) exp(x²/4) D_{−p}(−x) (DLMF 12.5.1), by mpmath in 60 digits."""
    with mpmath.workdps(60):
        u = mpmath.mpf(x)
        m = [mpmath.gamma(nu + k) * mpmath.pcfd(-(nu + k), -u) for k in (0, mpmath.mpf(1) / 2, 1, 2)]
        f, j, j2 = m[1] / m[0], m[2] / m[0], m[3] / m[0]
        expected = [float(v) for v in (f, mpmath.sqrt(j - f * f), j, mpmath.sqrt(j2 - j * j))]
    found = posterior(np.array([float(x)]), np.array([centric]))
    assert np.concatenate(found) == pytest.approx(np.array(expected), rel=1e-11)


@pytest.mark.parametrize("ratio", [1e4, 1e8, 1e20])
def test_strong_reflections_are_their_roots(ratio):
    """For I ≫ σ: F → √I, σ_F → σ/2√I; the next terms are of the order (σ/I)² and σ/Σ."""
    sigma = 0.3
    found = bayesian_amplitudes(stack([ratio * sigma], [sigma]), expected=[ratio * sigma])
    assert found.reflections.observed[0] == pytest.approx(np.sqrt(ratio * sigma), rel=2 / ratio + 1e-14)
    assert found.intensity_sigma[0] == pytest.approx(sigma, rel=2 / ratio + 1e-14)
    assert found.reflections.sigma[0] == pytest.approx(sigma / (2 * np.sqrt(ratio * sigma)), rel=2 / ratio + 1e-14)


def test_hopelessly_weak_reflections_are_the_prior():
    """For σ ≫ Σ the data say nothing: ⟨F⟩ = √(πΣ)/2 acentric, √(2Σ/π) centric; J has the mean Σ."""
    found = bayesian_amplitudes(stack([0.0, 0.0], [1e5, 1e5]), expected=[2.0, 2.0], centric=np.array([False, True]))
    assert found.reflections.observed == pytest.approx([np.sqrt(np.pi * 2) / 2, np.sqrt(2 * 2 / np.pi)], rel=1e-4)
    assert found.intensity == pytest.approx([2.0, 2.0], rel=1e-4)


@given(st.floats(-1e6, 1e6), st.booleans())
def test_posterior_is_finite_positive_and_rises(x, centric):
    """Laws: every moment is finite and above zero, ⟨F⟩² + σ_F² = ⟨J⟩, and ⟨F⟩ rises with I."""
    step = 1e-3 * max(1.0, abs(x))
    f, f_sigma, j, j_sigma = posterior(np.array([x, x + step]), np.array([centric, centric]))
    for values in (f, f_sigma, j, j_sigma):
        assert np.all(np.isfinite(values) & (values > 0))
    assert f**2 + f_sigma**2 == pytest.approx(j, rel=1e-12)
    assert f[1] > f[0]


def test_posterior_is_right_on_average():
    """Of simulated intensities with noise the means of F and I are those of the truth, which the root's is not.

    4 000 reflections with Σ = σ: the sample's standard error is 0.6 % of F, four times that allowed.
    """
    rng = np.random.default_rng(41)
    indices = half_sphere(d_min=1.0)[:4000]
    centric = np.arange(4000) % 4 == 0
    true = wilson_z(rng, centric)
    noisy = reflections(indices, true + rng.normal(size=4000), np.ones(4000))
    found = bayesian_amplitudes(noisy, expected=np.ones(4000), centric=centric)
    difference = found.reflections.observed - np.sqrt(true)
    assert abs(difference.mean()) < 4 * difference.std() / np.sqrt(4000)
    assert abs((found.intensity - true).mean()) < 4 * (found.intensity - true).std() / np.sqrt(4000)
    # The claimed uncertainty is the scatter: mean square pull 1, its own error below 0.04.
    assert ((difference / found.reflections.sigma) ** 2).mean() == pytest.approx(1, abs=0.12)
    kept = root_amplitudes(noisy, negative="exclude")
    assert kept.reflections.observed.mean() > 1.1 * np.sqrt(true).mean()
    assert found.negative == np.count_nonzero(noisy.observed < 0)
    assert found.reflections.count == 4000
    assert f"{found.negative} of 4000" in found.notes[1]


def test_more_rows_than_a_block_are_all_done():
    x = np.linspace(-20, 20, 20001)
    whole = posterior(x, x > 5)
    pieces = posterior(x[8190:8200], x[8190:8200] > 5)
    for one, other in zip(whole, pieces, strict=True):
        assert one[8190:8200] == pytest.approx(other, rel=1e-14)
        assert np.all(np.isfinite(one))


def test_root_propagates():
    """F = √I, σ_F = σ/2F, by hand."""
    found = root_amplitudes(stack([4.0, 25.0], [0.4, 1.0]))
    assert found.reflections.quantity == "amplitude"
    assert found.reflections.observed == pytest.approx([2.0, 5.0], rel=1e-15)
    assert found.reflections.sigma == pytest.approx([0.1, 0.1], rel=1e-15)
    assert found.excluded_rows.size == 0


def test_rows_without_a_root_are_refused_or_counted():
    weak = stack([4.0, -1.0, 0.0, 9.0], [1.0, 1.0, 1.0, 1.0])
    with pytest.raises(InputError) as fault:
        root_amplitudes(weak)
    assert fault.value.rows == (1, 2)
    found = root_amplitudes(weak, negative="exclude")
    assert found.excluded_rows.tolist() == [1, 2]
    assert found.negative == 1
    assert found.reflections.row.tolist() == [0, 3]
    assert "2 of 4" in found.notes[1]


def test_a_zero_without_uncertainty_has_a_root():
    assert root_amplitudes(stack([4.0, 0.0])).reflections.observed.tolist() == [2.0, 0.0]


@pytest.mark.parametrize(
    ("call", "path"),
    [
        (lambda: bayesian_amplitudes(stack([1.0, 2.0]), expected=[1, 1]), ("sigma",)),
        (lambda: bayesian_amplitudes(stack([1.0, 2.0], [1.0, 0.0]), expected=[1, 1]), ("sigma",)),
        (lambda: bayesian_amplitudes(stack([1.0, 2.0], [1.0, 1.0]), expected=[1, -1]), ("expected",)),
        (lambda: bayesian_amplitudes(stack([1.0, 2.0], [1.0, 1.0]), expected=[1]), ("expected",)),
        (lambda: bayesian_amplitudes(stack([1.0], [1.0]), expected=[1], epsilon=[0]), ("epsilon",)),
        (lambda: bayesian_amplitudes(stack([1.0], [1.0]), expected=[1], centric=[1]), ("centric",)),
        (lambda: bayesian_amplitudes(stack([1.0], [1.0], quantity="amplitude"), expected=[1]), ("reflections",)),
        (lambda: root_amplitudes(stack([1.0], quantity="amplitude")), ("reflections",)),
        (lambda: root_amplitudes(stack([-1.0]), negative="exclude"), ("observed",)),
        (lambda: root_amplitudes(stack([1.0]), negative="drop"), ("negative",)),
    ],
)
def test_refusals(call, path):
    with pytest.raises(InputError) as fault:
        call()
    assert fault.value.path == path


def test_layer_stacks_are_warned_of():
    found = bayesian_amplitudes(stack([1.0], [1.0]), expected=[1.0])
    assert any("layer stacks" in note for note in found.notes)
    crystal = reflections(half_sphere(CELL, 4.0)[:1], [1.0], [1.0])
    assert not any("layer stacks" in note for note in bayesian_amplitudes(crystal, expected=[1.0]).notes)
