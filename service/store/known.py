"""Which sets are there, asked of the database at most once a second for each."""

from __future__ import annotations

import time
from collections import OrderedDict

from starlette.concurrency import run_in_threadpool

from service.store.records import Sets

SECONDS = 1.0
"""How long another server process's deletion may stay unnoticed; this one's own is noticed at once."""
MOST = 10_000


class Known:
    """Ids of sets that were there a moment ago. Use it from one event loop."""

    def __init__(self) -> None:
        self._seen: OrderedDict[str, float] = OrderedDict()
        self._changes = 0

    async def has(self, sets: Sets, identity: str) -> bool:
        """Whether a set is there.

        Raises
        ------
        Problem
            503: the store does not answer.
        """
        now = time.monotonic()
        if now - self._seen.get(identity, -SECONDS) < SECONDS:
            return True
        changes = self._changes
        if not await run_in_threadpool(sets.holds, identity):
            self.forget(identity)
            return False
        if changes != self._changes:
            # Something was deleted while the database was asked.
            return await self.has(sets, identity)
        self._seen[identity] = now
        self._seen.move_to_end(identity)
        if len(self._seen) > MOST:
            self._seen.popitem(last=False)
        return True

    def forget(self, identity: str) -> None:
        """A set has been deleted."""
        self._changes += 1
        self._seen.pop(identity, None)
