from __future__ import annotations

import asyncio

import pytest
from fastapi import APIRouter, FastAPI, Request, Response
from starlette.requests import ClientDisconnect

from service.problems import Problem
from service.routes.exchange import CHUNK, answering, chunks, received_body, streamed, unless_gone
from service.spool import Spool
from service.wall.pool import Answer


def request(messages, headers=()):
    """A request whose body comes as these messages; afterwards nothing comes."""
    waiting = list(messages)

    async def receive():
        if waiting:
            return waiting.pop(0)
        await asyncio.sleep(3600)
        raise AssertionError

    scope = {"type": "http", "method": "POST", "path": "/", "query_string": b"", "headers": list(headers)}
    return Request(scope, receive)


def piece(data, more=True):
    return {"type": "http.request", "body": data, "more_body": more}


def test_a_body_is_received_whole():
    async def scenario():
        with await received_body(request([piece(b"ab"), piece(b"c"), piece(b"", False)]), 3) as spool:
            assert bytes(spool.view()) == b"abc"

    asyncio.run(scenario())


@pytest.mark.parametrize(
    ("messages", "headers"),
    [([piece(b"abcd", False)], ()), ([piece(b"ab"), piece(b"cd", False)], ()), ([], [(b"content-length", b"4")])],
)
def test_a_body_beyond_the_limit_is_refused(messages, headers):
    with pytest.raises(Problem) as caught:
        asyncio.run(received_body(request(messages, headers), 3))
    assert caught.value.status == 413


def test_a_client_that_leaves_while_it_sends():
    with pytest.raises(ClientDisconnect):
        asyncio.run(received_body(request([piece(b"a"), {"type": "http.disconnect"}]), 3))


def test_a_client_that_leaves_ends_the_computation():
    ended = []

    async def compute():
        try:
            await asyncio.sleep(3600)
        except asyncio.CancelledError:
            ended.append(True)
            raise

    async def scenario():
        assert await unless_gone(request([{"type": "http.disconnect"}]), compute()) is None
        await asyncio.sleep(0)

    asyncio.run(scenario())
    assert ended == [True]


def test_a_client_that_stays_gets_the_answer_or_the_fault():
    async def good():
        return 7

    async def bad():
        raise Problem("busy", "x")

    assert asyncio.run(unless_gone(request([]), good())) == 7
    with pytest.raises(Problem, match="x"):
        asyncio.run(unless_gone(request([]), bad()))


@pytest.mark.parametrize("size", [0, 1, CHUNK, CHUNK + 1, 3 * CHUNK])
def test_pieces_are_the_body(size):
    view = memoryview(bytes(range(256)) * (size // 256 + 1))[:size]

    async def gather():
        return [bytes(part) async for part in chunks(view)]

    parts = asyncio.run(gather())
    assert b"".join(parts) == view
    assert all(len(part) == CHUNK for part in parts[:-1])


def test_an_answer_is_sent_with_what_belongs_to_it():
    spool = Spool.unnamed()
    spool.append(b"abc")
    response = streamed("profile", "npy", Answer(spool, 0.25, {"X-Form": "y"}))
    assert response.headers["content-length"] == "3"
    assert response.headers["content-type"] == "application/x-npy"
    assert response.headers["x-form"] == "y"
    assert response.headers["server-timing"] == "compute;dur=250.0"
    assert 'filename="profile.npy"' in response.headers["content-disposition"]


def test_an_address_answers_head_as_it_answers_get():
    async def endpoint() -> Response:
        return Response(b"x")

    router = APIRouter()
    answering(router, "/a", endpoint, {"operation_id": "a", "summary": "A"})
    app = FastAPI()
    app.include_router(router)
    assert {method for route in router.routes for method in route.methods} == {"GET", "HEAD"}
    assert set(app.openapi()["paths"]["/a"]) == {"get"}
