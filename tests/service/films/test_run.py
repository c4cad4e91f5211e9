"""Films through the whole service in this process: forms of the answer, columns beside a request, runs, oddities."""

from __future__ import annotations

import copy
import csv
import io
import json

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from service import intake, pipeline
from service.analyses.report import Limits
from service.films import run
from service.openapi import EXAMPLES
from service.problems import Problem
from service.schemas.film_reports import FILM_REPORTS
from service.settings import Settings
from tests.service.analyses.asked import numbers, table
from tests.service.bodies import FORM, form
from tests.service.films.asked import (
    FILM,
    GIVEN,
    ORDERS,
    PERIOD,
    RUN,
    SIMPLE,
    TASK,
    WAVELENGTH,
    amplitudes,
    answered,
    asked,
    changed,
    members,
    refused,
)
from tests.service.test_mutations import ODDITIES, places

LIMITS = Limits(max_bytes=2**28, max_rows=1000, max_values=100_000)


def read(product, body, *parts):
    """The answer to a request with files beside it."""
    sent = form(("request", "application/json", json.dumps(body).encode()), *parts)
    found = intake.read(product, FORM, sent, max_body_bytes=2**20)[1]
    return json.loads(pipeline.film_answer(found, "json", Settings(), threads=1))


def archive(columns):
    made = io.BytesIO()
    np.savez(made, **{name: np.array(value) for name, value in columns.items()})
    return made.getvalue()


def text(columns):
    made = io.StringIO()
    writer = csv.writer(made)
    writer.writerow(columns)
    writer.writerows(zip(*columns.values(), strict=True))
    return made.getvalue().encode()


@pytest.mark.parametrize(("kind", "pack"), [("text/csv", text), ("application/x-npz", archive)])
def test_columns_beside_the_request(kind, pack):
    columns = {name: value for name, value in SIMPLE["scan"].items() if isinstance(value, list)}
    columns["order"] = [0, 2, 0, 0, 0]
    columns["saturated"] = [1, 0, 0, 0, 0]
    body = changed(SIMPLE, scan={"wavelength": WAVELENGTH})
    expected = answered("film", changed(SIMPLE, scan={**columns, "wavelength": WAVELENGTH}))
    found = read("film", body, ("columns", kind, pack(columns)))
    assert found == expected
    assert found["orders"][0]["flags"]


def test_columns_that_are_none_of_a_scan():
    columns = {"two_theta_deg": [4.6, 9.2], "height": [1.0, 2.0]}
    with pytest.raises(Problem) as caught:
        read("film", SIMPLE, ("columns", "text/csv", text(columns)))
    assert caught.value.status in (400, 422)
    assert "height" in caught.value.detail


@pytest.mark.parametrize("product", ["film", "film_run"])
def test_examples_are_answered(product):
    FILM_REPORTS[product].model_validate(answered(product, EXAMPLES[product]), strict=True)


def test_a_run_is_one_film_after_the_other():
    made = answered("film_run", RUN)
    assert made["variable"] == {"name": "relative humidity", "unit": "%", "values": [10, 40]}
    alone = {name: value for name, value in RUN.items() if name not in ("members", "variable", "variable_unit")}
    for member, told in zip(RUN["members"], made["members"], strict=True):
        one = {**alone, "product": "film", "scan": {**RUN["scan"], **member["scan"]}}
        assert told == answered("film", one)
    for row, told, period in zip(made["table"], made["members"], (19.2, 19.5), strict=True):
        assert row["period"] == told["spacing"]["period"] == pytest.approx(period, abs=1e-3)
        assert row["layers"] == len(told["layers"])
        assert row["sheet"] == told["regions"][0]["integral"]
        assert row["gallery_sigma"] == told["regions"][1]["sigma"]
        assert row["decided"] is told["signs"]["decided"]
        assert row["mean"] is None
    assert set(made["notes"]) >= {note for told in made["members"] for note in told["notes"]}


def test_the_table_of_a_run_has_one_row_a_film():
    head, found = table(answered("film_run", RUN, "csv"))
    made = answered("film_run", RUN)["table"]
    assert head[0] == "value: relative humidity (%)"
    for name in ("value", "period", "period_sigma", "layers", "sheet", "gallery_sigma"):
        assert numbers(found[name]) == [row[name] for row in made]
    assert found["mean"] == ["", ""]


def test_progress_of_a_run_is_told():
    steps = []
    limits = Limits(max_bytes=2**28, max_rows=1, max_values=1, progress=lambda done, whole: steps.append((done, whole)))
    run.film_run(asked("film_run", RUN), limits)
    assert steps == [(1, 2), (2, 2)]


ABSOLUTE = {**RUN, "facts": TASK["facts"], "phases": TASK["phases"]}


@pytest.mark.parametrize(
    ("body", "pointer", "words"),
    [
        (changed(RUN, members__1__scan__two_theta_deg__2=190.0), "/members/1/scan/two_theta_deg/2", ""),
        (changed(RUN, members__1__scan__intensity=[1.0]), "/members/1/scan/intensity", ""),
        (changed(RUN, members__1__scan__intensity=[-1.0] * 5), "/members/1/scan/intensity", ""),
        (changed(RUN, members__1__scan__intensity_sigma=...), "/members/1/scan/intensity_sigma", ""),
        (changed(RUN, members__1__scan__order=[1, 2, 3, 3, 5]), "/members/1/scan/order/2", ""),
        (changed(RUN, members__1__scan__two_theta_deg__1="9"), "/members/1/scan/two_theta_deg/1", ""),
        (changed(RUN, members__1__scan__wdith=[1.0]), "/members/1/scan/wdith", ""),
        (changed(RUN, members__1__scan=...), "/members/1/scan", ""),
        (changed(RUN, members__1__value=...), "/members/1/value", ""),
        (changed(RUN, members__1__value="x"), "/members/1/value", ""),
        (changed(RUN, members=[]), "/members", ""),
        (changed(RUN, scan__wavelength=...), "/members/0/scan/wavelength", ""),
        (changed(RUN, members__1__scan__width_sigma__2=0.0), "/members/1/scan/width_sigma/2", ""),
        (changed(RUN, regions__0__to=24.3), "/regions/0", "in member 0"),
        (changed(RUN, regions__0={"name": "all", "from": 0, "to": 19.4}), "/regions/0", "in member 0"),
        (changed(ABSOLUTE, members=members(19.5, 19.2), facts__1__to=16.4), "/facts/1", "in member 1"),
        (changed(RUN, regions__0__name="period"), "/regions/0/name", ""),
        (changed(RUN, regions__1__name="sheet_sigma"), "/regions/1/name", ""),
        (changed(RUN, regions__1__name="sheet"), "/regions/1/name", ""),
        (changed(RUN, spacing__critical_q=5.0), "/spacing/critical_q", "in member 0"),
        (changed(RUN, phases__known_signs={"77": 1}), "/phases/known_signs/77", "in member 0"),
        (changed(RUN, product="film"), "/product", ""),
    ],
)
def test_what_is_at_fault_in_a_run(body, pointer, words):
    found, reason, cure = refused("film_run", body)
    assert found == pointer, (found, reason, cure)
    assert words in reason


@pytest.mark.parametrize("form", ["png", "svg"])
@pytest.mark.parametrize(("product", "good"), [("film", GIVEN), ("film_run", RUN)])
def test_pictures(form, product, good):
    pytest.importorskip("matplotlib")
    made = answered(product, {**good, "picture": {"width": 620, "height": 500, "theme": "dark"}}, form)
    assert made.startswith(b"\x89PNG" if form == "png" else b"<?xml")
    assert refused(product, {**good, "picture": {"width": 1}}, form)[0] == "/picture/width"
    place = "/members/0/scan/wavelength" if product == "film_run" else "/scan/wavelength"
    assert refused(product, changed(good, scan__wavelength=...), form)[0] == place


def test_the_truth_comes_back_from_any_period():
    for period in (14.3, 21.7):
        body = changed(SIMPLE, scan=members(period)[0]["scan"], corrections=TASK["corrections"])
        made = answered("film", changed(body, scan__wavelength=WAVELENGTH))
        assert made["spacing"]["period"] == pytest.approx(period, abs=1e-3)
        found = np.array([one["amplitude"] for one in made["orders"]])
        f = np.abs(amplitudes(period))
        strong = f > 0.3 * f.max()
        ratio = found[strong] / f[strong]
        np.testing.assert_allclose(ratio / ratio[0], 1, atol=0.02)
    assert ORDERS.size == len(made["orders"])
    assert period != PERIOD


BODIES = {"film": [FILM, GIVEN, SIMPLE], "film_run": [RUN]}


@st.composite
def spoilt(draw):
    """A good request with one place changed, of which every depth is as likely."""
    product = draw(st.sampled_from(sorted(BODIES)))
    made = copy.deepcopy(draw(st.sampled_from(BODIES[product])))
    found = sorted(places(made), key=str)
    length = draw(st.sampled_from(sorted({len(path) for path in found})))
    path = draw(st.sampled_from([path for path in found if len(path) == length]))
    place = made
    for key in path[:-1]:
        place = place[key]
    old = place[path[-1]]
    if draw(st.booleans()) and isinstance(old, int | float) and not isinstance(old, bool):
        place[path[-1]] = old * draw(st.sampled_from([-1.0, 0.0, 1e-8, 0.5, 3.0, 1e3, 1e12, 1e100]))
    elif draw(st.booleans()):
        place[path[-1]] = copy.deepcopy(draw(st.sampled_from(ODDITIES)))
    else:
        del place[path[-1]]
    return product, made


@given(spoilt())
@settings(max_examples=40, derandomize=True)
def test_spoilt_requests_are_answered_or_refused(request):
    product, body = request
    problem = None
    try:
        made = answered(product, body)
    except Problem as fault:
        problem = fault
    if problem is None:
        FILM_REPORTS[product].model_validate(made, strict=True)
    else:
        assert problem.status == 422
        assert all(place.reason and place.cure for place in problem.places)
