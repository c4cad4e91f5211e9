"""Periods against textbook regression, planted shifts, and the spread of many noisy scans."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import stats

from engine.errors import InputError
from engine.films.scans import Scan
from engine.films.spacing import fit_spacing

CU = 1.5405929
ORDERS = np.arange(1, 8)
RADIUS = 240.0


def film_angles(period, orders=ORDERS, *, critical=0.0, zero=0.0, ratio=0.0):
    """2θ of orders in degrees, with all that moves them."""
    q = np.sqrt((2 * np.pi * orders / period) ** 2 + critical)
    theta = np.arcsin(q * CU / (4 * np.pi))
    return np.degrees(2 * theta - 2 * ratio * np.cos(theta)) + zero


def scan_of(angles, sigma=0.005):
    return Scan.of(two_theta_deg=angles, position_sigma=np.full(np.size(angles), sigma), wavelength=CU)


def test_a_straight_line_through_the_origin_is_the_textbooks():
    rng = np.random.default_rng(1)
    sigma = rng.uniform(2e-4, 2e-3, 7)
    q = 2 * np.pi * ORDERS / 52 + sigma * rng.normal(size=7)
    found = fit_spacing(Scan.of(q=q, position_sigma=sigma), ORDERS)
    weight = 1 / sigma**2
    slope = np.sum(weight * ORDERS * q) / np.sum(weight * ORDERS**2)
    slope_sigma = np.sqrt(1 / np.sum(weight * ORDERS**2))
    chi_squared = np.sum(weight * (q - slope * ORDERS) ** 2)
    assert found.period == pytest.approx(2 * np.pi / slope, rel=1e-12)
    assert found.period_sigma == pytest.approx(found.period * slope_sigma / slope, rel=1e-9)
    assert found.chi_squared == pytest.approx(chi_squared, rel=1e-9)
    assert found.reduced == pytest.approx(chi_squared / 6, rel=1e-9)
    assert found.probability == pytest.approx(stats.chi2.sf(chi_squared, 6), rel=1e-9)
    np.testing.assert_allclose(found.residual, q - slope * ORDERS, atol=1e-12)
    np.testing.assert_allclose(found.residual_in_sigma, (q - slope * ORDERS) / sigma, atol=1e-8)
    assert found.covariance == pytest.approx(found.period_sigma**2)
    assert found.zero_shift_deg is None
    assert found.displacement is None
    assert (found.degrees, found.sigma_source, found.parameters) == (6, "given", ("period",))


def test_without_sigmas_all_weigh_the_same_and_the_scatter_tells():
    rng = np.random.default_rng(2)
    q = 2 * np.pi * ORDERS / 52 + 1e-3 * rng.normal(size=7)
    found = fit_spacing(Scan.of(q=q), ORDERS)
    slope = np.sum(ORDERS * q) / np.sum(ORDERS**2)
    scatter = np.sqrt(np.sum((q - slope * ORDERS) ** 2) / 6)
    assert found.period == pytest.approx(2 * np.pi / slope, rel=1e-12)
    assert found.period_sigma == pytest.approx(found.period * scatter / np.sqrt(np.sum(ORDERS**2)) / slope, rel=1e-9)
    np.testing.assert_allclose(found.residual_in_sigma, (q - slope * ORDERS) / scatter, atol=1e-8)
    assert found.chi_squared is None
    assert found.sigma_source == "scatter"
    assert "scatter" in found.notes[0]


def test_one_line_without_sigma_gives_a_period_without_sigma():
    found = fit_spacing(Scan.of(q=[0.3], order=[3]), [3])
    assert found.period == pytest.approx(2 * np.pi * 3 / 0.3)
    assert found.period_sigma is None
    assert found.covariance is None
    assert found.correlation is None
    assert found.residual_in_sigma is None
    assert "no σ is known" in found.notes[0]


@pytest.mark.parametrize("kind", ["two_theta", "q"])
def test_planted_shifts_are_found(kind):
    angles = film_angles(20.0, critical=8e-4, zero=0.031, ratio=0.12 / RADIUS)
    if kind == "two_theta":
        scan = scan_of(angles)
    else:
        q = 4 * np.pi / CU * np.sin(np.radians(angles) / 2)
        scan = Scan.of(q=q, position_sigma=np.full(7, 4e-4), wavelength=CU)
    found = fit_spacing(scan, ORDERS, zero_shift=True, displacement=True, critical_q=math.sqrt(8e-4), radius=RADIUS)
    assert found.period == pytest.approx(20.0, rel=1e-8)
    assert found.zero_shift_deg == pytest.approx(0.031, abs=1e-6)
    assert found.displacement == pytest.approx(0.12, abs=1e-5)
    assert found.displacement_unit == "mm"
    np.testing.assert_allclose(found.residual, 0, atol=1e-9)
    np.testing.assert_allclose(found.positions(ORDERS), scan.position, rtol=1e-10)
    np.testing.assert_allclose(found.outer_q(ORDERS), np.sqrt((np.pi * ORDERS / 10) ** 2 + 8e-4), rtol=1e-8)
    np.testing.assert_allclose(2 * np.degrees(found.theta(ORDERS)), film_angles(20.0, critical=8e-4), rtol=1e-8)


def test_without_a_radius_the_displacement_is_a_part_of_it():
    scan = scan_of(film_angles(20.0, ratio=5e-4))
    parts = fit_spacing(scan, ORDERS, displacement=True)
    length = fit_spacing(scan, ORDERS, displacement=True, radius=RADIUS)
    assert parts.displacement == pytest.approx(5e-4, rel=1e-6)
    assert parts.displacement_unit == "s/R"
    assert length.displacement == pytest.approx(5e-4 * RADIUS, rel=1e-6)
    assert length.displacement_sigma == pytest.approx(parts.displacement_sigma * RADIUS, rel=1e-9)
    assert length.covariance[0, 1] == pytest.approx(parts.covariance[0, 1] * RADIUS, rel=1e-9)
    assert length.correlation[0, 1] == pytest.approx(parts.correlation[0, 1], rel=1e-9)
    np.testing.assert_allclose(length.positions(ORDERS), parts.positions(ORDERS), rtol=1e-12)


def test_a_positive_displacement_lowers_angles():
    """s > 0 lowers 2θ by 2 s cos θ/R: of 0.24 mm at 240 mm by nearly 0.115° at small angles."""
    found = fit_spacing(scan_of(film_angles(52.0) - 0.1146), ORDERS, displacement=True, radius=RADIUS)
    assert found.displacement == pytest.approx(0.24, rel=0.01)


@pytest.mark.parametrize("shifts", [{}, {"zero_shift": True}])
def test_one_sigma_covers_68_percent(shifts):
    rng = np.random.default_rng(6)
    angles = film_angles(20.0, zero=0.02 if shifts else 0.0)
    inside, within = 0, 0
    for _ in range(1000):
        found = fit_spacing(scan_of(angles + 0.005 * rng.normal(size=7)), ORDERS, **shifts)
        inside += abs(found.period - 20.0) < found.period_sigma
        if shifts:
            true = 0.02
            within += abs(found.zero_shift_deg - true) < found.zero_shift_sigma_deg
    assert 0.63 < inside / 1000 < 0.73
    if shifts:
        assert 0.63 < within / 1000 < 0.73


def test_sigmas_too_small_are_scaled_where_asked_only():
    rng = np.random.default_rng(7)
    scan = scan_of(film_angles(20.0) + 0.02 * rng.normal(size=7))
    plain = fit_spacing(scan, ORDERS)
    scaled = fit_spacing(scan, ORDERS, scale_sigma=True)
    assert plain.reduced > 2
    assert scaled.period_sigma == pytest.approx(plain.period_sigma * math.sqrt(plain.reduced), rel=1e-9)
    assert scaled.sigma_source == "given, scaled"
    assert scaled.chi_squared == plain.chi_squared
    good = scan_of(film_angles(20.0) + 0.001 * rng.normal(size=7))
    assert fit_spacing(good, ORDERS, scale_sigma=True).period_sigma == fit_spacing(good, ORDERS).period_sigma


def test_refraction_moves_the_period_by_its_first_order():
    """Left out, one order alone gives d(1 − q_c² d²/8π²l²); with the right q_c nothing is left."""
    period, critical = 52.0, 1e-4
    for order in (1, 2, 4):
        q = math.sqrt((2 * math.pi * order / period) ** 2 + critical)
        bare = fit_spacing(Scan.of(q=[q], order=[order]), [order]).period
        first = -critical * period**3 / (8 * math.pi**2 * order**2)
        assert bare - period == pytest.approx(first, rel=0.02)
        assert fit_spacing(Scan.of(q=[q], order=[order]), [order], critical_q=0.01).period == pytest.approx(period)


def test_bias_of_refraction_vanishes_with_the_right_density():
    rng = np.random.default_rng(8)
    critical = 16 * math.pi * 2.8179403262e-5 * 0.7
    angles = film_angles(52.0, critical=critical)
    pulls = {None: [], 0.7: []}
    for _ in range(100):
        scan = scan_of(angles + 0.005 * rng.normal(size=7))
        for density, kept in pulls.items():
            found = fit_spacing(scan, ORDERS, mean_density=density)
            kept.append((found.period - 52.0) / found.period_sigma)
    assert abs(np.mean(pulls[0.7])) < 4 / math.sqrt(100)
    assert np.mean(pulls[None]) < -3


def test_neutron_densities_refract_in_their_own_unit():
    q = np.sqrt((2 * np.pi * ORDERS / 52) ** 2 + 16 * math.pi * 6.4e-6)
    heavy = fit_spacing(Scan.of(q=q, radiation="neutron"), ORDERS, mean_density=6.4)
    assert heavy.period == pytest.approx(52.0, rel=1e-10)
    light = np.sqrt((2 * np.pi * ORDERS / 52) ** 2 - 16 * math.pi * 0.56e-6)
    assert fit_spacing(Scan.of(q=light, radiation="neutron"), ORDERS, mean_density=-0.56).period == pytest.approx(52.0)
    assert "10⁻⁶ Å⁻²" in heavy.applied[1]


def test_strays_are_left_out_and_rows_told():
    angles = film_angles(52.0, np.array([3, 1, 2]))
    found = fit_spacing(scan_of([angles[0], 4.4, angles[1], angles[2]]), [3, 0, 1, 2])
    assert found.row.tolist() == [0, 2, 3]
    assert found.order.tolist() == [3, 1, 2]
    assert found.period == pytest.approx(52.0, rel=1e-9)
    assert "1 left out" in found.applied[0]


def test_correlated_parameters_are_told():
    found = fit_spacing(scan_of(film_angles(52.0)), ORDERS, zero_shift=True, displacement=True)
    assert any("zero_shift_deg and displacement are correlated" in note for note in found.notes)
    assert abs(found.correlation[1, 2]) > 0.99
    np.testing.assert_allclose(np.diag(found.correlation), 1)
    assert not any("correlated" in note for note in fit_spacing(scan_of(film_angles(52.0)), ORDERS).notes)


@pytest.mark.parametrize(
    ("scan", "orders", "more", "reason"),
    [
        (scan_of([1.7, 3.4]), [1, 2], {"zero_shift": True, "displacement": True}, "too few for 3"),
        (scan_of([1.7, 3.4]), [0, 0], {}, "too few for 1"),
        (scan_of([1.7, 3.4]), [1, 1], {}, "two lines"),
        (Scan.of(q=[0.12, 0.24]), [1, 2], {"zero_shift": True}, "no shift of an angle"),
        (scan_of([1.7, 3.4]), [1, 2], {"critical_q": 0.02, "mean_density": 0.3}, "both"),
        (scan_of([1.7, 3.4]), [1, 2], {"critical_q": 0.2}, "at or above a line"),
        (scan_of([1.7, 3.4]), [1, 2], {"critical_q": -0.01}, "above zero"),
        (scan_of([1.7, 3.4]), [1, 2], {"mean_density": -0.3}, "mean density"),
        (scan_of([1.7, 3.4]), [1, 2], {"mean_density": float("nan")}, "mean density"),
        (scan_of([1.7, 3.4]), [1, 2], {"radius": 0.0}, "above zero"),
        (
            scan_of(film_angles(20000.0, np.array([1, 2, 3]))),
            [1, 2, 3],
            {"zero_shift": True, "displacement": True},
            "apart",
        ),
    ],
)
def test_what_cannot_be_refined_is_refused(scan, orders, more, reason):
    with pytest.raises(InputError, match=reason):
        fit_spacing(scan, orders, **more)


def test_a_refinement_that_goes_astray_is_refused():
    with pytest.raises(InputError, match="fit no period"):
        fit_spacing(scan_of([10.0, 11.0, 150.0, 151.0]), [1, 30, 31, 32], zero_shift=True, displacement=True)
    # A zero shift of ten degrees would explain these, with a period four times that of any line.
    with pytest.raises(InputError, match="fit no period"):
        fit_spacing(scan_of([10.0, 11.0, 12.0, 13.0]), [1, 30, 31, 32], zero_shift=True)


def test_an_order_that_a_negative_density_holds_back_has_no_line():
    light = np.sqrt((2 * np.pi * np.array([2, 3]) / 1500) ** 2 - 16 * math.pi * 0.56e-6)
    found = fit_spacing(Scan.of(q=light, radiation="neutron"), [2, 3], mean_density=-0.56)
    assert found.period == pytest.approx(1500)
    with pytest.raises(InputError, match="no line outside"):
        found.outer_q(np.array([1]))


def test_an_order_out_of_reach_has_no_angle():
    found = fit_spacing(scan_of(film_angles(20.0)), ORDERS)
    with pytest.raises(InputError, match="out of reach"):
        found.theta(np.array([26]))
