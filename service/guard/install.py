"""The layers around an app, from the outermost to the innermost."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from fastapi import FastAPI

from service.access.keys import Keys
from service.guard import logs
from service.guard.authentication import Authentication
from service.guard.faults import Faults
from service.guard.headers import SecurityHeaders
from service.guard.metrics import Metrics
from service.guard.origins import Origins, Sharing
from service.guard.rates import Rates, Rating
from service.guard.record import Recording
from service.guard.stopping import Gate, Passing
from service.guard.transfers import InFlight, Transfers
from service.settings import Settings, listed


def keys_required(settings: Settings) -> bool:
    """Whether requests need a key; where nothing was said and the address is not known, they do."""
    return settings.require_keys is not False


def install(app: FastAPI, settings: Settings, keys: Callable[[], Keys], metrics: Metrics) -> Gate:
    """Put the layers around an app that has not started; returns the gate by which it stops."""
    gate = Gate(settings.stop_seconds)
    rates = Rates(settings.requests_per_minute)
    origins = listed(settings.cors_origins)
    required = keys_required(settings)
    in_flight = InFlight(settings.max_inflight_bytes)
    layers: list[tuple[Any, dict[str, Any]]] = [
        (Recording, {"observers": (logs.observe, metrics.observe)}),
        (SecurityHeaders, {"origins": origins}),
        *([(Sharing, {"origins": origins})] if origins else []),
        (Faults, {}),
        (Passing, {"gate": gate}),
        (Origins, {"hosts": None if required else listed(settings.allowed_hosts), "origins": origins}),
        *([(Authentication, {"keys": keys, "rates": rates})] if required else []),
        (Rating, {"each": rates, "total": Rates(settings.total_requests_per_minute)}),
        (
            Transfers,
            {
                "in_flight": in_flight,
                "most_body": settings.max_body_bytes,
                "body_seconds": settings.body_seconds,
            },
        ),
    ]
    # The one added last is the outermost.
    for layer, options in reversed(layers):
        app.add_middleware(layer, **options)
    metrics.gauge(
        {"in_flight_bytes": "Bytes of bodies and answers on their way, of this server process"},
        lambda: {"in_flight_bytes": in_flight.bytes},
    )
    return gate
