"""Which scope an address asks for, and which addresses ask for none."""

from __future__ import annotations

READ, COMPUTE, WRITE = "read", "compute", "write"
SCOPES = (READ, COMPUTE, WRITE)
"""What a key may do: look (GET), have something computed (POST), keep and delete sets."""

OPEN = frozenset({"/", "/docs", "/openapi.json", "/health/live", "/health/ready", "/favicon.ico"})
OPEN_BELOW = ("/docs/", "/page/")
"""Addresses that need no key: the page, the description of the API, and their files."""
KEEPING = "/v1/sets"
"""Where POST keeps something instead of computing."""


def is_open(path: str) -> bool:
    """Whether an address is answered without a key."""
    return path in OPEN or path.startswith(OPEN_BELOW)


def scope_needed(method: str, path: str) -> str | None:
    """The scope a request needs of its key; None where any key will do, for nothing answers that method.

    >>> scope_needed("POST", "/v1/sets"), scope_needed("POST", "/v1/sets/inspect"), scope_needed("GET", "/v1/sets")
    ('write', 'compute', 'read')
    """
    if method in ("GET", "HEAD"):
        return READ
    if method == "DELETE":
        return WRITE
    if method == "POST":
        return WRITE if path.rstrip("/") == KEEPING else COMPUTE
    return None
