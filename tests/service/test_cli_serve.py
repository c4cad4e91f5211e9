from __future__ import annotations

import os
import signal
import subprocess
import sys

import pytest
import uvicorn

from service.cli import main
from service.guard.connection import Connection
from service.settings import load_settings


@pytest.fixture
def served(monkeypatch, capsys):
    """What ``densityloom serve …`` starts: the server's options and the settings its processes will have."""

    def go(*arguments):
        started = []
        monkeypatch.setattr(uvicorn, "run", lambda *_, **options: started.append((options, load_settings())))
        assert main(["serve", *arguments]) == 0
        (found,) = started
        return *found, capsys.readouterr().err

    return go


@pytest.mark.parametrize(
    ("host", "required"),
    [
        ("127.0.0.1", False),
        ("127.9.9.9", False),
        ("::1", False),
        ("localhost", False),
        ("0.0.0.0", True),
        ("::", True),
        ("192.0.2.7", True),
    ],
)
def test_keys_follow_the_address_unless_they_are_set(served, monkeypatch, host, required):
    options, settings, told = served("--host", host, "--port", "8421", "--workers", "3")
    assert (options["host"], options["port"], options["workers"]) == (host, 8421, 3)
    assert settings.require_keys is required
    assert told == ""
    for forced in (True, False):
        monkeypatch.setenv("DENSITYLOOM_REQUIRE_KEYS", str(forced))
        _, settings, told = served("--host", host)
        assert settings.require_keys is forced
        assert ("anyone who can reach it" in told) is (required and not forced)


def test_loopback_is_the_default(served):
    options, settings, _ = served()
    assert options["host"] == "127.0.0.1"
    assert settings.require_keys is False


@pytest.mark.parametrize(
    ("host", "named"),
    [("127.0.0.1", "127.0.0.1"), ("0.0.0.0", ""), ("::", ""), ("localhost", "localhost"), ("fe80::1%lo", "fe80::1")],
)
def test_name_that_is_listened_on_is_allowed(served, monkeypatch, host, named):
    assert served("--host", host)[1].allowed_hosts == named
    monkeypatch.setenv("DENSITYLOOM_ALLOWED_HOSTS", "a.example")
    assert served("--host", host)[1].allowed_hosts == ",".join(filter(None, ("a.example", named)))


def test_server_is_bounded_and_logs_as_we_do(served):
    options, _, _ = served()
    assert options["http"] is Connection
    assert options["ws"] == "none"
    assert options["access_log"] is False
    assert options["server_header"] is False
    assert options["log_config"]["root"]["handlers"]
    assert options["timeout_graceful_shutdown"] > 0


def test_nothing_is_left_behind(served):
    before = dict(os.environ)
    handler = signal.getsignal(signal.SIGTERM)
    served("--host", "192.0.2.7")
    assert dict(os.environ) == before
    assert signal.getsignal(signal.SIGTERM) is handler


def test_serve_on_a_taken_port_ends_with_a_message(service):
    port = service.address.rpartition(":")[2]
    command = [sys.executable, "-m", "service.cli", "serve", "--port", port]
    done = subprocess.run(command, capture_output=True, text=True, timeout=60, check=False)
    assert done.returncode != 0
    assert "address already in use" in done.stderr
