"""How much work a client may have under way at once, so that one leaves room for others."""

from __future__ import annotations

import ipaddress
from collections import Counter
from collections.abc import Iterator
from contextlib import contextmanager

from service.guard.record import CURRENT, Record
from service.problems import Problem

RETRY_SECONDS = 1


class Shares:
    """Work under way, by client."""

    def __init__(self, most: int) -> None:
        self._most = most
        self._held: Counter[str] = Counter()

    @contextmanager
    def held(self) -> Iterator[None]:
        """Count one piece of work for the client of the running request, while it is computed or waits.

        Raises
        ------
        Problem
            429: the client has as much under way as it may.
        """
        client = _shared(CURRENT.get())
        if client is None:
            yield
            return
        if self._held[client] >= self._most:
            raise Problem(
                "rate-limited",
                f"{self._most} requests of one client are computed or wait, as many as may; wait for one of them.",
                headers={"Retry-After": str(RETRY_SECONDS)},
            )
        self._held[client] += 1
        try:
            yield
        finally:
            self._held[client] -= 1
            if not self._held[client]:
                del self._held[client]


def _shared(record: Record | None) -> str | None:
    """The client that work is counted for; without keys, this machine's programs are no one's rivals."""
    if record is None:
        return None
    if record.key is None:
        try:
            if ipaddress.ip_address(record.address).is_loopback:
                return None
        except ValueError:
            pass
    return record.client
