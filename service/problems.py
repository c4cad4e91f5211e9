"""Problem documents (RFC 9457): the one shape of every error the service answers."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field
from typing import Any

import orjson
from pydantic import ValidationError

from engine.errors import InputError, TooLargeError

MEDIA_TYPE = "application/problem+json"
ERRORS_NAMED = 20
"""At most this many places are named in one document."""
LONGEST_PART = 80
"""A member's name is cut to this length in a pointer: an unknown one may be as long as the body."""

TITLES = {
    "invalid-request": (422, "The request cannot be carried out as it stands"),
    "malformed-body": (400, "The body cannot be read"),
    "malformed-request": (400, "The request cannot be read"),
    "too-costly": (422, "The work asked for exceeds a limit"),
    "body-too-large": (413, "The body exceeds the limit"),
    "unsupported-media-type": (415, "The body's media type is not understood"),
    "not-acceptable": (406, "No acceptable form of answer"),
    "not-installed": (501, "This needs an optional package that is not installed"),
    "unauthorized": (401, "This address asks for an API key"),
    "forbidden": (403, "The request is not allowed"),
    "not-found": (404, "There is nothing at this address"),
    "method-not-allowed": (405, "This address does not answer that method"),
    "body-too-slow": (408, "The body came too slowly"),
    "misdirected": (421, "The service does not answer under this name"),
    "rate-limited": (429, "More was asked for than one client may ask for"),
    "busy": (503, "All workers are busy"),
    "overloaded": (503, "The service carries as much as it may"),
    "store-unavailable": (503, "The store cannot be used"),
    "store-full": (507, "The store has no room"),
    "not-ready": (503, "The service is not ready"),
    "timeout": (504, "The computation took too long"),
    "internal": (500, "The service failed"),
}
"""Every kind of problem: its status and title. The type is ``urn:densityloom:problem:`` + kind."""


@dataclass(frozen=True, slots=True)
class Place:
    """One place at fault: a JSON pointer into the body, the reason, and how to mend it."""

    pointer: str
    reason: str
    cure: str


@dataclass(slots=True)
class Problem(Exception):
    """A problem on its way to the client."""

    kind: str
    detail: str
    places: tuple[Place, ...] = ()
    headers: dict[str, str] = field(default_factory=dict)

    def __post_init__(self) -> None:
        Exception.__init__(self, self.detail)

    @property
    def status(self) -> int:
        return TITLES[self.kind][0]

    def document(self) -> dict[str, Any]:
        """The document's members."""
        document: dict[str, Any] = {
            "type": f"urn:densityloom:problem:{self.kind}",
            "title": TITLES[self.kind][1],
            "status": self.status,
            "detail": self.detail,
        }
        if self.places:
            document["errors"] = [
                {"pointer": place.pointer, "reason": place.reason, "cure": place.cure}
                for place in self.places[:ERRORS_NAMED]
            ]
        return document

    def encode(self) -> bytes:
        return orjson.dumps(self.document())

    @classmethod
    def from_message(cls, message: Mapping[str, Any]) -> Problem:
        """The inverse of `to_message`."""
        return cls(
            message["kind"],
            message["detail"],
            tuple(Place(**place) for place in message["places"]),
            dict(message["headers"]),
        )

    def to_message(self) -> dict[str, Any]:
        """Plain data, for the way between processes."""
        return {
            "kind": self.kind,
            "detail": self.detail,
            "places": [
                {"pointer": place.pointer, "reason": place.reason, "cure": place.cure}
                for place in self.places[:ERRORS_NAMED]
            ],
            "headers": self.headers,
        }


def pointer(parts: Sequence[str | int]) -> str:
    """A JSON pointer (RFC 6901)."""
    return "".join("/" + str(part)[:LONGEST_PART].replace("~", "~0").replace("/", "~1") for part in parts)


def at(parts: Sequence[str | int], reason: str, cure: str, *, kind: str = "invalid-request") -> Problem:
    """A problem of one place."""
    place = Place(pointer(parts), reason, cure)
    where = place.pointer or "the request"
    return Problem(kind, f"{where}: {reason}. {cure[:1].upper()}{cure[1:]}.", (place,))


@contextmanager
def located(*prefix: str | int, renamed: Mapping[str, tuple[str | int, ...]] | None = None) -> Iterator[None]:
    """Turn a fault of the engine into a problem that points into the request's body.

    Parameters
    ----------
    prefix : str or int
        Where in the body the engine's argument came from.
    renamed : mapping, optional
        Arguments whose place in the body has another name.
    """
    try:
        yield
    except InputError as fault:
        path = fault.path
        if path and renamed and str(path[0]) in renamed:
            path = (*renamed[str(path[0])], *path[1:])
        row = fault.rows[:1] if path and fault.rows else ()
        kind = "too-costly" if isinstance(fault, TooLargeError) else "invalid-request"
        raise at((*prefix, *path, *row), fault.reason, fault.cure, kind=kind) from fault


@contextmanager
def moved(*place: str | int) -> Iterator[None]:
    """Let problems that point into the member ``set`` point to the same place below another member.

    For sets that a request holds beside its first.
    """
    try:
        yield
    except Problem as problem:
        old, new = pointer(("set",)), pointer(place)

        def relocated(text: str) -> str:
            return new + text.removeprefix(old) if text == old or text.startswith((f"{old}/", f"{old}:")) else text

        places = tuple(Place(relocated(one.pointer), one.reason, one.cure) for one in problem.places)
        raise Problem(problem.kind, relocated(problem.detail), places, problem.headers) from problem


@contextmanager
def below(*place: str | int) -> Iterator[None]:
    """Let problems that point to members of one object of the body point to where that object stands."""
    try:
        yield
    except Problem as problem:
        outer = pointer(place)
        old = problem.places[0].pointer if problem.places else ""
        places = tuple(Place(outer + one.pointer, one.reason, one.cure) for one in problem.places)
        detail = outer + problem.detail if old and problem.detail.startswith(old) else problem.detail
        raise Problem(problem.kind, detail, places, problem.headers) from problem


def from_validation(error: ValidationError) -> Problem:
    """A schema's complaints as places; the values at fault are never echoed."""
    return from_complaints(error.errors(include_url=False, include_input=False))


def from_complaints(complaints: Sequence[Mapping[str, Any]]) -> Problem:
    """The same of complaints in the validation library's form, at least one."""
    found: dict[str, Place] = {}
    for complaint in complaints[:ERRORS_NAMED]:
        context = complaint.get("ctx", {})
        parts = [*complaint["loc"], *([context["row"]] if "row" in context else [])]
        if complaint["type"] != "extra_forbidden":
            # A member of several types: each is tried, complains, and adds its own name.
            parts = [part for part in parts if not (isinstance(part, str) and _OWN_NAME.fullmatch(part))]
        cure = str(context.get("cure", _CURES.get(complaint["type"], "see the request's schema at /docs")))
        # The stock message for an object names our own class.
        reason = "is not an object" if complaint["type"] == "model_type" else complaint["msg"].lower().rstrip(".")
        where = pointer(parts)
        if where not in found:
            found[where] = Place(where, reason, cure)
        elif reason not in found[where].reason:
            found[where] = Place(where, f"{found[where].reason}, or: {reason}", found[where].cure)
    places = list(found.values())
    first = places[0]
    where = first.pointer or "the request"
    more = f" ({len(places) - 1} more under errors)" if len(places) > 1 else ""
    return Problem(
        "invalid-request", f"{where}: {first.reason}. {first.cure[:1].upper()}{first.cure[1:]}{more}.", tuple(places)
    )


_OWN_NAME = re.compile(r"(?:constrained-)?(?:int|float|str|bool)|(?:literal|list)\[.*\]")
"""What the library calls the types of a member that may have several."""

_CURES = {
    "missing": "add it",
    "extra_forbidden": "remove it, or check its spelling",
    "finite_number": "give a finite number",
    "literal_error": "choose one of the values named",
    "model_type": "give a JSON object",
    **dict.fromkeys(
        ("greater_than", "greater_than_equal", "less_than", "less_than_equal"), "give a number in that range"
    ),
}
