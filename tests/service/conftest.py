"""Services in processes of their own, each started once."""

from __future__ import annotations

import os
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import httpx
import psutil
import pytest

from service.access.keys import Keys
from service.store.database import Database, open_database
from tests.service.databases import KINDS, fresh_postgresql
from tests.serving import Served, serving

SMALL = {
    "compute_workers": 1,
    "compute_threads": 1,
    "max_body_bytes": 20_000,
    "max_coefficients": 50,
    "max_samples": 300_000,
    "max_json_values": 1000,
    "max_memory_bytes": 2 * 2**20,
}
"""Limits that small requests pass."""


@contextmanager
def alone(*arguments: str, **settings: object) -> Iterator[Served]:
    """A service with these arguments and settings, and none of the developer's."""
    with pytest.MonkeyPatch.context() as patch:
        for name in list(os.environ):
            if name.upper().startswith("DENSITYLOOM_"):
                patch.delenv(name)
        with serving(*arguments, **settings) as served:
            yield served


def worker_processes(served: Served) -> set[int]:
    """The numbers of a service's worker processes."""
    return {child.pid for child in psutil.Process(served.process.pid).children()}


@pytest.fixture(scope="session")
def service() -> Iterator[Served]:
    """A service with the default limits; one thread a worker, so that sums repeat bit by bit."""
    with alone(compute_workers=2, compute_threads=1) as served:
        yield served


@pytest.fixture(scope="session")
def client(service: Served) -> Iterator[httpx.Client]:
    with httpx.Client(base_url=service.address, timeout=60) as made:
        yield made


@pytest.fixture(scope="session")
def small_service() -> Iterator[Served]:
    """A service whose limits are `SMALL`."""
    with alone(**SMALL) as served:
        yield served


@pytest.fixture(scope="session")
def small_client(small_service: Served) -> Iterator[httpx.Client]:
    with httpx.Client(base_url=small_service.address, timeout=60) as made:
        yield made


@pytest.fixture(params=KINDS)
def address(request, tmp_path) -> Iterator[tuple[Path, str | None]]:
    """Arguments of `open_database`, for each kind of database."""
    if request.param == "sqlite":
        yield tmp_path / "data", None
    else:
        with fresh_postgresql() as url:
            yield tmp_path / "data", url


@pytest.fixture
def database(address) -> Iterator[Database]:
    made = open_database(*address)
    yield made
    made.close()


@pytest.fixture
def keys(database) -> Keys:
    return Keys(database)


@pytest.hookimpl(wrapper=True)
def pytest_runtest_makereport(item, call):
    """A failed test shows what the service it asked has logged."""
    report = yield
    if report.failed:
        for name, value in getattr(item, "funcargs", {}).items():
            if isinstance(value, Served):
                report.sections.append((f"log of {name}", value.log.read_text()[-4000:]))
    return report


@pytest.fixture(scope="module")
def workers(service: Served) -> set[int]:
    """The worker processes before the tests of a module."""
    return worker_processes(service)
