"""``densityloom serve``: the address, and what follows from it."""

from __future__ import annotations

import argparse
import ipaddress
import math
import os
import signal
import socket
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

import uvicorn

from service.guard import logs
from service.guard.connection import Connection
from service.guard.stopping import CUT_SECONDS
from service.settings import PREFIX, Settings, listed, load_settings

HEALTH_SECONDS = 60
"""How long a server process may keep the one that started it waiting."""


def add(actions: Any) -> None:  # noqa: ANN401 - argparse keeps the type to itself
    """Add the sub-command to the command's parser."""
    serve = actions.add_parser("serve", help="run the REST service")
    serve.add_argument("--host", default="127.0.0.1", help="address to listen on (default: this machine only)")
    serve.add_argument("--port", type=int, default=8420)
    serve.add_argument("--workers", type=int, default=1, help="server processes; each has its own computing workers")
    serve.set_defaults(action=_serve)


def _serve(options: argparse.Namespace) -> int:
    settings = load_settings()
    own = _is_loopback(options.host)
    required = not own if settings.require_keys is None else settings.require_keys
    if not own and not required:
        print(
            f"densityloom: listening on {options.host} without keys: anyone who can reach it can have work computed, "
            "and read and delete the sets. Put a proxy that asks for credentials before it.",
            file=sys.stderr,
        )
    with _served(
        # The app is made in each server process, from the environment; the address is known here alone.
        REQUIRE_KEYS=str(required).lower(),
        ALLOWED_HOSTS=_hosts(options.host, settings),
    ):
        uvicorn.run(
            "service.app:create_app",
            factory=True,
            host=options.host,
            port=options.port,
            workers=options.workers,
            # Over the parser that bounds the size of a header.
            http=Connection,
            ws="none",
            server_header=False,
            log_config=logs.configuration(settings),
            access_log=False,
            # The app has waited already, and cut what took too long.
            timeout_graceful_shutdown=math.ceil(CUT_SECONDS),
            # Of several processes each is asked whether it lives, also while it still loads its libraries.
            timeout_worker_healthcheck=HEALTH_SECONDS,
        )
    return 0


@contextmanager
def _served(**settings: str) -> Iterator[None]:
    """Have settings in the environment as long as this lasts; to be told to stop is then no failure."""
    before = dict(os.environ)
    os.environ.update({f"{PREFIX}{name}": value for name, value in settings.items()})
    # The server hands the signal on when it has stopped.
    handler = signal.signal(signal.SIGTERM, lambda *_: sys.exit(0))
    try:
        yield
    finally:
        signal.signal(signal.SIGTERM, handler)
        os.environ.clear()
        os.environ.update(before)


def _hosts(host: str, settings: Settings) -> str:
    """The names allowed, and the one that is listened on; one that stands for all addresses names none."""
    try:
        named = [] if ipaddress.ip_address(host).is_unspecified else [host.partition("%")[0]]
    except ValueError:
        named = [host]
    return ",".join((*listed(settings.allowed_hosts), *named))


def _is_loopback(host: str) -> bool:
    try:
        return ipaddress.ip_address(host).is_loopback
    except ValueError:
        found = socket.getaddrinfo(host, None)
        return all(ipaddress.ip_address(entry[4][0]).is_loopback for entry in found)
