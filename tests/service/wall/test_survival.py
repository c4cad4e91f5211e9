"""The wall seen from outside: what one request does to itself, it does to no other."""

from __future__ import annotations

import json
import os
import signal
import socket
import time
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from pathlib import Path

import httpx
import numpy as np
import psutil
import pytest

from tests.service import bodies
from tests.service.conftest import alone, worker_processes
from tests.service.problem_shape import assert_problem

HEAVY = json.dumps(bodies.heavy_grid()).encode()
LIMIT = 4.0
"""Seconds a request may take in the service under test; the heavy grid takes several times that."""


@pytest.fixture(scope="module")
def narrow():
    """One worker, no queue, little patience."""
    with alone(**bodies.HEAVY_LIMITS, queue=0, request_seconds=LIMIT) as served:
        yield served


def ended(pid):
    """Gone, or dead and waiting for a parent that will never ask."""
    try:
        return psutil.Process(pid).status() == psutil.STATUS_ZOMBIE
    except psutil.NoSuchProcess:
        return True


def heavy(served):
    return httpx.post(f"{served.address}/v1/grid?format=npy", content=HEAVY, headers=bodies.JSON, timeout=60)


def assert_computes(served):
    answer = httpx.post(f"{served.address}/v1/profile", json=bodies.PROFILE, timeout=60)
    assert answer.status_code == 200, answer.text
    np.testing.assert_allclose(answer.json()["values"], bodies.film_profile(np.linspace(0, 1, 17)), atol=1e-12)


def state(served):
    return httpx.get(f"{served.address}/health/ready", timeout=10).json()


def until(condition, seconds=10.0):
    end = time.monotonic() + seconds
    while not condition():
        assert time.monotonic() < end, "it did not happen in time"
        time.sleep(0.01)


@contextmanager
def under_way(served):
    """A heavy request in a thread, once the worker has it; yields the future of its answer."""
    with ThreadPoolExecutor(1) as threads:
        future = threads.submit(heavy, served)
        until(lambda: state(served)["busy"] == 1)
        yield future


def test_worker_killed_during_a_request_costs_that_request(narrow):
    with under_way(narrow) as future:
        time.sleep(0.3)
        os.kill(*worker_processes(narrow), signal.SIGKILL)
        assert_problem(future.result(), 500, kind="internal")
    assert_computes(narrow)
    assert "a worker died with code -9" in narrow.log.read_text()


def test_worker_killed_between_requests_costs_nothing(narrow):
    assert_computes(narrow)
    (victim,) = worker_processes(narrow)
    os.kill(victim, signal.SIGKILL)
    until(lambda: ended(victim))
    assert_computes(narrow)
    assert len(worker_processes(narrow)) == 1
    assert worker_processes(narrow) != {victim}


def test_too_slow_is_504_and_ends_the_work(narrow):
    assert_computes(narrow)
    before = worker_processes(narrow)
    begin = time.monotonic()
    document = assert_problem(heavy(narrow), 504, kind="timeout")
    assert LIMIT <= time.monotonic() - begin < LIMIT + 3
    assert "4 s" in document["detail"]
    assert all(map(ended, before))
    assert_computes(narrow)


def test_full_queue_is_503_with_retry_after(narrow):
    with under_way(narrow) as future:
        answer = httpx.post(f"{narrow.address}/v1/profile", json=bodies.PROFILE)
        assert_problem(answer, 503, kind="busy")
        assert int(answer.headers["Retry-After"]) >= 1
        assert httpx.get(f"{narrow.address}/health/live").status_code == 200
        assert future.result().status_code == 504
    assert_computes(narrow)


def test_client_that_leaves_has_its_computation_ended(narrow):
    assert_computes(narrow)
    before = worker_processes(narrow)
    head = (
        "POST /v1/grid?format=npy HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
        f"Content-Length: {len(HEAVY)}\r\n\r\n"
    )
    with socket.create_connection(("127.0.0.1", int(narrow.address.rpartition(":")[2]))) as raw:
        raw.sendall(head.encode() + HEAVY)
        until(lambda: state(narrow)["busy"] == 1)
    left = time.monotonic()
    until(lambda: state(narrow)["busy"] == 0)
    assert time.monotonic() - left < LIMIT / 2
    assert all(map(ended, before))
    assert_computes(narrow)


def test_client_that_leaves_in_the_middle_of_its_body_leaves_no_trace(narrow):
    head = (
        "POST /v1/grid HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
        "X-Marked: half\r\nContent-Length: 1000\r\n\r\nhalf a body"
    )
    with socket.create_connection(("127.0.0.1", int(narrow.address.rpartition(":")[2]))) as raw:
        raw.sendall(head.encode())
        time.sleep(0.2)
    assert_computes(narrow)
    assert "Traceback" not in narrow.log.read_text()


def test_event_loop_answers_while_a_million_rows_are_read(service, client):
    """Parsing and computing hold an interpreter lock; it must not be the server's."""
    rows = 1_000_000
    rng = np.random.default_rng(6)
    columns = {"l": np.arange(1, rows + 1), "real": rng.normal(size=rows), "imag": rng.normal(size=rows)}
    given = {"cell": {"period": 5e6}, "values": "density_coefficient"}
    given |= {name: column.tolist() for name, column in columns.items()}
    body = json.dumps({"set": given, "from": [0], "to": [1], "samples": 50}).encode()
    assert len(body) > 40_000_000
    delays = []
    with ThreadPoolExecutor(1) as threads, httpx.Client(base_url=service.address) as other:
        future = threads.submit(client.post, "/v1/profile?format=npy", content=body, headers=bodies.JSON)
        until(lambda: other.get("/health/ready").json()["busy"] == 1)
        while not future.done():
            begin = time.perf_counter()
            assert other.get("/health/live").status_code == 200
            delays.append(time.perf_counter() - begin)
            time.sleep(0.01)
    assert future.result().status_code == 200, future.result().text
    assert len(delays) > 20, "the request was over too soon to tell"
    # On a crowded machine single answers are late by themselves.
    assert np.quantile(delays, 0.9) < 0.1
    assert max(delays) < 0.7


@pytest.mark.skipif(not Path("/proc/self/fd").exists(), reason="descriptors are counted in /proc")
def test_no_descriptor_leaks(narrow):
    def descriptors():
        pids = [narrow.process.pid, *sorted(worker_processes(narrow))]
        return [len(list(Path(f"/proc/{pid}/fd").iterdir())) for pid in pids]

    address = int(narrow.address.rpartition(":")[2])
    with httpx.Client(base_url=narrow.address, timeout=60) as one:

        def round_of_requests():
            for form in ("json", "npy", "npz", "csv"):
                assert one.post(f"/v1/points?format={form}", json=bodies.POINTS).status_code == 200
            assert one.post("/v1/profile", json={}).status_code == 422
            assert one.post("/v1/profile", content=b"{", headers=bodies.JSON).status_code == 400
            assert one.post("/v1/profile", json=bodies.PROFILE, headers={"Accept": "a/b"}).status_code == 406
            assert one.get("/v1/nothing").status_code == 404
            sent = bodies.film_form(("text/csv", bodies.as_csv(bodies.table_of(bodies.FILM))))
            assert one.post("/v1/profile", content=sent, headers={"Content-Type": bodies.FORM}).status_code == 200
            with socket.create_connection(("127.0.0.1", address)) as raw:
                raw.sendall(b"POST /v1/grid HTTP/1.1\r\nHost: localhost\r\nContent-Length: 9\r\n\r\n{")

        round_of_requests()
        before = descriptors()
        for _ in range(10):
            round_of_requests()
        # The last connections may still be on their way out.
        until(lambda: max(after - start for after, start in zip(descriptors(), before, strict=True)) <= 1)


def test_workers_end_with_their_server():
    """Even with one that is killed and can end nothing itself."""
    with alone(compute_workers=1) as served:
        pids = worker_processes(served)
        assert len(pids) == 1
        served.process.kill()
        until(lambda: all(map(ended, pids)))
