from __future__ import annotations

import json
import logging

import pytest

from service.access.keys import Keys
from service.guard.authentication import FIRST_KEY, Authentication, announce
from service.guard.rates import Rates
from service.guard.record import record_of
from tests.service.guard.asgi import around, asked


async def within(scope, receive, send):
    told = str(record_of(scope).key).encode()
    await send({"type": "http.response.start", "status": 200, "headers": []})
    await send({"type": "http.response.body", "body": told})


def layer(keys, per_minute=0):
    return around(Authentication, within, keys=lambda: keys, rates=Rates(per_minute))


def bearer(text):
    return {"Authorization": f"Bearer {text}"}


ALL = [
    ("GET", "/v1/sets"),
    ("POST", "/v1/profile"),
    ("POST", "/v1/sets"),
    ("DELETE", "/v1/sets/0"),
    ("GET", "/metrics"),
]


@pytest.mark.parametrize(
    ("method", "path"), [*ALL, ("GET", "/v1/none"), ("PUT", "/v1/sets"), ("GET", "/none"), ("OPTIONS", "/v1/sets")]
)
def test_nothing_without_a_key(keys, method, path):
    answer = asked(layer(keys), method=method, path=path)
    assert answer.status == 401
    assert answer.headers["www-authenticate"] == 'Bearer realm="densityloom"'
    assert json.loads(answer.body)["type"].endswith(":unauthorized")


@pytest.mark.parametrize(
    "path", ["/", "/docs", "/docs/docs.js", "/page/js/a.js", "/openapi.json", "/health/live", "/health/ready"]
)
def test_what_is_open(keys, path):
    answer = asked(layer(keys), path=path)
    assert (answer.status, answer.body) == (200, b"None")
    # Not even a wrong key shuts it.
    assert asked(layer(keys), path=path, headers=bearer("wrong")).status == 200


@pytest.mark.parametrize(
    ("scopes", "passes"),
    [
        (["read"], {("GET", "/v1/sets"), ("GET", "/metrics")}),
        (["compute"], {("POST", "/v1/profile")}),
        (["write"], {("POST", "/v1/sets"), ("DELETE", "/v1/sets/0")}),
        (["read", "compute", "write"], set(ALL)),
    ],
)
def test_scopes(keys, scopes, passes):
    key, text = keys.create("a", scopes)
    for method, path in ALL:
        answer = asked(layer(keys), method=method, path=path, headers=bearer(text))
        if (method, path) in passes:
            assert (answer.status, answer.body) == (200, key.id.encode())
        else:
            assert answer.status == 403
            (needed,) = {"read", "compute", "write"} & set(answer.headers["www-authenticate"].split('"'))
            assert needed not in scopes
            detail = json.loads(answer.body)["detail"]
            assert f"scope {needed}" in detail
            assert text not in detail
    assert asked(layer(keys), method="PUT", headers=bearer(text)).status == 200


@pytest.mark.parametrize(
    "header",
    [
        "",
        "Bearer",
        "Bearer ",
        "Basic dTpw",
        "{}",
        "Token {}",
        "Bearer {}x",
        "Bearer {} {}",
        "Bearer é",
        "Bearer x" * 2000,
    ],
)
def test_other_credentials(keys, header):
    _, text = keys.create("a", ["read"])
    answer = asked(layer(keys), headers={"Authorization": header.format(text, text)})
    assert answer.status == 401
    assert 'error="invalid_token"' in answer.headers["www-authenticate"]
    assert text.encode() not in answer.body


def test_scheme_has_no_case(keys):
    _, text = keys.create("a", ["read"])
    assert asked(layer(keys), headers={"Authorization": f"bearer  {text}"}).status == 200


def test_revoked_key_is_refused_at_once(keys):
    key, text = keys.create("a", ["read"])
    app = layer(keys)
    assert asked(app, headers=bearer(text)).status == 200
    keys.revoke(key.id)
    assert asked(app, headers=bearer(text)).status == 401


def test_without_a_store_nothing_opens():
    for headers, status in (({}, 401), (bearer("x"), 401), (bearer(f"dl_{'0' * 16}_{'0' * 64}"), 503)):
        assert asked(layer(Keys(None)), headers=headers).status == status
    assert asked(layer(Keys(None)), path="/health/live").status == 200


def test_database_that_fails_opens_nothing(keys, database, monkeypatch):
    """Its tables are gone: nothing can be looked up."""
    _, text = keys.create("a", ["read"])
    with database.writing() as connection:
        connection.exec_driver_sql("DROP TABLE keys")
    assert asked(layer(keys), headers=bearer(text)).status == 503


def test_whoever_only_tries_is_slowed_down_by_address(keys):
    _, text = keys.create("a", ["read"])
    app = layer(keys, per_minute=3)
    wrong = f"dl_{'0' * 16}_{'0' * 64}"
    tried = [asked(app, headers=bearer(wrong), client=("192.0.2.1", 1)).status for _ in range(5)]
    assert tried == [401, 401, 401, 429, 429]
    # Others are not held up, and a good key takes nothing from its address.
    for _ in range(5):
        assert asked(app, headers=bearer(text), client=("192.0.2.2", 1)).status == 200
    # Nor does a good one wait for what others behind the same proxy have tried.
    assert asked(app, headers=bearer(text), client=("192.0.2.1", 1)).status == 200


def test_announcement(keys, caplog):
    with caplog.at_level(logging.INFO):
        announce(False, keys)
        assert "no keys" in caplog.text
        announce(True, keys)
        assert FIRST_KEY in caplog.text
        caplog.clear()
        keys.create("a", ["read"])
        announce(True, keys)
        assert caplog.text == ""
        announce(True, Keys(None))
        assert "cannot be checked" in caplog.text
