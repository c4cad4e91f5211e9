from __future__ import annotations

import json

import pytest
from pydantic import BaseModel, ConfigDict, ValidationError

from engine import errors
from engine.errors import EngineError, InputError, TooLargeError
from service import pipeline
from service.intake import JSON
from service.problems import ERRORS_NAMED, LONGEST_PART, TITLES, Place, Problem, at, from_validation, located, pointer
from service.settings import Settings
from service.spool import Spool
from service.wall.worker import _serve
from tests.service import bodies


def subclasses(base):
    return [base, *(below for child in base.__subclasses__() for below in subclasses(child))]


def expected(kind):
    if issubclass(kind, TooLargeError):
        return 422, "too-costly"
    if issubclass(kind, InputError):
        return 422, "invalid-request"
    return 500, "internal"


@pytest.mark.parametrize("kind", subclasses(EngineError), ids=lambda kind: kind.__name__)
def test_every_fault_of_the_engine_is_mapped(monkeypatch, kind):
    def fails(*_, **__):
        raise kind("samples", "is at fault", "mend it") if issubclass(kind, InputError) else kind("at fault")

    monkeypatch.setattr(pipeline, "prepare", fails)
    with Spool.unnamed() as body:
        body.append(json.dumps(bodies.PROFILE).encode())
        message, made = _serve({"product": "profile", "content_type": JSON, "form": "npy"}, body, Settings())
    made.close()
    problem = Problem.from_message(message["problem"])
    assert (problem.status, problem.kind) == expected(kind)
    assert bool(problem.places) is (problem.status == 422)


def test_walk_over_faults_is_complete():
    named = {value for value in vars(errors).values() if isinstance(value, type) and issubclass(value, EngineError)}
    assert set(subclasses(EngineError)) >= named >= {EngineError, InputError, TooLargeError}


@pytest.mark.parametrize("kind", TITLES)
def test_every_kind_has_a_status_and_a_title(kind):
    problem = Problem(kind, "Detail.")
    assert 400 <= problem.status < 600
    assert problem.document() == {
        "type": f"urn:densityloom:problem:{kind}",
        "title": TITLES[kind][1],
        "status": problem.status,
        "detail": "Detail.",
    }
    assert TITLES[kind][1]


def test_titles_differ():
    assert len({title for _, title in TITLES.values()}) == len(TITLES)


def test_problem_survives_the_way_between_processes():
    problem = Problem("busy", "Wait.", (Place("/a", "is", "do"),), {"Retry-After": "3"})
    again = Problem.from_message(json.loads(json.dumps(problem.to_message())))
    assert again == problem
    assert json.loads(again.encode())["errors"] == [{"pointer": "/a", "reason": "is", "cure": "do"}]
    assert str(again) == "Wait."


def test_pointer():
    assert pointer([]) == ""
    assert pointer(["set", "l", 3]) == "/set/l/3"
    assert pointer(["a/b~c"]) == "/a~1b~0c"
    assert len(pointer(["x" * 10**6, 1])) == LONGEST_PART + 3


def test_problem_of_one_place():
    problem = at(("set", "l"), "is absent", "give the column l, please; F(000) aside")
    assert problem.detail == "/set/l: is absent. Give the column l, please; F(000) aside."
    assert problem.places == (Place("/set/l", "is absent", "give the column l, please; F(000) aside"),)
    assert at((), "is odd", "mend it").detail.startswith("the request: is odd")


def test_located_turns_a_fault_into_a_place():
    with pytest.raises(Problem) as caught, located("set"):
        raise InputError(("sigma",), "is negative", "mend it", rows=(17, 18))
    assert caught.value.places[0].pointer == "/set/sigma/17"
    with pytest.raises(Problem) as caught, located("set"):
        raise InputError((), "rows differ", "mend it", rows=(1, 2))
    assert caught.value.places[0].pointer == "/set"
    renamed = {"edge_1": ("edges", 0)}
    with pytest.raises(Problem) as caught, located(renamed=renamed):
        raise InputError(("edge_1", 2), "is not finite", "mend it")
    assert caught.value.places[0].pointer == "/edges/0/2"
    with pytest.raises(Problem) as caught, located():
        raise TooLargeError("samples", "is much", "ask for less")
    assert caught.value.kind == "too-costly"


def test_located_lets_other_faults_pass():
    with pytest.raises(ZeroDivisionError), located("set"):
        raise ZeroDivisionError


class Inner(BaseModel):
    model_config = ConfigDict(strict=True)
    number: float


class Model(BaseModel):
    model_config = ConfigDict(extra="forbid", strict=True)
    inner: Inner
    rows: list[int] = []


def complaints(document):
    with pytest.raises(ValidationError) as caught:
        Model.model_validate(document)
    return from_validation(caught.value)


def test_complaints_of_a_schema_become_places():
    problem = complaints({"inner": {"number": "12"}, "other": 1})
    assert problem.status == 422
    assert [place.pointer for place in problem.places] == ["/inner/number", "/other"]
    assert "12" not in problem.detail
    assert "(1 more under errors)" in problem.detail
    assert problem.places[1].cure == "remove it, or check its spelling"


def test_complaint_about_an_object_names_no_class_of_ours():
    problem = complaints({"inner": [1]})
    assert problem.places == (Place("/inner", "is not an object", "give a JSON object"),)


def test_complaints_are_counted():
    problem = complaints({"inner": {"number": 1.0}, "rows": ["x"] * 1000})
    assert len(problem.document()["errors"]) == 20


def test_places_beyond_a_number_are_not_told():
    problem = Problem("invalid-request", "Much.", tuple(Place(f"/{n}", "is", "do") for n in range(30)))
    assert len(problem.document()["errors"]) == len(problem.to_message()["places"]) == ERRORS_NAMED
