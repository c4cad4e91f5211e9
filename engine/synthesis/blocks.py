"""Running a prepared source: whole, or block by block."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import AbstractContextManager, nullcontext
from functools import lru_cache
from threading import Lock

import numpy as np
import threadpoolctl

from engine.arrays import AnyArray
from engine.synthesis.estimate import Source

Progress = Callable[[int, int], None]
"""Called with the planes done and the planes in all; may raise to end the work."""


def fill(
    source: Source,
    out: AnyArray,
    *,
    threads: int,
    progress: Progress | None = None,
    each: Callable[[AnyArray], None] | None = None,
) -> None:
    """Compute all planes into `out`, shape (planes, ...).

    `each` sees every finished block while it is still in cache; it is called from several
    threads, one at a time.
    """
    done = 0
    lock = Lock()

    def work(block: tuple[int, int]) -> None:
        nonlocal done
        view = out[block[0] : block[1]]
        source.compute(*block, view)
        with lock:
            done += block[1] - block[0]
            if each is not None:
                each(view)
            if progress is not None:
                progress(done, source.planes)

    blocks = list(_blocks(source))
    if not source.concurrent or threads == 1 or len(blocks) == 1:
        with _library_threads(threads):
            for block in blocks:
                work(block)
        return
    # Each thread takes a run of neighbouring blocks: two threads that touch one page of fresh
    # memory wait for each other.
    shares = np.array_split(np.arange(len(blocks)), min(threads, len(blocks)))

    def share(part: np.ndarray[tuple[int], np.dtype[np.int64]]) -> None:
        for number in part:
            work(blocks[number])

    with _library_threads(1), ThreadPoolExecutor(len(shares)) as pool:
        list(pool.map(share, shares))


def stream(source: Source, dtype: np.dtype[np.generic], rest: tuple[int, ...], threads: int) -> Iterator[AnyArray]:
    """Yield blocks of planes in order, each a new array of shape (planes of the block, *rest)."""

    def work(block: tuple[int, int]) -> AnyArray:
        values = np.empty((block[1] - block[0], *rest), dtype=dtype)
        source.compute(*block, values)
        return values

    blocks = list(_blocks(source))
    if not source.concurrent or threads == 1:
        for block in blocks:
            yield work(block)
        return
    with ThreadPoolExecutor(threads) as pool:
        # As many blocks are in the making as there are threads, and one is waiting to be taken.
        waiting = [pool.submit(work, block) for block in blocks[: threads + 1]]
        for block in blocks[threads + 1 :]:
            yield waiting.pop(0).result()
            waiting.append(pool.submit(work, block))
        for future in waiting:
            yield future.result()


def _blocks(source: Source) -> Iterator[tuple[int, int]]:
    for start in range(0, source.planes, source.block):
        yield start, min(start + source.block, source.planes)


@lru_cache(maxsize=1)
def _controller() -> threadpoolctl.ThreadpoolController:
    return threadpoolctl.ThreadpoolController()


def _library_threads(threads: int) -> AbstractContextManager[object]:
    """Threads that a linear-algebra library may use inside one block."""
    controller = _controller()
    return controller.limit(limits=threads) if controller.info() else nullcontext()
