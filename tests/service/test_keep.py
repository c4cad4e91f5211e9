from __future__ import annotations

import json

import pytest

from service import intake
from service.keep import parcel
from service.parts import Part
from service.problems import Problem
from service.settings import Settings
from service.store.content import content_of
from tests.service import bodies


def made(body, files=None, **settings):
    _, request = intake.check("keep", body, files or {}, max_body_bytes=2**20)
    return parcel(request, Settings(**settings)), request


def test_a_parcel_holds_what_was_sent_and_what_it_is_worth():
    found, request = made({"set": bodies.CRYSTAL, "name": "crystal", "tags": ["a"]})
    assert found.content == content_of(request.set)
    assert (found.labels.name, found.labels.tags) == ("crystal", ("a",))
    facts = found.facts
    assert (facts.kind, facts.dimension, facts.rows, facts.coefficients) == ("columns", 3, 40, 41)
    summary = json.loads(found.summary)
    assert summary["cell"]["angles"] == pytest.approx([82, 97, 105])
    assert summary["cell"]["lengths"] == pytest.approx([5.1, 6.2, 7.3])
    assert summary["coefficients"]["zero_term"] == "given"
    assert summary["columns"] == []
    assert summary["inspection"] is None
    assert facts.d_min == summary["d_min"] < summary["d_max"] == facts.d_max


@pytest.mark.parametrize(
    ("body", "name"),
    [
        (bodies.FILM, "layer stack 17.4 Å"),
        (bodies.SHEET, "planar lattice 31 × 27 Å"),
        (bodies.CRYSTAL, "crystal 5.1 × 6.2 × 7.3 Å"),
    ],
)
def test_a_set_without_a_name_is_called_by_its_cell(body, name):
    assert made({"set": body})[0].labels.name == name


def warnings(body):
    return " ".join(json.loads(made({"set": body})[0].summary)["warnings"])


def test_warnings_say_what_to_know_before_looking():
    film = {**bodies.FILM, "sigma": [1, 1, 1, 1]}
    assert "zero term is absent" in warnings(film)
    assert "Phases are taken as exact" in warnings(film)
    assert "no standard uncertainties" in warnings(bodies.FILM)
    assert "scale is arbitrary" in warnings(bodies.SHEET)
    assert "possible down to" in warnings(bodies.CRYSTAL)
    assert "1 of 4 coefficients have no phase" in warnings({**film, "phase_deg": [None, 0, 0, 0]})
    assert "No coefficient has a phase" in warnings({**film, "phase_deg": [None] * 4})
    good = {**film, "phase_sigma_deg": [1] * 4, "mean": 0.5}
    assert warnings(good) == ""


def test_a_set_that_cannot_be_summed_is_refused():
    with pytest.raises(Problem, match="/set/h"):
        made({"set": {**bodies.FILM, "cell": bodies.TRICLINIC}})


def test_limits_hold():
    with pytest.raises(Problem, match="more than the limit"):
        made({"set": bodies.CRYSTAL}, max_coefficients=5)


TABLE = b"h,k,l,intensity,intensity_sigma\n" + b"".join(
    f"{h},{k},{l},{10 + h + 2 * k + 3 * l},1\n".encode() for h in range(-2, 3) for k in range(3) for l in range(1, 4)
)


def test_a_file_is_prepared_and_inspected():
    body = {"set": {"values": "structure_factor", "cell": bodies.TRICLINIC}}
    found, _ = made(body, {"reflections": Part("text/csv", TABLE, "run 7.csv")})
    assert (found.facts.kind, found.facts.file, found.labels.name) == ("reflections", "run 7.csv", "run 7.csv")
    summary = json.loads(found.summary)
    assert summary["inspection"]["file"]["rows_read"] == 45
    assert "No coefficient has a phase" in " ".join(summary["warnings"])


@pytest.mark.parametrize(
    "labels",
    [{"name": ""}, {"name": "a\nb"}, {"name": "x" * 201}, {"tags": [""]}, {"tags": ["a,b"]}, {"tags": ["a"] * 21}],
)
def test_labels_are_bounded(labels):
    with pytest.raises(Problem):
        made({"set": bodies.FILM, **labels})
