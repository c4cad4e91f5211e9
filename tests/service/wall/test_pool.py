from __future__ import annotations

import asyncio
import json
import subprocess
import sys
import time
from contextlib import suppress

import pytest

from service.problems import Problem
from service.settings import Settings
from service.spool import Spool
from service.wall import pool as module
from service.wall.pool import Job, Pool
from tests.service import bodies

LIMITS = Settings(**bodies.HEAVY_LIMITS, queue=1, request_seconds=30)


def job(product, body):
    spool = Spool.unnamed()
    spool.append(json.dumps(body).encode())
    return Job(product, "application/json", spool, "npy")


QUICK = ("profile", bodies.PROFILE)
HEAVY = ("grid", bodies.heavy_grid())


def with_pool(scenario, settings=LIMITS):
    """Run a coroutine function with a started pool."""

    async def run():
        pool = Pool(settings)
        await pool.start()
        try:
            await scenario(pool)
        finally:
            await pool.close()

    asyncio.run(run())


async def taken(pool, product, body):
    answer = await pool.run(job(product, body))
    with answer.spool as spool:
        return spool.size


async def until_busy(pool):
    while pool.state()["busy"] == 0:
        await asyncio.sleep(0.01)


def test_queue_and_cancellation():
    async def scenario(pool):
        assert pool.state() == {"workers": 1, "busy": 0, "waiting": 0}
        assert await taken(pool, *QUICK) == 128 + 17 * 8
        heavy = asyncio.create_task(taken(pool, *HEAVY))
        await until_busy(pool)
        waiting = asyncio.create_task(taken(pool, *QUICK))
        await asyncio.sleep(0.05)
        assert pool.state() == {"workers": 1, "busy": 1, "waiting": 1}
        with pytest.raises(Problem) as refused:
            await pool.run(job(*QUICK))
        assert refused.value.status == 503
        assert int(refused.value.headers["Retry-After"]) >= 1
        # Who waits gets the worker as soon as the one before has left.
        heavy.cancel()
        with pytest.raises(asyncio.CancelledError):
            await heavy
        begin = time.monotonic()
        assert await waiting > 0
        assert time.monotonic() - begin < 8
        # One that leaves the queue takes its place with it.
        heavy = asyncio.create_task(taken(pool, *HEAVY))
        await until_busy(pool)
        waiting = asyncio.create_task(taken(pool, *QUICK))
        await asyncio.sleep(0.05)
        waiting.cancel()
        await asyncio.sleep(0.05)
        assert pool.state()["waiting"] == 0
        heavy.cancel()
        while pool.state()["busy"]:
            await asyncio.sleep(0.01)

    with_pool(scenario)


def test_closing_cuts_work_short():
    async def scenario(pool):
        heavy = asyncio.create_task(taken(pool, *HEAVY))
        await until_busy(pool)
        await asyncio.sleep(0.2)
        begin = time.monotonic()
        await pool.close()
        assert time.monotonic() - begin < 5
        with pytest.raises(Problem) as cut:
            await heavy
        assert cut.value.kind == "internal"

    with_pool(scenario)


def test_refusals_come_through_and_leave_the_worker():
    async def scenario(pool):
        before = pool._workers[0]._process.pid
        with pytest.raises(Problem) as refused:
            await pool.run(job("profile", {}))
        assert refused.value.places[0].pointer == "/set"
        assert await taken(pool, *QUICK) > 0
        assert pool._workers[0]._process.pid == before

    with_pool(scenario)


def test_worker_that_does_not_start_is_not_mistaken_for_one(monkeypatch):
    """Its process is ended, and the next job tries anew."""
    worker = module._Worker(LIMITS)
    monkeypatch.setattr(module, "START_SECONDS", 0.001)
    with pytest.raises(TimeoutError):
        worker.start()
    assert worker._process is None
    assert worker._channel is None
    monkeypatch.undo()
    monkeypatch.setattr(sys, "executable", "/bin/false")
    with pytest.raises(module.wire.Closed):
        worker.start()
    assert worker._process is None


def test_worker_that_ends_before_it_reads_its_settings(monkeypatch):
    """Writing to it fails, and nothing of it may be left behind."""
    started = subprocess.Popen

    def ended(*arguments, **options):
        process = started(*arguments, **options)
        process.wait()
        return process

    monkeypatch.setattr(sys, "executable", "/bin/false")
    monkeypatch.setattr(subprocess, "Popen", ended)
    worker = module._Worker(LIMITS)
    with pytest.raises(module.wire.Closed):
        worker.start()
    assert worker._process is None
    assert worker._channel is None


def test_a_client_that_leaves_at_the_end_harms_nobody():
    """Its computation is over, or nearly so; the next client's is not cut short for it."""

    async def scenario(pool):
        for wait in (0.0, 0.002, 0.005, 0.01, 0.02, 0.03):
            leaving = asyncio.create_task(pool.run(job(*QUICK)))
            await asyncio.sleep(wait)
            leaving.cancel()
            with suppress(asyncio.CancelledError):
                (await leaving).spool.close()
            (await pool.run(job(*QUICK))).spool.close()

    with_pool(scenario)


def test_a_worker_that_was_killed_is_not_trusted_to_be_alive():
    async def scenario(pool):
        (await pool.run(job(*QUICK))).spool.close()
        worker = pool._workers[0]
        worker.kill()
        (await pool.run(job(*QUICK))).spool.close()
        assert not worker._killed

    with_pool(scenario, Settings(compute_workers=1))


def test_long_work_that_nobody_waits_for_is_cut_short(monkeypatch):
    monkeypatch.setattr(module, "GRACE_SECONDS", 0.05)

    async def scenario(pool):
        leaving = asyncio.create_task(pool.run(job(*HEAVY)))
        await asyncio.sleep(0.1)
        before = pool._workers[0]._process.pid
        leaving.cancel()
        await asyncio.sleep(0.4)
        (await pool.run(job(*QUICK))).spool.close()
        assert pool._workers[0]._process.pid != before

    with_pool(scenario, Settings(**{**bodies.HEAVY_LIMITS, "compute_workers": 1}, request_seconds=30))
