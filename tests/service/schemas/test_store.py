from __future__ import annotations

import re

import pytest
from pydantic import ValidationError

from service.schemas.base import PRINTABLE
from service.schemas.store import MOST_TAGS, KeepIn, RecordOut
from service.store.records import Facts
from service.store.shelf import ID
from tests.service import bodies


def test_a_set_alone_suffices():
    made = KeepIn.model_validate({"set": bodies.FILM})
    assert (made.name, made.tags) == (None, [])


@pytest.mark.parametrize(
    "wrong",
    [
        {},
        {"set": bodies.FILM, "owner": "x"},
        {"set": bodies.FILM, "tags": "a"},
        {"set": bodies.FILM, "tags": ["a"] * (MOST_TAGS + 1)},
        {"set": bodies.FILM, "tags": ["a,b"]},
        {"set": bodies.FILM, "name": 7},
        {"set": bodies.FILM, "name": "a\x00b"},
        {"set": bodies.FILM, "product": "profile"},
    ],
)
def test_what_is_no_set_to_keep(wrong):
    with pytest.raises(ValidationError):
        KeepIn.model_validate(wrong)


@pytest.mark.parametrize(("text", "allowed"), [("film ü <b>", True), ("", True), ("a\tb", False), ("a\x7f", False)])
def test_labels_can_be_printed(text, allowed):
    assert bool(re.search(PRINTABLE, text)) is allowed


def test_a_record_tells_every_fact():
    assert set(Facts.__dataclass_fields__) <= set(RecordOut.model_fields)
    assert RecordOut.model_json_schema()["properties"]["id"]["pattern"] == ID.pattern
