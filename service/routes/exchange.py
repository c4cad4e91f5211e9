"""The two ends of a request: its body as it comes, its answer as it goes, and a client that leaves in between."""

from __future__ import annotations

import asyncio
from collections.abc import AsyncIterator, Awaitable, Callable
from typing import Any, TypeVar

from fastapi import APIRouter, Request, Response
from fastapi.responses import StreamingResponse

from service.encoders.negotiation import MEDIA_TYPES
from service.problems import Problem
from service.spool import Spool
from service.wall.pool import Answer

CHUNK = 1 << 20
"""Bytes sent at a time: measured to be the fastest without holding the answer twice."""

GONE = 499
"""Status logged for a client that went away before its answer; nobody reads it."""

T = TypeVar("T")


def answering(
    router: APIRouter, address: str, endpoint: Callable[..., Awaitable[Response]], told: dict[str, Any]
) -> None:
    """Have an address answer GET, and HEAD alike; the endpoint leaves the body out of the latter."""
    router.add_api_route(address, endpoint, methods=["GET"], response_class=Response, **told)
    router.add_api_route(address, endpoint, methods=["HEAD"], response_class=Response, include_in_schema=False)


async def received_body(request: Request, limit: int) -> Spool:
    """The body, read as it comes and never beyond the limit."""
    declared = request.headers.get("content-length", "")
    if declared.isdigit() and int(declared) > limit:
        raise _too_long(limit)
    spool = Spool.unnamed()
    received = 0
    try:
        async for chunk in request.stream():
            received += len(chunk)
            if received > limit:
                raise _too_long(limit)
            spool.append(chunk)
    except BaseException:
        spool.close()
        raise
    return spool


def _too_long(limit: int) -> Problem:
    return Problem(
        "body-too-large",
        f"The body is longer than the limit of {limit:,} bytes. Send columns as application/x-npz, or fewer of them.",
    )


async def unless_gone(request: Request, computing: Awaitable[T]) -> T | None:
    """The answer, or None as soon as the client has gone; the computation then ends too."""
    task = asyncio.ensure_future(computing)
    watcher = asyncio.ensure_future(_departure(request))
    try:
        await asyncio.wait({task, watcher}, return_when=asyncio.FIRST_COMPLETED)
        if not task.done():
            task.cancel()
            return None
        return task.result()
    except asyncio.CancelledError as fault:
        # The server is stopping and has waited as long as it will.
        task.cancel()
        raise Problem("not-ready", "The service is stopping.", headers={"Retry-After": "5"}) from fault
    finally:
        watcher.cancel()


async def _departure(request: Request) -> None:
    while (await request.receive())["type"] != "http.disconnect":
        pass


def streamed(product: str, form: str, answer: Answer) -> Response:
    """An answer on its way to the client; its spool is closed."""
    view = answer.spool.view()
    answer.spool.close()
    headers = {
        **answer.headers,
        "Vary": "Accept",
        "Server-Timing": f"compute;dur={1000 * answer.seconds:.1f}",
    }
    if form != "json":
        headers["Content-Disposition"] = f'attachment; filename="{product}.{form}"'
    return sent(view, MEDIA_TYPES[form], headers)


def sent(view: memoryview, media_type: str, headers: dict[str, str], *, head: bool = False) -> Response:
    """A body on its way to the client, in pieces where it is long; none of it is copied."""
    headers = {**headers, "Content-Length": str(len(view))}
    if head:
        return Response(headers=headers, media_type=media_type)
    if len(view) <= CHUNK:
        return Response(view, media_type=media_type, headers=headers)
    return StreamingResponse(chunks(view), media_type=media_type, headers=headers)


async def chunks(view: memoryview) -> AsyncIterator[memoryview]:
    """A body in pieces, none of it copied."""
    for start in range(0, len(view), CHUNK):
        yield view[start : start + CHUNK]
