"""A stop without loss: new work is refused, what is under way ends, and what takes too long is cut with a word."""

from __future__ import annotations

import asyncio
import logging
import signal
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from types import FrameType
from typing import Any

from starlette.types import ASGIApp, Receive, Scope, Send

from service.problems import Problem

log = logging.getLogger("densityloom")

ALIVE = "/health/live"
"""Answered to the end."""
RETRY_SECONDS = 5
CUT_SECONDS = 2.0
"""For requests that were cut to say so."""
SIGNALS = (signal.SIGTERM, signal.SIGINT)


class Gate:
    """Knows what is under way, and whether more may begin.

    Parameters
    ----------
    seconds : float
        Time to finish what is under way.
    """

    def __init__(self, seconds: float) -> None:
        self._seconds = seconds
        self._under_way: set[asyncio.Task[Any]] = set()
        self._cut: set[asyncio.Task[Any]] = set()
        self._quiet = asyncio.Event()
        self._hurry = asyncio.Event()
        self.stopping = False

    @contextmanager
    def passing(self) -> Iterator[None]:
        """One request of the running task.

        Raises
        ------
        Problem
            503: the service is stopping, or has waited for this request as long as it would.
        """
        if self.stopping:
            raise stopping()
        task = asyncio.current_task()
        if task is None:
            raise RuntimeError("a request runs in a task")
        self._under_way.add(task)
        self._quiet.clear()
        try:
            yield
        except asyncio.CancelledError:
            if task not in self._cut:
                raise
            task.uncancel()
            raise stopping() from None
        finally:
            self._under_way.discard(task)
            self._cut.discard(task)
            if not self._under_way:
                self._quiet.set()

    async def drain(self) -> None:
        """Refuse what is new, and return when nothing is under way any more."""
        self.stopping = True
        if not self._under_way:
            return
        log.info("stopping: %d requests under way may take %g s", len(self._under_way), self._seconds)
        await self._until(self._seconds, self._quiet, self._hurry)
        if not self._under_way:
            return
        log.warning("stopping: %d requests are cut", len(self._under_way))
        for task in tuple(self._under_way):
            self._cut.add(task)
            task.cancel()
        await self._until(CUT_SECONDS, self._quiet)

    def hurry(self) -> None:
        """Cut at once: whoever stops the service has asked a second time."""
        self._hurry.set()

    @staticmethod
    async def _until(seconds: float, *events: asyncio.Event) -> None:
        """Wait for one of some events, no longer than so many seconds."""
        waits = [asyncio.ensure_future(event.wait()) for event in events]
        await asyncio.wait(waits, timeout=seconds, return_when=asyncio.FIRST_COMPLETED)
        for wait in waits:
            wait.cancel()


class Passing:
    """Layer that leads every request through the gate."""

    def __init__(self, app: ASGIApp, gate: Gate) -> None:
        self._app = app
        self._gate = gate

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] != "http" or scope["path"] == ALIVE:
            await self._app(scope, receive, send)
            return
        with self._gate.passing():
            await self._app(scope, receive, send)


@contextmanager
def stopped_gently(gate: Gate) -> Iterator[None]:
    """While this lasts, a signal that ends the server reaches it when the gate has drained.

    Where no server waits for signals, as in tests, nothing is changed.
    """
    loop = asyncio.get_running_loop()
    tasks: list[asyncio.Task[None]] = []
    caught: dict[signal.Signals, Callable[[int, FrameType | None], Any]] = {}

    async def stop(number: signal.Signals) -> None:
        await gate.drain()
        caught[number](number, None)

    def told(number: signal.Signals) -> None:
        if tasks:
            gate.hurry()
        else:
            tasks.append(loop.create_task(stop(number)))

    for number in SIGNALS:
        handler = signal.getsignal(number)
        if callable(handler) and handler is not signal.default_int_handler:
            caught[number] = handler
            loop.add_signal_handler(number, told, number)
    try:
        yield
    finally:
        for number, handler in caught.items():
            loop.remove_signal_handler(number)
            signal.signal(number, handler)


def stopping() -> Problem:
    """The problem of a request that comes, or stays, too late."""
    return Problem(
        "not-ready",
        "The service is stopping; this request was not carried out.",
        headers={"Retry-After": str(RETRY_SECONDS), "Connection": "close"},
    )
