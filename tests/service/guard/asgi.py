"""An application called in this process, with every message in the test's hand."""

from __future__ import annotations

import asyncio
from dataclasses import dataclass, field

from starlette.datastructures import Headers
from starlette.responses import PlainTextResponse

from service.guard.faults import Faults
from service.guard.record import Recording


@dataclass
class Answer:
    status: int = 0
    headers: Headers = field(default_factory=Headers)
    body: bytes = b""


def scope(method="GET", path="/v1/sets", headers=None, client=("127.0.0.1", 1), server=("127.0.0.1", 8420), query=b""):
    given = {"host": "127.0.0.1:8420", **{name.lower(): value for name, value in (headers or {}).items()}}
    return {
        "type": "http",
        "method": method,
        "path": path,
        "raw_path": path.encode(),
        "query_string": query,
        "headers": [(name.encode(), value.encode("latin-1")) for name, value in given.items() if value is not None],
        "client": client,
        "server": server,
        "scheme": "http",
        "root_path": "",
        "http_version": "1.1",
    }


async def ask(app, *pieces, **options):
    """The answer to a request whose body comes in pieces; a piece that is a number is waited for so many seconds."""
    answer = Answer()
    messages, given = list(pieces), []

    async def receive():
        while messages:
            piece = messages.pop(0)
            if isinstance(piece, bytes):
                more = any(isinstance(later, bytes) for later in messages)
                return {"type": "http.request", "body": piece, "more_body": more}
            await asyncio.sleep(piece)
        if pieces or given:
            await asyncio.sleep(3600)
        given.append(True)
        return {"type": "http.request", "body": b"", "more_body": False}

    async def send(message):
        if message["type"] == "http.response.start":
            answer.status = message["status"]
            answer.headers = Headers(raw=message["headers"])
        else:
            answer.body += bytes(message.get("body", b""))

    await app(scope(**options), receive, send)
    return answer


def asked(app, *pieces, **options):
    return asyncio.run(ask(app, *pieces, **options))


def around(layer, app=None, **options):
    """A layer with what it needs around it, and something to answer within."""
    return Recording(Faults(layer(app or PlainTextResponse("within"), **options)))
