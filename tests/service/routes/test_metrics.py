from __future__ import annotations

import httpx
from prometheus_client.parser import text_string_to_metric_families

from service.routes.metrics import CACHE, POOL, STORE
from tests.service import bodies
from tests.service.conftest import alone


def figures(client):
    answer = client.get("/metrics")
    assert answer.status_code == 200
    assert answer.headers["content-type"].startswith("text/plain")
    assert answer.headers["cache-control"] == "no-store"
    return {
        (sample.name, tuple(sorted(sample.labels.items()))): sample.value
        for family in text_string_to_metric_families(answer.text)
        for sample in family.samples
    }


def test_figures_follow_what_is_done():
    with alone(compute_workers=1) as served, httpx.Client(base_url=served.address) as client:
        before = figures(client)
        for name in (*POOL, *CACHE, *STORE):
            assert (f"densityloom_{name}", ()) in before
        assert before["densityloom_workers", ()] == 1
        assert before["densityloom_store_sets", ()] == 0
        body = {"set": bodies.FILM}
        kept = client.post("/v1/sets", json={**body, "name": "invented"})
        assert kept.status_code == 201, kept.text
        identity = kept.json()["id"]
        for _ in range(2):
            answer = client.get(f"/v1/sets/{identity}/profile?from=0&to=1&samples=17")
            assert answer.status_code == 200
        assert client.get(f"/v1/sets/{'0' * 64}/profile?from=0&to=1&samples=17").status_code == 404
        after = figures(client)
        assert after["densityloom_store_sets", ()] == 1
        assert after["densityloom_store_bytes", ()] > 0
        assert (after["densityloom_cache_hits_total", ()], after["densityloom_cache_misses_total", ()]) == (1, 1)
        assert after["densityloom_cache_bytes", ()] >= len(answer.content)
        route = ("route", "/v1/sets/{identity}/profile")
        for status, count in (("200", 2), ("404", 1)):
            assert after["densityloom_requests_total", (("method", "GET"), route, ("status", status))] == count
        assert after["densityloom_in_flight_bytes", ()] == 0
