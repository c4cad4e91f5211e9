"""The computing endpoints: stateless, one for each product and analysis, and the inspection of a file."""

from __future__ import annotations

from collections.abc import Awaitable, Callable

from fastapi import APIRouter, Request, Response
from starlette.requests import ClientDisconnect

from service.encoders.negotiation import choose
from service.openapi import operation
from service.routes.exchange import GONE, received_body, streamed, unless_gone
from service.schemas.analyses import ANALYSES
from service.schemas.products import PRODUCTS
from service.schemas.requests import INSPECT, SERIES
from service.settings import Settings
from service.wall.pool import Job, Pool

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
            spool = await received_body(request, settings.max_body_bytes)
        except ClientDisconnect:
            return Response(status_code=GONE)
        with spool as body:
            job = Job(product, request.headers.get("content-type", ""), body, form)
            answer = await unless_gone(request, pool.run(job))
        if answer is None:
            return Response(status_code=GONE)
        return streamed(product, form, answer)

    return endpoint
