from __future__ import annotations

import json
import logging

import pytest
from starlette.responses import PlainTextResponse

from service.guard.faults import Faults, answer_to
from service.guard.record import Recording
from service.problems import MEDIA_TYPE, Problem
from tests.service.guard.asgi import asked


def failing(fault, *messages):
    async def app(scope, receive, send):
        for message in messages:
            await send(message)
        raise fault

    return Recording(Faults(app))


STARTED = {"type": "http.response.start", "status": 200, "headers": []}


def test_problem_becomes_its_document():
    answer = asked(failing(Problem("busy", "too much", headers={"Retry-After": "7"})))
    assert (answer.status, answer.headers["content-type"], answer.headers["retry-after"]) == (503, MEDIA_TYPE, "7")
    assert json.loads(answer.body)["detail"] == "too much"
    assert answer.headers["x-request-id"]


def test_unforeseen_fault_is_logged_and_told_without_detail(caplog):
    with caplog.at_level(logging.ERROR):
        answer = asked(failing(RuntimeError("secret")), path="/v1/broken", headers={"X-Request-ID": "r9"})
    assert (answer.status, answer.headers["x-request-id"]) == (500, "r9")
    assert json.loads(answer.body)["type"].endswith(":internal")
    assert b"secret" not in answer.body
    assert "secret" in caplog.text
    assert "/v1/broken" in caplog.text


@pytest.mark.parametrize("fault", [RuntimeError("late"), Problem("busy", "late")])
def test_answer_that_has_begun_is_cut_not_mended(fault):
    with pytest.raises(type(fault), match="late"):
        asked(failing(fault, STARTED))


def test_what_works_is_left_alone():
    assert asked(Recording(Faults(PlainTextResponse("fine")))).body == b"fine"


def test_headers_of_problem_and_caller():
    answer = answer_to(Problem("method-not-allowed", "no", headers={"A": "1"}), {"Allow": "GET"})
    assert (answer.headers["allow"], answer.headers["a"], answer.status_code) == ("GET", "1", 405)
