"""The application: settings and pool in, ASGI app out. Nothing lives at module level."""

from __future__ import annotations

import asyncio
import logging
from collections.abc import AsyncIterator
from contextlib import asynccontextmanager
from importlib.metadata import version

from fastapi import FastAPI, Request, Response
from fastapi.exceptions import RequestValidationError
from starlette.exceptions import HTTPException
from starlette.routing import Match

from service import openapi
from service.access.keys import Keys
from service.answers.cache import Cache
from service.guard.authentication import announce
from service.guard.connection import SEND_SECONDS
from service.guard.faults import answer_to
from service.guard.install import install, keys_required
from service.guard.metrics import Metrics
from service.guard.stopping import stopped_gently
from service.problems import Problem, from_complaints
from service.routes import compute, docs, health, page, sets, stored
from service.routes import metrics as figures
from service.settings import Settings, load_settings
from service.store.known import Known
from service.store.store import Store
from service.wall.pool import Pool

log = logging.getLogger("densityloom")


def create_app(settings: Settings | None = None) -> FastAPI:
    """The service.

    Parameters
    ----------
    settings : Settings, optional
        By default from the environment.
    """
    settings = settings or load_settings()
    pool = Pool(settings)
    cache = Cache(settings.cache_bytes)
    known = Known()
    metrics = Metrics()

    @asynccontextmanager
    async def lifespan(app: FastAPI) -> AsyncIterator[dict[str, object]]:
        opened = app.state.store = Store(settings)
        opened.open()
        trying = asyncio.create_task(opened.keep_trying())
        announce(keys_required(settings), keys())
        await pool.start()
        app.state.pool = pool
        try:
            with stopped_gently(gate):
                # For the connections, which the server makes.
                yield {SEND_SECONDS: settings.send_seconds}
        finally:
            app.state.pool = None
            trying.cancel()
            await pool.close()
            opened.close()

    def store() -> Store:
        found: Store = app.state.store
        return found

    def keys() -> Keys:
        opened: Store | None = getattr(app.state, "store", None)
        return Keys(opened.database if opened else None)

    app = FastAPI(
        title="densityloom",
        version=version("densityloom"),
        description=openapi.DESCRIPTION,
        docs_url=None,
        redoc_url=None,
        redirect_slashes=False,
        lifespan=lifespan,
    )
    app.state.keys_required = keys_required(settings)
    app.include_router(compute.router(pool, settings))
    app.include_router(sets.router(pool, store, known, settings))
    app.include_router(stored.router(pool, store, known, cache))
    app.include_router(page.router)
    app.include_router(health.router)
    app.include_router(figures.router(metrics, pool, store, cache))
    docs.install(app)
    openapi.install(app, keys=keys_required(settings))
    app.add_exception_handler(Problem, _problem)
    app.add_exception_handler(RequestValidationError, _parameters)
    app.add_exception_handler(HTTPException, _framework)
    gate = install(app, settings, keys, metrics)
    return app


async def _problem(_: Request, fault: Exception) -> Response:
    if not isinstance(fault, Problem):
        raise fault
    if fault.status >= 500:
        log.warning("answered %d: %s", fault.status, fault.detail)
    return answer_to(fault)


async def _parameters(_: Request, fault: Exception) -> Response:
    """Parameters of an address that the framework has checked; their kind is no part of their place."""
    if not isinstance(fault, RequestValidationError):
        raise fault
    return answer_to(from_complaints([{**one, "loc": one["loc"][1:]} for one in fault.errors()]))


async def _framework(request: Request, fault: Exception) -> Response:
    """What the framework refuses by itself: unknown addresses and methods."""
    if not isinstance(fault, HTTPException):
        raise fault
    kinds = {400: "malformed-request", 404: "not-found", 405: "method-not-allowed"}
    path = request.url.path[:200]
    if fault.status_code not in kinds:
        log.error("the framework answered %d: %s", fault.status_code, fault.detail)
        return answer_to(Problem("internal", "The request could not be handled."))
    details = {
        400: "The request cannot be read.",
        404: f"There is nothing at {path}. The addresses are listed at /openapi.json.",
        405: f"{path} does not answer {request.method}.",
    }
    headers = dict(fault.headers or {})
    if fault.status_code == 405:
        headers["Allow"] = ", ".join(sorted(_methods(request)))
    return answer_to(Problem(kinds[fault.status_code], details[fault.status_code]), headers)


def _methods(request: Request) -> set[str]:
    """What an address answers, over all its routes: the framework tells those of the first alone."""
    found: set[str] = set()
    for method in ("GET", "HEAD", "POST", "DELETE"):
        matches = (route.matches({**request.scope, "method": method})[0] for route in request.app.router.routes)
        if any(match is Match.FULL for match in matches):
            found.add(method)
    return found
