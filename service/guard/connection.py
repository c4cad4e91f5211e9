"""A connection that does not wait for ever: for a request's head, for the rest of a body that nobody reads, for a
client that does not take its answer."""

from __future__ import annotations

import asyncio
import logging
import socket
import struct
from typing import Any

import h11
from uvicorn.protocols.http.h11_impl import H11Protocol

from service.guard.record import REQUEST_ID, new_id
from service.problems import MEDIA_TYPE, Problem

log = logging.getLogger("densityloom.connection")

HEAD_SECONDS = 30.0
"""For the head of a request, and for what follows of a body that was answered before its end."""
SEND_SECONDS = "send_seconds"
"""Where the app has put its setting, in the state that the server keeps for it."""


class Connection(H11Protocol):
    """One client's connection."""

    def __init__(self, *arguments: Any, **options: Any) -> None:  # noqa: ANN401 - the server's own
        super().__init__(*arguments, **options)
        self._head_timer: asyncio.TimerHandle | None = None
        self._send_timer: asyncio.TimerHandle | None = None

    def connection_made(self, transport: asyncio.Transport) -> None:  # type: ignore[override]
        super().connection_made(transport)
        self._await_head()

    def data_received(self, data: bytes) -> None:
        super().data_received(data)
        self._await_head()

    def connection_lost(self, exc: Exception | None) -> None:
        for timer in (self._head_timer, self._send_timer):
            if timer is not None:
                timer.cancel()
        super().connection_lost(exc)

    def pause_writing(self) -> None:
        """The client is behind: what waits for it must be gone in time."""
        super().pause_writing()
        seconds = self.app_state.get(SEND_SECONDS)
        if seconds is not None and self._send_timer is None:
            self._send_timer = self.loop.call_later(
                seconds, self._cut, logging.WARNING, "did not take its answer in time"
            )

    def resume_writing(self) -> None:
        if self._send_timer is not None:
            self._send_timer.cancel()
            self._send_timer = None
        super().resume_writing()

    def send_400_response(self, msg: str) -> None:
        """What cannot be read as HTTP is told so in the shape of every other problem."""
        if self.conn.our_state not in (h11.IDLE, h11.SEND_RESPONSE):
            # An answer to what came before is on its way; nothing can be said beside it.
            self.transport.abort()
            return
        identity = new_id()
        problem = Problem("malformed-request", "This is no request that can be read as HTTP/1.1.")
        body = problem.encode()
        headers = [
            (b"content-type", MEDIA_TYPE.encode()),
            (b"content-length", str(len(body)).encode()),
            (REQUEST_ID.lower().encode(), identity.encode()),
            (b"x-content-type-options", b"nosniff"),
            (b"connection", b"close"),
        ]
        for event in (
            h11.Response(status_code=problem.status, headers=headers, reason=b"Bad Request"),
            h11.Data(data=body),
            h11.EndOfMessage(),
        ):
            self.transport.write(self.conn.send(event) or b"")
        self.transport.close()

    def _await_head(self) -> None:
        """Time what the client owes, as long as it owes something that no request waits for."""
        states = (self.conn.our_state, self.conn.their_state)
        owes = states[1] is h11.IDLE or (states[0] in (h11.DONE, h11.MUST_CLOSE) and states[1] is h11.SEND_BODY)
        if not owes:
            if self._head_timer is not None:
                self._head_timer.cancel()
                self._head_timer = None
        elif self._head_timer is None:
            self._head_timer = self.loop.call_later(
                HEAD_SECONDS, self._cut, logging.DEBUG, "did not send its request in time"
            )

    def _cut(self, level: int, what: str) -> None:
        log.log(level, "a client at %s %s", self.client[0] if self.client else "this machine", what)
        # Not closed: that would wait for the client to take what is left. Reset, so that what the system holds for
        # it goes too, and nobody takes the part for the whole.
        connected = self.transport.get_extra_info("socket")
        if connected is not None:
            connected.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, struct.pack("ii", 1, 0))
        self.transport.abort()
