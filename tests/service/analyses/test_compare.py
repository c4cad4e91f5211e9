from __future__ import annotations

import numpy as np
import pytest

from engine.features.comparison import compare
from service.analyses.compare import NUMBERS
from tests.service import bodies
from tests.service.analyses import asked
from tests.service.analyses.asked import CRYSTAL, FILM, GOOD, LATER, numbers, pointer, refusal, report, table

ONE, TWO = bodies.coefficients(FILM), bodies.coefficients(LATER)


def test_json_and_csv_hold_the_numbers_of_the_engine(client):
    made = compare(ONE, TWO)
    answer = client.post("/v1/compare", json=GOOD["compare"]).json()
    for name in NUMBERS:
        assert answer[name] == getattr(made, name), name
    (shell,) = answer["shells"]
    assert (shell["both"], shell["correlation"]) == (4, made.shells.correlation[0])
    head, columns = table(client.post("/v1/compare?format=csv", json=GOOD["compare"]).content)
    assert f"matched: {made.matched}" in head
    assert [float(line.split(": ")[1]) for line in head if line.startswith("scale:")] == [made.scale]
    assert numbers(columns["d_min"]) == made.shells.d_min.tolist()


def test_figures_by_hand():
    told = report("compare", GOOD["compare"]).document
    signs = np.cos(np.deg2rad(FILM["phase_deg"]))
    one, two = (signs * given["amplitude"] / bodies.PERIOD for given in (FILM, LATER))
    scale = one @ two / (two @ two)
    assert told["scale"] == pytest.approx(scale)
    assert told["correlation"] == pytest.approx(one @ two / np.sqrt((one @ one) * (two @ two)))
    assert told["rms_difference"] == pytest.approx(np.sqrt(2 * ((one - two) ** 2).sum()))
    assert told["r_value"] == pytest.approx(np.abs(one - scale * two).sum() / np.abs(one).sum())
    assert (told["mean_cosine"], told["mean_phase_difference"]) == (pytest.approx(1), pytest.approx(0, abs=1e-6))


def test_terms_and_shells_reach_the_engine():
    fewer = {**bodies.without({"set": LATER}, "set/sigma")["set"], "l": [2, 3, 4, 6]}
    body = {"set": FILM, "with": fewer, "terms": "common", "shells": 3}
    told = report("compare", body).document
    direct = compare(ONE, bodies.coefficients(fewer), terms="common", shells=3, names=("set", "with"))
    assert (told["matched"], told["first_only"], told["second_only"]) == (3, 1, 1)
    assert told["correlation"] == direct.correlation
    assert len(told["shells"]) == 3


def test_zero_densities_have_no_agreement():
    """0/0 is no number, neither in JSON nor in a table."""
    nothing = {**FILM, "amplitude": [0.0] * 4, "mean": 0.0}
    content = asked.answered("compare", {"set": FILM, "with": nothing})
    assert b"NaN" not in content
    head, _ = table(asked.answered("compare", {"set": FILM, "with": nothing}, "csv"))
    assert "correlation: null" in head


WITH = "/with"


@pytest.mark.parametrize(
    ("members", "place"),
    [
        ({"with": None}, WITH),
        ({"with": {**LATER, "cell": {"period": 20.0}}}, "/with/cell"),
        ({"with": CRYSTAL}, "/with/cell"),
        ({"with": {**LATER, "amplitude": [1, 2, -3, 4]}}, "/with/amplitude/2"),
        ({"with": {**LATER, "amplitude": [1, 2, 3]}}, "/with/amplitude"),
        ({"with": {**LATER, "l": None}}, "/with/l"),
        ({"with": bodies.without({"a": LATER}, "a/cell")["a"]}, "/with/cell"),
        ({"with": {**LATER, "phase_deg": [None] * 4, "mean": None}}, "/with/phase_deg"),
        ({"set": {**FILM, "phase_deg": [None] * 4, "mean": None}}, "/set/phase_deg"),
        ({"with": {**LATER, "widow": 1}}, "/with/widow"),
        ({"with": {**LATER, "density": "complex"}}, WITH),
        ({"set": {**FILM, "density": "complex"}}, "/set"),
        ({"with": {**LATER, "l": [5, 6, 7, 8]}, "terms": "common"}, "/set"),
        ({"shells": 99}, "/shells"),
        ({"terms": "some"}, "/terms"),
        ({"resolution": {"d_min": 30.0}}, "/set"),
        ({"resolution": {"d_min": 9, "d_max": 3}}, "/resolution/d_min"),
        ({"missing_phase": "refuse", "with": {**LATER, "phase_deg": [0, None, 0, 0]}}, "/with/phase_deg/1"),
    ],
)
def test_refusals(members, place):
    assert pointer("compare", {**GOOD["compare"], **members}) == place


def test_rows_of_the_second_set_are_limited():
    problem = refusal("compare", GOOD["compare"], asked.Limits(max_bytes=2**20, max_rows=3, max_values=1000))
    assert (problem.kind, problem.places[0].pointer) == ("too-costly", "/with/l")
