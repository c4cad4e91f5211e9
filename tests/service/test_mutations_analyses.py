"""As test_mutations.py, of analyses, series, combinations and what goes beside values."""

from __future__ import annotations

import json
import random

import pytest

from service.schemas.reports import REPORTS
from tests.service import bodies
from tests.service.analyses.asked import FEW, FILM, GOOD, LATER
from tests.service.conftest import worker_processes
from tests.service.series_bodies import SERIES, SLICES
from tests.service.test_mutations import holes, spoilt

SEEDS = range(8)
ROUNDS = 30
FITTED = {"kind": "fitted", "displacement": True, "robust": True}
WITH = {"set": FILM, "uncertainty": True}
REQUESTS = [
    *((product, body) for product, body in GOOD.items() if len(json.dumps(body)) < 4000),
    (
        "integrals",
        {
            "set": FILM,
            "regions": [{"kind": "slab", "from": 0, "to": 3}, {"kind": "ball", "centre": [0.5], "radius": 2.0}],
        },
    ),
    (
        "extrema",
        {
            "set": FEW,
            "region": {"centre": [0, 0, 0], "radius": 3.0},
            "least_significance": 1.0,
            "spacing": 0.5,
            "most": 5,
        },
    ),
    ("extrema", {"set": FILM, "region": {"origin": [0], "edges": [[0.5]]}, "least_value": -1.0, "greatest_value": 1e3}),
    ("layers", {"set": FILM, "from": [0.1], "to": [0.9], "baseline": 0.5, "least_prominence": 0.1}),
    ("statistics", {"set": FEW, "spacing": 0.7, "field": "laplacian", "bins": 7}),
    ("windows", {"set": FILM, "windows": [{"kind": "gaussian", "b": 20.0}, {"kind": "lanczos"}]}),
    ("compare", {"set": FILM, "with": LATER, "terms": "common", "shells": 2}),
    ("series", SERIES),
    ("series", SLICES),
    ("series", {**SERIES, "uncertainty": True, "difference": True, "scale": FITTED}),
    (
        "profile",
        {
            **bodies.PROFILE,
            **WITH,
            "combination": {
                "kind": "difference",
                "with": LATER,
                "scale": {"kind": "given", "k": 1.1, "k_sigma": 0.1, "b": 3.0},
                "phases": "third",
                "third": FILM,
            },
        },
    ),
    ("profile", {**bodies.PROFILE, **WITH, "combination": {"kind": "average", "with": LATER, "scale": FITTED}}),
    ("profile", {**bodies.PROFILE, **WITH, "unmeasured": {"amplitude": 1.0, "b": 20.0, "d_stop": 2.0}}),
    ("grid", {**bodies.GRID, "set": FEW, "unmeasured": {"formula": "SiO2", "units": 2.0, "b": 20.0, "d_stop": 1.0}}),
    ("grid", {**bodies.GRID, "set": {**FEW, "symmetry": {"space_group": 1, "columns": "full"}}, "uncertainty": True}),
]


@pytest.mark.parametrize("seed", SEEDS)
def test_spoilt_requests(small_service, small_client, seed):
    chance = random.Random(1000 + seed)
    workers = worker_processes(small_service)
    statuses = set()
    for _ in range(ROUNDS):
        product, body = chance.choice(REQUESTS)
        body = spoilt(body, chance)
        answer = small_client.post(f"/v1/{product}", json=body)
        assert answer.status_code in (200, 400, 422), (product, body, answer.text)
        statuses.add(answer.status_code)
        if answer.status_code != 200:
            errors = answer.json().get("errors", [])
            assert all("[" not in one["pointer"] and one["reason"] for one in errors), answer.text
        elif product in REPORTS:
            REPORTS[product].model_validate(answer.json(), strict=True)
        else:
            told = answer.json()
            assert not holes([told[name] for name in ("values", "uncertainty", "unmeasured") if told.get(name)]), body
    assert statuses >= {200, 422}
    assert worker_processes(small_service) == workers
