"""Trial stacks over HTTP."""

from __future__ import annotations

import numpy as np
import pytest

from engine.films.trial import Plane, Slab, Stack, calculated, refine
from service.films.orders import orders_of
from service.intake import check
from service.schemas.film_reports import TrialReport
from tests import samples_films
from tests.service.problem_shape import assert_problem

REQUEST = samples_films.requests("")["coating_trial.json"]
ADDRESS = "/v1/films/trial"
FLAT = {"kind": "slab", "name": "x", "lower": 2.0, "upper": 1.0, "density": 1.0}


def engine_stack():
    sheet, middle, oxygen = REQUEST["parts"]
    return Stack.of(
        REQUEST["orders"]["period"],
        [
            Slab.between("sheet", sheet["lower"], sheet["upper"], density=sheet["density"], roughness=0.4),
            Plane.of("middle", 0.0, strength=middle["strength"], width=0.4),
            Plane.of("oxygen", 2.0, strength=oxygen["strength"], width=0.4),
        ],
        symmetry="m",
        background=samples_films.WATER,
        unit="e/Å³",
    )


def test_refined_numbers_are_those_of_the_engine(client):
    answer = client.post(ADDRESS, json=REQUEST)
    assert answer.status_code == 200, answer.text
    told = answer.json()
    TrialReport.model_validate(told, strict=True)
    request = check("film_trial", REQUEST, {}, max_body_bytes=2**20)[1]
    found = refine(engine_stack(), orders_of(request.orders, ("orders",)), REQUEST["refine"])
    assert [row["parameter"] for row in told["parameters"]] == REQUEST["refine"]
    np.testing.assert_allclose([row["value"] for row in told["parameters"]], found.values, rtol=1e-6)
    np.testing.assert_allclose([row["sigma"] for row in told["parameters"]], found.sigma, rtol=1e-6)
    assert told["refined"]["r_factor"] == pytest.approx(found.r_factor)
    assert told["refined"]["degrees"] == samples_films.ORDERS - len(REQUEST["refine"])
    for row in told["orders"]:
        assert row["difference"] == pytest.approx(row["measured"] - row["calculated"])


def test_without_refinement_the_model_stands(client):
    told = client.post(ADDRESS, json={**REQUEST, "refine": []}).json()
    assert told["refined"] is None
    assert told["parameters"] == []
    model = calculated(engine_stack(), np.arange(1, samples_films.ORDERS + 1))
    np.testing.assert_allclose([row["calculated"] for row in told["orders"]], np.abs(model))
    for row, factor in zip(told["orders"], model, strict=True):
        assert np.cos(np.radians(row["phase_deg"])) == pytest.approx(np.sign(factor.real))


@pytest.mark.parametrize(
    ("table", "first"), [("parameters", "parameter"), ("orders", "order"), ("profile", "distance_angstrom")]
)
def test_tables(client, table, first):
    answer = client.post(ADDRESS, json={**REQUEST, "table": table}, headers={"Accept": "text/csv"})
    lines = [line for line in answer.text.splitlines() if not line.startswith("#")]
    assert lines[0].split(",")[0] == first


@pytest.mark.parametrize(
    ("members", "pointer"),
    [
        ({"refine": ["sheet.colour"]}, "/refine"),
        ({"refine": ["nothing.position"]}, "/refine"),
        ({"refine": ["middle.position"]}, "/refine"),
        ({"parts": [REQUEST["parts"][1]] * 2}, "/parts"),
        ({"parts": [{"kind": "plane", "name": "x", "position": 1.0}], "refine": []}, "/parts/0"),
        ({"parts": [FLAT], "refine": []}, "/parts/0"),
        ({"bounds": {"sheet.density": [2.0, 3.0]}}, "/bounds"),
    ],
)
def test_refusals(client, members, pointer):
    answer = client.post(ADDRESS, json={**REQUEST, **members})
    assert_problem(answer, 422, answer.json()["errors"][0]["pointer"])
    assert answer.json()["errors"][0]["pointer"].startswith(pointer), answer.text
