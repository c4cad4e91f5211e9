"""Figures for a monitor."""

from __future__ import annotations

from collections.abc import Callable, Mapping

from fastapi import APIRouter, Request, Response
from starlette.concurrency import run_in_threadpool

from service.answers.cache import Cache
from service.guard.metrics import Metrics
from service.openapi import problems
from service.store.store import Store
from service.wall.pool import Pool

_EACH = "of this server process; there is one set of figures for each"
POOL = {
    "workers": f"Computing processes, {_EACH}",
    "workers_busy": f"Computing processes at work, {_EACH}",
    "computations_total": f"Requests that were computed, {_EACH}",
    "requests_waiting": f"Requests that wait for a computing process, {_EACH}",
}
CACHE = {
    "cache_hits_total": f"Answers of stored sets found in memory, {_EACH}",
    "cache_misses_total": f"Answers of stored sets not found in memory, {_EACH}",
    "cache_bytes": f"Bytes of answers held in memory, {_EACH}",
}
STORE = {"store_sets": "Sets in the store", "store_bytes": "Bytes of the sets in the store"}


def router(metrics: Metrics, pool: Pool, store: Callable[[], Store], cache: Cache) -> APIRouter:
    """The endpoint, over the parts that it shows."""
    made = APIRouter(tags=["health"])

    def of_pool() -> Mapping[str, float]:
        state = pool.state()
        return {
            "workers": state["workers"],
            "workers_busy": state["busy"],
            "computations_total": pool.computed,
            "requests_waiting": state["waiting"],
        }

    def of_cache() -> Mapping[str, float]:
        return {"cache_hits_total": cache.hits, "cache_misses_total": cache.misses, "cache_bytes": cache.bytes}

    def of_store() -> Mapping[str, float]:
        sets, held = store().sets.used()
        return {"store_sets": sets, "store_bytes": held}

    metrics.gauge(POOL, of_pool)
    metrics.gauge(CACHE, of_cache)
    metrics.gauge(STORE, of_store)

    @made.get(
        "/metrics",
        operation_id="metrics",
        summary="Figures for a monitor, in the Prometheus text format",
        response_class=Response,
        responses={
            200: {"description": "The figures", "content": {"text/plain": {"schema": {"type": "string"}}}},
            **problems(("internal",)),
        },
    )
    async def figures(request: Request) -> Response:
        """Figures are of the server process that answers; with several, each has its own."""
        body, media_type = await run_in_threadpool(metrics.expose, request.headers.get("accept", ""))
        return Response(body, media_type=media_type, headers={"Cache-Control": "no-store"})

    return made
