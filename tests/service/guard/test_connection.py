"""Connections as they are on a network: half a request, an answer nobody takes."""

from __future__ import annotations

import json
import socket
import subprocess
import sys
import time
from contextlib import contextmanager, suppress

import httpx
import psutil
import pytest

from tests.service import bodies
from tests.service.conftest import alone

HEAD = (
    "POST /v1/grid?format=npy HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
    "Content-Length: {}\r\n\r\n"
)


@pytest.fixture(scope="module")
def hasty():
    """A service of little patience."""
    with alone(compute_workers=1, body_seconds=1, send_seconds=1) as served:
        yield served


@contextmanager
def connected(served, **options):
    with socket.socket() as raw:
        for name, value in options.items():
            raw.setsockopt(socket.SOL_SOCKET, getattr(socket, name), value)
        raw.settimeout(30)
        raw.connect(("127.0.0.1", int(served.address.rpartition(":")[2])))
        yield raw


def all_of(raw):
    received = b""
    while part := raw.recv(1 << 16):
        received += part
    return received


def in_flight(served):
    (line,) = (
        line
        for line in httpx.get(f"{served.address}/metrics").text.splitlines()
        if line.startswith("densityloom_in_flight")
    )
    return float(line.split()[1])


def test_body_that_stops_is_answered_408_and_closed(hasty):
    with connected(hasty) as raw:
        raw.sendall(HEAD.format(1000).encode() + b'{"set": ')
        answer = all_of(raw)
    assert answer.startswith(b"HTTP/1.1 408 ")
    assert b"application/problem+json" in answer
    assert b"connection: close" in answer.lower()
    assert b"x-request-id: " in answer


@pytest.mark.parametrize(
    "sent", [b"nonsense\r\n\r\n", b"GET / HTTP/1.1\r\nHost: a\r\nHost: b\r\n\r\n", b"GET / HTTP/1.1\r\n\r\n"]
)
def test_what_is_no_http_is_a_problem_too(hasty, sent):
    with connected(hasty) as raw:
        raw.sendall(sent)
        answer = all_of(raw)
    head, _, body = answer.partition(b"\r\n\r\n")
    assert head.startswith(b"HTTP/1.1 400 ")
    assert b"content-type: application/problem+json" in head
    assert b"x-request-id: " in head
    assert b"urn:densityloom:problem:malformed-request" in body


def test_body_that_breaks_off_in_disorder(hasty):
    """Before it was answered, and while its answer is on its way."""
    broken = HEAD.replace("Content-Length: {}", "Transfer-Encoding: chunked").encode() + b"5\r\n{"
    with connected(hasty) as raw:
        raw.sendall(broken)
        time.sleep(0.2)
        raw.sendall(b"xxxxxxxxxxx")
        assert all_of(raw).startswith(b"HTTP/1.1 400 ")
    body = json.dumps({**bodies.GRID, "shape": [100, 100, 100]}).encode()
    with connected(hasty, SO_RCVBUF=4096) as raw:
        raw.sendall(HEAD.format(len(body)).encode() + body)
        assert raw.recv(100).startswith(b"HTTP/1.1 200 ")
        raw.sendall(b"nonsense\r\n\r\n")
        with suppress(ConnectionResetError):
            all_of(raw)
    assert httpx.get(f"{hasty.address}/health/live").status_code == 200
    told = hasty.log.read_text()
    assert "Traceback" not in told
    assert '"trace"' not in told


def test_head_without_end_is_bounded(hasty):
    with connected(hasty) as raw:
        raw.sendall(b"GET / HTTP/1.1\r\nHost: localhost\r\nX-Long: " + b"x" * 200_000)
        try:
            answer = all_of(raw)
        except ConnectionResetError:
            answer = b"HTTP/1.1 400 "
    assert answer.startswith(b"HTTP/1.1 400 ")


def test_answer_that_is_not_taken_is_let_go(hasty):
    """Megabytes for a client that reads none of them: neither they nor its connection are kept."""
    body = json.dumps({**bodies.GRID, "shape": [200, 200, 200]}).encode()
    with connected(hasty, SO_RCVBUF=4096) as raw:
        raw.sendall(HEAD.format(len(body)).encode() + body)
        assert raw.recv(100).startswith(b"HTTP/1.1 200 ")
        end = time.monotonic() + 20
        while in_flight(hasty):
            assert time.monotonic() < end, "the answer was kept"
            time.sleep(0.05)
        ports = {one.raddr.port for one in psutil.Process(hasty.process.pid).net_connections("tcp") if one.raddr}
        assert raw.getsockname()[1] not in ports
        with pytest.raises(ConnectionResetError):
            all_of(raw)
    assert "did not take its answer in time" in hasty.log.read_text()


PATIENCE = """
import service.guard.connection as module
module.HEAD_SECONDS = 0.5
from service.cli import main
main(["serve", "--port", "{}"])
"""


def test_requests_that_never_come_to_their_end(tmp_path, monkeypatch):
    """Half a head, a head byte by byte, and a body that goes on after it was refused: all are cut in the end."""
    monkeypatch.setenv("DENSITYLOOM_DATA_DIR", str(tmp_path))
    monkeypatch.setenv("DENSITYLOOM_COMPUTE_WORKERS", "1")
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        port = probe.getsockname()[1]
    process = subprocess.Popen([sys.executable, "-c", PATIENCE.format(port)])
    address = ("127.0.0.1", port)
    try:
        end = time.monotonic() + 60
        while True:
            assert time.monotonic() < end
            try:
                if httpx.get(f"http://127.0.0.1:{port}/health/ready").status_code == 200:
                    break
            except httpx.TransportError:
                time.sleep(0.05)
        for begin in (b"GET / HT", b"GET / HTTP/1.1\r\nHost: localhost\r\nX-Y: ", HEAD.format(10**9).encode()):
            with socket.create_connection(address, 30) as raw:
                raw.sendall(begin)
                cut = False
                for _ in range(200):
                    time.sleep(0.05)
                    try:
                        raw.sendall(b"x")
                    except (ConnectionResetError, BrokenPipeError):
                        cut = True
                        break
                assert cut
        with socket.create_connection(address, 30) as silent, pytest.raises(ConnectionResetError):
            silent.recv(10)
        # One that is in time is not touched, however long its work takes.
        with httpx.Client(base_url=f"http://127.0.0.1:{port}") as client:
            for _ in range(3):
                assert client.get("/health/live").status_code == 200
                time.sleep(0.4)
    finally:
        process.terminate()
        assert process.wait(20) == 0
