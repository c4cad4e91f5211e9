"""A bounded pool of worker processes, each of which may die without harm to the others."""

from __future__ import annotations

import asyncio
import logging
import os
import socket
import subprocess
import sys
import time
from concurrent.futures import ThreadPoolExecutor
from contextlib import suppress
from dataclasses import dataclass, field
from typing import Any

from service.guard.record import CURRENT_ID
from service.guard.shares import Shares
from service.problems import Problem
from service.settings import Settings
from service.spool import Spool
from service.wall import wire

log = logging.getLogger("densityloom.pool")

START_SECONDS = 60.0
"""A worker that has not reported by then is broken."""

GRACE_SECONDS = 1.0
"""What nobody waits for any more may go on for so long."""


@dataclass(frozen=True, slots=True)
class Job:
    """A request as it came: its product, the media type and bytes of its body, the form of answer wanted, and
    members of the request that came with the address."""

    product: str
    content_type: str
    body: Spool
    form: str
    members: dict[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Answer:
    """An encoded answer; whoever takes it closes the spool."""

    spool: Spool
    seconds: float
    headers: dict[str, str]


class Pool:
    """Workers and the queue before them. Start and close it from one event loop."""

    def __init__(self, settings: Settings) -> None:
        self._settings = settings
        self._workers = [_Worker(settings) for _ in range(settings.compute_workers)]
        self._free: asyncio.LifoQueue[_Worker] = asyncio.LifoQueue()
        self._threads = ThreadPoolExecutor(len(self._workers), thread_name_prefix="wall")
        self._waiting = 0
        self._busy = 0
        self._seconds = 1.0
        self.computed = 0
        self._shares = Shares(settings.concurrent_per_key)

    async def start(self) -> None:
        """Start all workers and wait until they report."""
        loop = asyncio.get_running_loop()
        await asyncio.gather(*(loop.run_in_executor(self._threads, worker.start) for worker in self._workers))
        for worker in self._workers:
            self._free.put_nowait(worker)

    async def close(self) -> None:
        """End all workers; a computation under way is cut short."""
        for worker in self._workers:
            worker.kill()
        self._threads.shutdown(wait=True, cancel_futures=True)
        for worker in self._workers:
            worker.end()

    def state(self) -> dict[str, int]:
        """Numbers for the health answer."""
        return {"workers": len(self._workers), "busy": self._busy, "waiting": self._waiting}

    async def run(self, job: Job) -> Answer:
        """Have a job computed; if the caller is cancelled, the computation ends soon too.

        Raises
        ------
        Problem
            What the worker found wrong; 503 when the queue is full, 429 when the client has as much
            under way as it may, 504 when time is up, 500 when the worker died.
        """
        with self._shares.held():
            return await self._run(job)

    async def _run(self, job: Job) -> Answer:
        if self._free.empty() and self._waiting >= self._settings.queue:
            wait = max(1, round(self._seconds * (self._waiting + 1) / len(self._workers)))
            raise Problem("busy", f"All workers are busy; try again in {wait} s.", headers={"Retry-After": str(wait)})
        self._waiting += 1
        try:
            worker = await self._free.get()
        finally:
            self._waiting -= 1
        self._busy += 1
        loop = asyncio.get_running_loop()
        work = loop.run_in_executor(self._threads, worker.call, job, CURRENT_ID.get())
        try:
            answer = await asyncio.shield(work)
            self.computed += 1
            # A running mean of what a request takes, for Retry-After.
            self._seconds += 0.2 * (answer.seconds - self._seconds)
            return answer
        except asyncio.CancelledError:
            # Most computations end sooner than a new process starts; a long one is cut short.
            loop.call_later(GRACE_SECONDS, lambda: None if work.done() else worker.kill())
            work.add_done_callback(_discard)
            raise
        finally:
            work.add_done_callback(lambda _: self._release(worker))

    def _release(self, worker: _Worker) -> None:
        self._busy -= 1
        self._free.put_nowait(worker)


def _discard(work: asyncio.Future[Answer]) -> None:
    """Let go of an answer, or of the fault, that nobody waits for any more."""
    if not work.cancelled() and work.exception() is None:
        work.result().spool.close()


class _Worker:
    """One child process; its methods but `kill` are called from one thread at a time."""

    def __init__(self, settings: Settings) -> None:
        self._settings = settings
        self._process: subprocess.Popen[bytes] | None = None
        self._channel: socket.socket | None = None
        self._killed = False

    def start(self) -> None:
        """Start the process and wait until it is ready."""
        ours, theirs = socket.socketpair()
        threads = str(self._settings.compute_threads)
        limits = dict.fromkeys(("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"), threads)
        with theirs:
            process = subprocess.Popen(  # noqa: S603 - our own module
                [sys.executable, "-m", "service.wall.worker", str(theirs.fileno())],
                stdin=subprocess.PIPE,
                # A library that prints what it cannot read would mix clients' text into our output.
                stdout=subprocess.DEVNULL,
                pass_fds=[theirs.fileno()],
                env={**os.environ, **limits, "PYTHONPATH": os.pathsep.join(filter(None, sys.path))},
            )
        self._process, self._channel = process, ours
        ours.settimeout(START_SECONDS)
        try:
            if process.stdin is not None:
                # One that has ended before it read its settings is found out by the channel.
                with suppress(BrokenPipeError), process.stdin:
                    process.stdin.write(self._settings.model_dump_json().encode())
            wire.receive(ours)
        except BaseException:
            self.end()
            raise

    def call(self, job: Job, request_id: str | None = None) -> Answer:
        """Have one job computed, in a new process if the last one has died; `request_id` is for its log."""
        # One that was killed a moment ago may still look alive.
        if self._killed or self._process is None or self._process.poll() is not None or self._channel is None:
            self.end()
            self.start()
        process, channel = self._process, self._channel
        if process is None or channel is None:
            raise Problem("internal", "A worker could not be started.")
        limit = self._settings.request_seconds
        deadline = time.monotonic() + limit
        channel.settimeout(limit)
        try:
            head = {
                "product": job.product,
                "content_type": job.content_type,
                "form": job.form,
                "members": job.members,
                "request_id": request_id,
            }
            wire.send(channel, head, [job.body.descriptor])
            message, descriptors = wire.receive(channel)
        except TimeoutError as fault:
            self.end()
            raise Problem(
                "timeout",
                f"The computation took longer than the limit of {limit:g} s. Ask for fewer samples or coefficients.",
            ) from fault
        except (wire.Closed, OSError) as fault:
            wanted = self._killed
            code = self.end()
            level = logging.DEBUG if wanted else logging.ERROR
            log.log(level, "a worker died with code %s, %.1f s before its deadline", code, deadline - time.monotonic())
            raise Problem(
                "internal", "The process that computed this request died; others are not affected."
            ) from fault
        spool = Spool(descriptors[0])
        if "problem" in message:
            spool.close()
            raise Problem.from_message(message["problem"])
        return Answer(spool, float(message["seconds"]), message["headers"])

    def kill(self) -> None:
        """End the process from any thread; a call under way fails."""
        self._killed = True
        if self._process is not None:
            self._process.kill()

    def end(self) -> int | None:
        """End the process and let go of all that belongs to it; returns its exit code."""
        if self._channel is not None:
            self._channel.close()
            self._channel = None
        if self._process is None:
            return None
        self._process.kill()
        code = self._process.wait()
        self._process = None
        self._killed = False
        return code
