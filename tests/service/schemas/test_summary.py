from __future__ import annotations

import dataclasses

import pytest
from pydantic import BaseModel

from engine.agreement import Agreement
from engine.preparation import Summary
from service.schemas import summary
from service.schemas.summary import AgreementOut, SummaryAnswer
from tests.service import bodies


def fields(kind):
    return {field.name for field in dataclasses.fields(kind)}


def test_members_are_those_of_the_engine():
    assert set(SummaryAnswer.model_fields) == fields(Summary) | {"file"}
    assert set(AgreementOut.model_fields) <= fields(Agreement)


@pytest.mark.parametrize(
    ("request_body", "file"),
    [
        ({"set": {}}, bodies.CRYSTAL_FILE),
        ({"set": {"preparation": bodies.SCALED}}, bodies.CRYSTAL_FILE),
        ({"set": {"cell": bodies.ORTHORHOMBIC}}, bodies.AMPLITUDES_FILE),
        ({"set": {"cell": {"period": 52.0}}}, bodies.SCAN_FILE),
    ],
)
def test_answers_of_the_service_fit(client, request_body, file):
    sent = bodies.reflections_form(request_body, file)
    answer = client.post("/v1/sets/inspect", content=sent, headers={"Content-Type": bodies.FORM})
    assert answer.status_code == 200, answer.text
    told = answer.json()
    SummaryAnswer.model_validate(told, strict=True)
    assert set(told) == set(SummaryAnswer.model_fields)
    for shell in (told["agreement"], *told["agreement_shells"]):
        assert set(shell) == set(AgreementOut.model_fields)
    assert set(told["file"]) == set(summary.FileOut.model_fields)


def test_every_model_is_described():
    for model in vars(summary).values():
        if isinstance(model, type) and issubclass(model, BaseModel) and model is not BaseModel:
            assert model.__doc__
