"""Is the service alive, and is it ready?"""

from __future__ import annotations

from importlib.metadata import version

from fastapi import APIRouter, Request

from service.problems import Problem
from service.schemas.health import Live, Ready
from service.store.store import Store

LIBRARIES = ("numpy", "scipy", "finufft", "fastapi", "uvicorn", "pydantic", "sqlalchemy")

router = APIRouter(prefix="/health", tags=["health"])


@router.get("/live", operation_id="live", summary="The process answers")
async def live() -> Live:
    """Answers as long as the event loop turns."""
    return Live(status="live", version=version("densityloom"))


@router.get("/ready", operation_id="ready", summary="Requests can be computed")
async def ready(request: Request) -> Ready:
    """Answers 200 once all workers have started, 503 before."""
    pool = getattr(request.app.state, "pool", None)
    if pool is None:
        raise Problem("not-ready", "The workers are starting.", headers={"Retry-After": "2"})
    store: Store = request.app.state.store
    if request.app.state.keys_required and store.database is None:
        raise Problem("not-ready", "Keys cannot be checked: the store is away.", headers={"Retry-After": "5"})
    return Ready(
        status="ready",
        version=version("densityloom"),
        **pool.state(),
        store=store.told(),
        libraries={name: version(name) for name in LIBRARIES},
    )


# Who watches over a service often asks so; the server sends no body then.
for _address, _endpoint in (("/live", live), ("/ready", ready)):
    router.add_api_route(_address, _endpoint, methods=["HEAD"], include_in_schema=False)
