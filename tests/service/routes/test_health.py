from __future__ import annotations

import asyncio
from importlib.metadata import version

import httpx
import psutil

from service.app import create_app
from service.routes.health import LIBRARIES
from service.settings import Settings
from service.store.sqlite import library
from service.store.store import Store
from tests.service.problem_shape import assert_problem


def test_live(client):
    assert client.get("/health/live").json() == {"status": "live", "version": version("densityloom")}


def test_ready(service, client):
    ready = client.get("/health/ready").json()
    assert ready == {
        "status": "ready",
        "version": version("densityloom"),
        "workers": 2,
        "busy": 0,
        "waiting": 0,
        "store": library().told(),
        "libraries": {name: version(name) for name in LIBRARIES},
    }
    assert len(psutil.Process(service.process.pid).children()) == 2


def test_both_answer_head(client):
    for address in ("/health/live", "/health/ready"):
        answer = client.head(address)
        assert (answer.status_code, answer.content) == (200, b"")


def test_without_its_keys_a_service_that_asks_for_them_is_not_ready(tmp_path):
    (tmp_path / "file").write_text("")
    settings = Settings(data_dir=tmp_path / "file" / "x", require_keys=True, compute_workers=1)
    app = create_app(settings)
    app.state.pool = object()
    app.state.store = Store(settings)

    async def ask():
        transport = httpx.ASGITransport(app)
        async with httpx.AsyncClient(transport=transport, base_url="http://127.0.0.1") as client:
            return await client.get("/health/ready")

    answer = asyncio.run(ask())
    assert_problem(answer, 503)
    assert "store is away" in answer.json()["detail"]
