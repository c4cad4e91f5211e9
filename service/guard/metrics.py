"""Figures for a monitor, in the Prometheus text format."""

from __future__ import annotations

import logging
from collections.abc import Callable, Iterable, Mapping

from prometheus_client import CollectorRegistry, Counter, Histogram, ProcessCollector
from prometheus_client.core import CounterMetricFamily, GaugeMetricFamily, Metric
from prometheus_client.exposition import choose_encoder
from prometheus_client.registry import Collector

from service.guard.record import Record
from service.problems import Problem

log = logging.getLogger("densityloom")

METHODS = ("GET", "HEAD", "POST", "DELETE", "OPTIONS", "PUT", "PATCH")
OTHER = "other"
"""Stands for methods that clients have made up."""
BUCKETS = (0.001, 0.0025, 0.005, 0.01, 0.025, 0.05, 0.1, 0.25, 0.5, 1.0, 2.5, 5.0, 10.0, 30.0, 60.0, 120.0)
_EACH = "of this server process; there is one set of figures for each"

Figures = Callable[[], Mapping[str, float]]
"""Current figures by name."""


class Metrics:
    """A registry of one app's own."""

    def __init__(self) -> None:
        self._registry = CollectorRegistry()
        ProcessCollector(registry=self._registry)
        self._requests = Counter(
            "densityloom_requests",
            f"Requests answered, {_EACH}",
            ("method", "route", "status"),
            registry=self._registry,
        )
        self._seconds = Histogram(
            "densityloom_request_seconds",
            f"From the first byte of a request to the last of its answer, {_EACH}",
            ("method", "route"),
            buckets=BUCKETS,
            registry=self._registry,
        )
        self._received = Counter(
            "densityloom_received_bytes", f"Bytes of bodies received, {_EACH}", registry=self._registry
        )
        self._sent = Counter("densityloom_sent_bytes", f"Bytes of answers sent, {_EACH}", registry=self._registry)

    def observe(self, record: Record) -> None:
        """Count a request that has ended."""
        method = record.method if record.method in METHODS else OTHER
        self._requests.labels(method, record.route, str(record.status)).inc()
        self._seconds.labels(method, record.route).observe(record.seconds)
        self._received.inc(record.received)
        self._sent.inc(record.sent)

    def gauge(self, told: Mapping[str, str], figures: Figures) -> None:
        """Show figures that are asked for when they are shown.

        Parameters
        ----------
        told : mapping of str to str
            Names, without our prefix, and what each means; a name that ends in ``_total`` only grows.
        figures : callable
            Their values; it may raise `Problem`, and they are then left out.
        """
        self._registry.register(_Asked(told, figures))

    def expose(self, accept: str) -> tuple[bytes, str]:
        """All figures, and the media type they are in; takes a moment, for some are looked up."""
        try:
            encode, media_type = choose_encoder(accept)
        except (ValueError, TypeError):
            # A version that is no number.
            encode, media_type = choose_encoder("")
        body: bytes = encode(self._registry)
        return body, media_type


class _Asked(Collector):
    def __init__(self, told: Mapping[str, str], figures: Figures) -> None:
        self._told = told
        self._figures = figures

    def describe(self) -> Iterable[Metric]:
        """Nothing is looked up before somebody asks."""
        return ()

    def collect(self) -> Iterable[Metric]:
        try:
            found = self._figures()
        except Problem as problem:
            log.warning("figures are left out: %s", problem.detail)
            return
        for name, meaning in self._told.items():
            kind = CounterMetricFamily if name.endswith("_total") else GaugeMetricFamily
            yield kind(f"densityloom_{name}", meaning, value=found[name])
