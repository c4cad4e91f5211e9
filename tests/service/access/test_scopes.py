from __future__ import annotations

import pytest

from service.access.scopes import is_open, scope_needed


@pytest.mark.parametrize(
    "path",
    [
        "/",
        "/docs",
        "/docs/docs.js",
        "/docs/vendor/x.css",
        "/page/js/main.js",
        "/openapi.json",
        "/health/live",
        "/health/ready",
    ],
)
def test_open_to_all(path):
    assert is_open(path)


@pytest.mark.parametrize(
    "path",
    [
        "/v1/sets",
        "/v1",
        "/v1/",
        "/metrics",
        "/nothing",
        "/docsx",
        "/health",
        "/openapi.json/",
        "//",
        "",
        "/DOCS",
        "/page",
    ],
)
def test_closed(path):
    assert not is_open(path)


@pytest.mark.parametrize(
    ("method", "path", "scope"),
    [
        ("GET", "/v1/sets", "read"),
        ("HEAD", "/v1/sets/00/profile", "read"),
        ("GET", "/metrics", "read"),
        ("POST", "/v1/profile", "compute"),
        ("POST", "/v1/sets/inspect", "compute"),
        ("POST", "/v1/sets", "write"),
        ("POST", "/v1/sets/", "write"),
        ("DELETE", "/v1/sets/00", "write"),
        ("PUT", "/v1/sets/00", None),
        ("OPTIONS", "/v1/sets", None),
        ("get", "/v1/sets", None),
    ],
)
def test_scope_needed(method, path, scope):
    assert scope_needed(method, path) == scope
