"""Headers that tell browsers what they must not do with an answer."""

from __future__ import annotations

from collections.abc import Collection

from starlette.datastructures import Headers, MutableHeaders
from starlette.types import ASGIApp, Message, Receive, Scope, Send

POLICY = "default-src 'none'; frame-ancestors 'none'"
"""Of an answer that is data: opened by itself, it loads and runs nothing."""
DRAWING_POLICY = "default-src 'none'; style-src 'unsafe-inline'; img-src data:; frame-ancestors 'none'"
"""Of a drawing, whose lines have their styles within it; scripts do not run."""
DRAWING = "image/svg+xml"
PROGRAMS = ("text/javascript", "application/javascript", "text/css", "application/wasm", "font/")
"""Parts of a page: what they may do, the page says; a policy here would bind the workers it starts."""


class SecurityHeaders:
    """Layer that adds them to every answer; a route's own policy stays."""

    def __init__(self, app: ASGIApp, origins: Collection[str] = ()) -> None:
        self._app = app
        self._origins = origins

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] != "http":
            await self._app(scope, receive, send)
            return
        allowed = Headers(scope=scope).get("origin") in self._origins

        async def protected(message: Message) -> None:
            if message["type"] == "http.response.start":
                headers = MutableHeaders(scope=message)
                headers["X-Content-Type-Options"] = "nosniff"
                headers["Referrer-Policy"] = "no-referrer"
                headers["Cross-Origin-Resource-Policy"] = "cross-origin" if allowed else "same-origin"
                media_type = headers.get("content-type", "").partition(";")[0]
                if not media_type.startswith(PROGRAMS):
                    policy = DRAWING_POLICY if media_type == DRAWING else POLICY
                    headers.setdefault("Content-Security-Policy", policy)
            await send(message)

        await self._app(scope, receive, protected)
