"""Which web pages may use the service: a foreign page must not drive one that runs on its reader's machine."""

from __future__ import annotations

import ipaddress
from collections.abc import Collection

from starlette.datastructures import Headers
from starlette.middleware.cors import CORSMiddleware
from starlette.responses import Response
from starlette.types import ASGIApp, Receive, Scope, Send

from service.guard.faults import answer_to
from service.problems import Problem

SAFE_METHODS = ("GET", "HEAD", "OPTIONS")
PROBES = "/health/"
"""Answered under every name: those who ask whether the service is alive may call it by its bare address."""
EXPOSED = (
    "ETag",
    "Location",
    "Retry-After",
    "RateLimit",
    "RateLimit-Policy",
    "Samples-Description",
    "X-Request-ID",
    "Server-Timing",
    "Content-Disposition",
)
"""Headers of answers that pages of allowed origins may read."""


class Origins:
    """Layer that refuses browsers led here by pages of others.

    Without keys nothing but its name protects a service from a page whose own name has been bound to this
    machine's address after it was loaded: so then it answers only to this machine's names, to the address that the
    connection came to, and to the names it was given.
    """

    def __init__(self, app: ASGIApp, hosts: Collection[str] | None, origins: Collection[str]) -> None:
        """`hosts` None: under any name, for keys are asked for."""
        self._app = app
        self._hosts = hosts
        self._origins = origins

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] == "http":
            headers = Headers(scope=scope)
            if self._hosts is not None and not scope["path"].startswith(PROBES):
                self._check_host(headers.get("host", ""), scope)
            if scope["method"] not in SAFE_METHODS:
                self._check_origin(headers)
        await self._app(scope, receive, send)

    def _check_host(self, host: str, scope: Scope) -> None:
        name = host_name(host)
        server = scope.get("server") or ("", None)
        if is_own(name) or name in (self._hosts or ()) or (_is_address(name) and name == server[0]):
            return
        raise Problem(
            "misdirected",
            f"The service runs without keys and does not answer to the name {name[:80]!r}. Call it by 127.0.0.1 or "
            "localhost, or name it in DENSITYLOOM_ALLOWED_HOSTS.",
        )

    def _check_origin(self, headers: Headers) -> None:
        origin = headers.get("origin")
        # What a browser says of itself under this name, no page can forge.
        if origin is None or origin in self._origins or headers.get("sec-fetch-site") == "same-origin":
            return
        if origin.partition("://")[2] == headers.get("host", ""):
            return
        raise Problem(
            "forbidden",
            f"A page of {origin[:80]} may not send this. Allow its origin by DENSITYLOOM_CORS_ORIGINS.",
        )


class Sharing(CORSMiddleware):
    """Layer that lets pages of the origins allowed read answers (the Fetch standard's CORS protocol)."""

    def __init__(self, app: ASGIApp, origins: Collection[str]) -> None:
        super().__init__(
            app,
            allow_origins=origins,
            allow_methods=("GET", "HEAD", "POST", "DELETE"),
            allow_headers=("Authorization", "Content-Type", "If-None-Match", "X-Request-ID"),
            expose_headers=EXPOSED,
        )

    def preflight_response(self, request_headers: Headers) -> Response:
        response = super().preflight_response(request_headers)
        if response.status_code < 400:
            return response
        told = dict(response.headers)
        kept = {name: value for name, value in told.items() if not name.startswith("content-")}
        return answer_to(Problem("forbidden", f"{bytes(response.body).decode()}: see DENSITYLOOM_CORS_ORIGINS."), kept)


def host_name(host: str) -> str:
    """The name in a Host header, without the port, in small letters.

    >>> host_name("[::1]:8420"), host_name("LocalHost.:80")
    ('::1', 'localhost')
    """
    if host.startswith("["):
        return host[1:].partition("]")[0].lower()
    return host.partition(":")[0].lower().rstrip(".")


def is_own(name: str) -> bool:
    """Whether a name means the machine it is used on, and cannot mean another."""
    if name == "localhost" or name.endswith(".localhost"):
        return True
    return _is_address(name) and ipaddress.ip_address(name).is_loopback


def _is_address(name: str) -> bool:
    try:
        ipaddress.ip_address(name)
    except ValueError:
        return False
    return True
