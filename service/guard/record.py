"""What is known of each request, from its first byte to its last: the base of log and metrics."""

from __future__ import annotations

import ipaddress
import re
import secrets
import time
from collections.abc import Callable, Sequence
from contextvars import ContextVar
from dataclasses import dataclass

from starlette.datastructures import Headers, MutableHeaders
from starlette.types import ASGIApp, Message, Receive, Scope, Send

REQUEST_ID = "X-Request-ID"
_ACCEPTABLE = re.compile(r"[A-Za-z0-9._-]{1,64}")
LONGEST_TOLD = 200
"""Characters of an address that are told."""
UNROUTED = "none"
"""Stands for the route of a request that reached none."""
_NETWORK_BITS = 64
"""What one customer of IPv6 has as a rule: its addresses are one client."""


@dataclass(slots=True, kw_only=True)
class Record:
    """One request.

    Attributes
    ----------
    path, query : str
        As they came, cut.
    address : str
        Of the client, or its network for IPv6; empty where it came by no network.
    begun : float
        On the monotonic clock.
    key : str or None
        Id of the API key; the key itself is never held.
    route : str
        Template of the address.
    received, sent : int
        Bytes of the bodies.
    gone : bool
        Whether the client left before its answer was complete.
    """

    id: str
    method: str
    path: str
    query: str
    address: str
    begun: float
    key: str | None = None
    route: str = UNROUTED
    status: int = 500
    received: int = 0
    sent: int = 0
    gone: bool = False
    seconds: float = 0.0

    @property
    def client(self) -> str:
        """Who counts as one client: a key, or else an address."""
        return f"key {self.key}" if self.key is not None else f"address {self.address}"


CURRENT: ContextVar[Record | None] = ContextVar("record", default=None)
"""The request that the running task works for."""
CURRENT_ID: ContextVar[str | None] = ContextVar("request_id", default=None)
"""Its id, which also a computing process knows."""


def record_of(scope: Scope) -> Record:
    """The record of a request behind `Recording`."""
    found = CURRENT.get()
    if found is None:
        raise RuntimeError(f"{scope['path'][:80]} was reached around the guard")
    return found


class Recording:
    """Outermost layer: makes the record, names the request in its answer, tells observers at the end."""

    def __init__(self, app: ASGIApp, observers: Sequence[Callable[[Record], None]] = ()) -> None:
        self._app = app
        self._observers = observers

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] != "http":
            await self._app(scope, receive, send)
            return
        record = _begun(scope)
        CURRENT.set(record)
        CURRENT_ID.set(record.id)
        complete = False

        async def received() -> Message:
            message = await receive()
            if message["type"] == "http.request":
                record.received += len(message.get("body", b""))
            elif not complete:
                record.gone = True
            return message

        async def answered(message: Message) -> None:
            nonlocal complete
            if message["type"] == "http.response.start":
                record.status = message["status"]
                MutableHeaders(scope=message)[REQUEST_ID] = record.id
            elif message["type"] == "http.response.body":
                record.sent += len(message.get("body", b""))
                complete = not message.get("more_body", False)
            await send(message)

        try:
            await self._app(scope, received, answered)
        finally:
            record.seconds = time.perf_counter() - record.begun
            record.route = _template(scope)
            for observe in self._observers:
                observe(record)


def new_id() -> str:
    """A name for a request that came without one."""
    return secrets.token_hex(8)


def _begun(scope: Scope) -> Record:
    given = Headers(scope=scope).get(REQUEST_ID, "")
    raw = scope.get("raw_path") or scope["path"].encode()
    return Record(
        id=given if _ACCEPTABLE.fullmatch(given) else new_id(),
        method=scope["method"][:LONGEST_TOLD],
        path=raw.decode("latin-1")[:LONGEST_TOLD],
        query=scope["query_string"].decode("latin-1")[:LONGEST_TOLD],
        address=_address(scope),
        begun=time.perf_counter(),
    )


def _address(scope: Scope) -> str:
    client = scope.get("client")
    if not client:
        return ""
    try:
        address = ipaddress.ip_address(client[0])
    except ValueError:
        return str(client[0])[:LONGEST_TOLD]
    if isinstance(address, ipaddress.IPv6Address) and not address.is_loopback:
        if address.ipv4_mapped is not None:
            return str(address.ipv4_mapped)
        return str(ipaddress.ip_network((address, _NETWORK_BITS), strict=False))
    return str(address)


def _template(scope: Scope) -> str:
    """The route's template: of those there are few, so that figures can be kept of each."""
    template = getattr(scope.get("route"), "path_format", None)
    if isinstance(template, str):
        return template
    # What is mounted, as files are, has no template of its own.
    root = scope.get("root_path", "") if scope.get("endpoint") is not None else ""
    return f"{root}/…" if root else UNROUTED
