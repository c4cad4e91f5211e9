from __future__ import annotations

from importlib.metadata import version

import psutil

from service.routes.health import LIBRARIES
from service.store.sqlite import library


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
