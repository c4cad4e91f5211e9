"""Products and analyses of stored sets by GET: for dashboards, cacheable at every step."""

from __future__ import annotations

import hashlib
from collections.abc import Awaitable, Callable
from importlib.metadata import version
from typing import Annotated

import orjson
from fastapi import APIRouter, Path, Request, Response
from fastapi.responses import StreamingResponse
from pydantic import ValidationError
from starlette.concurrency import run_in_threadpool

from service import query
from service.answers.cache import Cache, Kept
from service.answers.coding import choose_coding, encode
from service.answers.flights import Flights
from service.encoders.negotiation import MEDIA_TYPES, choose
from service.openapi_sets import stored_operation
from service.problems import from_validation
from service.routes.conditions import is_current
from service.routes.exchange import GONE, answering, chunks, unless_gone
from service.schemas.analyses import ANALYSES
from service.schemas.products import PRODUCTS
from service.schemas.requests import REQUESTS
from service.spool import Spool
from service.store.shelf import ID, no_such_set
from service.store.store import Store
from service.wall.pool import Job, Pool

BY_GET = (*PRODUCTS, *(name for name in ANALYSES if name != "compare"))
"""What a stored set is asked for by GET; a comparison has a second set, which travels in a body."""
DAYS_FRESH = 7
"""A set never changes, but a later release of this program may compute better."""
Identity = Annotated[str, Path(description="id of a set", json_schema_extra={"pattern": ID.pattern})]
Endpoint = Callable[[Request, str], Awaitable[Response]]


def router(pool: Pool, store: Callable[[], Store], cache: Cache) -> APIRouter:
    """Endpoints over the store, a pool of workers and a cache of answers."""
    made = APIRouter(prefix="/v1/sets/{identity}", tags=["stored sets"])
    flights: Flights[Kept] = Flights()
    for product in BY_GET:
        answering(made, f"/{product}", _endpoint(product, pool, store, cache, flights), stored_operation(product))
    return made


def _endpoint(product: str, pool: Pool, store: Callable[[], Store], cache: Cache, flights: Flights[Kept]) -> Endpoint:
    async def endpoint(request: Request, identity: Identity) -> Response:
        pairs = [pair for pair in request.query_params.multi_items() if pair[0] != "format"]
        form = choose(product, ",".join(request.headers.getlist("accept")), request.query_params.get("format"))
        body = _checked(product, query.document(product, pairs), identity)
        if not ID.fullmatch(identity) or await run_in_threadpool(store().sets.record, identity) is None:
            raise no_such_set(identity)
        key = _key(product, form, body)
        accepted = ",".join(request.headers.getlist("accept-encoding"))
        held = request.headers.get("if-none-match")
        # Known before anything is computed, in any coding that the client may hold it in.
        for coding in (None, "zstd", "gzip"):
            if held is not None and held.strip() != "*" and is_current(held, _tag(key, coding)):
                return Response(status_code=304, headers=_headers(_tag(key, coding)))
        answer = cache.get(key)
        if answer is None:

            async def compute() -> Kept:
                made = await _computed(pool, product, form, body)
                cache.put(key, made)
                return made

            shared = await unless_gone(request, flights.share(key, compute))
            if shared is None:
                return Response(status_code=GONE)
            answer = shared
        return await _response(request, product, form, key, answer, cache, accepted)

    return endpoint


def _checked(product: str, document: dict[str, object], identity: str) -> bytes:
    """The request as a worker gets it, once its schema has passed it."""
    try:
        REQUESTS[product].model_validate({**document, "set": query.PLACEHOLDER})
    except ValidationError as fault:
        raise from_validation(fault) from fault
    return orjson.dumps({**document, "set_id": identity}, option=orjson.OPT_SORT_KEYS)


def _key(product: str, form: str, body: bytes) -> str:
    """Names an answer: the set, the request, the form, and the release that computes it."""
    named = orjson.dumps([product, form, version("densityloom")])
    return hashlib.sha256(named + body).hexdigest()[:40]


def _tag(key: str, coding: str | None) -> str:
    """A strong entity tag, which differs by the coding."""
    return f'"{key}"' if coding is None else f'"{key}-{coding}"'


def _headers(tag: str) -> dict[str, str]:
    return {
        "ETag": tag,
        "Cache-Control": f"private, max-age={DAYS_FRESH * 86_400}, immutable",
        "Vary": "Accept, Accept-Encoding, Authorization",
    }


async def _computed(pool: Pool, product: str, form: str, body: bytes) -> Kept:
    with Spool.unnamed() as sent:
        sent.append(body)
        answer = await pool.run(Job(product, "application/json", sent, form))
    with answer.spool as made:
        return Kept(made.view(), MEDIA_TYPES[form], answer.headers, answer.seconds)


async def _response(
    request: Request, product: str, form: str, key: str, answer: Kept, cache: Cache, accepted: str
) -> Response:
    coding = choose_coding(accepted, answer.media_type, len(answer.body))
    view = answer.body
    headers = {
        **answer.headers,
        **_headers(_tag(key, coding)),
        "Server-Timing": f"compute;dur={1000 * answer.seconds:.1f}",
        "Content-Disposition": f'inline; filename="{product}.{form}"',
    }
    if coding is not None:
        if coding not in answer.coded:
            answer.coded[coding] = await run_in_threadpool(encode, answer.body, coding)
            cache.put(key, answer)
        view = memoryview(answer.coded[coding])
        headers["Content-Encoding"] = coding
    headers["Content-Length"] = str(len(view))
    if request.method == "HEAD":
        return Response(headers={**headers, "Content-Type": answer.media_type})
    return StreamingResponse(chunks(view), media_type=answer.media_type, headers=headers)
