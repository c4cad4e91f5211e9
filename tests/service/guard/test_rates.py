from __future__ import annotations

import json
from contextlib import suppress

import pytest

from service.guard import rates as module
from service.guard.rates import Rates, Rating
from service.problems import Problem
from tests.service.guard.asgi import around, asked


class Clock:
    def __init__(self):
        self.now = 1000.0

    def __call__(self):
        return self.now


def taken(rates, client, times):
    """How many of so many requests pass."""
    passed = 0
    for _ in range(times):
        with suppress(Problem):
            rates.take(client)
            passed += 1
    return passed


def test_bucket_holds_a_minute_and_fills_again():
    clock = Clock()
    rates = Rates(30, clock)
    assert taken(rates, "a", 50) == 30
    assert taken(rates, "b", 50) == 30
    clock.now += 2
    assert taken(rates, "a", 50) == 1
    clock.now += 30
    assert taken(rates, "a", 50) == 15
    clock.now += 3600
    assert taken(rates, "a", 50) == 30


def test_refusal_says_when():
    clock = Clock()
    rates = Rates(6, clock)
    taken(rates, "a", 6)
    with pytest.raises(Problem) as caught:
        rates.take("a", "this key")
    assert caught.value.status == 429
    assert caught.value.headers == {
        "Retry-After": "10",
        "RateLimit-Policy": '"requests";q=6;w=60',
        "RateLimit": '"requests";r=0;t=10',
    }
    assert "this key" in caught.value.detail
    clock.now += int(caught.value.headers["Retry-After"])
    rates.take("a")


def test_no_limit():
    assert taken(Rates(0, Clock()), "a", 1000) == 1000


def test_buckets_are_bounded(monkeypatch):
    monkeypatch.setattr(module, "MOST_CLIENTS", 3)
    rates = Rates(2, Clock())
    for client in "abcdefg":
        rates.take(client)
    assert set(rates._buckets) == set("efg")


def test_layer_counts_each_client_and_all():
    each, total = Rates(2, Clock()), Rates(3, Clock())
    app = around(Rating, each=each, total=total)

    def status(address, path="/v1/sets"):
        answer = asked(app, client=(address, 1), path=path)
        if answer.status != 200:
            assert int(answer.headers["retry-after"]) > 0
            assert json.loads(answer.body)["type"].endswith(":rate-limited")
        return answer.status

    assert [status("192.0.2.1") for _ in range(3)] == [200, 200, 429]
    # What was refused has taken nothing from the others.
    assert [status("192.0.2.2") for _ in range(2)] == [200, 429]
    assert [status("192.0.2.1", "/health/ready") for _ in range(5)] == [200] * 5
