"""Requests drawn from the OpenAPI document by Schemathesis: no fault of ours, every answer as the document says."""

from __future__ import annotations

from collections.abc import Iterator

import pytest
import schemathesis
from hypothesis import HealthCheck, settings, strategies
from schemathesis.specs.openapi import checks

from service.app import create_app
from service.settings import Settings
from tests.service.conftest import SMALL, alone

DOCUMENT = create_app(Settings(require_keys=False)).openapi()

STORED = "^/(v1/sets|health)"
"""Addresses whose every constraint is tried, each at its edges and beyond. The others have large bodies, and our own
tests go through these member by member (test_malformed, test_mutations); of them only examples are drawn."""
EDGES = schemathesis.openapi.from_dict(DOCUMENT).include(path_regex=STORED)
DRAWN = schemathesis.openapi.from_dict(DOCUMENT).exclude(path_regex=STORED)
DRAWN.config.phases.coverage.enabled = False
EXAMPLES = 8

for media_type in ("application/x-npz", "chemical/x-cif", "text/tab-separated-values"):
    schemathesis.openapi.media_type(media_type, strategies.binary(max_size=200))


@pytest.fixture(scope="module")
def address() -> Iterator[str]:
    """A service with small limits, so that what is drawn at random stays cheap."""
    with alone(**{**SMALL, "max_body_bytes": 2**22, "request_seconds": 20}) as served:
        yield served.address


NOT_STATED = (
    # Rules between members, such as one way to say where the samples are, have no place in a schema.
    checks.positive_data_acceptance,
)
TWO_FACED = "/v1/sets/inspect"
"""Answers POST; to other methods it is the address of a set of that name, which is not there."""


FUZZED = settings(max_examples=EXAMPLES, deadline=None, derandomize=True, suppress_health_check=list(HealthCheck))


@EDGES.parametrize()
@FUZZED
def test_addresses_of_sets_are_as_the_document_says(case, address):
    left = NOT_STATED
    if case.path == TWO_FACED:
        left += (checks.unsupported_method, checks.allow_header_conformance)
    case.call_and_validate(base_url=address, excluded_checks=left)


@DRAWN.parametrize()
@FUZZED
def test_addresses_that_compute_are_as_the_document_says(case, address):
    case.call_and_validate(base_url=address, excluded_checks=NOT_STATED)
