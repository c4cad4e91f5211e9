"""A real service in a process of its own, for tests and benchmarks."""

from __future__ import annotations

import os
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

START_SECONDS = 60.0


@dataclass(frozen=True)
class Served:
    """A running service.

    Attributes
    ----------
    address : str
        Base URL.
    process : subprocess.Popen
    log : Path
        What it writes to its standard error.
    ready_seconds : float
        From the command to the first answer of /health/ready.
    """

    address: str
    process: subprocess.Popen[bytes]
    log: Path
    ready_seconds: float


@contextmanager
def serving(*arguments: str, **settings: object) -> Iterator[Served]:
    """Start the service with arguments of its command and settings by their names (``queue=0``), and end it afterwards.

    Its store is in a folder that ends with it, unless the settings name another.
    """
    folder = tempfile.TemporaryDirectory()
    settings = {"data_dir": Path(folder.name) / "data", **settings}
    environment = {f"DENSITYLOOM_{name.upper()}": str(value) for name, value in settings.items()}
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        port = probe.getsockname()[1]
    command = [sys.executable, "-m", "service.cli", "serve", "--port", str(port), *arguments]
    with folder:
        log = Path(folder.name) / "service.log"
        begin = time.perf_counter()
        with log.open("wb") as sink:
            process = subprocess.Popen(command, stdout=sink, stderr=sink, env={**os.environ, **environment})
        address = f"http://127.0.0.1:{port}"
        try:
            _wait(address, process, log, begin + START_SECONDS)
            yield Served(address, process, log, time.perf_counter() - begin)
        finally:
            process.terminate()
            process.wait(20)


def _wait(address: str, process: subprocess.Popen[bytes], log: Path, until: float) -> None:
    while time.perf_counter() < until:
        if process.poll() is not None:
            break
        try:
            if httpx.get(f"{address}/health/ready").status_code == 200:
                return
        except httpx.TransportError:
            time.sleep(0.02)
    raise RuntimeError(f"the service did not become ready:\n{log.read_text()}")
