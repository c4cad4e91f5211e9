from __future__ import annotations

import numpy as np
import pytest

from engine.features import extrema as engine_extrema
from engine.features.extrema import find_extrema
from engine.features.geometry import angles, distances
from engine.features.neighbours import neighbours
from engine.features.regions import ball_region, box_region
from engine.fields import Treatment
from engine.windows import Window
from tests.service import bodies
from tests.service.analyses import asked
from tests.service.analyses.asked import FEW, FILM, GOOD, LIMITS, numbers, pointer, refusal, report, table

FEW_SET = bodies.coefficients(FEW)
KINDS = ("maximum", "minimum", "saddle")
BODY = GOOD["extrema"]


def test_json_holds_the_numbers_of_the_engine(client):
    answer = client.post("/v1/extrema", json=BODY).json()
    made = find_extrema(FEW_SET, kinds=KINDS)
    assert made.count >= 4
    assert answer["found"] == made.found == len(answer["extrema"])
    assert [one["number"] for one in answer["extrema"]] == list(range(1, made.count + 1))
    assert [one["kind"] for one in answer["extrema"]] == list(made.kind)
    for name in (
        "fractional",
        "cartesian",
        "value",
        "sigma",
        "significance",
        "position_sigma",
        "largest_position_sigma",
        "curvatures",
        "directions",
        "multiplicity",
    ):
        np.testing.assert_array_equal([one[name] for one in answer["extrema"]], getattr(made, name), err_msg=name)
    assert answer["cell"] == {"negative_curvatures": [0, 1, 2, 3], "counts": list(made.cell.counts)}
    counts = answer["cell"]["counts"]
    assert counts[0] - counts[1] + counts[2] - counts[3] == 0
    assert answer["uncertainty"]["contains"] == list(made.contains)


def test_distances_and_angles_count_from_one(client):
    answer = client.post("/v1/extrema", json=BODY).json()
    made = find_extrema(FEW_SET, kinds=KINDS)
    named, near = distances(made, [[0, 1]]), neighbours(made, 6.0)
    first, *others = answer["distances"]
    assert (first["first"], first["second"], first["distance"]) == (1, 2, named.value[0])
    assert [one["distance"] for one in others] == near.value.tolist()
    assert [one["first"] for one in others] == (near.first + 1).tolist()
    for one in answer["distances"]:
        assert np.linalg.norm(one["vector"]) == pytest.approx(one["distance"])
        assert one["sigma"] > 0
    (angle,) = answer["angles"]
    direct = angles(made, [[0, 1, 2]])
    assert (angle["first"], angle["vertex"], angle["last"]) == (1, 2, 3)
    assert (angle["angle_deg"], angle["sigma_deg"]) == (direct.value[0], direct.sigma[0])


def test_csv_holds_the_same_numbers(client):
    answer = client.post("/v1/extrema?format=csv", json=BODY)
    head, columns = table(answer.content)
    made = find_extrema(FEW_SET, kinds=KINDS)
    assert head[0] == "extrema; unit: e/Å³"
    assert f"found: {made.found}" in head
    assert columns["kind"] == list(made.kind)
    assert numbers(columns["x_2"]) == made.fractional[:, 1].tolist()
    assert numbers(columns["z_angstrom"]) == made.cartesian[:, 2].tolist()
    assert numbers(columns["z_sigma"]) == made.position_sigma[:, 2].tolist()
    assert numbers(columns["curvature_1"]) == made.curvatures[:, 0].tolist()
    assert numbers(columns["site_order"]) == made.site_order.tolist()


def test_without_uncertainties_none_are_made_up():
    plain = bodies.without({"set": FEW}, "set/sigma")
    made = report("extrema", plain)
    assert made.document["uncertainty"] is None
    assert {one["sigma"] for one in made.document["extrema"]} == {None}
    assert "sigma" not in dict(made.table)
    assert "x_sigma" not in dict(made.table)


def test_options_reach_the_engine():
    body = {
        "set": FEW,
        "kinds": ["minimum", "saddle"],
        "window": {"kind": "lanczos"},
        "spacing": 0.5,
        "most": 1,
        "greatest_value": 1e3,
        "least_value": -1e3,
        "least_significance": 0.5,
    }
    made = report("extrema", body).document
    direct = find_extrema(
        FEW_SET,
        Treatment(window=Window("lanczos")),
        kinds=("minimum", "saddle"),
        spacing=0.5,
        most=1,
        greatest_value=1e3,
        least_value=-1e3,
        least_significance=0.5,
    )
    assert [one["value"] for one in made["extrema"]] == direct.value.tolist()
    assert made["found"] == direct.found > len(made["extrema"])
    assert made["cell"] is None
    assert any("lanczos" in word.lower() or "Lanczos" in word for word in made["applied"])


def test_bounds_of_the_value():
    every = [one["value"] for one in report("extrema", {"set": FEW, "kinds": ["saddle"]}).document["extrema"]]
    low, high = sorted(every)[1], sorted(every)[-2]
    bounded = {"set": FEW, "kinds": ["saddle"], "least_value": low - 1e-6, "greatest_value": high + 1e-6}
    assert [one["value"] for one in report("extrema", bounded).document["extrema"]] == sorted(every)[1:-1]


@pytest.mark.parametrize("coordinates", ["fractional", "cartesian"])
def test_regions(coordinates):
    lattice = FEW_SET.lattice
    box = {"origin": [0, 0, 0], "edges": [[2.4, 0, 0], [0, 2.4, 0], [0, 0, 6.0]]}
    if coordinates == "fractional":
        box = {"origin": [0, 0, 0], "edges": [[1.4, 0, 0], [0, 1, 0], [0, 0, 1]]}
    body = {"set": FEW, "kinds": list(KINDS), "coordinates": coordinates}
    direct = find_extrema(
        FEW_SET, kinds=KINDS, region=box_region(lattice, box["origin"], box["edges"], coordinates=coordinates)
    )
    made = report("extrema", {**body, "region": box}).document
    assert [one["fractional"] for one in made["extrema"]] == direct.fractional.tolist()
    centre = [0.3, 0.2, 0.1] if coordinates == "fractional" else [1.0, 1.0, 1.0]
    direct = find_extrema(FEW_SET, kinds=KINDS, region=ball_region(lattice, centre, 4.0, coordinates=coordinates))
    made = report("extrema", {**body, "region": {"centre": centre, "radius": 4.0}}).document
    assert [one["fractional"] for one in made["extrema"]] == direct.fractional.tolist()
    assert made["extrema"]


def changed(**members):
    return {"set": FEW, **members}


REFUSED = [
    ("number beyond the list", {**BODY, "distances": [[1, 2], [1, 999]]}, "/distances/1"),
    ("number beyond 64 bits", {**BODY, "distances": [[1, 2**70]]}, "/distances/0"),
    ("number of an angle", {**BODY, "angles": [[1, 2, 999]]}, "/angles/0"),
    ("one position twice", {**BODY, "distances": [[1, 2], [2, 2]]}, "/distances/1"),
    ("leg without length", {**BODY, "angles": [[1, 2, 3], [1, 1, 2]]}, "/angles/1"),
    ("numbers from zero", {**BODY, "distances": [[0, 1]]}, "/distances/0/0"),
    ("three numbers for a distance", {**BODY, "distances": [[1, 2, 3]]}, "/distances/0"),
    ("nothing found to name", changed(least_value=1e9, distances=[[1, 2]]), "/distances/0"),
    ("angles of a stack", {"set": FILM, "angles": [[1, 2, 1]]}, "/angles"),
    ("saddles of a stack", {"set": FILM, "kinds": ["maximum", "saddle"]}, "/kinds/1"),
    ("unknown kind", changed(kinds=["peak"]), "/kinds/0"),
    ("no kinds", changed(kinds=[]), "/kinds"),
    ("neighbours in a region", changed(within=2.0, region={"centre": [0, 0, 0], "radius": 2.0}), "/within"),
    ("neighbours without end", changed(within=1e8), "/within"),
    ("region of nothing", changed(region={}), "/region"),
    ("region of both forms", changed(region={"origin": [0, 0, 0], "radius": 1.0}), "/region"),
    ("half a ball", changed(region={"radius": 1.0}), "/region/centre"),
    ("ball about null", changed(region={"radius": 1.0, "centre": None}), "/region/centre"),
    ("half a box", changed(region={"origin": [0, 0, 0]}), "/region/edges"),
    ("ball of another dimension", changed(region={"centre": [0, 0], "radius": 1.0}), "/region/centre"),
    ("two edges", changed(region={"origin": [0, 0, 0], "edges": [[1, 0, 0], [0, 1, 0]]}), "/region/edges"),
    (
        "flat box",
        changed(region={"origin": [0, 0, 0], "edges": [[1, 0, 0], [0, 1, 0], [1, 1, 0]]}),
        "/region/edges",
    ),
    ("region without end", changed(region={"centre": [0, 0, 0], "radius": 1e7}), "/region"),
    ("coarse search", changed(spacing=9.0), "/spacing"),
    ("gradient", changed(field="gradient"), "/field"),
    ("squares", changed(field="autocorrelation"), "/field"),
    ("flat field", changed(average={"kind": "lateral", "normal": [0, 0, 1]}), "/field"),
    ("complex", {"set": bodies.ABSORBING}, "/set/density"),
    ("no phases", {"set": {**FEW, "mean": None, "phase_deg": [None] * 5}}, "/set/phase_deg"),
    ("significance of nothing", bodies.without(changed(least_significance=3.0), "set/sigma"), "/least_significance"),
    ("merit of nothing", changed(apply_merit=True), "/apply_merit"),
    ("self term", changed(self_term=1.0), "/self_term"),
    ("gaussian without b", changed(window={"kind": "gaussian"}), "/window/b"),
]


@pytest.mark.parametrize(("body", "place"), [pytest.param(*row[1:], id=row[0]) for row in REFUSED])
def test_refusals(body, place):
    assert pointer("extrema", body) == place


@pytest.mark.parametrize("spacing", [0.01, 1e-8, 1e-300])
def test_memory_is_refused_before_it_is_taken(monkeypatch, spacing):
    monkeypatch.setattr(engine_extrema, "critical_points", lambda *_, **__: pytest.fail("the search began"))
    problem = refusal("extrema", changed(spacing=spacing), asked.Limits(max_bytes=2**21, max_rows=50, max_values=1000))
    assert (problem.kind, problem.places[0].pointer) == ("too-costly", "/spacing")


def test_default_search_is_bounded_too():
    problem = refusal("extrema", changed(), asked.Limits(max_bytes=2**16, max_rows=50, max_values=1000))
    assert (problem.kind, problem.places[0].pointer) == ("too-costly", "/spacing")


def test_long_reports_are_refused():
    problem = refusal("extrema", BODY, asked.Limits(max_bytes=2**28, max_rows=50, max_values=10))
    assert (problem.kind, problem.places[0].pointer) == ("too-costly", "/most")
    found = report("extrema", BODY)
    held = len(found.document["extrema"]) * 35
    assert len(found.document["distances"]) * 8 > held, "the case needs more distances than extrema"
    problem = refusal("extrema", BODY, asked.Limits(max_bytes=2**28, max_rows=50, max_values=held))
    assert (problem.kind, problem.places[0].pointer) == ("too-costly", "/within")


def test_progress_is_passed_on():
    told = []
    report(
        "extrema",
        changed(),
        asked.Limits(
            **{name: getattr(LIMITS, name) for name in ("max_bytes", "max_rows", "max_values")},
            progress=lambda done, total: told.append((done, total)),
        ),
    )
    assert told
    assert told[-1][0] == told[-1][1]
