from __future__ import annotations

import asyncio
import json
import signal
import time
from concurrent.futures import ThreadPoolExecutor

import httpx
import pytest
from starlette.responses import Response

from service.guard.stopping import Gate, Passing, stopped_gently
from tests.service import bodies
from tests.service.conftest import alone
from tests.service.guard.asgi import around, ask
from tests.service.problem_shape import assert_problem


def waiting(event):
    async def app(scope, receive, send):
        await event.wait()
        await Response("finished")(scope, receive, send)

    return app


def test_what_is_under_way_ends_and_what_is_new_is_refused():
    async def scenario():
        gate, event = Gate(30), asyncio.Event()
        app = around(Passing, waiting(event), gate=gate)
        running = [asyncio.create_task(ask(app)) for _ in range(3)]
        await asyncio.sleep(0.01)
        stop = asyncio.create_task(gate.drain())
        await asyncio.sleep(0.01)
        refused = await ask(app)
        assert (refused.status, refused.headers["connection"]) == (503, "close")
        assert int(refused.headers["retry-after"]) > 0
        assert not stop.done()
        event.set()
        await asyncio.wait_for(stop, 1)
        for one in running:
            assert (await one).body == b"finished"
        # Whether it lives is answered to the end.
        assert (await ask(app, path="/health/live")).status == 200
        assert (await ask(app, path="/health/ready")).status == 503

    asyncio.run(scenario())


def test_nothing_under_way_stops_at_once():
    async def scenario():
        gate = Gate(30)
        await asyncio.wait_for(gate.drain(), 1)
        assert gate.stopping

    asyncio.run(scenario())


def test_what_takes_too_long_is_cut_with_a_word():
    async def scenario():
        gate = Gate(0.05)
        app = around(Passing, waiting(asyncio.Event()), gate=gate)
        running = asyncio.create_task(ask(app))
        await asyncio.sleep(0.01)
        await asyncio.wait_for(gate.drain(), 2)
        answer = await running
        assert answer.status == 503
        assert json.loads(answer.body)["type"].endswith(":not-ready")

    asyncio.run(scenario())


def test_second_request_to_stop_cuts_at_once():
    async def scenario():
        gate = Gate(600)
        app = around(Passing, waiting(asyncio.Event()), gate=gate)
        running = asyncio.create_task(ask(app))
        await asyncio.sleep(0.01)
        stop = asyncio.create_task(gate.drain())
        await asyncio.sleep(0.01)
        gate.hurry()
        assert (await asyncio.wait_for(running, 2)).status == 503
        await asyncio.wait_for(stop, 2)

    asyncio.run(scenario())


def test_other_cancellations_stay_cancellations():
    async def scenario():
        app = around(Passing, waiting(asyncio.Event()), gate=Gate(1))
        running = asyncio.create_task(ask(app))
        await asyncio.sleep(0.01)
        running.cancel()
        with pytest.raises(asyncio.CancelledError):
            await running

    asyncio.run(scenario())


def test_signal_reaches_the_server_when_all_is_done():
    async def scenario():
        told = []
        before = signal.signal(signal.SIGTERM, lambda *given: told.append(given[0]))
        try:
            gate, event = Gate(30), asyncio.Event()
            app = around(Passing, waiting(event), gate=gate)
            running = asyncio.create_task(ask(app))
            await asyncio.sleep(0.01)
            with stopped_gently(gate):
                signal.raise_signal(signal.SIGTERM)
                await asyncio.sleep(0.1)
                assert gate.stopping
                assert not told
                event.set()
                assert (await running).status == 200
                await asyncio.sleep(0.05)
                assert told == [signal.SIGTERM]
            signal.raise_signal(signal.SIGTERM)
            assert told == [signal.SIGTERM] * 2
        finally:
            signal.signal(signal.SIGTERM, before)

    asyncio.run(scenario())


def test_without_a_server_signals_are_left_alone():
    async def scenario():
        before = [signal.getsignal(number) for number in (signal.SIGTERM, signal.SIGINT)]
        with stopped_gently(Gate(1)):
            # What the loop itself has set is no server's.
            assert signal.getsignal(signal.SIGTERM) is before[0]
        assert [signal.getsignal(number) for number in (signal.SIGTERM, signal.SIGINT)] == before

    asyncio.run(scenario())


def grid(share):
    """The heavy grid with every so manieth of its coefficients."""
    body = bodies.heavy_grid()
    for name in ("h", "k", "l", "real", "imag"):
        body["set"][name] = body["set"][name][::share]
    return body


@pytest.mark.parametrize(("seconds", "whole"), [(60, True), (0.5, False)])
def test_real_service_told_to_stop(seconds, whole):
    """A computation under way ends and its client has all of it; one that is too long gets a clean refusal."""
    with (
        alone(**bodies.HEAVY_LIMITS, stop_seconds=seconds, request_seconds=100) as served,
        ThreadPoolExecutor(2) as threads,
    ):
        with httpx.Client(base_url=served.address, timeout=90) as client:
            future = threads.submit(client.post, "/v1/grid?format=npy", json=grid(10 if whole else 1))
            while httpx.get(f"{served.address}/health/ready").json()["busy"] == 0:
                time.sleep(0.01)
            time.sleep(0.3)
            begun = time.monotonic()
            served.process.send_signal(signal.SIGTERM)
            if whole:
                time.sleep(0.5)
                refused = httpx.post(f"{served.address}/v1/profile", json=bodies.PROFILE)
                assert_problem(refused, 503, kind="not-ready")
                assert int(refused.headers["Retry-After"]) > 0
                answer = future.result()
                assert answer.status_code == 200
                assert len(answer.content) == int(answer.headers["Content-Length"])
                assert answer.content[:6] == b"\x93NUMPY"
            else:
                document = assert_problem(future.result(), 503, kind="not-ready")
                assert "stopping" in document["detail"]
                assert time.monotonic() - begun < 20
        assert served.process.wait(30) == 0
        told = served.log.read_text()
        assert "Traceback" not in told


def test_idle_service_stops_at_once_with_a_connection_kept_open():
    with alone(compute_workers=1) as served, httpx.Client(base_url=served.address) as client:
        assert client.get("/health/live").status_code == 200
        served.process.send_signal(signal.SIGTERM)
        assert served.process.wait(15) == 0
