from __future__ import annotations

import io
import json
import resource
import subprocess
import sys
from contextlib import closing

import numpy as np
import pytest

from engine.errors import EngineError
from service import pipeline
from service.problems import Problem
from service.settings import Settings
from service.spool import Spool
from service.store.parcel import unpack
from service.store.shelf import Shelf
from service.wall import worker
from tests.service import bodies


def served(product, body, form="json", settings=None, media_type="application/json", members=None):
    """What a worker answers: the message, and the bytes of the answer."""
    with Spool.unnamed() as spool:
        spool.append(body if isinstance(body, bytes) else json.dumps(body).encode())
        asked = {"product": product, "content_type": media_type, "form": form, "members": members or {}}
        with closing(Shelf(settings or Settings(compute_threads=1))) as shelf:
            message, made = worker._serve(asked, spool, shelf, settings or Settings(compute_threads=1))
    with made:
        return message, bytes(made.view())


def test_answer():
    message, content = served("profile", bodies.PROFILE, "npy")
    assert message["size"] == len(content)
    assert 0 < message["seconds"] < 10
    np.testing.assert_allclose(
        np.load(io.BytesIO(content)), bodies.film_profile(np.linspace(0, 1, 17)), rtol=0, atol=1e-12
    )


def test_refusal_survives_the_way_between_processes():
    message, _ = served("profile", bodies.without(bodies.PROFILE, "samples"))
    problem = Problem.from_message(json.loads(json.dumps(message["problem"])))
    assert problem.status == 422
    assert problem.places[0].pointer == "/samples"


@pytest.mark.parametrize("fault", [EngineError("secret"), ValueError("secret"), RecursionError("secret")])
def test_unforeseen_faults_are_told_without_detail(monkeypatch, caplog, fault):
    def fails(*_, **__):
        raise fault

    monkeypatch.setattr(pipeline, "run", fails)
    message, _ = served("profile", bodies.PROFILE)
    assert message["problem"]["kind"] == "internal"
    assert "secret" not in json.dumps(message)
    assert "secret" in caplog.text


def test_memory_beyond_the_estimate(monkeypatch, caplog):
    def fails(*_, **__):
        raise MemoryError

    monkeypatch.setattr(pipeline, "run", fails)
    message, _ = served("profile", bodies.PROFILE)
    assert message["problem"]["kind"] == "too-costly"
    assert "memory" in caplog.text


def test_limits_are_the_settings(caplog):
    message, _ = served("profile", bodies.PROFILE, settings=Settings(max_samples=16))
    assert message["problem"]["kind"] == "too-costly"


@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="address space is bounded on Linux alone")
def test_memory_is_bounded():
    code = (
        "from service.settings import Settings; from service.wall.worker import _bound_memory; import numpy as np\n"
        "_bound_memory(Settings(max_memory_bytes=2**24, max_body_bytes=1024)); np.ones(2**20)\n"
        "try: np.ones(2**28)\n"
        "except MemoryError: print('bounded')\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout == "bounded\n"


def test_tighter_bound_from_outside_is_kept(monkeypatch):
    """Raising a hard limit is not ours to do; asking for it would end the worker at its start."""
    told = []
    monkeypatch.setattr(resource, "getrlimit", lambda _: (2**30, 2**30))
    monkeypatch.setattr(resource, "setrlimit", lambda _, limits: told.append(limits))
    worker._bound_memory(Settings())
    assert told in ([(2**30, 2**30)], [])


def test_members_that_came_with_the_address_are_of_the_request():
    message, content = served("keep", {"set": bodies.FILM}, members={"name": "film KL-2"})
    assert message["headers"] == {}
    assert unpack(memoryview(content)).labels.name == "film KL-2"
    message, _ = served("keep", {"set": bodies.FILM, "name": "x"}, members={"name": "y"})
    assert "given in the body and again in the address" in message["problem"]["detail"]


def test_headers_that_belong_to_a_form_travel_with_the_answer():
    message, content = served("profile", bodies.PROFILE, "f32")
    assert json.loads(message["headers"]["Samples-Description"])["shape"] == [len(content) // 4]
