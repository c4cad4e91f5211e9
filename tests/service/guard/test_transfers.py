from __future__ import annotations

import asyncio
import json

import pytest
from starlette.requests import Request
from starlette.responses import Response, StreamingResponse

from service.guard import transfers as module
from service.guard.transfers import InFlight, Transfers
from service.problems import Problem
from tests.service.guard.asgi import around, ask, asked


async def measure(scope, receive, send):
    body = await Request(scope, receive).body()
    await Response(str(len(body)))(scope, receive, send)


def layer(app=measure, in_flight=None, most_body=1000, body_seconds=5.0):
    return around(
        Transfers, app, in_flight=in_flight or InFlight(10_000), most_body=most_body, body_seconds=body_seconds
    )


def test_counting():
    held = InFlight(100)
    held.reserve(60)
    held.reserve(40)
    with pytest.raises(Problem) as caught:
        held.reserve(1)
    assert (caught.value.status, caught.value.headers["Retry-After"]) == (503, "2")
    held.add(500)
    held.release(600)
    assert held.bytes == 0
    # One alone may always: what it may at most send, another limit says.
    held.reserve(1000)


def test_body_passes_whole_and_is_let_go():
    held = InFlight(10_000)
    for headers in ({"Content-Length": "6"}, {}, {"Content-Length": "nonsense"}):
        answer = asked(layer(in_flight=held), b"abc", b"def", method="POST", headers=headers)
        assert (answer.status, answer.body) == (200, b"6")
        assert held.bytes == 0


def test_body_is_counted_before_it_is_read():
    async def scenario():
        held = InFlight(1000)
        app = layer(in_flight=held, most_body=900)
        first = asyncio.create_task(ask(app, b"a", 0.2, b"b", method="POST", headers={"Content-Length": "800"}))
        await asyncio.sleep(0.05)
        assert held.bytes == 800
        refused = await ask(app, b"a", method="POST", headers={"Content-Length": "300"})
        assert refused.status == 503
        assert json.loads(refused.body)["type"].endswith(":overloaded")
        assert (await ask(app, b"a", method="POST", headers={"Content-Length": "100"})).status == 200
        # One that does not say how much comes is counted as it comes.
        chunked = await ask(app, b"x" * 100, b"x" * 200, method="POST")
        assert chunked.status == 503
        assert (await first).status == 200
        assert held.bytes == 0
        # More than any body may have is not reserved: it is refused elsewhere.
        assert (await ask(app, b"a", method="POST", headers={"Content-Length": "99999999"})).status == 200

    asyncio.run(scenario())


def test_answers_count_until_they_are_out():
    async def scenario():
        held = InFlight(1000)
        going = asyncio.Event()

        async def slow():
            yield b"x" * 100
            await going.wait()
            yield b"x" * 1100

        async def answering(scope, receive, send):
            await StreamingResponse(slow(), headers={"Content-Length": "1200"})(scope, receive, send)

        first = asyncio.create_task(ask(layer(answering, held)))
        await asyncio.sleep(0.05)
        # What the connection has taken is held no more.
        assert held.bytes == 1100
        # New work waits until there is room; what watches over the service does not.
        assert (await ask(layer(in_flight=held))).status == 503
        assert (await ask(layer(in_flight=held), path="/health/ready")).status == 200
        going.set()
        assert len((await first).body) == 1200
        assert held.bytes == 0

    asyncio.run(scenario())


def test_bytes_of_a_request_that_fails_are_let_go():
    held = InFlight(1000)

    async def failing(scope, receive, send):
        await receive()
        raise RuntimeError("no")

    assert asked(layer(failing, held), b"abc", method="POST").status == 500
    assert held.bytes == 0


def test_body_that_does_not_come():
    answer = asked(layer(body_seconds=0.1), b"abc", 30, b"def", method="POST", headers={"Content-Length": "6"})
    assert answer.status == 408
    assert answer.headers["connection"] == "close"
    assert "3 bytes" in json.loads(answer.body)["detail"]


def test_body_that_comes_steadily_has_more_time(monkeypatch):
    monkeypatch.setattr(module, "SLOWEST", 10)
    steady = [part for _ in range(6) for part in (b"abc", 0.05)]
    assert asked(layer(body_seconds=0.1), *steady, b"end", method="POST").status == 200
    monkeypatch.setattr(module, "SLOWEST", 10_000)
    assert asked(layer(body_seconds=0.1), *steady, b"end", method="POST").status == 408


def test_waiting_for_a_client_to_leave_has_no_end():
    """Once the body is whole, or the answer has begun, nothing is owed."""

    async def whole(scope, receive, send):
        await receive()
        with pytest.raises(TimeoutError):
            async with asyncio.timeout(0.3):
                await receive()
        await Response("waited")(scope, receive, send)

    assert asked(layer(whole, body_seconds=0.1), b"abc", method="POST").body == b"waited"

    async def begun(scope, receive, send):
        await send({"type": "http.response.start", "status": 200, "headers": []})
        with pytest.raises(TimeoutError):
            async with asyncio.timeout(0.3):
                await receive()
        await send({"type": "http.response.body", "body": b"waited"})

    assert asked(layer(begun, body_seconds=0.1), 30, b"abc", method="POST").body == b"waited"


def test_an_answer_to_head_has_no_bytes():
    held = InFlight(1000)
    seen = []

    async def answering(scope, receive, send):
        await Response(b"", headers={"Content-Length": "900"})(scope, receive, send)
        seen.append(held.bytes)

    assert asked(layer(answering, held), method="HEAD").status == 200
    assert seen == [0]
