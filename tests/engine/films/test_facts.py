"""Facts of a film: what a composition fixes, and what is refused."""

from __future__ import annotations

import math

import numpy as np
import pytest

from engine.films.facts import (
    KnownAmplitude,
    KnownDensity,
    KnownFactor,
    KnownMean,
    KnownTotal,
    check,
    mean_of_composition,
)
from engine.films.orders import FilmOrders
from engine.scattering import composition
from tests.strategies import refusal_of

FILM = FilmOrders.of(50.0, [1, 2, 3], [10.0, 5.0, 2.0])


def test_mean_of_a_composition():
    """Two formula units of 30 electrons on 40 Å² a period of 50 Å: 60/2000 e/Å³; σ by the relative squares."""
    mean = mean_of_composition(
        composition("SiO2"), area=40.0, period=50.0, units=2.0, area_sigma=0.4, period_sigma=1.0, units_sigma=0.06
    )
    assert mean.mean == pytest.approx(60 / 2000)
    assert mean.sigma == pytest.approx(0.03 * math.sqrt(0.01**2 + 0.02**2 + 0.03**2))
    assert "SiO2" in mean.name


def test_mean_for_neutrons_may_be_negative():
    """H2O: b = 2·(−3.739) + 5.803 = −1.675 fm; 1 fm/Å³ is 10 units of 10⁻⁶ Å⁻²."""
    mean = mean_of_composition(composition("H2O"), area=10.0, period=3.0, area_sigma=1.0, probe="neutron")
    assert mean.mean == pytest.approx(-1.675 / 30 * 10, rel=2e-3)
    assert mean.sigma == pytest.approx(-mean.mean * 0.1)


@pytest.mark.parametrize(
    ("call", "path", "reason"),
    [
        (lambda: mean_of_composition(composition("H2O"), area=0.0, period=50.0), "area", "above zero"),
        (lambda: mean_of_composition(composition("H2O"), area=9.0, period=-1.0), "period", "above zero"),
        (lambda: mean_of_composition(composition("H2O"), area=9.0, period=1.0, units=0.0), "units", "above zero"),
        (
            lambda: mean_of_composition(composition("H2O"), area=9.0, period=1.0, area_sigma=-1),
            "area_sigma",
            "negative",
        ),
    ],
)
def test_refusals_of_compositions(call, path, reason):
    refusal = refusal_of(call)
    assert refusal.path[0] == path
    assert reason in refusal.reason


@pytest.mark.parametrize(
    ("facts", "path", "reason"),
    [
        ([KnownDensity(start=5, end=5, density=0.3)], ("facts", 0, "end"), "beyond the start"),
        ([KnownTotal(start=5, end=56, total=3)], ("facts", 0), "longer than the period"),
        ([KnownMean(mean=0.3), KnownMean(mean=0.3, sigma=-1)], ("facts", 1, "sigma"), "negative"),
        ([KnownMean(mean=np.nan)], ("facts", 0, 0), "not a finite"),
        ([KnownFactor(factor=0.0)], ("facts", 0, "factor"), "above zero"),
        ([KnownAmplitude(order=1, amplitude=-2.0)], ("facts", 0, "amplitude"), "above zero"),
        (
            [KnownDensity(start=0, end=10, density=0.3), KnownDensity(start=9, end=20, density=0.4)],
            ("facts",),
            "overlap",
        ),
        # One period on, the other way round: −5…5 holds 47…48.
        (
            [KnownDensity(start=47, end=48, density=0.3), KnownDensity(start=-5, end=5, density=0.4)],
            ("facts",),
            "overlap",
        ),
    ],
)
def test_refusals(facts, path, reason):
    refusal = refusal_of(lambda: check(facts, FILM))
    assert refusal.path == path
    assert reason in refusal.reason


def test_regions_may_touch_and_totals_may_hold_regions():
    check([KnownDensity(start=-5, end=5, density=0.3), KnownDensity(start=5, end=45, density=0.4)], FILM)
    check([KnownTotal(start=0, end=50, total=3), KnownDensity(start=5, end=45, density=0.4)], FILM)
