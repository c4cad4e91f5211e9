"""The process behind the wall: takes one request at a time, computes it, answers.

Started by the pool as ``python -m service.wall.worker DESCRIPTOR``, with its settings on standard
input.
"""

from __future__ import annotations

import logging
import os
import resource
import signal
import socket
import sys
from pathlib import Path
from typing import Any

from service import intake, pipeline
from service.guard import logs
from service.guard.record import CURRENT_ID
from service.problems import Problem
from service.settings import Settings
from service.spool import Spool
from service.store.shelf import Shelf
from service.wall import wire

log = logging.getLogger("densityloom.worker")


def main() -> None:
    """Serve the channel until the server closes it."""
    # An interrupt from a terminal, or a supervisor's request to end, reaches the whole group; the server decides
    # when to end us.
    for number in (signal.SIGINT, signal.SIGTERM):
        signal.signal(number, signal.SIG_IGN)
    channel = socket.socket(fileno=int(sys.argv[1]))
    settings = Settings.model_validate_json(sys.stdin.buffer.read())
    logs.configure(settings)
    _bound_memory(settings)
    shelf = Shelf(settings)
    wire.send(channel, {"ready": os.getpid()})
    while True:
        try:
            message, descriptors = wire.receive(channel)
        except wire.Closed:
            return
        CURRENT_ID.set(message.get("request_id"))
        with Spool(descriptors[0]) as body:
            answer, made = _serve(message, body, shelf, settings)
        with made:
            wire.send(channel, answer, [made.descriptor])


def _serve(message: dict[str, Any], body: Spool, shelf: Shelf, settings: Settings) -> tuple[dict[str, Any], Spool]:
    """One request; a fault that nobody foresaw is logged here and told without detail."""
    made = Spool.unnamed()
    try:
        data = bytes(body.view())
        product, request = intake.read(
            message["product"],
            message["content_type"],
            data,
            max_body_bytes=settings.max_body_bytes,
            shelf=shelf,
            members=message["members"],
        )
        del data
        told = pipeline.answer(product, request, message["form"], made, settings, threads=settings.compute_threads)
    except Problem as problem:
        return _refusal(problem), made
    except MemoryError:
        log.exception("a request exceeded the worker's memory")
        detail = "The work took more memory than was estimated. Ask for fewer samples."
        return _refusal(Problem("too-costly", detail)), made
    except Exception:  # the wall's purpose: whatever happens, the client gets an answer
        log.exception("a request failed")
        return _refusal(Problem("internal", "The computation failed; the fault has been logged.")), made
    return {"seconds": told.seconds, "headers": told.headers, "size": made.size}, made


def _refusal(problem: Problem) -> dict[str, Any]:
    return {"problem": problem.to_message()}


def _bound_memory(settings: Settings) -> None:
    """Let an allocation beyond the limits fail here, before the machine runs out."""
    # What libraries reserve without using counts too, so the bound starts from what is mapped now.
    try:
        mapped = int(Path("/proc/self/statm").read_text().split()[0]) * os.sysconf("SC_PAGE_SIZE")
    except FileNotFoundError:
        # Elsewhere than on Linux the estimate before the work is the only bound.
        return
    spare = 512 * 2**20 + 8 * settings.max_body_bytes
    bound = mapped + settings.max_memory_bytes + spare
    hard = resource.getrlimit(resource.RLIMIT_AS)[1]
    if hard != resource.RLIM_INFINITY:
        bound = min(bound, hard)
    resource.setrlimit(resource.RLIMIT_AS, (bound, hard))


if __name__ == "__main__":
    main()
