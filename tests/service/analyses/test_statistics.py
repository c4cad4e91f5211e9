from __future__ import annotations

import numpy as np
import pytest

from engine import Treatment, evaluate, sampling
from engine.features.distribution import distribution
from service.analyses.statistics import NUMBERS
from tests.service import bodies
from tests.service.analyses import asked
from tests.service.analyses.asked import CRYSTAL, GOOD, numbers, pointer, refusal, report, table

SET = bodies.coefficients(CRYSTAL)


def test_json_and_csv_hold_the_numbers_of_the_engine(client):
    made = distribution(SET, bins=12)
    answer = client.post("/v1/statistics", json=GOOD["statistics"]).json()
    for name in NUMBERS:
        np.testing.assert_allclose(answer[name], getattr(made, name), rtol=1e-12, err_msg=name)
    np.testing.assert_allclose(answer["histogram"]["edges"], made.edges, rtol=1e-12)
    assert answer["histogram"]["counts"] == made.counts.tolist()
    head, columns = table(client.post("/v1/statistics?format=csv", json=GOOD["statistics"]).content)
    assert f"samples: {made.samples}" in head
    assert f"shape: [{','.join(map(str, made.shape))}]" in head
    assert numbers(columns["count"]) == made.counts.tolist()
    assert numbers(columns["lower"])[1:] == numbers(columns["upper"])[:-1]


def test_moments_by_brute_force():
    told = report("statistics", {"set": CRYSTAL, "field": "laplacian"}).document
    values = evaluate(SET, sampling.full_cell(SET.lattice, told["shape"]), Treatment(field="laplacian")).values
    assert told["standard_deviation"] == pytest.approx(values.std())
    assert told["rms"] == pytest.approx(np.sqrt((values**2).mean()))
    assert told["skewness"] == pytest.approx(((values - values.mean()) ** 3).mean() / values.std() ** 3)
    assert told["fraction_negative"] == pytest.approx((values < 0).mean())
    assert told["samples"] == values.size == sum(told["histogram"]["counts"])
    assert told["unit"] == "e/Å³/Å²"


def test_spacing_is_at_most_what_was_asked_for():
    told = report("statistics", {"set": CRYSTAL, "spacing": 0.9}).document
    assert tuple(told["shape"]) == sampling.full_cell_by_spacing(SET.lattice, 0.9).shape


def test_flat_field_has_no_shape():
    given = {"cell": {"period": 9.0}, "values": "structure_factor", "l": [0], "amplitude": [3], "phase_deg": [0]}
    told = report("statistics", {"set": given}).document
    assert (told["skewness"], told["excess_kurtosis"]) == (None, None)
    assert told["mean"] == pytest.approx(1 / 3)
    assert told["resolution"] is None


@pytest.mark.parametrize(
    ("members", "place"),
    [
        ({"bins": 0}, "/bins"),
        ({"bins": 10**6}, "/bins"),
        ({"spacing": 0}, "/spacing"),
        ({"field": "gradient"}, "/field"),
        ({"field": "gradient_magnitude"}, "/field"),
        ({"set": bodies.ABSORBING}, "/set/density"),
        ({"set": {**CRYSTAL, "mean": None, "phase_deg": [None] * 40}}, "/set/phase_deg"),
    ],
)
def test_refusals(members, place):
    assert pointer("statistics", {"set": CRYSTAL, **members}) == place


@pytest.mark.parametrize("spacing", [0.001, 1e-8, 1e-300])
def test_samples_without_end_are_refused(spacing):
    problem = refusal(
        "statistics",
        {"set": CRYSTAL, "spacing": spacing},
        asked.Limits(max_bytes=2**24, max_rows=50, max_values=1000),
    )
    assert problem.places[0].pointer == "/spacing"
