from __future__ import annotations

import asyncio
import contextlib

import httpx
import pytest
from starlette.exceptions import HTTPException

from service.app import create_app
from service.settings import Settings
from tests.service.problem_shape import assert_problem

SETTINGS = Settings(compute_workers=1, require_keys=False)


def asked(app, method, address, **options):
    """One request to an app in this process, without its workers."""

    async def ask():
        transport = httpx.ASGITransport(app, raise_app_exceptions=False)
        async with httpx.AsyncClient(transport=transport, base_url="http://127.0.0.1") as client:
            return await client.request(method, address, **options)

    return asyncio.run(ask())


@pytest.mark.parametrize("address", ["/nothing", "/v1", "/v1/profiles", "/v2/profile", "/docs/vendor/none.js", "/%00"])
def test_unknown_address(client, address):
    assert_problem(client.get(address), 404, kind="not-found")


def test_long_address_is_not_echoed(client):
    document = assert_problem(client.get("/" + "x" * 5000), 404)
    assert len(document["detail"]) < 400


@pytest.mark.parametrize(
    ("method", "address", "allowed"),
    [("GET", "/v1/profile", "POST"), ("DELETE", "/v1/grid", "POST"), ("POST", "/health/live", "GET, HEAD")],
)
def test_unknown_method(client, method, address, allowed):
    answer = client.request(method, address)
    assert_problem(answer, 405, kind="method-not-allowed")
    assert answer.headers["Allow"] == allowed


def test_not_ready_before_the_workers_have_started():
    answer = asked(create_app(SETTINGS), "GET", "/health/ready")
    assert_problem(answer, 503, kind="not-ready")
    assert int(answer.headers["Retry-After"]) > 0
    assert asked(create_app(SETTINGS), "GET", "/health/live").status_code == 200


def app_that_fails(fault):
    app = create_app(SETTINGS)

    @app.get("/fault")
    async def fails():
        raise fault

    return app


def test_unforeseen_fault_is_told_without_detail(caplog):
    answer = asked(app_that_fails(RuntimeError("secret")), "GET", "/fault")
    assert_problem(answer, 500, kind="internal")
    assert b"secret" not in answer.content
    assert "/fault" in caplog.text


def test_other_refusals_of_the_framework_are_problems_too(caplog):
    answer = asked(app_that_fails(HTTPException(418, "secret")), "GET", "/fault")
    assert_problem(answer, 500, kind="internal")
    assert b"secret" not in answer.content
    assert "418" in caplog.text


def test_apps_share_nothing():
    one, other = create_app(SETTINGS), create_app(SETTINGS)
    assert one.state is not other.state

    @one.get("/only-here")
    async def only_here():
        return {}

    assert asked(one, "GET", "/only-here").status_code == 200
    assert_problem(asked(other, "GET", "/only-here"), 404)


def test_settings_come_from_the_environment(monkeypatch):
    monkeypatch.setenv("DENSITYLOOM_QUEU", "1")
    with pytest.raises(ValueError, match="unknown setting"):
        create_app()


def test_workers_live_as_long_as_the_app():
    async def scenario():
        app = create_app(SETTINGS)
        async with app.router.lifespan_context(app):
            pool = app.state.pool
            process = pool._workers[0]._process
            assert process.poll() is None
            transport = httpx.ASGITransport(app)
            async with httpx.AsyncClient(transport=transport, base_url="http://127.0.0.1") as client:
                ready = (await client.get("/health/ready")).json()
            assert (ready["workers"], ready["busy"], ready["waiting"]) == (1, 0, 0)
        assert process.poll() is not None
        assert app.state.pool is None

    with contextlib.closing(asyncio.new_event_loop()) as loop:
        loop.run_until_complete(scenario())
