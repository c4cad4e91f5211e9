from __future__ import annotations

import pytest
from pydantic import BaseModel, ValidationError

from service.problems import Place, Problem
from service.schemas import answers
from service.schemas.answers import Answer, ProblemDocument
from tests.service import bodies


def members(value, model):
    """The members of an answer are those of the model, at every level."""
    assert set(value) == set(model.model_fields), model.__name__
    for name, member in model.model_fields.items():
        inner = member.annotation
        if isinstance(inner, type) and issubclass(inner, BaseModel):
            members(value[name], inner)


@pytest.mark.parametrize("product", bodies.GOOD)
def test_answers_of_the_service_fit(client, product):
    answer = client.post(f"/v1/{product}", json=bodies.GOOD[product]).json()
    Answer.model_validate(answer, strict=True)
    members(answer, Answer)
    for axis in answer["axes"]:
        members(axis, answers.AxisOut)


def test_answer_without_a_resolution_fits(client):
    """A set of nothing but its zero term has none."""
    given = {"cell": {"period": 9.0}, "values": "structure_factor", "l": [0], "amplitude": [3], "phase_deg": [0]}
    answer = client.post("/v1/profile", json={**bodies.PROFILE, "set": given})
    assert answer.status_code == 200, answer.text
    Answer.model_validate(answer.json(), strict=True)
    assert answer.json()["summary"]["resolution"] is None
    assert answer.json()["values"] == pytest.approx([3 / 9] * 17)


def test_problems_fit():
    document = Problem("busy", "Wait.", (Place("/a", "is", "do"),)).document()
    ProblemDocument.model_validate(document, strict=True)
    with pytest.raises(ValidationError):
        ProblemDocument.model_validate({**document, "status": "503"}, strict=True)


def test_every_model_is_described():
    models = [one for one in vars(answers).values() if isinstance(one, type) and issubclass(one, BaseModel)]
    for model in models:
        if model is not BaseModel:
            assert model.__doc__
