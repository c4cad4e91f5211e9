"""Bodies on their way in and answers on their way out: how many bytes at once, and how slowly a body may come."""

from __future__ import annotations

import asyncio
from contextlib import suppress

from starlette.datastructures import Headers
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from service.problems import Problem

SLOWEST = 64 * 1024
"""Bytes a second that a body must come at, after its grace."""
RETRY_SECONDS = 2
WORK = "/v1/"
"""Where answers may be long."""


class InFlight:
    """Bytes held for requests under way."""

    def __init__(self, most: int) -> None:
        self._most = most
        self.bytes = 0

    def reserve(self, count: int) -> None:
        """Hold bytes that are to come; a single request always may.

        Raises
        ------
        Problem
            503: others hold as many as may be.
        """
        if self.bytes and self.bytes + count > self._most:
            raise Problem(
                "overloaded",
                f"Bodies and answers of {self.bytes:,} bytes are on their way; try again in {RETRY_SECONDS} s.",
                headers={"Retry-After": str(RETRY_SECONDS)},
            )
        self.bytes += count

    def add(self, count: int) -> None:
        """Hold bytes that are there already, as a computed answer is."""
        self.bytes += count

    def release(self, count: int) -> None:
        self.bytes -= count


class Transfers:
    """Layer that counts the bytes of each request until its answer is out, and gives a body its time.

    Parameters
    ----------
    in_flight : InFlight
    most_body : int
        Bytes beyond which a body is refused anyway.
    body_seconds : float
        Grace, after which `SLOWEST` holds on average.
    """

    def __init__(self, app: ASGIApp, in_flight: InFlight, most_body: int, body_seconds: float) -> None:
        self._app = app
        self._in_flight = in_flight
        self._most_body = most_body
        self._seconds = body_seconds

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] != "http":
            await self._app(scope, receive, send)
            return
        if scope["path"].startswith(WORK):
            # An answer that is computed is sent; so new work must not begin while too much is being sent.
            self._in_flight.reserve(0)
        transfer = _Transfer(self._in_flight, scope, self._most_body, self._seconds)

        async def received() -> Message:
            return await transfer.receive(receive)

        async def answered(message: Message) -> None:
            transfer.note_answer(message)
            await send(message)
            transfer.note_sent(message)

        try:
            await self._app(scope, received, answered)
        finally:
            self._in_flight.release(transfer.held)


class _Transfer:
    """One request's bytes."""

    def __init__(self, in_flight: InFlight, scope: Scope, most_body: int, seconds: float) -> None:
        self._in_flight = in_flight
        self._head = scope["method"] == "HEAD"
        declared = Headers(scope=scope).get("content-length", "")
        self._declared = min(int(declared), most_body) if declared.isdigit() else 0
        self._seconds = seconds
        self._begun: float | None = None
        self._arrived = 0
        self._whole = False
        self._answered = False
        self.held = 0

    async def receive(self, receive: Receive) -> Message:
        """The next message; waits for a piece of the body no longer than it may take."""
        if self._whole or self._answered:
            return await receive()
        loop = asyncio.get_running_loop()
        if self._begun is None:
            self._begun = loop.time()
            self._hold(self._declared)
        message: Message | None = None
        with suppress(TimeoutError):
            async with asyncio.timeout_at(self._begun + self._seconds + self._arrived / SLOWEST):
                message = await receive()
        if message is None:
            raise Problem(
                "body-too-slow",
                f"After {loop.time() - self._begun:.0f} s {self._arrived:,} bytes of the body had come. Send it at "
                f"{SLOWEST:,} bytes a second or faster.",
                headers={"Connection": "close"},
            )
        if message["type"] == "http.request":
            self._arrived += len(message.get("body", b""))
            self._whole = not message.get("more_body", False)
            if self._arrived > self.held:
                self._hold(self._arrived - self.held)
        return message

    def note_answer(self, message: Message) -> None:
        if message["type"] == "http.response.start":
            self._answered = True
            length = Headers(raw=message.get("headers", [])).get("content-length", "")
            if length.isdigit() and not self._head:
                self._in_flight.add(int(length))
                self.held += int(length)

    def note_sent(self, message: Message) -> None:
        """What the connection has taken is held no more."""
        if message["type"] == "http.response.body" and self._answered:
            gone = min(len(message.get("body", b"")), self.held)
            self._in_flight.release(gone)
            self.held -= gone

    def _hold(self, count: int) -> None:
        if count:
            self._in_flight.reserve(count)
            self.held += count
