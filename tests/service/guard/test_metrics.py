from __future__ import annotations

import pytest
from prometheus_client.parser import text_string_to_metric_families

from service.guard.metrics import OTHER, Metrics
from service.guard.record import Record
from service.problems import Problem


def record(**changed):
    given = {"id": "r", "method": "GET", "path": "/", "query": "", "address": "", "begun": 0.0, "route": "/v1/sets"}
    return Record(**{**given, "status": 200, "received": 5, "sent": 70, "seconds": 0.03, **changed})


def samples(metrics, accept=""):
    body, media_type = metrics.expose(accept)
    assert media_type.startswith("text/plain") or "openmetrics" in accept
    found = {}
    for family in text_string_to_metric_families(body.decode()):
        for sample in family.samples:
            found[sample.name, tuple(sorted(sample.labels.items()))] = sample.value
    return found


def test_requests_are_counted():
    metrics = Metrics()
    for one in (record(), record(), record(status=404), record(method="POST", seconds=3.0)):
        metrics.observe(one)
    found = samples(metrics)

    def counted(method, status):
        return found["densityloom_requests_total", (("method", method), ("route", "/v1/sets"), ("status", status))]

    assert (counted("GET", "200"), counted("GET", "404"), counted("POST", "200")) == (2, 1, 1)
    assert found["densityloom_received_bytes_total", ()] == 20
    assert found["densityloom_sent_bytes_total", ()] == 280

    def within(method, seconds):
        labels = (("le", seconds), ("method", method), ("route", "/v1/sets"))
        return found["densityloom_request_seconds_bucket", labels]

    assert (within("GET", "0.025"), within("GET", "0.05"), within("POST", "2.5"), within("POST", "5.0")) == (0, 3, 0, 1)


def test_methods_that_were_made_up_are_one():
    metrics = Metrics()
    for number in range(50):
        metrics.observe(record(method=f"MADE{number}"))
    labels = (("method", OTHER), ("route", "/v1/sets"), ("status", "200"))
    assert samples(metrics)["densityloom_requests_total", labels] == 50


def test_figures_are_asked_for_when_shown():
    metrics, figures = Metrics(), {"sets": 1, "hits_total": 5}
    metrics.gauge({"sets": "how many", "hits_total": "how often"}, lambda: figures)
    assert samples(metrics)["densityloom_sets", ()] == 1
    figures["sets"] = 7
    found = samples(metrics)
    assert (found["densityloom_sets", ()], found["densityloom_hits_total", ()]) == (7, 5)


def test_figures_that_cannot_be_had_are_left_out():
    def fails():
        raise Problem("store-unavailable", "away")

    metrics = Metrics()
    metrics.gauge({"sets": "how many"}, fails)
    metrics.gauge({"others": "how many"}, lambda: {"others": 2})
    found = samples(metrics)
    assert ("densityloom_sets", ()) not in found
    assert found["densityloom_others", ()] == 2


def test_apps_share_no_figures():
    one, other = Metrics(), Metrics()
    one.observe(record())
    assert not any(name == "densityloom_requests_total" for name, _ in samples(other))


def test_the_process_is_described_and_each_has_its_own():
    body = Metrics().expose("")[0].decode()
    assert "process_resident_memory_bytes" in body
    for line in body.splitlines():
        if line.startswith("# HELP densityloom"):
            assert "of this server process" in line


@pytest.mark.parametrize(
    "accept",
    ["application/openmetrics-text; version=1.0.0", "application/openmetrics-text;version=abc", "text/plain", "*/*"],
)
def test_forms(accept):
    body, media_type = Metrics().expose(accept)
    assert media_type.split(";")[0] in ("text/plain", "application/openmetrics-text")
    assert body.endswith(b"# EOF\n") is ("openmetrics" in media_type)
