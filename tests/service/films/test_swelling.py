"""Swelling series over HTTP."""

from __future__ import annotations

import json

import numpy as np
import pytest

from engine.films.swelling import excess, joint_signs
from service.films.orders import orders_of
from service.films.swelling import swelling
from service.intake import check
from service.schemas.film_reports import SwellingReport
from tests import samples_films
from tests.service.problem_shape import assert_problem

REQUEST = samples_films.requests("")["coating_swelling.json"]
ADDRESS = "/v1/films/swelling"


def checked(**members):
    return check("film_swelling", {**REQUEST, **members}, {}, max_body_bytes=2**20)[1]


def test_report_is_that_of_the_engine(client):
    answer = client.post(ADDRESS, json=REQUEST)
    assert answer.status_code == 200, answer.text
    told = answer.json()
    SwellingReport.model_validate(told, strict=True)
    found = joint_signs([orders_of(one, ("sets",)) for one in checked().sets], orientation=excess("positive"))
    assert told["verdict"] == found.verdict
    assert [row["sign"] for row in told["orders"]] == np.concatenate(found.signs).tolist()
    np.testing.assert_allclose([row["fitted"] for row in told["orders"]], np.concatenate(found.fitted))
    np.testing.assert_allclose([row["scale"] for row in told["scales"]], found.scales)


def test_signs_are_those_of_the_sheet_it_was_made_of():
    """The generator's own transform knows them; all are decided."""
    told = swelling(checked(), None).document
    assert told["settled"]
    for row in told["orders"]:
        truth = samples_films.transform(np.array([2 * np.pi * row["order"] / row["period"]]))[0]
        assert row["sign"] == np.sign(truth)
        assert row["decided"]
    q, value, sigma = (np.array(told["transform"][name]) for name in ("q", "value", "sigma"))
    inner = (q > 0.3) & (q < 2.3)
    assert np.abs(value[inner] - samples_films.transform(q[inner])).max() < 6 * sigma[inner].max()


def test_table(client):
    lines = client.post(ADDRESS, json=REQUEST, headers={"Accept": "text/csv"}).text.splitlines()
    table = [line.split(",") for line in lines if not line.startswith("#")]
    assert table[0][:3] == ["set", "period", "order"]
    assert len(table) == 1 + 4 * samples_films.ORDERS


@pytest.mark.parametrize(
    ("members", "pointer"),
    [
        ({"sets": REQUEST["sets"][:1]}, "/sets"),
        ({"sets": [REQUEST["sets"][0]] * 2}, "/sets"),
        ({"orientation": {"kind": "excess"}}, "/orientation/sign"),
        ({"orientation": {"kind": "excess", "sign": "positive", "value": 1.0}}, "/orientation/value"),
        ({"orientation": {"kind": "known_order", "number": 9, "order": 1, "sign": "positive"}}, "/orientation"),
        ({"thickness": 40.0}, "/thickness"),
    ],
)
def test_refusals(client, members, pointer):
    answer = client.post(ADDRESS, json={**REQUEST, **members})
    assert_problem(answer, 422, answer.json()["errors"][0]["pointer"])
    assert answer.json()["errors"][0]["pointer"].startswith(pointer), answer.text


def test_endless_margins_are_null():
    document = swelling(checked(orientation={"kind": "undecided"}), None).document
    assert not document["oriented"]
    assert json.dumps([row["margin"] for row in document["orders"]], allow_nan=False)
