from __future__ import annotations

import io
import json

import numpy as np
import pytest

from service import intake, pipeline
from service.encoders.report import report_json
from service.problems import Problem
from service.settings import Settings
from service.spool import Spool
from tests.service import bodies
from tests.service.analyses import asked


def ran(product, body, form="npy", watch=None, threads=1, **limits):
    _, request = intake.check(product, body, {}, max_body_bytes=2**20)
    with Spool.unnamed() as spool:
        done = pipeline.run(product, request, form, spool, Settings(**limits), threads=threads, watch=watch)
        return done, bytes(spool.view())


def refusal(*arguments, **options):
    with pytest.raises(Problem) as caught:
        ran(*arguments, **options)
    return caught.value


def test_run_computes_into_the_spool():
    done, content = ran("profile", bodies.PROFILE)
    np.testing.assert_array_equal(np.load(io.BytesIO(content)), done.field.values)
    np.testing.assert_allclose(done.field.values, bodies.film_profile(np.linspace(0, 1, 17)), rtol=0, atol=1e-12)
    assert done.coefficients.count == 4
    assert 0 < done.seconds < 10


def test_watch_is_told_before_and_during_the_work():
    told = []

    def watch(work):
        told.append(work.shape)
        return lambda done, total: told.append((done, total))

    ran("grid", bodies.GRID, watch=watch)
    assert told[0] == (5, 6, 8)
    assert told[-1] == (5, 5)


def test_watch_may_end_the_work():
    class Enough(Exception):
        pass

    def watch(_):
        def report(done, total):
            raise Enough

        return report

    with pytest.raises(Enough):
        ran("grid", bodies.GRID, watch=watch)


@pytest.mark.parametrize(
    ("product", "body", "pointer"),
    [
        ("profile", {**bodies.PROFILE, "samples": 101}, "/samples"),
        ("slice", {**bodies.SLICE, "shape": [11, 10]}, "/shape"),
        ("slice", {**bodies.PLANE, "spacing": 0.1}, "/spacing"),
        ("grid", {**bodies.GRID, "shape": [5, 5, 5]}, "/shape"),
        ("grid", {"set": bodies.CRYSTAL, "spacing": 0.5}, "/spacing"),
        ("points", {**bodies.POINTS, "positions": [[0, 0, 0]] * 101}, "/positions"),
    ],
)
def test_too_many_samples_are_refused_at_what_sets_their_number(product, body, pointer):
    problem = refusal(product, body, max_samples=100)
    assert problem.kind == "too-costly"
    assert problem.places[0].pointer == pointer
    assert "limit of 100" in problem.detail


def test_as_many_samples_as_the_limit_are_computed():
    assert ran("profile", {**bodies.PROFILE, "samples": 100}, max_samples=100)[0].field.values.size == 100


def test_memory_is_estimated_before_it_is_taken():
    begin = []
    problem = refusal("grid", {**bodies.GRID, "shape": [100, 100, 100]}, watch=begin.append, max_memory_bytes=2**20)
    assert (problem.kind, problem.places[0].pointer) == ("too-costly", "/shape")
    assert "MiB" in problem.detail
    assert not begin


@pytest.mark.parametrize(("given", "numbers"), [(bodies.CRYSTAL, 240), (bodies.ABSORBING, 480)])
def test_numbers_in_text_are_limited(given, numbers):
    body = {**bodies.GRID, "set": given}
    assert ran("grid", body, "json", max_json_values=numbers)[1]
    problem = refusal("grid", body, "json", max_json_values=numbers - 1)
    assert "application/x-npz" in problem.detail
    assert ran("grid", body, "npz", max_json_values=1)[1]


def test_vectors_count_each_component():
    body = {**bodies.GRID, "field": "gradient"}
    assert refusal("grid", body, "json", max_json_values=719).kind == "too-costly"
    assert ran("grid", body, "json", max_json_values=720)[1]


def test_coefficients_are_limited():
    assert refusal("profile", bodies.PROFILE, max_coefficients=3).places[0].pointer == "/set/l"
    assert ran("profile", bodies.PROFILE, max_coefficients=4)[1]


@pytest.mark.filterwarnings("ignore:.*(overflow|invalid value).*:RuntimeWarning")
@pytest.mark.parametrize("form", ["json", "npy", "npz", "csv"])
def test_values_that_overflow_are_refused(form):
    """No answer holds what is not a number."""
    body = {**bodies.changed(bodies.PROFILE, "set/amplitude", [1e50] * 4), "precision": "single"}
    problem = refusal("profile", body, form)
    assert (problem.kind, problem.places[0].pointer) == ("invalid-request", "/set")


def analysed(product, body, **limits):
    _, request = intake.check(product, body, {}, max_body_bytes=2**20)
    return pipeline.analyse(product, request, Settings(**limits), threads=1)


@pytest.mark.parametrize("product", asked.GOOD)
def test_analyses_are_answered_as_reports(product):
    body = asked.GOOD[product]
    assert report_json(analysed(product, body)) == asked.answered(product, body)


@pytest.mark.parametrize(
    ("product", "limits", "pointer"),
    [
        ("extrema", {"max_json_values": 10}, "/most"),
        ("extrema", {"max_memory_bytes": 2**20}, "/spacing"),
        ("statistics", {"max_memory_bytes": 2**20}, "/spacing"),
        ("integrals", {"max_coefficients": 39}, "/set/h"),
        ("compare", {"max_coefficients": 3}, "/set/l"),
    ],
)
def test_analyses_have_the_limits_of_the_service(product, limits, pointer):
    body = asked.GOOD[product]
    if product == "statistics":
        body = {**body, "spacing": 0.05}
    with pytest.raises(Problem) as caught:
        analysed(product, body, **limits)
    assert (caught.value.kind, caught.value.places[0].pointer) == ("too-costly", pointer)


UNMEASURED = {"amplitude": 1.0, "b": 30.0}


def test_unmeasured_terms_are_apart_from_the_uncertainty():
    """Of the film in P 1: the same rms everywhere, from the orders beyond the fourth, by hand."""
    body = {**bodies.PROFILE, "unmeasured": {**UNMEASURED, "d_stop": bodies.PERIOD / 10.5}}
    done, content = ran("profile", body, "json")
    told = json.loads(content)
    assert told["uncertainty"] is None
    orders = np.arange(5, 11)
    strengths = np.exp(-30 * (orders / (2 * bodies.PERIOD)) ** 2)
    listed = 2 * float((strengths**2).sum())
    # The tail by its integral: one of each pair, an order to every period.
    s = np.linspace(10.5, 400, 200_001) / (2 * bodies.PERIOD)
    tail = 2 * np.trapezoid(np.exp(-60 * s**2), s) * 2 * bodies.PERIOD
    np.testing.assert_allclose(told["unmeasured"], np.sqrt(listed + tail), rtol=0.02)
    assert told["summary"]["unmeasured"]["rms"] == pytest.approx(np.sqrt(listed + tail), rel=0.02)
    assert told["summary"]["unmeasured"]["assumed"]
    assert done.shown.change is not None


@pytest.mark.parametrize(
    ("product", "body", "pointer"),
    [
        ("profile", {"unmeasured": {"b": 1.0}}, "/unmeasured"),
        ("profile", {"unmeasured": {**UNMEASURED, "formula": "SiO2"}}, "/unmeasured"),
        ("profile", {"unmeasured": {"amplitude": 1.0}}, "/unmeasured/b"),
        ("profile", {"unmeasured": {"formula": "SiO2", "b": 1.0}}, "/unmeasured/formula"),
        ("grid", {"unmeasured": {"formula": "Qq2", "b": 1.0}}, "/unmeasured/formula"),
        ("grid", {"unmeasured": {"formula": "", "b": 1.0}}, "/unmeasured/formula"),
        ("grid", {"unmeasured": {"formula": "SiO2", "b": 1.0, "units": 0}}, "/unmeasured/units"),
        ("profile", {"unmeasured": {**UNMEASURED, "d_stop": 50.0}}, "/unmeasured/d_stop"),
        ("grid", {"unmeasured": {**UNMEASURED, "d_stop": 1e-3}}, "/unmeasured/d_stop"),
        ("profile", {"unmeasured": UNMEASURED, "field": "gradient"}, "/unmeasured"),
        ("profile", {"unmeasured": UNMEASURED, "sharpen": 1.0}, "/unmeasured"),
        ("grid", {"unmeasured": UNMEASURED, "set": bodies.ABSORBING}, "/unmeasured"),
        (
            "profile",
            {"unmeasured": UNMEASURED, "set": {**bodies.FILM, "phase_deg": [None] * 4, "mean": 1.0}},
            "/set/phase_deg",
        ),
    ],
)
def test_unmeasured_terms_that_cannot_be_told(product, body, pointer):
    problem = refusal(product, {**bodies.GOOD[product], **body}, "json")
    assert problem.places[0].pointer == pointer


def test_unmeasured_terms_need_a_place_of_their_own():
    assert refusal("profile", {**bodies.PROFILE, "unmeasured": UNMEASURED}).kind == "not-acceptable"


def test_memory_of_unmeasured_terms_is_refused():
    body = {**bodies.GRID, "unmeasured": {"amplitude": 1.0, "b": 1e-6}}
    problem = refusal("grid", body, "json", max_memory_bytes=2**24)
    assert (problem.kind, problem.places[0].pointer) == ("too-costly", "/unmeasured")


def test_text_is_limited_with_what_goes_beside_the_values():
    body = {**bodies.PROFILE, "unmeasured": UNMEASURED}
    assert ran("profile", body, "json", max_json_values=34)
    assert "34 numbers" in refusal("profile", body, "json", max_json_values=33).detail
