"""Single flight: what several clients want at the same time is computed once."""

from __future__ import annotations

import asyncio
from collections.abc import Awaitable, Callable
from typing import Generic, TypeVar

T = TypeVar("T")


class _Flight(Generic[T]):
    def __init__(self, task: asyncio.Task[T]) -> None:
        self.task = task
        self.waiting = 0


class Flights(Generic[T]):
    """Computations under way, by what they compute."""

    def __init__(self) -> None:
        self._under_way: dict[str, _Flight[T]] = {}

    async def share(self, key: str, compute: Callable[[], Awaitable[T]]) -> T:
        """The result of `compute`, or of a computation of the same key that is under way already.

        A computation ends when the last client that waits for it has gone; its fault reaches all of them.
        """
        flight = self._under_way.get(key)
        if flight is None:
            task = asyncio.ensure_future(compute())
            flight = self._under_way[key] = _Flight(task)
            task.add_done_callback(lambda _: self._landed(key, flight))
        flight.waiting += 1
        try:
            return await asyncio.shield(flight.task)
        finally:
            flight.waiting -= 1
            if flight.waiting == 0 and not flight.task.done():
                # Another client that comes now starts anew.
                self._landed(key, flight)
                flight.task.cancel()

    def _landed(self, key: str, flight: _Flight[T]) -> None:
        """Forget a flight, but not one of the same key that has started since."""
        if self._under_way.get(key) is flight:
            del self._under_way[key]
