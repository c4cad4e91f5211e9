"""Uncertainties in requests and in every form of answer, against the engine and a plain sum."""

from __future__ import annotations

import csv
import io
import json

import numpy as np
import pytest

from engine import Treatment, evaluate, sampling
from engine.symmetry import space_group
from service import intake, pipeline
from service.problems import Problem
from service.settings import Settings
from service.spool import Spool
from tests.service import bodies
from tests.service.bodies import changed, without
from tests.service.problem_shape import assert_problem

RNG = np.random.default_rng(9)
ROWS = len(bodies.CRYSTAL["h"])
SIGMA = RNG.uniform(0.1, 2, ROWS).round(3).tolist()
SET = {**bodies.CRYSTAL, "sigma": SIGMA, "phase_sigma_deg": RNG.uniform(1, 30, ROWS).round(2).tolist()}
COEFFICIENTS = bodies.coefficients(SET)
FILM = {**bodies.FILM, "sigma": [0.3, 0.5, 0.2, 0.4], "merit": [0.9, 1.0, 0.4, 0.8]}
POINTS = {**bodies.POINTS, "set": SET, "uncertainty": True}
GRID = {**bodies.GRID, "set": SET, "uncertainty": True}
PROFILE = {**bodies.PROFILE, "set": FILM, "uncertainty": True}
WHERE = sampling.points(COEFFICIENTS.lattice, bodies.POINTS["positions"])
CELL = sampling.full_cell(COEFFICIENTS.lattice, bodies.GRID["shape"])


def ran(product, body, form="json", **limits):
    _, request = intake.check(product, body, {}, max_body_bytes=2**20)
    with Spool.unnamed() as spool:
        pipeline.run(product, request, form, spool, Settings(**limits), threads=1)
        return bytes(spool.view())


def answered(product, body, **limits):
    return json.loads(ran(product, body, "json", **limits))


def refusal(product, body, form="json", **limits):
    with pytest.raises(Problem) as caught:
        ran(product, body, form, **limits)
    return caught.value


def plain_sigma(given, positions):
    """σ in P1 with small phase errors: each pair ±h by itself, ρ = (2/V) Σ A cos(φ − 2πh·x)."""
    h = np.stack([given[name] for name in "hkl"], axis=1)
    angle = np.deg2rad(given["phase_deg"]) - 2 * np.pi * np.asarray(positions) @ h.T
    along = np.array(given["sigma"]) * np.cos(angle)
    across = np.array(given["amplitude"]) * np.deg2rad(given["phase_sigma_deg"]) * np.sin(angle)
    return 2 / COEFFICIENTS.lattice.volume * np.sqrt(np.sum(along**2 + across**2, axis=1))


def test_json_holds_values_and_their_uncertainties():
    small = {**SET, "phase_sigma_deg": [0.2] * ROWS}
    told = answered("points", {**POINTS, "set": small})
    np.testing.assert_allclose(told["uncertainty"], plain_sigma(small, bodies.POINTS["positions"]), rtol=1e-4)
    without_it = answered("points", {**bodies.POINTS, "set": small})
    assert told["values"] == without_it["values"]
    assert without_it["uncertainty"] is None
    assert without_it["summary"]["uncertainty"] is None
    assert told["quantity"] == "value"


def test_the_summary_says_what_is_in_it_and_how_large_it_is():
    told = answered("grid", GRID)
    expected = evaluate(COEFFICIENTS, CELL, uncertainty=True)
    np.testing.assert_array_equal(told["uncertainty"], expected.sigma.values)
    summary = told["summary"]["uncertainty"]
    assert summary["contains"] == list(expected.sigma.contains)
    assert summary["omits"] == list(expected.sigma.omits)
    held = np.array(told["uncertainty"])
    assert (summary["minimum"], summary["maximum"]) == (held.min(), held.max())
    assert summary["rms"] == pytest.approx(np.sqrt(np.mean(held**2)), rel=1e-12)
    assert 0 < summary["accuracy"] < 1e-4
    for level in summary["contour_levels"]:
        assert level["value"] == pytest.approx(level["sigmas"] * summary["rms"], rel=1e-12)
        assert abs(level["sigmas"]) in (3, 6, 12, 24, 48)
        assert told["summary"]["minimum"] < level["value"] < told["summary"]["maximum"]
    assert summary["contour_levels"]


def test_npz_holds_both_arrays():
    with np.load(io.BytesIO(ran("grid", GRID, "npz"))) as archive:
        expected = evaluate(COEFFICIENTS, CELL, uncertainty=True)
        np.testing.assert_array_equal(archive["values"], expected.values)
        np.testing.assert_array_equal(archive["uncertainty"], expected.sigma.values)
        told = json.loads(str(archive["metadata"]))
    assert told["summary"]["uncertainty"]["rms"] == expected.sigma.rms
    with np.load(io.BytesIO(ran("grid", {**GRID, "uncertainty": False}, "npz"))) as archive:
        assert "uncertainty" not in archive


def test_npz_in_single_precision():
    with np.load(io.BytesIO(ran("grid", {**GRID, "precision": "single"}, "npz"))) as archive:
        assert archive["uncertainty"].dtype == np.float32
        double = evaluate(COEFFICIENTS, CELL, uncertainty=True).sigma
        np.testing.assert_allclose(archive["uncertainty"], double.values, rtol=0, atol=1e-3 * double.maximum)


def read_csv(content):
    lines = content.decode().splitlines()
    told = [line[2:] for line in lines if line.startswith("#")]
    rows = list(csv.DictReader(line for line in lines if not line.startswith("#")))
    return told, {name: np.array([float(row[name]) for row in rows]) for name in rows[0]}


def test_csv_has_a_column_of_uncertainties():
    told, table = read_csv(ran("profile", PROFILE, "csv"))
    coefficients = bodies.coefficients(FILM)
    expected = evaluate(coefficients, sampling.line(coefficients.lattice, [0], [1], 17), uncertainty=True)
    assert list(table)[1:] == ["value", "uncertainty"]
    np.testing.assert_array_equal(table["value"], expected.values)
    np.testing.assert_array_equal(table["uncertainty"], expected.sigma.values)
    assert any(line.startswith("uncertainty contains: ") and "figures of merit" in line for line in told)
    assert any(line.startswith("uncertainty omits: ") and "termination" in line for line in told)
    assert any("weighted by their figures of merit; the values are not so" in line for line in told)


def test_csv_of_a_gradient_has_one_for_each_component():
    _, table = read_csv(ran("points", {**POINTS, "field": "gradient"}, "csv"))
    expected = evaluate(COEFFICIENTS, WHERE, Treatment(field="gradient"), uncertainty=True)
    for place, name in enumerate("xyz"):
        np.testing.assert_array_equal(table[f"value_{name}"], expected.values[:, place])
        np.testing.assert_array_equal(table[f"uncertainty_{name}"], expected.sigma.values[:, place])


def test_the_gradient_of_a_stack_has_one_component_with_its_uncertainty():
    told = answered("profile", {**PROFILE, "field": "gradient"})
    assert told["shape"] == [17, 1]
    assert np.shape(told["uncertainty"]) == np.shape(told["values"]) == (17, 1)
    _, table = read_csv(ran("profile", {**PROFILE, "field": "gradient"}, "csv"))
    np.testing.assert_array_equal(table["uncertainty_x"], np.array(told["uncertainty"])[:, 0])


def test_csv_of_a_complex_density():
    given = {**bodies.ABSORBING, "sigma": SIGMA}
    _, table = read_csv(ran("points", {**bodies.POINTS, "set": given, "uncertainty": True}, "csv"))
    expected = evaluate(bodies.coefficients(given), WHERE, uncertainty=True)
    np.testing.assert_array_equal(table["value_real"] + 1j * table["value_imag"], expected.values)
    np.testing.assert_array_equal(table["uncertainty"], expected.sigma.values)


QUANTITIES = [("sigma", "e/Å³"), ("significance", "σ")]


@pytest.mark.parametrize(("quantity", "unit"), QUANTITIES)
@pytest.mark.parametrize("form", ["json", "npz", "npy", "csv"])
def test_other_quantities_take_the_place_of_the_values(quantity, unit, form):
    product, body = ("points", {**POINTS, "quantity": quantity, "uncertainty": False})
    field = evaluate(COEFFICIENTS, WHERE, uncertainty=True)
    expected = field.sigma.values if quantity == "sigma" else field.values / field.sigma.values
    content = ran(product, body, form)
    if form == "npy":
        np.testing.assert_allclose(np.load(io.BytesIO(content)), expected, rtol=1e-12)
        return
    if form == "csv":
        told, table = read_csv(content)
        assert any(f"quantity: {quantity}; unit: {unit}" in line for line in told)
        assert not [name for name in table if name.startswith("uncertainty")]
        np.testing.assert_allclose(table["value"], expected, rtol=1e-12)
        return
    if form == "npz":
        with np.load(io.BytesIO(content)) as archive:
            assert "uncertainty" not in archive
            values, told = archive["values"], json.loads(str(archive["metadata"]))
    else:
        told = json.loads(content)
        values = told["values"]
        assert told["uncertainty"] is None
    np.testing.assert_allclose(values, expected, rtol=1e-12)
    assert (told["quantity"], told["unit"]) == (quantity, unit)
    assert told["summary"]["maximum"] == pytest.approx(expected.max(), rel=1e-12)
    assert told["summary"]["uncertainty"]["rms"] == field.sigma.rms
    assert told["summary"]["uncertainty"]["contour_levels"] == []


def test_a_significance_that_does_not_exist_is_null():
    """An average over all directions but one that no row lies along leaves the mean, which was given as exact."""
    body = {**POINTS, "uncertainty": False, "quantity": "significance"}
    body["average"] = {"kind": "lateral", "normal": [9, 1, 0]}
    told = answered("points", body)
    assert told["values"] == [None] * 3
    assert any("3 values have the uncertainty 0" in note for note in told["notes"])
    assert told["summary"]["uncertainty"]["maximum"] == 0
    shown = answered("points", {**body, "quantity": "value", "uncertainty": True})
    assert shown["uncertainty"] == [0] * 3
    np.testing.assert_allclose(shown["values"], SET["mean"] / COEFFICIENTS.lattice.volume, rtol=1e-12)


def test_the_scale_of_a_set_has_its_own_uncertainty():
    given = {**without(without(SET, "sigma"), "phase_sigma_deg"), "scale_sigma": 0.07}
    told = answered("points", {**POINTS, "set": given})
    mean = given["mean"] / COEFFICIENTS.lattice.volume
    np.testing.assert_allclose(told["uncertainty"], 0.07 * np.abs(np.array(told["values"]) - mean), rtol=1e-9)
    assert any("7 %" in words for words in told["summary"]["uncertainty"]["contains"])


@pytest.mark.parametrize("value", [-0.1, 1.5, "much", None])
def test_a_scale_sigma_that_is_none_is_refused(value):
    with pytest.raises(Problem) as caught:
        intake.check("points", changed(POINTS, "set/scale_sigma", value), {}, max_body_bytes=2**20)
    assert caught.value.places[0].pointer == "/set/scale_sigma"


def test_equivalents_of_an_expanded_set_are_one_measurement():
    cell = {"a": 5.1, "b": 6.2, "c": 7.3, "alpha": 90, "beta": 90, "gamma": 90}
    given = {
        "cell": cell,
        "values": "structure_factor",
        "h": [1, 2, 1],
        "k": [1, 3, 0],
        "l": [2, 1, 2],
        "amplitude": [10.0, 8.0, 5.0],
        "phase_deg": [33.0, -71.0, 180.0],
        "sigma": [0.5, 0.4, 0.3],
        "scale_sigma": 0.02,
        "symmetry": {"space_group": "P 21 21 21"},
    }
    told = answered("points", {**POINTS, "set": given})
    group = space_group("P212121")
    assert any(f"related by {group.name} taken as one measurement (3 in all)" in words
               for words in told["summary"]["uncertainty"]["contains"])  # fmt: skip
    # One measurement after the other, with the density that each alone gives.
    positions = bodies.POINTS["positions"]
    variance = (0.02 * np.array(told["values"])) ** 2
    for row in range(3):
        alone = {name: [column[row]] if isinstance(column, list) else column for name, column in given.items()}
        density = np.array(answered("points", {"set": alone, "positions": positions})["values"])
        variance += (density * given["sigma"][row] / given["amplitude"][row]) ** 2
    np.testing.assert_allclose(told["uncertainty"], np.sqrt(variance), rtol=1e-9, atol=1e-12)


REFUSED = [
    ("no uncertainty in the set", "points", {**bodies.POINTS, "uncertainty": True}, "json", "/set/sigma"),
    ("nor for its σ", "points", {**bodies.POINTS, "quantity": "sigma"}, "npy", "/set/sigma"),
    ("response", "points", {**POINTS, "field": "response"}, "json", "/uncertainty"),
    ("twice", "points", {**POINTS, "quantity": "sigma"}, "json", "/uncertainty"),
    ("twice again", "points", {**POINTS, "quantity": "significance"}, "json", "/uncertainty"),
]


@pytest.mark.parametrize(
    ("product", "body", "form", "pointer"), [one[1:] for one in REFUSED], ids=[one[0] for one in REFUSED]
)
def test_refusals_point_at_their_cause(product, body, form, pointer):
    problem = refusal(product, body, form)
    assert problem.places[0].pointer == pointer


def test_a_single_array_has_no_room_for_both():
    problem = refusal("grid", GRID, "npy")
    assert problem.kind == "not-acceptable"
    assert "npz" in problem.detail
    assert "quantity sigma" in problem.detail


def test_limits_count_both_arrays():
    numbers = int(np.prod(bodies.GRID["shape"]))
    assert refusal("grid", GRID, max_json_values=2 * numbers - 1).kind == "too-costly"
    assert answered("grid", GRID, max_json_values=2 * numbers)["uncertainty"]
    assert answered("grid", {**GRID, "uncertainty": False}, max_json_values=numbers)["values"]
    assert answered("grid", {**GRID, "uncertainty": False, "quantity": "sigma"}, max_json_values=numbers)["values"]


def test_memory_is_limited_before_it_is_taken():
    cell = {"a": 40.0, "b": 50.0, "c": 60.0, "alpha": 80, "beta": 95, "gamma": 100}
    rows = np.unique(np.random.default_rng(2).integers(-30, 31, (8000, 3)), axis=0)
    rows = rows[rows[:, 2] > 0]
    given = {
        "cell": cell,
        "values": "density_coefficient",
        **{name: column.tolist() for name, column in zip("hkl", rows.T, strict=True)},
        "amplitude": [1.0] * len(rows),
        "phase_deg": [20.0] * len(rows),
        "sigma": [0.1] * len(rows),
    }
    body = {"set": given, "positions": [[0.1, 0.2, 0.3]]}
    limit = 2**20
    assert answered("points", body, max_memory_bytes=limit)["values"]
    problem = refusal("points", {**body, "uncertainty": True}, max_memory_bytes=limit)
    assert problem.kind == "too-costly"
    assert problem.places[0].pointer == "/uncertainty"


def test_over_http(client):
    answer = client.post("/v1/points", json=POINTS)
    assert answer.status_code == 200
    expected = evaluate(COEFFICIENTS, WHERE, uncertainty=True)
    np.testing.assert_allclose(answer.json()["uncertainty"], expected.sigma.values, rtol=1e-9)
    both = client.post("/v1/points", json=changed(POINTS, "quantity", "sigma"))
    assert_problem(both, 422, "/uncertainty")
    array = client.post("/v1/grid", json=GRID, headers={"Accept": "application/x-npy"})
    assert_problem(array, 406)
    unknown = client.post("/v1/points", json=changed(bodies.POINTS, "quantity", "doubt"))
    assert_problem(unknown, 422, "/quantity")
