"""What a film's request means, and what is refused: by its place, in plain words, never a 500."""

from __future__ import annotations

import numpy as np
import pytest

from engine.films.facts import KnownAmplitude, KnownDensity, KnownFactor, KnownMean, KnownTotal
from engine.films.task import Region
from service.films import interpret
from service.problems import Problem
from tests.service.films.asked import FILM, GIVEN, SIMPLE, answered, asked, changed, refused, scan

ONE = {name: value[:1] if isinstance(value, list) else value for name, value in scan().items()}
DENSITY = {"kind": "density", "from": 0, "to": 3, "value": 0.334}
WHOLE = changed(SIMPLE, scan__intensity_sigma=..., amplitudes="root")


def q_scan(**further):
    given = {"q": [0.33, 0.66, 0.99, 1.32], "intensity": [50.0, 8.0, 3.0, 2.0], "intensity_sigma": [0.1] * 4}
    return {**given, **further}


def task(body):
    request = asked("film", body)
    return interpret.task(request, interpret.scan_of(request.scan))


def test_a_task_holds_what_the_request_says():
    facts = [
        DENSITY,
        {"kind": "total", "from": 5, "to": 7, "value": 2.0, "sigma": 0.2},
        {"kind": "mean", "value": 0.7, "sigma": 0.1},
        {"kind": "factor", "value": 3.0},
        {"kind": "amplitude", "order": 2, "value": 4.0, "sigma": 0.5},
        {"kind": "composition", "formula": "SiO2", "units": 3.0, "area": 24.0, "area_sigma": 0.1},
    ]
    body = changed(
        FILM,
        facts=facts,
        spacing={"period_range": [15.0, 25.0], "zero_shift": True, "displacement": True, "radius_mm": 185.0},
        phases__known_signs={"1": -1},
        phases__use=3,
        phases__decisive=4.0,
        scan__saturated=[0, 0, 1, 0, 0],
        amplitudes="root",
        negative="refuse",
        baseline=0.2,
        instrument_rule="lorentzian",
    )
    made = task(body)
    assert made.facts == (
        KnownDensity(start=0, end=3, density=0.334),
        KnownTotal(start=5, end=7, total=2.0, sigma=0.2),
        KnownMean(mean=0.7, sigma=0.1),
        KnownFactor(factor=3.0),
        KnownAmplitude(order=2, amplitude=4.0, sigma=0.5),
    )
    assert (made.content.content.formula, made.content.units, made.content.area) == ("SiO2", 3.0, 24.0)
    assert made.period_range == (15.0, 25.0)
    assert (made.zero_shift, made.displacement, made.radius) == (True, True, 185.0)
    assert (made.fixed, made.rank, made.decisive) == ({1: -1}, 2, 4.0)
    assert made.scan.saturated.tolist() == [False, False, True, False, False]
    assert (made.rule, made.negative, made.baseline, made.instrument_rule) == ("root", "refuse", 0.2, "lorentzian")
    assert made.regions == (Region(name="sheet", start=5, end=14.2), Region(name="gallery", start=-4.5, end=4.5))
    assert made.criteria.non_negative.floor == 0.1
    assert (made.criteria.flat[0].start, made.criteria.flat[0].stop, made.criteria.flat[0].sigma) == (-4, 4, 0.05)
    assert made.phases_deg is None
    assert task(GIVEN).phases_deg == {1: 180, 2: 0, 3: 180, 4: 180, 5: 0}


def test_criteria_at_a_point_and_in_an_interval():
    known = {"from": 2.0, "value": 0.3, "sigma": 0.1}
    made = task(changed(FILM, phases__criteria__densities=[known, {**known, "to": 4.0, "weight": 2.0}]))
    assert [(one.start, one.stop, one.weight) for one in made.criteria.densities] == [(2.0, None, 1.0), (2.0, 4.0, 2.0)]


REFUSED = {
    # the scan
    "two lines on one position": (changed(FILM, scan__two_theta_deg__1=4.5986), "/scan/two_theta_deg/0"),
    "an order twice": (changed(FILM, scan__order=[1, 1, 3, 4, 5]), "/scan/order/0"),
    "orders that fall": (changed(FILM, scan__order=[1, 2, 3, 5, 4]), "/scan/order/4"),
    "half an order": (changed(FILM, scan__order=[1.5, 2, 3, 4, 5]), "/scan/order/0"),
    "one line, no order, no period": ({**SIMPLE, "scan": ONE}, "/scan/two_theta_deg"),
    "no line": (changed(FILM, scan__two_theta_deg=[]), "/scan/two_theta_deg"),
    "an angle beyond 180°": (changed(FILM, scan__two_theta_deg__4=190.0), "/scan/two_theta_deg/4"),
    "an angle below 0": (changed(FILM, scan__two_theta_deg__0=-4.0), "/scan/two_theta_deg/0"),
    "2θ without wavelength": (changed(FILM, scan__wavelength=...), "/scan/wavelength"),
    "2θ and q": (changed(FILM, scan__q=[1, 2, 3, 4, 5]), "/scan/two_theta_deg"),
    "neither": (changed(FILM, scan__two_theta_deg=...), "/scan/two_theta_deg"),
    "a wavelength that means nothing": (changed(FILM, scan__wavelength=1e8), "/scan"),
    "another one": (changed(FILM, scan__wavelength=1e-8), "/scan"),
    "q beyond the wavelength": ({**SIMPLE, "scan": q_scan(wavelength=12.0)}, "/scan/q/3"),
    "corrections without angles": ({**FILM, "scan": q_scan()}, "/scan/wavelength"),
    "a displacement without angles": (
        {**SIMPLE, "scan": q_scan(), "spacing": {"displacement": True}},
        "/scan/wavelength",
    ),
    "no intensities": (changed(FILM, scan__intensity=..., scan__intensity_sigma=...), "/scan/intensity"),
    "Bayes without errors": (changed(FILM, scan__intensity_sigma=...), "/scan/intensity_sigma"),
    "all negative": (changed(FILM, scan__intensity=[-5.0] * 5), "/scan/intensity"),
    "all negative, roots": (changed(FILM, scan__intensity=[-5.0] * 5, amplitudes="root"), "/scan/intensity"),
    "negative, to be refused": (
        changed(FILM, scan__intensity__2=-5.0, amplitudes="root", negative="refuse"),
        "/scan/intensity/2",
    ),
    "columns of two lengths": (changed(FILM, scan__intensity=[1.0, 2.0]), "/scan/intensity"),
    "a σ below 0": (changed(FILM, scan__intensity_sigma__3=-1.0), "/scan/intensity_sigma/3"),
    "a σ of 0": (changed(FILM, scan__position_sigma__3=0.0), "/scan/position_sigma/3"),
    "widths of 0": (changed(FILM, scan__width__3=0.0), "/scan/width/3"),
    "σ's of widths of 0": (changed(FILM, scan__width_sigma__3=0.0), "/scan/width_sigma/3"),
    "a line wider than any": (changed(FILM, scan__width__3=1e200), "/scan/width/3"),
    "a position known not at all": (changed(FILM, scan__position_sigma__3=1e200), "/scan/position_sigma/3"),
    "widths that no fit finds": (changed(FILM, scan__width_sigma__0=3e-11), "/scan/width"),
    "an instrument broader than the lines": (changed(FILM, instrument_width=2.0), "/scan/width"),
    "an absurd instrument": (changed(FILM, instrument_width=1e300), "/instrument_width"),
    "saturated by half": (changed(FILM, scan__saturated=[0, 0, 0.5, 0, 0]), "/scan/saturated/2"),
    "everything saturated": (changed(FILM, scan__saturated=[1] * 5), "/scan"),
    "another radiation": (changed(FILM, scan__radiation="electron"), "/scan/radiation"),
    # the period
    "a range that falls": (changed(FILM, spacing__period_range=[30.0, 10.0]), "/spacing/period_range"),
    "an absurd range": (changed(FILM, spacing__period_range=[1e5, 1e7]), "/spacing/period_range"),
    "another": (changed(FILM, spacing__period_range=[1e-5, 1e-3]), "/spacing/period_range"),
    "half a range": (changed(FILM, spacing__period_range=[10.0]), "/spacing/period_range"),
    "a critical q beyond the lines": (changed(FILM, spacing__critical_q=5.0), "/spacing/critical_q"),
    "refraction twice": (changed(FILM, spacing={"critical_q": 0.03, "mean_density": 0.7}), "/spacing/critical_q"),
    "a mean below 0": (changed(FILM, spacing__mean_density=-0.7), "/spacing/mean_density"),
    "a radius for nothing": (changed(FILM, spacing__radius_mm=185.0), "/spacing/radius_mm"),
    # corrections
    "an incomplete correction": (changed(FILM, corrections=[{"kind": "lorentz"}]), "/corrections/0/geometry"),
    "one of powders": (changed(FILM, corrections=[{"kind": "multiplicity"}]), "/corrections/0/kind"),
    "one twice": (changed(FILM, corrections=[{"kind": "polarisation"}] * 2), "/corrections/1"),
    "neutrons polarised as X-rays": (changed(FILM, scan__radiation="neutron"), "/corrections/1/kind"),
    # facts
    "a mean without value": (changed(FILM, facts__0={"kind": "mean"}), "/facts/0/value"),
    "a density without end": (changed(FILM, facts__1__to=...), "/facts/1/to"),
    "a total without start": (changed(FILM, facts__1={"kind": "total", "to": 2, "value": 1}), "/facts/1/from"),
    "an amplitude of no order": (changed(FILM, facts__0={"kind": "amplitude", "value": 3}), "/facts/0/order"),
    "a composition without area": (changed(FILM, facts__0={"kind": "composition", "formula": "SiO2"}), "/facts/0/area"),
    "a mean by formula": (changed(FILM, facts__0__formula="SiO2"), "/facts/0/formula"),
    "a mean from somewhere": (changed(FILM, facts__0__from=1.0), "/facts/0/from"),
    "a composition with σ": (
        changed(FILM, facts__0={"kind": "composition", "formula": "SiO2", "area": 24, "sigma": 1}),
        "/facts/0/sigma",
    ),
    "no element": (changed(FILM, facts__0={"kind": "composition", "formula": "Xx3", "area": 24}), "/facts/0/formula"),
    "two compositions": (changed(FILM, facts=[{"kind": "composition", "formula": "SiO2", "area": 24}] * 2), "/facts/1"),
    "a factor below 0": (changed(FILM, facts__0={"kind": "factor", "value": -1}), "/facts/0/value"),
    "an amplitude of 0": (changed(FILM, facts__0={"kind": "amplitude", "order": 1, "value": 0}), "/facts/0/value"),
    "a place longer than the period": (changed(FILM, facts__1__to=40.0), "/facts/1"),
    "a place that falls": (changed(FILM, facts__1__to=-10.0), "/facts/1/to"),
    "places that overlap": (changed(FILM, facts__0=DENSITY), "/facts"),
    "too little": (changed(FILM, facts=[{"kind": "mean", "value": 0.7}]), "/facts"),
    "two equal densities": (changed(FILM, facts=[DENSITY, {**DENSITY, "from": 5, "to": 7}]), "/facts"),
    "an absurd density": (changed(FILM, facts__1__value=1e300), "/facts/1/value"),
    # phases
    "no phases": (changed(FILM, phases=...), "/phases"),
    "neither phases nor criteria": (changed(FILM, phases={}), "/phases"),
    "both": (changed(FILM, phases__phase_deg={"1": 0}), "/phases"),
    "an unknown criterion": (changed(FILM, phases__criteria__smooth={}), "/phases/criteria/smooth"),
    "no criterion": (changed(FILM, phases__criteria={}), "/phases/criteria"),
    "a flat part that falls": (changed(FILM, phases__criteria__flat__0__to=-5.0), "/phases/criteria/flat/0/to"),
    "a flat part beyond the period": (changed(FILM, phases__criteria__flat__0__to=50.0), "/phases/criteria/flat/0"),
    "a total at a point": (
        changed(FILM, phases__criteria__totals=[{"from": 5, "value": 1, "sigma": 0.1}]),
        "/phases/criteria/totals/0/to",
    ),
    "a floor without scale": (changed(FILM, facts=[]), "/facts"),
    "a floor without mean": (changed(FILM, facts=[{"kind": "factor", "value": 0.14}]), "/facts"),
    "an absurd floor": (
        changed(FILM, phases__criteria__non_negative__floor=1e300),
        "/phases/criteria/non_negative/floor",
    ),
    "use beyond any list": (changed(FILM, phases__use=11), "/phases/use"),
    "use of none": (changed(FILM, phases__use=0), "/phases/use"),
    "use beyond the list": (
        changed(SIMPLE, phases__known_signs={"1": 1, "2": 1, "3": -1, "4": 1}, phases__use=5),
        "/phases/use",
    ),
    "a sign of what is no order": (changed(FILM, phases__known_signs={"x": 1}), "/phases/known_signs/x"),
    "an order by two names": (changed(FILM, phases__known_signs={"01": 1, "1": -1}), "/phases/known_signs/01"),
    "order 0": (changed(FILM, phases__known_signs={"0": 1}), "/phases/known_signs/0"),
    "an endless order": (changed(FILM, phases__known_signs={"9" * 5000: 1}), "/phases/known_signs/" + "9" * 80),
    "a sign of an order without a line": (changed(FILM, phases__known_signs={"55": 1}), "/phases/known_signs/55"),
    "a sign of 2": (changed(FILM, phases__known_signs={"1": 2}), "/phases/known_signs/1"),
    "phases of other orders": (changed(GIVEN, phases={"phase_deg": {"77": 0}}), "/phases/phase_deg"),
    "phases of no order": (changed(GIVEN, phases={"phase_deg": {"-1": 0}}), "/phases/phase_deg/-1"),
    "use of given phases": (changed(GIVEN, phases__use=2), "/phases/use"),
    # the profile
    "a region beyond the period": (changed(FILM, regions__0__to=50.0), "/regions/0"),
    "a region that falls": (changed(FILM, regions__1__to=-50.0), "/regions/1/to"),
    "two regions of a name": (changed(FILM, regions__1__name="sheet"), "/regions/1/name"),
    "unmeasured by formula": (changed(FILM, unmeasured={"formula": "SiO2", "b": 3}), "/unmeasured/formula"),
    "unmeasured by nothing": (changed(FILM, unmeasured={"b": 3}), "/unmeasured/amplitude"),
    "unmeasured with an end": (changed(FILM, unmeasured__d_stop=2.0), "/unmeasured/d_stop"),
    "a window that needs b": (changed(FILM, window={"kind": "gaussian"}), "/window/b"),
    "no baseline": (changed(FILM, baseline="low"), "/baseline"),
    "an absurd baseline": (changed(FILM, baseline=1e300), "/baseline"),
    "too many samples": (changed(FILM, samples=100_001), "/samples"),
    "an area of nothing": (changed(FILM, area=0.0), "/area"),
    "an unknown table": (changed(FILM, table="numbers"), "/table"),
    "a table of signs that are given": (changed(GIVEN, table="signs"), "/table"),
    "another product": (changed(FILM, product="layers"), "/product"),
    "an unknown member": (changed(FILM, widow=1), "/widow"),
}


@pytest.mark.parametrize("case", REFUSED)
def test_refused(case):
    body, pointer = REFUSED[case]
    found, reason, cure = refused("film", body)
    assert found == pointer, (found, reason, cure)
    # The engine's own names are not those of a request.
    for name in ("phases_deg", "two_theta ", "observed", "fixed", " stop", " rank"):
        assert name not in f"{reason} {cure}", (reason, cure)


def test_use_beyond_the_list_says_how_long_the_list_is():
    body = REFUSED["use beyond the list"][0]
    assert "2 sign sets" in refused("film", body)[1]
    assert answered("film", changed(body, phases__use=2))["signs"]["used"] == 2


@pytest.mark.parametrize("rule", ["bayesian", "root"])
def test_a_negative_intensity_is_told(rule):
    made = answered("film", changed(SIMPLE, scan__intensity__2=-5.0, amplitudes=rule))
    assert any("1 of 5 intensities are negative" in note for note in made["notes"])
    third = made["orders"][2]
    if rule == "root":
        assert third["amplitude"] is None
        assert third["flags"]
    else:
        assert 0 < third["amplitude"] < 2 * third["amplitude_sigma"]


@pytest.mark.parametrize("known", [{"order": [1]}, {"period": 19.2}])
def test_one_line_with_an_order_or_a_period_is_enough(known):
    body = {"scan": {**ONE, **known}, "phases": {"phase_deg": {"1": 180}}, "samples": 17}
    made = answered("film", body)
    assert made["spacing"]["period"] == pytest.approx(19.2, abs=0.01)
    assert [one["order"] for one in made["orders"]] == [1]


def test_roots_need_no_errors():
    made = answered("film", WHOLE)
    assert made["uncertainty"] is None
    assert made["profile"]["uncertainty"] is None
    expected = np.sqrt(WHOLE["scan"]["intensity"])
    np.testing.assert_allclose([one["amplitude"] for one in made["orders"]], expected, rtol=1e-12)


def test_saturated_lines_are_left_out_or_kept():
    body = changed(SIMPLE, scan__saturated=[1, 0, 0, 0, 0])
    assert answered("film", body)["orders"][0]["amplitude"] is None
    assert answered("film", changed(body, keep_saturated=True))["orders"][0]["amplitude"] > 0


def test_a_scan_is_located_where_it_stands():
    request = asked("film", changed(SIMPLE, scan__intensity__2=1.0, scan__two_theta_deg__4=190.0))
    with pytest.raises(Problem) as caught:
        interpret.scan_of(request.scan, ("members", 3, "scan"))
    assert caught.value.places[0].pointer == "/members/3/scan/two_theta_deg/4"
