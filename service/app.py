"""The application: settings and pool in, ASGI app out. Nothing lives at module level."""

from __future__ import annotations

import logging
from collections.abc import AsyncIterator
from contextlib import asynccontextmanager
from importlib.metadata import version

from fastapi import FastAPI, Request, Response
from starlette.exceptions import HTTPException

from service import openapi
from service.problems import MEDIA_TYPE, Problem
from service.routes import compute, docs, health
from service.settings import Settings, load_settings
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

    @asynccontextmanager
    async def lifespan(app: FastAPI) -> AsyncIterator[None]:
        await pool.start()
        app.state.pool = pool
        try:
            yield
        finally:
            app.state.pool = None
            await pool.close()

    app = FastAPI(
        title="densityloom",
        version=version("densityloom"),
        description=openapi.DESCRIPTION,
        docs_url=None,
        redoc_url=None,
        lifespan=lifespan,
    )
    app.include_router(compute.router(pool, settings))
    app.include_router(health.router)
    docs.install(app)
    openapi.install(app)
    app.add_exception_handler(Problem, _problem)
    app.add_exception_handler(HTTPException, _framework)
    app.add_exception_handler(Exception, _unforeseen)
    return app


def _answer(problem: Problem, headers: dict[str, str] | None = None) -> Response:
    return Response(
        problem.encode(), problem.status, media_type=MEDIA_TYPE, headers={**problem.headers, **(headers or {})}
    )


async def _problem(_: Request, fault: Exception) -> Response:
    if not isinstance(fault, Problem):
        raise fault
    if fault.status >= 500:
        log.warning("answered %d: %s", fault.status, fault.detail)
    return _answer(fault)


async def _framework(request: Request, fault: Exception) -> Response:
    """What the framework refuses by itself: unknown addresses and methods."""
    if not isinstance(fault, HTTPException):
        raise fault
    kinds = {404: "not-found", 405: "method-not-allowed"}
    path = request.url.path[:200]
    if fault.status_code not in kinds:
        log.error("the framework answered %d: %s", fault.status_code, fault.detail)
        return _answer(Problem("internal", "The request could not be handled."))
    details = {
        404: f"There is nothing at {path}. The addresses are listed at /openapi.json.",
        405: f"{path} does not answer {request.method}.",
    }
    return _answer(Problem(kinds[fault.status_code], details[fault.status_code]), dict(fault.headers or {}))


async def _unforeseen(request: Request, fault: Exception) -> Response:
    # The server logs the trace itself; the client is told no more than that.
    log.error("a request to %s failed", request.url.path)
    return _answer(Problem("internal", "The service failed on this request; the fault has been logged."))
