from __future__ import annotations

import pytest
from pydantic import ValidationError

from service.routes.compute import ADDRESSES
from service.schemas.analyses import ANALYSES
from service.schemas.coefficient_set import ReflectionSetIn
from service.schemas.products import PRODUCTS
from service.schemas.requests import FILMS, INSPECT, KEEP, REQUESTS, SERIES, InspectIn


def test_every_kind_of_request_has_an_address():
    assert set(REQUESTS) == {*PRODUCTS, SERIES, *ANALYSES, *FILMS, INSPECT, KEEP}
    assert set(REQUESTS) - {KEEP} == set(ADDRESSES)
    assert len(set(ADDRESSES.values())) == len(ADDRESSES)


def test_inspection_takes_a_set_without_columns():
    made = InspectIn.model_validate({"product": "inspect", "remark": "x", "set": {"cell": {"period": 3.0}}})
    assert isinstance(made.set, ReflectionSetIn)
    assert InspectIn().set == ReflectionSetIn()


@pytest.mark.parametrize(
    "members", [{"set": {"l": [1]}}, {"set": {"values": "structure_factor"}}, {"product": "profile"}, {"samples": 3}]
)
def test_inspection_takes_nothing_else(members):
    with pytest.raises(ValidationError):
        InspectIn.model_validate(members)
