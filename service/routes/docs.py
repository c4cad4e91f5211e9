"""The API's page at /docs, served from files of our own: it works without a network beyond us."""

from __future__ import annotations

from pathlib import Path

from fastapi import FastAPI
from fastapi.responses import FileResponse
from starlette.staticfiles import StaticFiles

PAGE = Path(__file__).resolve().parent.parent / "page"

# The viewer sets styles from its script; scripts and requests stay with us.
POLICY = (
    "default-src 'none'; script-src 'self'; style-src 'self' 'unsafe-inline'; img-src 'self' data:; "
    "connect-src 'self'; base-uri 'none'; form-action 'none'; frame-ancestors 'none'"
)


def install(app: FastAPI) -> None:
    """Add /docs and the files it needs."""

    @app.get("/docs", include_in_schema=False)
    async def page() -> FileResponse:
        headers = {"Content-Security-Policy": POLICY, "X-Content-Type-Options": "nosniff"}
        return FileResponse(PAGE / "docs.html", headers=headers)

    @app.get("/docs/docs.js", include_in_schema=False)
    async def script() -> FileResponse:
        return FileResponse(PAGE / "docs.js")

    app.mount("/docs/vendor", StaticFiles(directory=PAGE / "vendor"), name="vendor")
