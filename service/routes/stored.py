"""Products and analyses of stored sets by GET: for dashboards, cacheable at every step."""

from __future__ import annotations

from collections.abc import Awaitable, Callable
from typing import Annotated

from fastapi import APIRouter, Path, Request, Response
from starlette.concurrency import run_in_threadpool

from service.answers.asked import LONGEST, Asked, understand
from service.answers.cache import Cache, Kept
from service.answers.coding import CODINGS, choose_coding, encode, entity_tag
from service.answers.flights import Flights
from service.encoders.negotiation import MEDIA_TYPES
from service.openapi_sets import stored_operation
from service.routes.conditions import is_current
from service.routes.exchange import GONE, answering, sent, unless_gone
from service.schemas.analyses import ANALYSES
from service.schemas.products import PRODUCTS
from service.spool import Spool
from service.store.known import Known
from service.store.shelf import ID, no_such_set
from service.store.store import Store
from service.wall.pool import Job, Pool

BY_GET = (*PRODUCTS, *(name for name in ANALYSES if name != "compare"))
"""What a stored set is asked for by GET; a comparison has a second set, which travels in a body."""
DAYS_FRESH = 7
"""A set never changes, but a later release of this program may compute better."""
Identity = Annotated[str, Path(description="id of a set", json_schema_extra={"pattern": ID.pattern})]
Endpoint = Callable[[Request, str], Awaitable[Response]]


def router(pool: Pool, store: Callable[[], Store], known: Known, cache: Cache) -> APIRouter:
    """Endpoints over the store, a pool of workers and a cache of answers."""
    made = APIRouter(prefix="/v1/sets/{identity}", tags=["stored sets"])
    flights: Flights[Kept] = Flights()
    for product in BY_GET:
        endpoint = _endpoint(product, pool, store, known, cache, flights)
        answering(made, f"/{product}", endpoint, stored_operation(product))
    return made


def _endpoint(
    product: str, pool: Pool, store: Callable[[], Store], known: Known, cache: Cache, flights: Flights[Kept]
) -> Endpoint:
    async def endpoint(request: Request, identity: Identity) -> Response:
        if not ID.fullmatch(identity) or not await known.has(store().sets, identity):
            raise no_such_set(identity)
        written, accept = request.url.query, ",".join(request.headers.getlist("accept"))
        if len(written) + len(accept) > LONGEST:
            # Long enough to hold up others.
            asked = await run_in_threadpool(understand, product, identity, written, accept)
        else:
            asked = understand(product, identity, written, accept)
        held = request.headers.get("if-none-match")
        if held is not None and held.strip() != "*":
            # Known before anything is computed, in any coding that the client may hold it in.
            for coding in (None, *CODINGS):
                if is_current(held, tag := entity_tag(asked.key, coding)):
                    return Response(status_code=304, headers=_headers(tag))
        answer = cache.get(asked.key)
        if answer is None:

            async def compute() -> Kept:
                made = await _computed(pool, asked, cache.largest)
                cache.put(asked.key, made)
                return made

            answer = await unless_gone(request, flights.share(asked.key, compute))
            if answer is None:
                return Response(status_code=GONE)
        return await _response(request, asked, answer, cache)

    return endpoint


def _headers(tag: str) -> dict[str, str]:
    return {
        "ETag": tag,
        "Cache-Control": f"private, max-age={DAYS_FRESH * 86_400}, immutable",
        "Vary": "Accept, Accept-Encoding, Authorization",
    }


async def _computed(pool: Pool, asked: Asked, most: float) -> Kept:
    with Spool.unnamed() as body:
        body.append(asked.body)
        answer = await pool.run(Job(asked.product, "application/json", body, asked.form))
    with answer.spool as made:
        view = made.view()
    # A mapping costs a descriptor for as long as it lives; what may be kept for long is copied out of it.
    held = memoryview(bytes(view)) if len(view) <= most else view
    return Kept(held, MEDIA_TYPES[asked.form], answer.headers, answer.seconds)


async def _response(request: Request, asked: Asked, answer: Kept, cache: Cache) -> Response:
    accepted = ",".join(request.headers.getlist("accept-encoding"))
    coding = choose_coding(accepted, answer.media_type, len(answer.body))
    view = answer.body
    headers = {
        **answer.headers,
        **_headers(entity_tag(asked.key, coding)),
        "Server-Timing": f"compute;dur={1000 * answer.seconds:.1f}",
        "Content-Disposition": f'inline; filename="{asked.product}.{asked.form}"',
    }
    if coding is not None:
        if coding not in answer.coded:
            answer.coded[coding] = await run_in_threadpool(encode, answer.body, coding)
            cache.put(asked.key, answer)
        view = memoryview(answer.coded[coding])
        headers["Content-Encoding"] = coding
    return sent(view, answer.media_type, headers, head=request.method == "HEAD")
