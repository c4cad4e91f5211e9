"""Contrast series over HTTP."""

from __future__ import annotations

import numpy as np
import pytest

from engine.films.swelling import contrast_signs
from service.films.contrast import contrast
from service.films.orders import orders_of
from service.intake import check
from service.schemas.film_reports import ContrastReport
from tests import samples_films
from tests.service.problem_shape import assert_problem

REQUEST = samples_films.requests("")["coating_contrast.json"]
ADDRESS = "/v1/films/contrast"
SETS = REQUEST["sets"]


def checked(**members):
    return check("film_contrast", {**REQUEST, **members}, {}, max_body_bytes=2**20)[1]


def without(one, *orders):
    """The set less some of its orders."""
    keep = [row for row, order in enumerate(one["order"]) if order not in orders]
    return {**one, **{name: [one[name][row] for row in keep] for name in ("order", "amplitude", "sigma")}}


def test_report_is_that_of_the_engine(client):
    answer = client.post(ADDRESS, json=REQUEST)
    assert answer.status_code == 200, answer.text
    told = answer.json()
    ContrastReport.model_validate(told, strict=True)
    sets = [orders_of(one, ("sets",)) for one in checked().sets]
    found = contrast_signs(sets, samples_films.SHARES, exchange="edge")
    assert [row["sign"] for row in told["orders"]] == found.signs.T.ravel().tolist()
    assert [row["amplitude"] for row in told["orders"]] == np.concatenate([one.amplitude for one in sets]).tolist()
    np.testing.assert_allclose([row["slope"] for row in told["lines"]], found.line[:, 1])
    np.testing.assert_allclose(
        [row["constant_sigma"] for row in told["lines"]], np.sqrt(found.line_covariance[:, 0, 0])
    )
    for row in told["orders"]:
        assert row["sign"] * row["amplitude"] == pytest.approx(row["fitted"] + row["residual"])


def test_signs_are_those_of_the_stack_it_was_made_of():
    """All but one, which all but vanishes there; it is told to be open."""
    told = contrast(checked()).document
    assert not told["settled"]
    assert told["verdict"] == "Signs are not decided at every contrast for order 7."
    assert [(row["order"], row["contrast"]) for row in told["orders"] if not row["decided"]] == [(7, 1.0)]
    for row in told["orders"]:
        truth = samples_films.neutron(np.array([float(row["order"])]), row["contrast"])[0]
        assert row["sign"] == np.sign(truth) or not row["decided"]
    for row in told["lines"]:
        order = np.array([float(row["order"])])
        dry = samples_films.neutron(order, 0.0)[0]
        assert abs(row["constant"] - dry) < 4 * row["constant_sigma"]
        assert abs(row["slope"] - (samples_films.neutron(order, 1.0)[0] - dry)) < 4 * row["slope_sigma"]


def test_settled_without_the_vanishing_order():
    told = contrast(checked(sets=[without(one, 7) for one in SETS])).document
    assert told["settled"]
    assert told["verdict"] == "All signs are decided."


def test_without_the_place_of_exchange_nothing_is_decided():
    told = contrast(checked(exchange=None)).document
    assert not told["settled"]
    assert told["verdict"] == "No sign is decided."
    assert [row["order"] for row in told["lines"] if not row["relative_decided"]] == [7]


def test_absent_orders_and_the_doubt_are_named():
    """The first order in two sets only; of the second order one sign is in doubt where its σ is wide."""
    sets = [without(SETS[0], 1), without(SETS[1], 1), SETS[2], SETS[3]]
    told = contrast(checked(sets=sets)).document
    assert told["unused"] == [1]
    assert len(told["orders"]) == 4 * (samples_films.ORDERS - 1)
    assert [row["set"] for row in told["orders"]] == [1 + row // 6 for row in range(24)]
    wide = [{**one, "sigma": [one["sigma"][0], 50.0, *one["sigma"][2:]]} for one in SETS]
    told = contrast(checked(sets=wide)).document
    assert told["verdict"] == "Signs are not decided at every contrast for order 2, 7."


def test_table(client):
    lines = client.post(ADDRESS, json=REQUEST, headers={"Accept": "text/csv"}).text.splitlines()
    table = [line.split(",") for line in lines if not line.startswith("#")]
    assert table[0][:3] == ["set", "contrast", "order"]
    assert len(table) == 1 + len(SETS) * samples_films.ORDERS


@pytest.mark.parametrize(
    ("members", "pointer"),
    [
        ({"sets": SETS[:2]}, "/sets"),
        ({"sets": [{**one, "contrast": 0.5} for one in SETS]}, "/sets"),
        ({"sets": [*SETS[:3], {**SETS[3], "period": 18.0}]}, "/sets"),
        ({"sets": [*SETS[:3], {**SETS[3], "unit": "e/Å³"}]}, "/sets"),
        ({"sets": [*SETS[:3], {name: SETS[3][name] for name in SETS[3] if name != "sigma"}]}, "/sets/3/sigma"),
        ({"sets": [*SETS[:3], {**SETS[3], "order": [1, 1, 2, 3, 4, 5, 6]}]}, "/sets/3/order"),
        ({"slope_sign": [1.0]}, "/slope_sign"),
        ({"exchange": None, "slope_sign": [1.0]}, "/slope_sign"),
        ({"exchange": None, "slope_sign": [0.5] * 7}, "/slope_sign/0"),
        ({"exchange": "side"}, "/exchange"),
        ({"model_error": 1.0}, "/model_error"),
    ],
)
def test_refusals(client, members, pointer):
    answer = client.post(ADDRESS, json={**REQUEST, **members})
    assert_problem(answer, 422, answer.json()["errors"][0]["pointer"])
    assert answer.json()["errors"][0]["pointer"].startswith(pointer), answer.text


def test_pictures_are_not_offered(client):
    assert client.post(ADDRESS, json=REQUEST, headers={"Accept": "image/png"}).status_code == 406
