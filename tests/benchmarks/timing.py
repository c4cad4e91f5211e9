"""Best of several runs, with the rivals taking turns so that a slow spell hits all of them."""

from __future__ import annotations

import os
import time
from collections.abc import Callable

CORES = len(os.sched_getaffinity(0))


def best(rounds: int, **rivals: Callable[[], object]) -> dict[str, float]:
    """Shortest time of each rival in seconds."""
    found = dict.fromkeys(rivals, float("inf"))
    for _ in range(rounds):
        for name, rival in rivals.items():
            begin = time.perf_counter()
            rival()
            found[name] = min(found[name], time.perf_counter() - begin)
    return found
