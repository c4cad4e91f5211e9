from __future__ import annotations

import json
from typing import Annotated, Literal

import pytest
from pydantic import BaseModel, ConfigDict, Field, ValidationError

from engine import errors
from engine.errors import EngineError, InputError, TooLargeError
from service import pipeline
from service.intake import JSON
from service.problems import (
    ERRORS_NAMED,
    LONGEST_PART,
    TITLES,
    Place,
    Problem,
    at,
    below,
    from_validation,
    located,
    moved,
    pointer,
)
from service.settings import Settings
from service.spool import Spool
from service.store.shelf import Shelf
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
        asked = {"product": "profile", "content_type": JSON, "form": "npy", "members": {}}
        message, made = _serve(asked, body, Shelf(Settings()), Settings())
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


def relocated(context, *places, detail=None):
    """A problem of these places, raised within a context."""
    found = tuple(Place(one, "is at fault", "mend it") for one in places)
    with pytest.raises(Problem) as caught, context:
        raise Problem("too-costly", detail or f"{places[0]}: is at fault. Mend it.", found, {"Retry-After": "1"})
    return caught.value


def test_a_further_set_is_told_where_it_stands():
    problem = relocated(moved("members", 3, "set"), "/set", "/set/h/2", "/settings", "/missing_phase")
    assert [one.pointer for one in problem.places] == [
        "/members/3/set",
        "/members/3/set/h/2",
        "/settings",
        "/missing_phase",
    ]
    assert problem.detail == "/members/3/set: is at fault. Mend it."
    assert (problem.kind, problem.headers) == ("too-costly", {"Retry-After": "1"})


@pytest.mark.parametrize(
    ("detail", "expected"),
    [
        ("/set/h: is absent.", "/with/h: is absent."),
        ("/set: is absent.", "/with: is absent."),
        ("/set_aside: is absent.", "/set_aside: is absent."),
        ("the set is absent", "the set is absent"),
        ("/setting/h: no", "/setting/h: no"),
    ],
)
def test_details_move_with_their_place(detail, expected):
    assert relocated(moved("with"), "/elsewhere", detail=detail).detail == expected


def test_names_of_places_are_escaped():
    assert relocated(moved("a/b", "c~d"), "/set/h").places[0].pointer == "/a~1b/c~0d/h"


def test_members_of_an_inner_object():
    problem = relocated(below("profile"), "/to", "/from")
    assert [one.pointer for one in problem.places] == ["/profile/to", "/profile/from"]
    assert problem.detail == "/profile/to: is at fault. Mend it."
    with pytest.raises(Problem, match=r"^Too much\.$"), below("profile"):
        raise Problem("too-costly", "Too much.")


def test_what_is_no_problem_passes():
    for context in (moved("with"), below("profile")):
        with pytest.raises(ZeroDivisionError), context:
            raise ZeroDivisionError


class Several(BaseModel):
    model_config = ConfigDict(extra="forbid", strict=True)

    level: Literal["zero", "mean"] | float = 0.0
    place: Annotated[float, Field(le=5)] | list[float] = 0.0
    flag: bool | None = None


@pytest.mark.parametrize(
    ("given", "pointers"),
    [
        ({"level": "high"}, ["/level"]),
        ({"place": "x"}, ["/place"]),
        ({"place": [0.0, "x"]}, ["/place", "/place/1"]),
        ({"place": 9.0}, ["/place"]),
        ({"flag": 3}, ["/flag"]),
        ({"float": 3, "list[int]": 4}, ["/float", "/list[int]"]),
        ({"level": "x", "flag": 3}, ["/level", "/flag"]),
    ],
)
def test_members_of_several_types_have_one_place(given, pointers):
    """No pointer may name what is not in the body."""
    with pytest.raises(ValidationError) as caught:
        Several.model_validate(given)
    assert [one.pointer for one in from_validation(caught.value).places] == pointers


def test_all_that_would_do_is_told():
    with pytest.raises(ValidationError) as caught:
        Several.model_validate({"level": "high"})
    (place,) = from_validation(caught.value).places
    assert "'zero' or 'mean'" in place.reason
    assert "valid number" in place.reason
