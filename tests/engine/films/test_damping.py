"""Damping of film amplitudes against closed forms and draws."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate, optimize

from engine.films.damping import cumulative_correction, damping_by_envelope, damping_by_reference
from engine.films.orders import FilmOrders
from tests.engine.films.stacks import summed
from tests.strategies import refusal_of

PERIOD = 52.0
ORDERS = np.arange(1, 11)
REFERENCE = np.array([-2.6, 1.9, 0.8, -1.1, 0.5, 0.33, -0.28, 0.42, 0.31, -0.2])
Q = 2 * np.pi * ORDERS / PERIOD


def film(u_squared, scale=3.0, noise=None, sigma=None, reference=REFERENCE):
    values = np.abs(scale * reference * np.exp(-0.5 * Q**2 * u_squared) + (0 if noise is None else noise))
    return FilmOrders.of(PERIOD, ORDERS, values, sigma)


@pytest.mark.parametrize("sigma", [None, 0.01 * np.ones(10)], ids=["plain", "weighed"])
def test_a_reference_gives_back_scale_and_displacement(sigma):
    found = damping_by_reference(film(1.7, sigma=sigma), REFERENCE)
    assert found.scale == pytest.approx(3, rel=1e-7)
    assert found.u_squared == pytest.approx(1.7, rel=1e-6)
    assert found.u == pytest.approx(1.7**0.5, rel=1e-6)
    assert found.u_sigma == pytest.approx(found.u_squared_sigma / (2 * 1.7**0.5), rel=1e-6)
    assert found.b == pytest.approx(8 * np.pi**2 * 1.7, rel=1e-6)
    assert found.b_sigma == pytest.approx(8 * np.pi**2 * found.u_squared_sigma)
    assert found.degrees == 8
    np.testing.assert_allclose(found.factors(ORDERS, PERIOD), np.exp(-0.5 * Q**2 * 1.7), rtol=1e-5)
    np.testing.assert_allclose(found.calculated, film(1.7).amplitude, rtol=1e-6)
    rest = found.undamped(film(1.7, sigma=sigma))
    np.testing.assert_allclose(rest.amplitude, 3 * np.abs(REFERENCE), rtol=1e-5)
    if sigma is not None:
        np.testing.assert_allclose(rest.sigma, sigma * np.exp(0.5 * Q**2 * 1.7), rtol=1e-5)
    assert "u² = 1.7" in rest.applied[-1]


def test_phases_of_a_reference_do_not_matter():
    turned = REFERENCE * np.exp(1j * ORDERS)
    assert damping_by_reference(film(1.0), turned).u_squared == pytest.approx(1.0, rel=1e-6)


@pytest.mark.parametrize("both", [False, True], ids=["exact reference", "its errors too"])
def test_uncertainties_by_a_reference(both):
    """400 draws know a standard deviation to 3.5 %. The reference's errors follow its own scale and damping."""
    rng = np.random.default_rng(2)
    sigma, own = np.full(10, 0.02), np.full(10, 0.01) if both else None
    found = []
    for _ in range(400):
        moved = REFERENCE if own is None else REFERENCE + own * rng.standard_normal(10)
        given = film(1.7, noise=sigma * rng.standard_normal(10) * np.sign(REFERENCE), sigma=sigma)
        found.append(damping_by_reference(given, moved, own))
    for name in ("scale", "u_squared"):
        values = np.array([getattr(fit, name) for fit in found])
        said = np.sqrt(np.mean([getattr(fit, f"{name}_sigma") ** 2 for fit in found]))
        assert values.std() == pytest.approx(said, rel=0.14)
    logarithms = np.log([fit.scale for fit in found])
    correlation = np.corrcoef(logarithms, [fit.u_squared for fit in found])[0, 1]
    said = found[0].covariance[0, 1] / np.sqrt(found[0].covariance[0, 0] * found[0].covariance[1, 1])
    assert correlation == pytest.approx(said, abs=0.12)


def test_notes_of_a_reference():
    wrong = damping_by_reference(film(1.7, sigma=np.full(10, 1e-3)), REFERENCE[::-1])
    assert any("does not fit" in note for note in wrong.notes)
    quiet = damping_by_reference(film(0.0, sigma=np.full(10, 0.05)), REFERENCE)
    assert any("not seen" in note for note in quiet.notes)
    grown = damping_by_reference(film(-1.0, sigma=np.full(10, 0.01)), REFERENCE)
    assert grown.u_squared == pytest.approx(-1, rel=1e-5)
    assert grown.u is None
    assert grown.cumulative is None
    assert any("negative" in note for note in grown.notes)


def test_a_robust_fit_bounds_an_outlier():
    noise = np.zeros(10)
    noise[3] = -1.5
    given = film(1.7, noise=noise, sigma=np.full(10, 0.01))
    plain, robust = damping_by_reference(given, REFERENCE), damping_by_reference(given, REFERENCE, robust=True)
    assert abs(robust.u_squared - 1.7) < 0.2 * abs(plain.u_squared - 1.7)
    assert any("beyond the robust bound" in note for note in robust.notes)


@pytest.mark.parametrize("centric", [True, False])
def test_envelope_of_random_layers(centric):
    """Many films of 16 orders whose amplitudes scatter as those of many layers at random do.

    u² is found without bias beyond its error; its spread over 400 films is the σ that is given.
    """
    rng = np.random.default_rng(4)
    orders = np.arange(1, 17)
    q = 2 * np.pi * orders / PERIOD
    envelope = 2 + np.exp(-q)
    damped = np.exp(-0.5 * q**2 * 2.0)
    found = []
    for _ in range(400):
        drawn = rng.standard_normal(16)
        if not centric:
            drawn = np.hypot(drawn, rng.standard_normal(16)) / np.sqrt(2)
        values = 5 * np.sqrt(envelope) * np.abs(drawn) * damped
        found.append(damping_by_envelope(FilmOrders.of(PERIOD, orders, values), envelope, centric=centric))
    u = np.array([fit.u_squared for fit in found])
    logarithm = np.log([fit.scale for fit in found])
    assert u.mean() == pytest.approx(2.0, abs=4 * u.std() / 20)
    assert u.std() == pytest.approx(found[0].u_squared_sigma, rel=0.15)
    assert logarithm.std() == pytest.approx(found[0].covariance[0, 0] ** 0.5, rel=0.15)
    # Of 16 orders maximum likelihood takes about 0.1 from ln k.
    assert logarithm.mean() == pytest.approx(np.log(5), abs=0.15)


def test_envelope_is_the_maximum_of_its_likelihood():
    """Gamma distributions of shape ½, maximised by scipy's simplex."""

    def cost(p):
        mean = p[0] - p[1] * Q**2
        return float(np.sum(mean + film(1.0).amplitude ** 2 / np.exp(mean)))

    best = optimize.minimize(cost, [0.0, 1.0], method="Nelder-Mead", options={"xatol": 1e-9, "fatol": 1e-13})
    found = damping_by_envelope(film(1.0))
    assert found.u_squared == pytest.approx(best.x[1], rel=1e-5)
    assert found.scale == pytest.approx(np.exp(best.x[0] / 2), rel=1e-5)
    np.testing.assert_allclose(found.calculated, np.exp(0.5 * (best.x[0] - best.x[1] * Q**2)), rtol=1e-5)


def test_points_and_notes_of_an_envelope():
    found = damping_by_envelope(film(1.0))
    intensity = film(1.0).amplitude ** 2
    assert found.points.shape == (3, 3)
    np.testing.assert_allclose(found.points[:, 0], [np.mean(Q[:3] ** 2), np.mean(Q[3:6] ** 2), np.mean(Q[6:] ** 2)])
    np.testing.assert_allclose(found.points[:, 1], [intensity[:3].mean(), intensity[3:6].mean(), intensity[6:].mean()])
    spread = np.sqrt(2) * found.calculated**2
    np.testing.assert_allclose(found.points[0, 2], np.sqrt((spread[:3] ** 2).sum()) / 3)
    few = FilmOrders.of(PERIOD, ORDERS[:5], film(1.0).amplitude[:5])
    assert any("5 orders are too few" in note for note in damping_by_envelope(few).notes)
    smooth = FilmOrders.of(PERIOD, ORDERS, np.exp(-0.5 * Q**2))
    assert any("more closely" in note for note in damping_by_envelope(smooth).notes)


def test_measured_errors_weaken_an_envelope():
    """Weights 1/(2 + (σ_I/μ)²): an order that is all noise has none."""
    sigma = np.full(10, 1e-6)
    plain = damping_by_envelope(film(1.0))
    same = damping_by_envelope(film(1.0, sigma=sigma))
    assert same.u_squared == pytest.approx(plain.u_squared, rel=1e-6)
    strong = damping_by_envelope(film(1.0, sigma=np.full(10, 0.5)))
    mean, observed = strong.calculated[:3] ** 2, film(1.0).amplitude[:3]
    spread = 2 * mean**2 + 4 * (observed * 0.5) ** 2 + 2 * 0.5**4
    assert strong.points[0, 2] == pytest.approx(np.sqrt(spread.sum()) / 3)
    sigma[5] = 1e4
    without = np.delete(np.arange(10), 5)
    left_out = damping_by_envelope(FilmOrders.of(PERIOD, ORDERS[without], film(1.0).amplitude[without]))
    noisy = damping_by_envelope(film(1.0, sigma=sigma))
    assert noisy.u_squared == pytest.approx(left_out.u_squared, rel=1e-4)
    assert noisy.u_squared_sigma == pytest.approx(left_out.u_squared_sigma, rel=1e-4)


def test_cumulative_disorder_of_a_thick_stack():
    """What stands above a background through the valleys of the summed factor, and within ±0.2, put back.

    The factor's damping changes across an order, its closed form's does not: 3 % at g l = 0.12.
    """
    g, layers, order = 0.03, 400, np.array([2, 3, 4])
    above, inside = [], []
    for l in order.tolist():
        floor = np.mean(summed([l - 0.5, l + 0.5], g, layers))
        above.append(
            integrate.quad(lambda h: summed(h, g, layers)[0], l - 0.5, l + 0.5, points=[l], limit=200)[0] - floor
        )
        inside.append(integrate.quad(lambda h: summed(h, g, layers)[0], l - 0.2, l + 0.2, points=[l], limit=200)[0])
    lost = FilmOrders.of(PERIOD, order, np.sqrt(above), np.full(3, 0.1))
    whole = cumulative_correction(lost, g)
    np.testing.assert_allclose(whole.amplitude, 1, atol=0.03)
    np.testing.assert_allclose(whole.sigma, 0.1 * whole.amplitude / lost.amplitude)
    assert "valleys" in whole.applied[-1]
    part = FilmOrders.of(PERIOD, order, np.sqrt(inside))
    np.testing.assert_allclose(cumulative_correction(part, g, reach=0.2).amplitude, 1, atol=0.015)


def test_cumulative_disorder_looks_like_a_displacement():
    """For small g the fall-off is that of u = g d/2, and the fit says which g that is."""
    g = 0.005
    share = 2 / (1 + np.exp(2 * np.pi**2 * g**2 * ORDERS**2))
    found = damping_by_reference(film(0.0, reference=REFERENCE * np.sqrt(share)), REFERENCE)
    assert found.u == pytest.approx(g * PERIOD / 2, rel=0.006)
    assert found.cumulative == pytest.approx(g, rel=0.006)


@pytest.mark.parametrize(
    ("call", "path", "reason"),
    [
        (lambda: damping_by_reference(film(1.0), REFERENCE[:4]), "reference", "shape"),
        (lambda: damping_by_reference(film(1.0), 0 * REFERENCE), "reference", "zero throughout"),
        (lambda: damping_by_reference(film(1.0), REFERENCE, np.ones(10)), "reference_sigma", "without σ"),
        (lambda: damping_by_reference(film(1.0, sigma=np.zeros(10)), REFERENCE), "sigma", "not above zero"),
        (
            lambda: damping_by_reference(film(1.0, sigma=np.ones(10)), REFERENCE, np.zeros(10)),
            "reference_sigma",
            "not above zero",
        ),
        (lambda: damping_by_reference(FilmOrders.of(50, [1, 2], [1, 1]), [1, 1]), "order", "2 orders"),
        (lambda: damping_by_envelope(FilmOrders.of(50, [1, 2, 3], [1, 1, 1])), "amplitude", "too few"),
        (lambda: damping_by_envelope(film(1.0), np.zeros(10)), "envelope", "not above zero"),
        (lambda: cumulative_correction(film(1.0), -0.1), "g", "negative"),
        (lambda: cumulative_correction(film(1.0), 0.1, reach=0.6), "reach", "within 0 and ½"),
        (lambda: cumulative_correction(film(1.0), 0.1), "order", "a tenth"),
    ],
)
def test_refusals(call, path, reason):
    refusal = refusal_of(call)
    assert refusal.path[0] == path
    assert reason in refusal.reason
