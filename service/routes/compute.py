"""The computing endpoints: stateless, one for each product and analysis, and the inspection of a file."""

from __future__ import annotations

import asyncio
from collections.abc import AsyncIterator, Awaitable, Callable

from fastapi import APIRouter, Request, Response
from fastapi.responses import StreamingResponse
from starlette.requests import ClientDisconnect

from service.encoders.negotiation import MEDIA_TYPES, choose
from service.openapi import operation
from service.problems import Problem
from service.schemas.analyses import ANALYSES
from service.schemas.products import PRODUCTS
from service.schemas.requests import INSPECT, SERIES
from service.settings import Settings
from service.spool import Spool
from service.wall.pool import Answer, Job, Pool

CHUNK = 1 << 20
"""Bytes sent at a time: measured to be the fastest without holding the answer twice."""

GONE = 499
"""Status logged for a client that went away before its answer; nobody reads it."""


FILM_ADDRESSES = {
    "film": "/films/analysis",
    "film_run": "/films/run",
    "film_swelling": "/films/swelling",
    "film_contrast": "/films/contrast",
    "film_trial": "/films/trial",
}
ADDRESSES = {
    **{product: f"/{product}" for product in (*PRODUCTS, SERIES, *ANALYSES)},
    **FILM_ADDRESSES,
    INSPECT: "/sets/inspect",
}


def router(pool: Pool, settings: Settings) -> APIRouter:
    """Endpoints over a pool of workers."""
    made = APIRouter(prefix="/v1", tags=["density"])
    for product, address in ADDRESSES.items():
        made.add_api_route(
            address,
            _endpoint(product, pool, settings),
            methods=["POST"],
            response_class=Response,
            **operation(product),
        )
    return made


def _endpoint(product: str, pool: Pool, settings: Settings) -> Callable[[Request], Awaitable[Response]]:
    async def endpoint(request: Request) -> Response:
        wanted = request.query_params.get("format")
        form = choose(product, ",".join(request.headers.getlist("accept")), wanted)
        try:
            spool = await _body(request, settings.max_body_bytes)
        except ClientDisconnect:
            return Response(status_code=GONE)
        with spool as body:
            job = Job(product, request.headers.get("content-type", ""), body, form)
            answer = await _unless_gone(request, pool.run(job))
        if answer is None:
            return Response(status_code=GONE)
        return _streamed(product, form, answer)

    return endpoint


async def _body(request: Request, limit: int) -> Spool:
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


async def _unless_gone(request: Request, computing: Awaitable[Answer]) -> Answer | None:
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


def _streamed(product: str, form: str, answer: Answer) -> StreamingResponse:
    view = answer.spool.view()
    answer.spool.close()

    async def chunks() -> AsyncIterator[memoryview]:
        for start in range(0, len(view), CHUNK):
            yield view[start : start + CHUNK]

    headers = {
        "Content-Length": str(len(view)),
        "Vary": "Accept",
        "Server-Timing": f"compute;dur={1000 * answer.seconds:.1f}",
    }
    if form != "json":
        headers["Content-Disposition"] = f'attachment; filename="{product}.{form}"'
    return StreamingResponse(chunks(), media_type=MEDIA_TYPES[form], headers=headers)
