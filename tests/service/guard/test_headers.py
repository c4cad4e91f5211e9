from __future__ import annotations

import pytest
from starlette.responses import Response

from service.guard.headers import DRAWING_POLICY, POLICY, SecurityHeaders
from tests.service.guard.asgi import around, asked


def answer(media_type, headers=None, origin=None, origins=()):
    app = Response(b"{}", media_type=media_type, headers=headers)
    return asked(around(SecurityHeaders, app, origins=origins), headers={"Origin": origin}).headers


@pytest.mark.parametrize(
    "media_type",
    ["application/json", "application/problem+json", "image/png", "text/csv; charset=utf-8", "text/html", None],
)
def test_data_may_do_nothing(media_type):
    headers = answer(media_type)
    assert headers["x-content-type-options"] == "nosniff"
    assert headers["referrer-policy"] == "no-referrer"
    assert headers["cross-origin-resource-policy"] == "same-origin"
    assert headers["content-security-policy"] == POLICY


def test_drawing_has_styles_and_no_scripts():
    assert answer("image/svg+xml")["content-security-policy"] == DRAWING_POLICY
    rules = dict(rule.split(maxsplit=1) for rule in DRAWING_POLICY.split("; "))
    assert rules["default-src"] == "'none'"
    assert "script-src" not in rules


@pytest.mark.parametrize("media_type", ["text/javascript; charset=utf-8", "text/css", "application/wasm"])
def test_parts_of_a_page_are_under_its_policy(media_type):
    headers = answer(media_type)
    assert "content-security-policy" not in headers
    assert headers["x-content-type-options"] == "nosniff"


def test_own_policy_of_a_route_stays():
    assert answer("text/html", {"Content-Security-Policy": "own"}).getlist("content-security-policy") == ["own"]


def test_pages_of_allowed_origins_may_embed():
    origins = ("https://a.example",)
    assert answer("image/png", None, "https://a.example", origins)["cross-origin-resource-policy"] == "cross-origin"
    for other in ("https://b.example", None):
        assert answer("image/png", None, other, origins)["cross-origin-resource-policy"] == "same-origin"
