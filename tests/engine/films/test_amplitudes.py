"""|F| of an invented film, FG-7: factors written out, posterior means by quadrature, and what became of each line."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import integrate

from engine.amplitudes.corrections import FilmAbsorption, Footprint, Lorentz, Multiplicity, Polarisation
from engine.errors import InputError
from engine.films.amplitudes import order_table, overlapping
from engine.films.scans import Scan
from engine.films.spacing import fit_spacing

CU = 1.5405929
PERIOD = 52.0
CORRECTIONS = (
    Lorentz("film_part_of_arc"),
    Polarisation(),
    FilmAbsorption(thickness_um=12.0, mu_per_cm=30.0),
    Footprint(length_mm=20.0, width_mm=0.4),
)


def angles_of(orders, critical=0.0):
    q = np.sqrt((2 * np.pi * np.asarray(orders) / PERIOD) ** 2 + critical)
    return np.degrees(2 * np.arcsin(q * CU / (4 * np.pi)))


def factors_of(two_theta_deg):
    """All four corrections, written out."""
    two_theta = np.radians(np.asarray(two_theta_deg))
    sine = np.sin(two_theta / 2)
    lorentz = 1 / (sine * np.sin(two_theta))
    polarisation = (1 + np.cos(two_theta) ** 2) / 2
    absorption = 1 - np.exp(-2 * 30.0 * 12e-4 / sine)
    footprint = np.minimum(1, 20.0 * sine / 0.4)
    return lorentz * polarisation * absorption * footprint


def film_scan(orders=(1, 2, 3, 4, 6), strength=(90.0, 40.0, 25.0, 12.0, 3.0), critical=0.0, **more):
    """Intensities that the strengths |F| make, with σ of 1 %."""
    angles = angles_of(orders, critical)
    intensity = np.asarray(strength) ** 2 * factors_of(angles)
    columns = {"intensity": intensity, "intensity_sigma": 0.01 * intensity, **more}
    return Scan.of(two_theta_deg=angles, position_sigma=np.full(len(orders), 0.005), wavelength=CU, **columns)


def test_planted_amplitudes_come_back_through_all_corrections():
    scan = film_scan()
    orders = [1, 2, 3, 4, 6]
    spacing = fit_spacing(scan, orders)
    # A posterior mean lies below the root by about (σ/I)² of it.
    for rule, tolerance in (("root", 1e-8), ("bayesian", 2e-4)):
        film = order_table(scan, orders, spacing, corrections=CORRECTIONS, rule=rule).film()
        assert film.order.tolist() == orders
        np.testing.assert_allclose(film.amplitude, [90, 40, 25, 12, 3], rtol=tolerance)
        # σ_F/F is half of σ_I/I.
        np.testing.assert_allclose(film.sigma, 0.005 * film.amplitude, rtol=1e-3)
        assert film.scale == "arbitrary"
        assert film.period == spacing.period
        assert film.period_sigma == spacing.period_sigma
        words = " | ".join(film.applied)
        for correction in CORRECTIONS:
            assert correction.describe() in words
        assert "rather than zero: 5" in words


def test_angles_of_corrections_are_those_outside_the_film_without_the_zero_shift():
    critical = 1e-3
    scan = film_scan(critical=critical)
    shifted = Scan.of(
        two_theta_deg=scan.position + 0.05,
        position_sigma=scan.position_sigma,
        intensity=scan.intensity,
        intensity_sigma=scan.intensity_sigma,
        wavelength=CU,
    )
    orders = [1, 2, 3, 4, 6]
    spacing = fit_spacing(shifted, orders, zero_shift=True, critical_q=math.sqrt(critical))
    table = order_table(shifted, orders, spacing, corrections=CORRECTIONS, rule="root")
    np.testing.assert_allclose(table.factor, factors_of(scan.position), rtol=1e-6)
    np.testing.assert_allclose(table.amplitude, [90, 40, 25, 12, 3], rtol=1e-6)
    np.testing.assert_allclose(table.residual, 0, atol=1e-9)


@pytest.mark.parametrize("symmetric", [True, False])
def test_weak_and_negative_orders_are_posterior_means(symmetric):
    """Against quadrature over F: prior exp(−F²/2Σ) of centric, F exp(−F²/Σ) of acentric ones."""
    q = 2 * np.pi * np.arange(1, 5) / PERIOD
    intensity, sigma = np.array([400.0, 30.0, 2.0, -3.0]), np.array([5.0, 4.0, 3.0, 2.5])
    scan = Scan.of(q=q, intensity=intensity, intensity_sigma=sigma)
    film = order_table(scan, [1, 2, 3, 4], fit_spacing(scan, [1, 2, 3, 4]), symmetric=symmetric).film()
    mean = intensity.mean()
    for row in range(4):

        def density(f, row=row):
            prior = math.exp(-(f**2) / (2 * mean)) if symmetric else f * math.exp(-(f**2) / mean)
            return prior * math.exp(-0.5 * ((f**2 - intensity[row]) / sigma[row]) ** 2)

        middle = math.sqrt(max(intensity[row], 0))
        near = max(0.0, middle - 3), middle + 5
        moments = [
            integrate.quad(lambda f, p=p, d=density: f**p * d(f), *near, epsabs=1e-13, limit=200)[0] for p in range(3)
        ]
        assert film.amplitude[row] == pytest.approx(moments[1] / moments[0], rel=1e-6)
        variance = moments[2] / moments[0] - (moments[1] / moments[0]) ** 2
        assert film.sigma[row] == pytest.approx(math.sqrt(variance), rel=1e-5)
    words = " | ".join(film.applied)
    assert "1 of 4 intensities are negative; all are kept" in words
    assert ("centric prior, of a mirror-symmetric stack" in words) is symmetric
    assert "no correction" in words


def test_root_leaves_negatives_out_or_refuses_them():
    scan = film_scan(intensity=np.array([50.0, 20.0, -1.0, 4.0, 9.0]), intensity_sigma=np.ones(5))
    orders = [1, 2, 3, 4, 6]
    spacing = fit_spacing(scan, orders)
    table = order_table(scan, orders, spacing, rule="root")
    assert table.used.tolist() == [True, True, False, True, True]
    assert table.unused == (3,)
    assert table.missing == (5,)
    assert table.flags[2] == ("negative", "weak", "excluded")
    assert np.isnan(table.amplitude[2])
    assert table.film().order.tolist() == [1, 2, 4, 6]
    np.testing.assert_allclose(table.film().amplitude, np.sqrt([50, 20, 4, 9]))
    assert any("without an amplitude: 3" in words for words in table.applied)
    with pytest.raises(InputError, match="has no root"):
        order_table(scan, orders, spacing, rule="root", negative="refuse").film()


def test_root_will_do_without_sigmas():
    scan = Scan.of(q=2 * np.pi * np.array([1, 2]) / PERIOD, intensity=[9.0, 4.0])
    spacing = fit_spacing(scan, [1, 2])
    film = order_table(scan, [1, 2], spacing, rule="root").film()
    assert film.amplitude.tolist() == [3.0, 2.0]
    assert film.sigma is None
    with pytest.raises(InputError, match="intensity_sigma: is absent"):
        order_table(scan, [1, 2], spacing).film()


def test_saturated_lines_stay_in_the_table_and_out_of_the_film_unless_asked():
    scan = film_scan(saturated=np.array([True, False, False, False, False]))
    orders = [1, 2, 3, 4, 6]
    spacing = fit_spacing(scan, orders)
    table = order_table(scan, orders, spacing, corrections=CORRECTIONS)
    assert table.flags[0] == ("saturated", "excluded")
    assert table.unused == (1,)
    assert table.film().order.tolist() == [2, 3, 4, 6]
    assert np.isfinite(table.factor[0])
    assert any("left out of the amplitudes: 1" in words for words in table.applied)
    kept = order_table(scan, orders, spacing, corrections=CORRECTIONS, keep_saturated=True)
    assert kept.flags[0] == ("saturated",)
    assert kept.film().order.tolist() == orders
    assert any("too small: 1" in words for words in kept.applied)


def test_the_table_keeps_the_scans_sequence_and_strays():
    angles = angles_of([3, 1, 2])
    scan = Scan.of(
        two_theta_deg=[angles[0], 4.4, angles[1], angles[2] + 0.01],
        position_sigma=[0.005, 0.005, 0.005, 0.01],
        intensity=[9.0, 3.0, 100.0, 25.0],
        intensity_sigma=[1.0, 1.0, 1.0, 10.0],
        wavelength=CU,
    )
    orders = [3, 0, 1, 2]
    spacing = fit_spacing(scan, orders)
    table = order_table(scan, orders, spacing, rule="root")
    assert table.order.tolist() == orders
    assert table.flags == (
        (),
        ("stray",),
        (),
        ("weak",),
    )
    np.testing.assert_allclose(table.amplitude, [3, np.nan, 10, 5])
    np.testing.assert_allclose(table.amplitude_sigma, [1 / 6, np.nan, 1 / 20, 1])
    np.testing.assert_allclose(table.two_theta_deg, scan.position)
    np.testing.assert_allclose(table.spacing, CU / (2 * np.sin(np.radians(scan.position) / 2)))
    calculated = np.degrees(2 * np.arcsin(np.array([3, 1, 2]) * CU / (2 * spacing.period)))
    np.testing.assert_allclose(table.residual[[0, 2, 3]], scan.position[[0, 2, 3]] - calculated, atol=1e-10)
    np.testing.assert_allclose(table.residual_in_sigma, table.residual / scan.position_sigma)
    assert np.isnan(table.residual[1])
    assert table.film().order.tolist() == [1, 2, 3]
    np.testing.assert_allclose(table.film().amplitude, [10, 5, 3])
    assert table.unit == "° 2θ"
    assert any("1 stray line is left out" in words for words in table.applied)


def test_residuals_in_the_scatter_serve_where_sigmas_are_absent():
    q = 2 * np.pi * np.array([1, 2, 3]) / PERIOD + [1e-3, -1e-3, 1e-3]
    scan = Scan.of(q=[*q, 0.5], intensity=[3.0, 2.0, 1.0, 1.0])
    spacing = fit_spacing(scan, [1, 2, 3, 0])
    table = order_table(scan, [1, 2, 3, 0], spacing, rule="root")
    np.testing.assert_allclose(table.residual_in_sigma[:3], spacing.residual_in_sigma)
    assert np.isnan(table.residual_in_sigma[3])
    assert table.two_theta_deg is None


def test_lines_overlap_within_one_and_a_half_mean_widths():
    """Means of the neighbours' widths are 0.015 and 0.02; the bounds 0.0225 and 0.03."""
    scan = Scan.of(q=[0.1301, 0.1, 0.1224], width=[0.02, 0.01, 0.02])
    assert overlapping(scan).tolist() == [True, True, True]
    apart = Scan.of(q=[0.1531, 0.1, 0.1226], width=[0.02, 0.01, 0.02])
    assert overlapping(apart).tolist() == [False, False, False]
    partly = Scan.of(q=[0.1520, 0.1, 0.1226], width=[0.02, 0.01, 0.02])
    assert overlapping(partly).tolist() == [True, False, True]
    assert not overlapping(Scan.of(q=[0.1, 0.1001])).any()


def test_overlapping_orders_are_kept_and_told():
    scan = film_scan(width=np.array([1.2, 1.2, 0.1, 0.1, 0.1]))
    orders = [1, 2, 3, 4, 6]
    table = order_table(scan, orders, fit_spacing(scan, orders), corrections=CORRECTIONS)
    assert table.flags[0] == table.flags[1] == ("overlapping",)
    assert table.used.all()
    assert any("overlap a neighbour and are kept: 1, 2" in words for words in table.applied)


def test_bad_requests_are_refused():
    scan = film_scan()
    orders = [1, 2, 3, 4, 6]
    spacing = fit_spacing(scan, orders)
    bare = Scan.of(q=scan.q, intensity=scan.intensity, intensity_sigma=scan.intensity_sigma)
    cases = [
        (scan, orders, spacing, {"corrections": (Lorentz("powder"), Lorentz("rotation"))}, "second Lorentz"),
        (scan, orders, spacing, {"corrections": (Multiplicity(np.ones(5)),)}, "multiplicity"),
        (scan, orders, spacing, {"rule": "guess"}, "known word"),
        (scan, [0] * 5, spacing, {}, "no line"),
        (scan, [1, 2, 3, 4, 4], spacing, {}, "two lines"),
        (bare, orders, spacing, {}, "another scan"),
        (bare, orders, fit_spacing(bare, orders), {"corrections": CORRECTIONS}, "no angle"),
        (Scan.of(q=scan.q), orders, fit_spacing(Scan.of(q=scan.q), orders), {}, "intensity: is absent"),
        (film_scan(intensity_sigma=np.zeros(5)), orders, spacing, {}, "not above zero"),
        (film_scan(intensity=-np.ones(5), intensity_sigma=np.ones(5)), orders, spacing, {}, "on average"),
        (film_scan(saturated=np.ones(5, dtype=bool)), orders, spacing, {}, "no line"),
    ]
    for used, numbers, fitted, more, reason in cases:
        with pytest.raises(InputError, match=reason):
            order_table(used, numbers, fitted, **more).film()


def test_backscattering_cannot_be_corrected():
    period = CU / 2
    scan = Scan.of(q=[2 * np.pi / period], intensity=[1.0], intensity_sigma=[0.1], order=[1], wavelength=CU)
    spacing = fit_spacing(scan, [1])
    with pytest.raises(InputError, match="cannot be undone at order 1"):
        order_table(scan, [1], spacing, corrections=(Lorentz("rotation"),)).film()
