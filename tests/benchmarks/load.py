"""Sustained load on the service: latencies beside those of a bare endpoint, errors, and memory over time.

Needs ``wrk`` on the path. Everything runs on this machine, bounded in time: `LOAD_SECONDS` (environment, 60 by
default; 600 for ten minutes) for the mixed load, a few seconds for each comparison.
"""

from __future__ import annotations

import os
import re
import shutil
import socket
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

import httpx
import psutil

from tests.samples import TRICLINIC, TRICLINIC_ATOMS, crystal_set
from tests.serving import serving

COMPARED_SECONDS = 8
PASSES = 3
CONNECTIONS = 4
CACHED = "/slice?plane=0,0,1&offset=1.5&width=16&height=16&spacing=0.0625&format=u16"
"""256 × 256 samples, as a page asks for while its reader moves through a cell."""

FRESH = """
local number = tonumber(os.getenv("LOAD_START")) + math.floor(1e6 * os.clock())
request = function()
  number = number + 1
  return wrk.format("GET", wrk.path .. "&offset=" .. string.format("%.6f", (number % 9000000) * 1e-6))
end
"""
"""Every request another plane."""

MIXED = """
local base, sets, number = os.getenv("LOAD_SET"), "/v1/sets", 0
local body = io.open(os.getenv("LOAD_BODY")):read("*a")
local kept = io.open(os.getenv("LOAD_KEPT")):read("*a")
local json = { ["Content-Type"] = "application/json" }
local line = "/profile?from=0,0,0&to=0,0,1&uncertainty=true&samples="
local plane = "/slice?plane=0,0,1&width=16&height=16&spacing=0.0625&format=u16&offset="
request = function()
  number = number + 1
  local kind = number % 20
  if kind < 8 then return wrk.format("GET", base .. plane .. (number % 50) / 10) end
  local fresh = string.format("%.6f", 1e-6 * (number * 7919 % 9000000))
  if kind < 12 then return wrk.format("GET", base .. plane .. fresh) end
  if kind < 14 then return wrk.format("GET", base .. line .. 200 + number % 300) end
  if kind == 14 then return wrk.format("GET", sets .. "?limit=20&search=TM") end
  if kind == 15 then return wrk.format("GET", base) end
  if kind == 16 then return wrk.format("POST", "/v1/points", json, body) end
  if kind == 17 then return wrk.format("POST", sets, json, kept) end
  if kind == 18 then return wrk.format("GET", "/health/ready") end
  return wrk.format("GET", base .. "/grid?spacing=0.2&format=u8&preview=" .. 20000 + number % 1000)
end
response = function(status) if status >= 400 then io.stderr:write("status " .. status .. "\\n") end end
"""


@dataclass(frozen=True)
class Measured:
    """What a run of wrk tells: requests per second, milliseconds of half and of 99 % of the requests, and faults."""

    rate: float
    median: float
    most: float
    requests: int
    faults: int


def run(url: str, seconds: float, *, script: str = "", connections: int = CONNECTIONS, **names: str) -> Measured:
    """One run of wrk."""
    with tempfile.NamedTemporaryFile("w", suffix=".lua") as file:
        file.write(script)
        file.flush()
        command = ["wrk", "-t1", f"-c{connections}", f"-d{seconds:g}s", "--timeout", "30s", "--latency", url]
        if script:
            command[1:1] = ["-s", file.name]
        done = subprocess.run(command, capture_output=True, text=True, check=True, env={**os.environ, **names})
    text = done.stdout

    def found(pattern: str) -> str:
        match = re.search(pattern, text)
        return match.group(1) if match else "0"

    faults = int(found(r"Non-2xx or 3xx responses: (\d+)"))
    faults += sum(map(int, re.findall(r"(?:connect|read|write|timeout) (\d+)", text)))
    return Measured(
        float(found(r"Requests/sec:\s+([\d.]+)")),
        _milliseconds(found(r"50%\s+(\S+)")),
        _milliseconds(found(r"99%\s+(\S+)")),
        int(found(r"(\d+) requests in")),
        faults,
    )


def _milliseconds(text: str) -> float:
    match = re.fullmatch(r"([\d.]+)(us|ms|s)", text)
    return float(match.group(1)) * {"us": 1e-3, "ms": 1.0, "s": 1e3}[match.group(2)] if match else float("nan")


@contextmanager
def bare(content: bytes) -> Iterator[str]:
    """The same framework and server with an endpoint that returns these bytes and does nothing else."""
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        port = probe.getsockname()[1]
    code = (
        "import sys, uvicorn; from fastapi import FastAPI, Response; app = FastAPI(); data = sys.stdin.buffer.read();\n"
        "@app.get('/')\n"
        "async def answer() -> Response: return Response(data, media_type='application/octet-stream')\n"
        f"uvicorn.run(app, port={port}, http='h11', log_level='error')"
    )
    process = subprocess.Popen([sys.executable, "-c", code], stdin=subprocess.PIPE)
    assert process.stdin is not None
    with process.stdin as pipe:
        pipe.write(content)
    address = f"http://127.0.0.1:{port}/"
    try:
        for _ in range(200):
            try:
                httpx.get(address)
                break
            except httpx.TransportError:
                time.sleep(0.05)
        yield address
    finally:
        process.terminate()
        process.wait(10)


def resident(process: psutil.Process) -> float:
    """MiB that a service and its workers hold, what they share counted once."""
    total = 0
    for one in (process, *process.children(recursive=True)):
        try:
            total += one.memory_full_info().pss
        except psutil.NoSuchProcess:
            continue
    return total / 2**20


def main() -> None:
    """Print the figures."""
    if shutil.which("wrk") is None:
        raise SystemExit("this needs wrk: apt-get install wrk")
    given = crystal_set(TRICLINIC, TRICLINIC_ATOMS, d_min=0.8, unit="e/Å³")
    given = {**given, "sigma": [0.05 * value + 0.1 for value in given["amplitude"]]}
    limits = {"requests_per_minute": 0, "concurrent_per_key": 64, "queue": 64, "log_level": "warning"}
    with serving(**limits) as served, httpx.Client(base_url=served.address, timeout=60) as client:
        identity = client.post("/v1/sets", json={"set": given, "name": "TM-1, invented"}).json()["id"]
        base = f"/v1/sets/{identity}"
        content = client.get(base + CACHED, headers={"Accept-Encoding": "identity"}).content
        print(f"Latency over loopback, {CONNECTIONS} connections, {PASSES} alternating passes of {COMPARED_SECONDS} s;")
        print(
            f"a slice of 256 × 256 samples of a set of {len(given['amplitude'])} coefficients, {len(content):,} bytes"
        )
        print("                                p50 ms     p99 ms   requests/s   faults")
        found: dict[str, list[Measured]] = {"bare endpoint, same bytes": [], "cached slice": [], "fresh slice": []}
        with bare(content) as plain:
            for number in range(PASSES):
                found["bare endpoint, same bytes"].append(run(plain, COMPARED_SECONDS))
                found["cached slice"].append(run(served.address + base + CACHED, COMPARED_SECONDS))
                fresh = served.address + base + CACHED.replace("&offset=1.5", "")
                start = str(3_000_000 * number)
                found["fresh slice"].append(run(fresh, COMPARED_SECONDS, script=FRESH, LOAD_START=start))
        for name, runs in found.items():
            best = min(runs, key=lambda one: one.median)
            faults = sum(one.faults for one in runs)
            print(f"  {name:27s} {best.median:9.2f} {best.most:10.2f} {best.rate:12.0f} {faults:8d}", flush=True)
        _sustained(served.address, served.process.pid, base, given)


def _sustained(address: str, process: int, base: str, given: dict[str, object]) -> None:
    """The mixed load, and memory beside it."""
    seconds = float(os.environ.get("LOAD_SECONDS", "60"))
    watched = psutil.Process(process)
    with tempfile.TemporaryDirectory() as folder:
        points, kept = Path(folder) / "points.json", Path(folder) / "kept.json"
        points.write_bytes(
            httpx.Request("POST", "http://x", json={"set": given, "positions": [[0.1, 0.2, 0.3]]}).content
        )
        kept.write_bytes(httpx.Request("POST", "http://x", json={"set": given, "name": "TM-1, invented"}).content)
        names = {"LOAD_SET": base, "LOAD_BODY": str(points), "LOAD_KEPT": str(kept)}
        run(address, 5, script=MIXED, connections=8, **names)
        held: list[float] = []
        begin = time.monotonic()
        with tempfile.TemporaryFile("w+") as sink:
            code = (
                "import json, sys; from tests.benchmarks.load import MIXED, run; from dataclasses import asdict;"
                f"print(json.dumps(asdict(run({address!r}, {seconds!r}, script=MIXED, connections=8))))"
            )
            with subprocess.Popen([sys.executable, "-c", code], stdout=sink, env={**os.environ, **names}) as load:
                while load.poll() is None:
                    held.append(resident(watched))
                    time.sleep(min(5.0, seconds / 20))
            sink.seek(0)
            told = httpx.Response(200, content=sink.read()).json()
    spent = time.monotonic() - begin
    part = max(1, len(held) // 5)
    first, last = (sum(some) / len(some) for some in (held[part : 2 * part] or held, held[-part:]))
    print(f"Mixed load, 8 connections, {spent:.0f} s: {told['requests']:,} requests, {told['faults']} faults,")
    print(f"  {told['rate']:.0f} requests/s, p50 {told['median']:.2f} ms, p99 {told['most']:.1f} ms")
    print(f"  memory of all processes, MiB: {first:.0f} in the second fifth of the time, {last:.0f} in the last,")
    print(f"  {max(held):.0f} at most")
