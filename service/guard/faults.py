"""Whatever goes wrong below becomes a problem document here, if nothing has been answered yet."""

from __future__ import annotations

import logging

from starlette.responses import Response
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from service.guard.record import record_of
from service.problems import MEDIA_TYPE, Problem

log = logging.getLogger("densityloom")


def answer_to(problem: Problem, headers: dict[str, str] | None = None) -> Response:
    """The answer that tells a problem."""
    return Response(
        problem.encode(), problem.status, media_type=MEDIA_TYPE, headers={**problem.headers, **(headers or {})}
    )


class Faults:
    """Layer that answers problems, and what nobody foresaw: logged with its trace, told without."""

    def __init__(self, app: ASGIApp) -> None:
        self._app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] != "http":
            await self._app(scope, receive, send)
            return
        begun = False

        async def watched(message: Message) -> None:
            nonlocal begun
            begun = True
            await send(message)

        try:
            await self._app(scope, receive, watched)
        except Problem as problem:
            if begun:
                raise
            await answer_to(problem)(scope, receive, send)
        except Exception as fault:  # the last place where an answer can still be given
            if begun:
                # The server cuts the connection, so that nobody takes the part for the whole.
                raise
            log.exception("a request to %s failed", record_of(scope).path, exc_info=fault)
            unforeseen = Problem("internal", "The service failed on this request; the fault has been logged.")
            await answer_to(unforeseen)(scope, receive, send)
