"""All layers at once: in this process, and as a service is run."""

from __future__ import annotations

import asyncio
import json
import os
import re
import signal
import subprocess
import sys
import threading
import time
from concurrent.futures import ThreadPoolExecutor

import httpx
import pytest

from service.app import create_app
from service.client import Client, ServiceError
from service.guard.install import keys_required
from service.settings import Settings
from tests.service import bodies
from tests.service.conftest import alone
from tests.service.guard.asgi import asked
from tests.service.problem_shape import assert_problem


@pytest.mark.parametrize(("setting", "required"), [(None, True), (True, True), (False, False)])
def test_app_whose_address_is_not_known_asks_for_keys(setting, required):
    settings = Settings(compute_workers=1, require_keys=setting)
    assert keys_required(settings) is required
    answer = asked(create_app(settings), path="/v1/none")
    # Without a store, as before the start, nothing can be checked and nothing opens.
    assert answer.status == (401 if required else 404)
    with_key = asked(
        create_app(settings), path="/v1/none", headers={"Authorization": f"Bearer dl_{'0' * 16}_{'0' * 64}"}
    )
    assert with_key.status == (503 if required else 404)


ANYWHERE = {"x-request-id", "x-content-type-options", "referrer-policy", "cross-origin-resource-policy"}


@pytest.mark.parametrize(
    ("method", "path", "status"),
    [
        ("GET", "/health/live", 200),
        ("GET", "/health/ready", 503),
        ("GET", "/docs", 200),
        ("GET", "/openapi.json", 200),
        ("GET", "/v1/none", 404),
        ("PUT", "/v1/profile", 405),
        ("POST", "/v1/profile", 500),
    ],
)
def test_every_answer_is_named_and_guarded(method, path, status, monkeypatch):
    """Also one to a fault that nobody foresaw: the workers of this app were never started."""
    app = create_app(Settings(compute_workers=1, require_keys=False))

    async def fails(*_):
        raise RuntimeError("unforeseen")

    monkeypatch.setattr("service.wall.pool.Pool.run", fails)
    headers = {"X-Request-ID": "mine", "Content-Type": "application/json"}
    answer = asked(app, b"{}", method=method, path=path, headers=headers)
    assert answer.status == status
    assert set(answer.headers) >= ANYWHERE
    assert answer.headers["x-request-id"] == "mine"
    if status >= 400:
        assert answer.headers["content-type"] == "application/problem+json"
        assert json.loads(answer.body)["status"] == status


def test_answers_to_allowed_origins_are_readable_also_when_refused():
    origin = "https://dashboard.example"
    app = create_app(Settings(compute_workers=1, require_keys=True, cors_origins=origin))
    answer = asked(app, headers={"Origin": origin})
    assert answer.status == 401
    assert answer.headers["access-control-allow-origin"] == origin
    assert "X-Request-ID" in answer.headers["access-control-expose-headers"]
    before = {
        "Origin": origin,
        "Access-Control-Request-Method": "POST",
        "Access-Control-Request-Headers": "authorization",
    }
    assert asked(app, method="OPTIONS", path="/v1/profile", headers=before).status == 200


def commanded(served_folder, *arguments):
    done = subprocess.run(
        [sys.executable, "-m", "service.cli", "keys", *arguments],
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
        env={**os.environ, "DENSITYLOOM_DATA_DIR": str(served_folder)},
    )
    assert done.returncode == 0, done.stderr
    return done.stdout.strip()


@pytest.fixture(scope="module")
def public(tmp_path_factory):
    """A service on every address of this machine, and the folder of its store."""
    folder = tmp_path_factory.mktemp("public")
    with alone("--host", "0.0.0.0", compute_workers=1, data_dir=folder, concurrent_per_key=2) as served:
        yield served, folder


def test_keys_from_end_to_end(public):
    served, folder = public
    with httpx.Client(base_url=served.address) as client:
        assert client.get("/health/ready").status_code == 200
        assert client.get("/docs").status_code == 200
        for method, address in (("GET", "/v1/sets"), ("POST", "/v1/profile"), ("GET", "/v1/none"), ("GET", "/metrics")):
            answer = client.request(method, address)
            assert_problem(answer, 401, kind="unauthorized")
            assert answer.headers["WWW-Authenticate"].startswith("Bearer")
        assert "densityloom keys create --name" in served.log.read_text()

        text = commanded(folder, "create", "--name", "pipeline", "--scope", "compute", "--scope", "write")
        looker = commanded(folder, "create", "--name", "dashboard", "--scope", "read")
        with Client(served.address, key=text) as pipeline:
            result = pipeline.compute("profile", bodies.PROFILE)
            assert result.values.shape == (17,)
        with Client(served.address, key=looker) as dashboard, pytest.raises(ServiceError) as refused:
            dashboard.compute("profile", bodies.PROFILE)
        assert refused.value.status == 403

        mine, theirs = {"Authorization": f"Bearer {text}"}, {"Authorization": f"Bearer {looker}"}
        kept = client.post("/v1/sets", json={"set": bodies.FILM, "name": "invented"}, headers=mine)
        assert kept.status_code == 201
        address = kept.headers["Location"]
        assert client.get(address, headers=theirs).status_code == 200
        assert_problem(client.get(address, headers=mine), 403, kind="forbidden")
        assert_problem(client.delete(address, headers=theirs), 403, kind="forbidden")
        # With keys any name will do.
        assert client.get(address, headers={**theirs, "Host": "density.example"}).status_code == 200

        identity = re.match("dl_([0-9a-f]+)_", looker)[1]
        commanded(folder, "revoke", identity)
        assert_problem(client.get(address, headers=theirs), 401, kind="unauthorized")
        assert client.delete(address, headers=mine).status_code == 204

    told = served.log.read_text()
    assert text not in told
    assert looker not in told
    lines = [json.loads(line) for line in told.splitlines()]
    assert {line.get("key") for line in lines if line["logger"] == "densityloom.requests"} == {
        None,
        identity,
        re.match("dl_([0-9a-f]+)_", text)[1],
    }


def test_one_key_leaves_room_for_others(public):
    """Two requests of a key may be under way; the third is refused, and another key is not."""
    served, folder = public
    first, second = (commanded(folder, "create", "--name", name, "--scope", "compute") for name in "ab")
    heavy = json.dumps(bodies.heavy_grid()).encode()

    def send(key, product, content):
        headers = {**bodies.JSON, "Authorization": f"Bearer {key}"}
        return httpx.post(f"{served.address}/v1/{product}?format=npy", content=content, headers=headers, timeout=60)

    async def hold(client):
        headers = {**bodies.JSON, "Authorization": f"Bearer {first}"}
        await client.post(f"{served.address}/v1/grid?format=npy", content=heavy, headers=headers)

    async def scenario():
        async with httpx.AsyncClient(timeout=60) as client:
            held = [asyncio.create_task(hold(client)) for _ in range(2)]
            while (await client.get(f"{served.address}/health/ready")).json()["waiting"] == 0:
                await asyncio.sleep(0.02)
            refused = await asyncio.to_thread(send, first, "profile", json.dumps(bodies.PROFILE))
            assert_problem(refused, 429, kind="rate-limited")
            assert int(refused.headers["Retry-After"]) >= 1
            other = asyncio.create_task(asyncio.to_thread(send, second, "profile", json.dumps(bodies.PROFILE)))
            await asyncio.sleep(0.2)
            # Whoever leaves the computation, and the queue, makes room at once.
            for one in held:
                one.cancel()
            await asyncio.gather(*held, return_exceptions=True)
            assert (await other).status_code == 200

    asyncio.run(scenario())
    state = httpx.get(f"{served.address}/health/ready").json()
    assert (state["busy"], state["waiting"]) == (0, 0)


def test_client_that_leaves_the_queue_is_not_computed_for():
    """Its place is free at once, and the worker never sees its request."""
    with alone(**bodies.HEAVY_LIMITS, queue=2) as served:
        heavy = json.dumps(bodies.heavy_grid()).encode()

        def state():
            return httpx.get(f"{served.address}/health/ready").json()

        async def scenario():
            async with httpx.AsyncClient(base_url=served.address, timeout=60) as client:
                first = asyncio.create_task(client.post("/v1/grid?format=npy", content=heavy, headers=bodies.JSON))
                while (await asyncio.to_thread(state))["busy"] == 0:
                    await asyncio.sleep(0.02)
                second = asyncio.create_task(client.post("/v1/grid?format=npy", content=heavy, headers=bodies.JSON))
                while (await asyncio.to_thread(state))["waiting"] == 0:
                    await asyncio.sleep(0.02)
                second.cancel()
                end = time.monotonic() + 5
                while (await asyncio.to_thread(state))["waiting"]:
                    assert time.monotonic() < end
                    await asyncio.sleep(0.02)
                first.cancel()
                end = time.monotonic() + 10
                while (await asyncio.to_thread(state))["busy"]:
                    assert time.monotonic() < end
                    await asyncio.sleep(0.02)

        asyncio.run(scenario())
        gone = [json.loads(line) for line in served.log.read_text().splitlines() if '"gone": true' in line]
        assert len(gone) == 2


def test_rates_of_a_real_service():
    with alone(compute_workers=1, requests_per_minute=20) as served, httpx.Client(base_url=served.address) as client:
        answers = [client.get("/v1/sets") for _ in range(25)]
        assert [answer.status_code for answer in answers[:20]] == [200] * 20
        assert_problem(answers[-1], 429, kind="rate-limited")
        assert int(answers[-1].headers["Retry-After"]) >= 1
        assert answers[-1].headers["RateLimit-Policy"] == '"requests";q=20;w=60'
        assert client.get("/health/ready").status_code == 200


def test_bytes_in_flight_of_a_real_service():
    with alone(compute_workers=1, max_inflight_bytes=2**20) as served, ThreadPoolExecutor(1) as threads:
        going, begun = threading.Event(), threading.Event()

        def slowly():
            yield b'{"set": '
            begun.set()
            going.wait(30)
            yield b" " * (900_000 - 8)

        headers = {**bodies.JSON, "Content-Length": "900000"}
        future = threads.submit(httpx.post, f"{served.address}/v1/profile", content=slowly(), headers=headers)
        assert begun.wait(20)
        time.sleep(0.3)
        refused = httpx.post(f"{served.address}/v1/profile", content=b" " * 300_000, headers=bodies.JSON)
        assert_problem(refused, 503, kind="overloaded")
        assert int(refused.headers["Retry-After"]) >= 1
        assert httpx.post(f"{served.address}/v1/profile", json=bodies.PROFILE).status_code == 200
        going.set()
        assert_problem(future.result(), 400, kind="malformed-body")


def test_nested_and_long_bodies_are_refused_cleanly(small_client):
    deep = b'{"set": ' + b"[" * 5000 + b"]" * 5000 + b"}"
    assert_problem(small_client.post("/v1/profile", content=deep, headers=bodies.JSON), 400)
    rows = {**bodies.FILM, "l": list(range(1, 200)), "amplitude": [1.0] * 199, "phase_deg": [0.0] * 199}
    document = small_client.post("/v1/profile", json={**bodies.PROFILE, "set": rows}).json()
    assert document["status"] == 422
    assert "50" in document["detail"]


def test_worker_logs_under_the_name_of_its_request(tmp_path):
    """A fault behind the wall is found by the id that the client was given."""
    runner = tmp_path / "sitecustomize.py"
    runner.write_text(
        "import sys\n"
        "if 'service.wall.worker' in sys.orig_argv:\n"
        "    import service.pipeline as p\n"
        "    def fails(*a, **k): raise RuntimeError('behind the wall')\n"
        "    p.answer = fails\n"
    )
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("PYTHONPATH", os.pathsep.join((str(tmp_path), os.getcwd())))
        with alone(compute_workers=1) as served:
            answer = httpx.post(
                f"{served.address}/v1/profile", json=bodies.PROFILE, headers={"X-Request-ID": "find.me"}
            )
            assert_problem(answer, 500, kind="internal")
            lines = [json.loads(line) for line in served.log.read_text().splitlines()]
    (line,) = (line for line in lines if line["logger"] == "densityloom.worker")
    assert line["request_id"] == "find.me"
    assert "behind the wall" in line["trace"]


def test_several_server_processes_stop_cleanly(tmp_path):
    with alone("--workers", "2", compute_workers=1, data_dir=tmp_path) as served:
        assert httpx.get(f"{served.address}/v1/sets").status_code == 200
        served.process.send_signal(signal.SIGTERM)
        assert served.process.wait(30) == 0
        assert "Traceback" not in served.log.read_text()
