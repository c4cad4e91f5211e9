from __future__ import annotations

import numpy as np
import pytest

from engine.features import integrals as engine
from engine.fields import Treatment
from engine.windows import Window
from tests.service import bodies
from tests.service.analyses.asked import CRYSTAL, FILM, GOOD, REGIONS, numbers, pointer, report, table

SET = bodies.coefficients(CRYSTAL)
LATTICE = SET.lattice
DIRECT = [
    engine.slab(LATTICE, [0, 0, 1], 0, 2.5),
    engine.slab(LATTICE, [1, 1, 0], -1.5, 0.5, per="cell"),
    engine.segment(LATTICE, [0, 0, 0], [0.5, 0.25, 0]),
    engine.parallelepiped(LATTICE, [[0.5, 0, 0], [0, 0.5, 0], [0, 0.1, 0.5]], origin=[0.1, 0, 0]),
    engine.parallelepiped(LATTICE, [[0.5, 0, 0], [0, 0.5, 0]], centre=[0.1, 0, 0]),
    engine.ball(LATTICE, [0.5, 0.5, 0.5], 1.2),
]
MEMBERS = {
    "integral": "values",
    "sigma": "sigma",
    "measure": "measures",
    "mean": "means",
    "mean_sigma": "mean_sigma",
    "region": "regions",
    "unit": "units",
    "measure_unit": "measure_units",
}


def test_json_and_csv_hold_the_numbers_of_the_engine(client):
    made = engine.integrals(SET, DIRECT)
    answer = client.post("/v1/integrals", json=GOOD["integrals"]).json()
    for member, name in MEMBERS.items():
        assert [one[member] for one in answer["integrals"]] == list(getattr(made, name)), member
    np.testing.assert_array_equal(answer["covariance"], made.covariance)
    assert [one["label"] for one in answer["integrals"]] == ["lower half", *(f"region {n}" for n in range(2, 7))]
    assert {one["scattering_length"] for one in answer["integrals"]} == {None}
    head, columns = table(client.post("/v1/integrals?format=csv", json=GOOD["integrals"]).content)
    assert head[0] == "integrals; unit: e/Å³"
    assert numbers(columns["integral"]) == made.values.tolist()
    assert numbers(columns["mean_sigma"]) == made.mean_sigma.tolist()
    assert "scattering_length" not in columns


def test_a_slab_of_a_stack_by_hand():
    """∫ from a to b of Σ n_l exp(2πi l z/P), by its antiderivative."""
    start, end = -1.3, 4.2
    body = {"set": FILM, "regions": [{"kind": "slab", "from": start, "to": end}]}
    (made,) = report("integrals", body).document["integrals"]
    period = bodies.PERIOD
    expected = FILM["mean"] / period * (end - start)
    for order, amplitude, phase in zip(FILM["l"], FILM["amplitude"], FILM["phase_deg"], strict=True):
        wave = 2 * np.pi * order / period
        strength = 2 * amplitude * np.cos(np.deg2rad(phase)) / period
        expected += strength * (np.sin(wave * end) - np.sin(wave * start)) / wave
    assert made["integral"] == pytest.approx(expected, rel=1e-12)
    slopes = [
        2 / period * np.cos(np.deg2rad(phase)) * (np.sin(wave * end) - np.sin(wave * start)) / wave
        for phase, wave in zip(FILM["phase_deg"], 2 * np.pi * np.array(FILM["l"]) / period, strict=True)
    ]
    assert made["sigma"] == pytest.approx(np.linalg.norm(np.array(slopes) * FILM["sigma"]), rel=1e-9)
    assert (made["unit"], made["measure"], made["measure_unit"]) == ("e/Å²", pytest.approx(5.5), "Å")


def test_treatment_and_coordinates_reach_the_engine():
    body = {
        "set": CRYSTAL,
        "coordinates": "cartesian",
        "window": {"kind": "lanczos"},
        "regions": [{"kind": "ball", "centre": [1.0, 2.0, 0.5], "radius": 1.0}],
    }
    made = report("integrals", body).document["integrals"][0]["integral"]
    region = engine.ball(LATTICE, [1.0, 2.0, 0.5], 1.0, coordinates="cartesian")
    assert made == engine.integrals(SET, [region], Treatment(window=Window("lanczos"))).values[0]


def test_scattering_lengths():
    body = {"set": {**FILM, "unit": "10⁻⁶ Å⁻²"}, "regions": [{"kind": "slab", "from": 0, "to": 3}]}
    (made,) = report("integrals", body).document["integrals"]
    assert made["scattering_length"] == pytest.approx(0.1 * made["integral"])
    assert made["scattering_length_sigma"] == pytest.approx(0.1 * made["sigma"])
    assert made["scattering_length_unit"] == "fm/Å²"


def test_without_uncertainties_none_are_made_up():
    made = report("integrals", bodies.without(GOOD["integrals"], "set/sigma"))
    assert made.document["covariance"] is None
    assert made.document["integrals"][0]["sigma"] is None
    assert "sigma" not in dict(made.table)


def among(**region):
    """The region at fault comes second: the place must say so."""
    return {"set": CRYSTAL, "regions": [REGIONS[0], region]}


SLAB = {"kind": "slab", "normal": [0, 0, 1], "from": 0, "to": 1}
LINE = {"kind": "line", "from": [0, 0, 0], "to": [0, 0, 1]}
BOX = {"kind": "box", "origin": [0, 0, 0], "edges": [[1, 0, 0]]}
BALL = {"kind": "ball", "centre": [0, 0, 0], "radius": 1.0}
REFUSED = [
    ({**SLAB, "from": None}, "/from"),
    ({**SLAB, "to": None}, "/to"),
    ({**SLAB, "normal": None}, "/normal"),
    ({**SLAB, "normal": [0, 0, 0]}, "/normal"),
    ({**SLAB, "normal": [0, 1]}, "/normal"),
    ({**SLAB, "from": [0, 0, 0]}, "/from"),
    ({**SLAB, "to": 0}, "/to"),
    ({**SLAB, "to": -1}, "/to"),
    ({**SLAB, "from": "a"}, "/from"),
    ({**SLAB, "from": 1e300}, "/from"),
    ({**SLAB, "radius": 1.0}, "/radius"),
    ({**SLAB, "per": "volume"}, "/per"),
    ({**LINE, "from": 0}, "/from"),
    ({**LINE, "to": 1.5}, "/to"),
    ({**LINE, "to": [0, 0, 0]}, "/to"),
    ({**LINE, "to": [0, 1]}, "/to"),
    ({**LINE, "per": "cell"}, "/per"),
    ({**LINE, "normal": [0, 0, 1]}, "/normal"),
    ({**BOX, "edges": None}, "/edges"),
    ({**BOX, "origin": None}, "/origin"),
    ({**BOX, "centre": [0, 0, 0]}, "/origin"),
    ({**BOX, "edges": [[1, 0, 0], [2, 0, 0]]}, "/edges"),
    ({**BOX, "edges": [[1, 0, 0], [0, 0, 0]]}, "/edges/1"),
    ({**BOX, "edges": [[1, 0]]}, "/edges"),
    ({**BOX, "from": 0}, "/from"),
    ({**BALL, "radius": None}, "/radius"),
    ({**BALL, "centre": None}, "/centre"),
    ({**BALL, "centre": [0, 0]}, "/centre"),
    ({**BALL, "radius": -1.0}, "/radius"),
    ({**BALL, "edges": [[1, 0, 0]]}, "/edges"),
    ({"kind": "cone", "radius": 1.0}, "/kind"),
    ({"radius": 1.0}, "/kind"),
]


@pytest.mark.parametrize(("region", "place"), REFUSED)
def test_regions_at_fault(region, place):
    assert pointer("integrals", among(**region)) == f"/regions/1{place}"


@pytest.mark.parametrize(
    ("body", "place"),
    [
        ({"set": CRYSTAL, "regions": []}, "/regions"),
        ({"set": CRYSTAL}, "/regions"),
        ({"set": CRYSTAL, "regions": [BALL], "field": "gradient"}, "/field"),
        ({"set": bodies.ABSORBING, "regions": [BALL]}, "/set/density"),
        ({"set": {**CRYSTAL, "mean": None, "phase_deg": [None] * 40}, "regions": [BALL]}, "/set/phase_deg"),
        ({"set": CRYSTAL, "regions": [BALL], "apply_merit": True}, "/apply_merit"),
        ({"set": CRYSTAL, "regions": [BALL], "average": {"kind": "slab"}}, "/average/thickness"),
    ],
)
def test_refusals(body, place):
    assert pointer("integrals", body) == place
