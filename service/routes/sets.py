"""Sets that are kept: send, list, look at, take back, delete."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Annotated, Any, TypeVar

import orjson
from fastapi import APIRouter, Path, Query, Request, Response
from starlette.concurrency import run_in_threadpool
from starlette.requests import ClientDisconnect

from service.openapi_sets import keeping, looking
from service.problems import at
from service.routes.conditions import is_current
from service.routes.exchange import GONE, answering, received_body, unless_gone
from service.schemas.base import PRINTABLE
from service.schemas.requests import KEEP
from service.schemas.store import MOST_TAGS, Tag
from service.settings import Settings
from service.store.known import Known
from service.store.parcel import unpack
from service.store.records import Record, Sets
from service.store.rows import columns_archive
from service.store.shelf import ID, no_such_set
from service.store.store import Store
from service.wall.pool import Job, Pool

T = TypeVar("T")
MOST_LISTED = 500
Identity = Annotated[str, Path(description="id of a set", json_schema_extra={"pattern": ID.pattern})]


def router(pool: Pool, store: Callable[[], Store], known: Known, settings: Settings) -> APIRouter:
    """Endpoints over the store; what clients send is read behind the wall, like everything else."""
    made = APIRouter(prefix="/v1/sets", tags=["sets"])

    @made.post("", response_class=Response, **keeping())
    async def keep(request: Request) -> Response:
        members = _labels(request)
        sets = store().sets
        try:
            spool = await received_body(request, settings.max_body_bytes)
        except ClientDisconnect:
            return Response(status_code=GONE)
        with spool as body:
            job = Job(KEEP, request.headers.get("content-type", ""), body, "json", members)
            answer = await unless_gone(request, pool.run(job))
        if answer is None:
            return Response(status_code=GONE)
        with answer.spool as packed:
            record, new, made = await run_in_threadpool(_keep, sets, packed.view())
        summary = made if new else await _found(sets.summary, record.id)
        return _whole(record, summary, 201 if new else 200, {"Location": f"/v1/sets/{record.id}"})

    @made.get("", response_class=Response, **looking("list"))
    async def listed(
        request: Request,
        limit: Annotated[int, Query(ge=1, le=MOST_LISTED)] = 50,
        after: Annotated[int | None, Query(ge=0, le=2**62, description="`next` of the part before")] = None,
        search: Annotated[
            str, Query(max_length=200, pattern=PRINTABLE, description="text in name, file name or id")
        ] = "",
        *,
        tag: Annotated[
            list[Tag], Query(default_factory=list, max_length=MOST_TAGS, description="tags that a set has all of")
        ],
    ) -> Response:
        _only(request, "limit", "after", "search", several=("tag",))
        page = await run_in_threadpool(store().sets.page, limit=limit, after=after, search=search, tags=tag)
        document = {"sets": [one.document() for one in page.records], "next": page.after, "total": page.total}
        return Response(orjson.dumps(document), media_type="application/json")

    async def one(request: Request, identity: Identity) -> Response:
        _only(request)
        sets = store().sets
        record = await _found(sets.record, identity)
        return _conditional(request, _whole(record, await _found(sets.summary, identity), 200, {}))

    async def columns(request: Request, identity: Identity) -> Response:
        _only(request)
        content = await _found(store().sets.content, identity)
        if content.kind == "columns":
            data = await run_in_threadpool(columns_archive, content)
            kind, name = "application/x-npz", f"{identity[:12]}.npz"
        else:
            part = content.parts["reflections"]
            data, kind, name = part.data, part.media_type or "application/octet-stream", identity[:12]
        headers = {"Content-Disposition": f'attachment; filename="{name}"', "ETag": f'"{identity}-columns"'}
        return _conditional(request, Response(data, media_type=kind, headers={**headers, **FRESH}))

    for address, name, endpoint in (("", "set", one), ("/summary", "summary", one), ("/columns", "columns", columns)):
        answering(made, f"/{{identity}}{address}", endpoint, looking(name))

    @made.delete("/{identity}", status_code=204, response_class=Response, **looking("delete"))
    async def delete(request: Request, identity: Identity) -> Response:
        _only(request)
        known.forget(identity)
        await _found(lambda one: store().sets.delete(one) or None, identity)
        known.forget(identity)
        return Response(status_code=204)

    return made


FRESH = {"Cache-Control": "private, no-cache"}
"""A set never changes, but it may be deleted: a copy is good when the service says so."""


def _labels(request: Request) -> dict[str, Any]:
    """Name and tags from the address."""
    _only(request, "name", several=("tag",))
    query = request.query_params
    found: dict[str, Any] = {}
    if "name" in query:
        found["name"] = query["name"]
    if tags := query.getlist("tag"):
        found["tags"] = tags
    return found


def _keep(sets: Sets, packed: memoryview) -> tuple[Record, bool, bytes]:
    """Keep what a worker has packed; also hands back the summary in it."""
    parcel = unpack(packed)
    return *sets.keep(parcel.content, parcel.labels, parcel.facts, parcel.summary), parcel.summary


def _only(request: Request, *names: str, several: Sequence[str] = ()) -> None:
    """Refuse parameters that an address does not have, and those that come twice."""
    seen: set[str] = set()
    for name, _ in request.query_params.multi_items():
        if name not in (*names, *several):
            listed = ", ".join((*names, *several)) or "none"
            raise at((name,), "is no parameter of this address", f"it has {listed}")
        if name in seen and name not in several:
            raise at((name,), "is given twice", "give it once")
        seen.add(name)


async def _found(look: Callable[[str], T | None], identity: str) -> T:
    found = await run_in_threadpool(look, identity) if ID.fullmatch(identity) else None
    if found is None:
        raise no_such_set(identity)
    return found


def _whole(record: Record, summary: bytes, status: int, headers: dict[str, str]) -> Response:
    """A record with its summary, which is text already."""
    body = orjson.dumps({**record.document(), "summary": orjson.Fragment(summary)})
    return Response(
        body,
        status,
        media_type="application/json",
        headers={"ETag": f'"{record.id}-{record.number}"', **FRESH, **headers},
    )


def _conditional(request: Request, response: Response) -> Response:
    """The response, or 304 where the client has it; to HEAD without its body."""
    if is_current(request.headers.get("if-none-match"), response.headers["etag"]):
        return Response(status_code=304, headers={name: response.headers[name] for name in ("etag", "cache-control")})
    if request.method == "HEAD":
        length = response.headers["content-length"]
        response.body = b""
        response.headers["content-length"] = length
    return response
