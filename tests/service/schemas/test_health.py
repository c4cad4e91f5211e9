from __future__ import annotations

import pytest
from pydantic import ValidationError

from service.schemas.health import Live, Ready


def test_answers_of_the_service_fit(client):
    assert Live.model_validate(client.get("/health/live").json(), strict=True).status == "live"
    ready = Ready.model_validate(client.get("/health/ready").json(), strict=True)
    assert ready.workers == 2
    assert "numpy" in ready.libraries


@pytest.mark.parametrize("model", [Live, Ready])
def test_examples_fit(model):
    for example in model.model_json_schema().get("examples", []):
        model.model_validate(example, strict=True)


def test_no_other_state_is_told():
    with pytest.raises(ValidationError):
        Live(status="ready", version="1")
