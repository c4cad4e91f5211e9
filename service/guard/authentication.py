"""Who is asking: an API key, as ``Authorization: Bearer`` (RFC 6750), where the service asks for one."""

from __future__ import annotations

import logging
from collections.abc import Callable

from starlette.concurrency import run_in_threadpool
from starlette.datastructures import Headers
from starlette.types import ASGIApp, Receive, Scope, Send

from service.access.keys import PATTERN, Key, Keys
from service.access.scopes import SCOPES, is_open, scope_needed
from service.guard.rates import Rates
from service.guard.record import Record, record_of
from service.problems import Problem

log = logging.getLogger("densityloom.access")

CHALLENGE = 'Bearer realm="densityloom"'
FIRST_KEY = "densityloom keys create --name NAME " + " ".join(f"--scope {scope}" for scope in SCOPES)


class Authentication:
    """Layer that lets nothing pass without a key of the scope that it needs, but for what is open to all.

    Parameters
    ----------
    keys : callable
        The keys of the store as it is now.
    rates : Rates
        Where keys that are none are counted, by address: whoever only tries is soon told to wait.
    """

    def __init__(self, app: ASGIApp, keys: Callable[[], Keys], rates: Rates) -> None:
        self._app = app
        self._keys = keys
        self._rates = rates

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] == "http" and not is_open(scope["path"]):
            record = record_of(scope)
            key = await self._known(Headers(scope=scope).get("authorization"), record)
            record.key = key.id
            needed = scope_needed(scope["method"], scope["path"])
            if needed is not None and needed not in key.scopes:
                raise Problem(
                    "forbidden",
                    f"This asks for a key with the scope {needed}; the key {key.id} has {', '.join(key.scopes)}.",
                    headers={"WWW-Authenticate": f'{CHALLENGE}, error="insufficient_scope", scope="{needed}"'},
                )
        await self._app(scope, receive, send)

    async def _known(self, header: str | None, record: Record) -> Key:
        kind, _, text = (header or "").partition(" ")
        # A key is looked up whatever others at the same address, such as a proxy's, have tried.
        if kind.lower() == "bearer" and PATTERN.fullmatch(text.strip()):
            key = await run_in_threadpool(self._keys().check, text.strip())
            if key is not None:
                return key
        self._rates.take(record.client, "this address")
        if header is None:
            detail = "Send an API key in the header Authorization: Bearer KEY."
            raise Problem("unauthorized", detail, headers={"WWW-Authenticate": CHALLENGE})
        raise Problem(
            "unauthorized",
            "This is no key in force. Send one that was not revoked, in the header Authorization: Bearer KEY.",
            headers={"WWW-Authenticate": f'{CHALLENGE}, error="invalid_token"'},
        )


def announce(required: bool, keys: Keys) -> None:
    """Tell at start how keys stand, and how to make the first one."""
    if not required:
        log.info("no keys are asked for")
        return
    try:
        found = keys.any_valid()
    except Problem as problem:
        log.error("keys are asked for and cannot be checked, so that nothing will be answered: %s", problem.detail)
        return
    if not found:
        log.warning("keys are asked for and there is none yet; make one with: %s", FIRST_KEY)
