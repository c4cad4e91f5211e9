"""The one shape of every error, checked in one place."""

from __future__ import annotations

import httpx

from service.problems import ERRORS_NAMED, TITLES

LONGEST = 8000
"""Bytes: a problem never echoes what it complains of at length."""


def assert_problem(answer: httpx.Response, status: int, pointer: str | None = None, kind: str | None = None) -> dict:
    """Check an error answer; returns its document."""
    assert answer.status_code == status, answer.text[:2000]
    assert answer.headers["content-type"] == "application/problem+json"
    assert len(answer.content) < LONGEST
    document = answer.json()
    found = document["type"].removeprefix("urn:densityloom:problem:")
    assert TITLES[found] == (status, document["title"])
    assert document["status"] == status
    assert document["detail"].strip()
    if kind is not None:
        assert found == kind
    errors = document.get("errors", [])
    assert len(errors) <= ERRORS_NAMED
    for place in errors:
        assert set(place) == {"pointer", "reason", "cure"}
        assert place["reason"].strip()
        assert place["cure"].strip()
    if pointer is None:
        assert not errors, errors
    else:
        assert errors, document
        assert errors[0]["pointer"] == pointer, errors
        assert pointer == "" or pointer in document["detail"]
    return document
