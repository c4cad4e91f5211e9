"""How often a client may ask: a token bucket each, which holds a minute's worth."""

from __future__ import annotations

import math
import time
from collections import OrderedDict
from collections.abc import Callable

from starlette.types import ASGIApp, Receive, Scope, Send

from service.guard.record import record_of
from service.problems import Problem

MOST_CLIENTS = 20_000
"""Buckets kept; of those beyond, the one not used for the longest time has filled up again."""
EXEMPT = "/health/"
"""Whoever watches over the service must always learn how it is."""


class Rates:
    """Buckets by client.

    Parameters
    ----------
    per_minute : int
        0: no limit.
    clock : callable
        Seconds, never going back.
    """

    def __init__(self, per_minute: int, clock: Callable[[], float] = time.monotonic) -> None:
        self._per_minute = per_minute
        self._clock = clock
        self._buckets: OrderedDict[str, tuple[float, float]] = OrderedDict()

    def take(self, client: str, told: str = "the client") -> None:
        """Count one request.

        Raises
        ------
        Problem
            429: the bucket is empty.
        """
        if self._per_minute == 0:
            return
        tokens = self._tokens(client)
        if tokens < 1:
            raise self._refusal(tokens, told)
        self._put(client, tokens - 1)

    def _tokens(self, client: str) -> float:
        tokens, then = self._buckets.get(client, (float(self._per_minute), 0.0))
        return min(float(self._per_minute), tokens + (self._clock() - then) * self._per_minute / 60)

    def _put(self, client: str, tokens: float) -> None:
        self._buckets[client] = (tokens, self._clock())
        self._buckets.move_to_end(client)
        if len(self._buckets) > MOST_CLIENTS:
            self._buckets.popitem(last=False)

    def _refusal(self, tokens: float, told: str) -> Problem:
        wait = max(1, math.ceil((1 - tokens) * 60 / self._per_minute))
        return Problem(
            "rate-limited",
            f"More than {self._per_minute:,} requests a minute from {told}; try again in {wait} s.",
            headers={
                "Retry-After": str(wait),
                "RateLimit-Policy": f'"requests";q={self._per_minute};w=60',
                "RateLimit": f'"requests";r=0;t={wait}',
            },
        )


class Rating:
    """Layer that counts each request with its client, and with all."""

    def __init__(self, app: ASGIApp, each: Rates, total: Rates) -> None:
        self._app = app
        self._each = each
        self._total = total

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] == "http" and not scope["path"].startswith(EXEMPT):
            record = record_of(scope)
            # A client that asks too often takes nothing from what others may ask for.
            self._each.take(record.client, "this key" if record.key else "this address")
            self._total.take("", "all clients together")
        await self._app(scope, receive, send)
