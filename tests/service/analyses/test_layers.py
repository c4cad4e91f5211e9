from __future__ import annotations

from dataclasses import fields

import numpy as np
import pytest

from engine import Treatment, Window, averages, sampling
from engine.features.layer_distances import layer_spacings
from engine.features.layers import layers as find_layers
from service.analyses import layers as module
from tests.service import bodies
from tests.service.analyses import asked
from tests.service.analyses.asked import CRYSTAL, FILM, GOOD, numbers, pointer, refusal, report, table

SET = bodies.coefficients(FILM)
LINE = sampling.lattice_line(SET.lattice, [1], 2)


def assert_same(records, made):
    held = {field.name for field in fields(made)}
    names = [name for name in records[0] if name in held]
    assert set(module.PLACES) < set(names)
    for name in names:
        np.testing.assert_array_equal([one[name] for one in records], getattr(made, name), err_msg=name)


def test_json_and_csv_hold_the_numbers_of_the_engine(client):
    made = find_layers(SET, LINE)
    answer = client.post("/v1/layers", json=GOOD["layers"]).json()
    assert made.count >= 3
    assert_same(answer["layers"], made)
    assert [one["layer"] for one in answer["layers"]] == list(range(1, made.count + 1))
    for name in ("area_unit", "length", "periodic", "merged"):
        assert answer[name] == getattr(made, name)
    np.testing.assert_array_equal(answer["position_covariance"], made.position_covariance)
    np.testing.assert_array_equal(answer["area_covariance"], made.area_covariance)
    head, columns = table(client.post("/v1/layers?format=csv", json=GOOD["layers"]).content)
    assert head[0] == "layers; unit: e/Å³"
    for name in ("position", "position_sigma", "width", "area_above_sigma"):
        assert numbers(columns[name]) == getattr(made, name).tolist()
    assert columns["open"] == [str(one) for one in made.open.tolist()]


def test_spacings_count_from_one():
    made = report("layers", GOOD["layers"])
    direct = layer_spacings(find_layers(SET, LINE))
    told = made.document["spacings"]
    assert [one["first"] for one in told] == (direct.first + 1).tolist()
    assert [one["second"] for one in told] == (direct.second + 1).tolist()
    assert [one["distance"] for one in told] == direct.distance.tolist()
    assert sum(one["distance"] for one in told) == pytest.approx(bodies.PERIOD)
    ((title, columns),) = made.further
    assert "distances" in title
    assert dict(columns)["sigma"].tolist() == direct.sigma.tolist()


def test_options_reach_the_engine():
    body = {
        "set": FILM,
        "from": [0.1],
        "to": [0.9],
        "window": {"kind": "lanczos"},
        "baseline": -0.5,
        "least_prominence": 0.4,
        "least_significance": 2.0,
    }
    made = report("layers", body).document
    direct = find_layers(
        SET,
        sampling.line(SET.lattice, [0.1], [0.9], 2),
        Treatment(window=Window("lanczos")),
        baseline=-0.5,
        least_prominence=0.4,
        least_significance=2.0,
    )
    assert not direct.periodic
    assert_same(made["layers"], direct)


def test_laterally_averaged_crystal():
    body = {"set": CRYSTAL, "normal_to": [0, 0, 1], "average": "lateral"}
    crystal = bodies.coefficients(CRYSTAL)
    direct = find_layers(
        crystal,
        sampling.normal_line(crystal.lattice, [0, 0, 1], 2),
        Treatment(average=averages.lateral(crystal.lattice, [0, 0, 1])),
    )
    assert_same(report("layers", body).document["layers"], direct)


def test_without_uncertainties_none_are_made_up():
    made = report("layers", bodies.without(GOOD["layers"], "set/sigma"))
    assert made.document["position_covariance"] is None
    assert made.document["layers"][0]["position_sigma"] is None
    assert "position_sigma" not in dict(made.table)
    assert "sigma" not in dict(made.further[0][1])


def along(**members):
    return {"set": FILM, "along": [1], **members}


@pytest.mark.parametrize(
    ("body", "place"),
    [
        ({"set": FILM}, "/from"),
        (along(samples=5), "/samples"),
        ({"set": FILM, "from": [0]}, "/to"),
        ({"set": FILM, "from": [0], "to": [0]}, "/to"),
        (along(length=2.0), "/length"),
        (along(baseline="mean"), "/baseline"),
        (along(baseline=True), "/baseline"),
        (along(least_prominence=-1.0), "/least_prominence"),
        (along(field="laplacian"), "/field"),
        (bodies.without(along(least_significance=3.0), "set/sigma"), "/least_significance"),
        ({"set": bodies.ABSORBING, "along": [0, 0, 1]}, "/set/density"),
        (along(set={**FILM, "mean": None, "phase_deg": [None] * 4}), "/set/phase_deg"),
        (along(set=CRYSTAL), "/along"),
    ],
)
def test_refusals(body, place):
    assert pointer("layers", body) == place


@pytest.mark.parametrize(
    ("members", "place"),
    [
        ({"from": [0], "to": [1e7]}, "/to"),
        ({"from": [0], "to": [30_000]}, "/to"),
        ({"normal_to": [1], "length": 1e6}, "/normal_to"),
    ],
)
def test_long_lines_are_refused_before_the_work(monkeypatch, members, place):
    monkeypatch.setattr(module, "find_layers", lambda *_, **__: pytest.fail("the work began"))
    problem = refusal("layers", {"set": FILM, **members})
    assert (problem.kind, problem.places[0].pointer) == ("too-costly", place)


def test_memory_bounds_what_any_two_layers_have_in_common():
    body = {"set": FILM, "from": [0], "to": [20]}
    assert len(report("layers", body).document["layers"]) > 20
    problem = refusal("layers", body, asked.Limits(max_bytes=2**18, max_rows=50, max_values=100_000))
    assert problem.kind == "too-costly"
    problem = refusal("layers", body, asked.Limits(max_bytes=2**30, max_rows=50, max_values=10_000))
    assert problem.kind == "too-costly"
