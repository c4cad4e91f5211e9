"""The page at /, for people who would rather look than read, from files of our own."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

from fastapi import APIRouter, Request, Response
from starlette.concurrency import run_in_threadpool

from service.answers.coding import CODINGS, choose_coding, encode, entity_tag
from service.problems import Problem
from service.routes.conditions import is_current
from service.routes.exchange import answering

FOLDER = Path(__file__).resolve().parent.parent / "page"
PARTS = ("css", "js", "demos", "vendor/uplot", "vendor/three")
"""Folders of the page whose files are served; the viewer of /docs has an address of its own."""
MEDIA_TYPES = {
    ".html": "text/html; charset=utf-8",
    ".css": "text/css; charset=utf-8",
    ".js": "text/javascript; charset=utf-8",
    ".json": "application/json",
    ".svg": "image/svg+xml",
}
"""Endings of the files that are served: licences and checksums are for readers of the source."""

POLICY = (
    "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data: blob:; connect-src 'self'; "
    "base-uri 'none'; form-action 'none'; frame-ancestors 'none'"
)
HEADERS = {
    "Content-Security-Policy": POLICY,
    "X-Content-Type-Options": "nosniff",
    "Referrer-Policy": "no-referrer",
    # Asked again each time, and mostly answered with 304: a page never mixes files of two releases.
    "Cache-Control": "no-cache",
    "Vary": "Accept-Encoding",
}


@dataclass(frozen=True, slots=True)
class Asset:
    """A file of the page in one coding."""

    body: bytes
    media_type: str
    tag: str


router = APIRouter()


async def index(request: Request) -> Response:
    """The page."""
    return await _answer(request, FOLDER / "index.html")


async def asset(request: Request, name: str) -> Response:
    """One of its files."""
    path = files().get(name)
    if path is None:
        raise Problem("not-found", f"The page has no file {name[:200]}.")
    return await _answer(request, path)


answering(router, "/", index, {"include_in_schema": False})
answering(router, "/page/{name:path}", asset, {"include_in_schema": False})


@lru_cache(maxsize=1)
def files() -> dict[str, Path]:
    """Every file that is served, by its address below /page/: what is not listed cannot be asked for."""
    found = (path for part in PARTS for path in (FOLDER / part).rglob("*") if path.suffix in MEDIA_TYPES)
    return {path.relative_to(FOLDER).as_posix(): path for path in found if path.is_file()}


async def _answer(request: Request, path: Path) -> Response:
    status = path.stat()
    media_type = MEDIA_TYPES[path.suffix]
    coding = choose_coding(",".join(request.headers.getlist("accept-encoding")), media_type, status.st_size)
    made = await run_in_threadpool(_asset, path, status.st_mtime_ns, coding)
    headers = {**HEADERS, "ETag": entity_tag(made.tag, coding)}
    held = request.headers.get("if-none-match")
    if any(is_current(held, entity_tag(made.tag, one)) for one in (None, *CODINGS)):
        return Response(status_code=304, headers=headers)
    if coding is not None:
        headers["Content-Encoding"] = coding
    headers["Content-Length"] = str(len(made.body))
    body = b"" if request.method == "HEAD" else made.body
    return Response(body, media_type=made.media_type, headers=headers)


@lru_cache(maxsize=256)
def _asset(path: Path, changed: int, coding: str | None) -> Asset:
    """A file, read once as long as it does not change."""
    body = path.read_bytes()
    tag = hashlib.sha256(body).hexdigest()[:32]
    coded = body if coding is None else encode(memoryview(body), coding)
    return Asset(coded, MEDIA_TYPES[path.suffix], tag)
