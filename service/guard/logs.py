"""The log: a line of JSON, or of text on a terminal, for each event, on standard error."""

from __future__ import annotations

import json
import logging
import logging.config
import re
import sys
from datetime import UTC, datetime
from typing import Any

from service.guard.record import CURRENT_ID, Record
from service.settings import Settings

log = logging.getLogger("densityloom.requests")

FIELDS = "fields"
"""Attribute of a log record that holds what goes into members of its own."""
_CONTROLS = re.compile("[\x00-\x1f\x7f-\x9f\u2028\u2029]")


def observe(record: Record) -> None:
    """One line a request."""
    fields: dict[str, Any] = {
        "method": record.method,
        "path": record.path,
        "query": record.query,
        "route": record.route,
        "status": record.status,
        "seconds": round(record.seconds, 6),
        "bytes_in": record.received,
        "bytes_out": record.sent,
        "key": record.key,
        "client": record.address,
    }
    if record.gone:
        fields["gone"] = True
    level = logging.WARNING if record.status >= 500 else logging.INFO
    log.log(level, "%s %s %d", record.method, record.path, record.status, extra={FIELDS: fields})


class JsonLines(logging.Formatter):
    """Each event as one JSON object."""

    def format(self, record: logging.LogRecord) -> str:
        made: dict[str, Any] = {
            "time": _time(record).isoformat(timespec="milliseconds").replace("+00:00", "Z"),
            "level": record.levelname.lower(),
            "logger": record.name,
            "message": record.getMessage(),
        }
        if (identity := CURRENT_ID.get()) is not None:
            made["request_id"] = identity
        made |= getattr(record, FIELDS, {})
        if record.exc_info:
            made["trace"] = self.formatException(record.exc_info)
        # In ASCII, with escapes: no text, however broken, can end a line or fail to be written.
        return json.dumps(made, default=str)


class TextLines(logging.Formatter):
    """Each event as one line to read; a trace follows on lines of its own."""

    def format(self, record: logging.LogRecord) -> str:
        # What clients send may be in a message: it must not look like a line of ours.
        message = _CONTROLS.sub(lambda found: f"\\x{ord(found[0]):02x}", record.getMessage())
        fields = getattr(record, FIELDS, None)
        if fields is not None:
            key = f"  key {fields['key']}" if fields["key"] else ""
            gone = "  client gone" if fields.get("gone") else ""
            message += (
                f"  {1000 * fields['seconds']:.1f} ms  in {fields['bytes_in']:,} B  out {fields['bytes_out']:,} B"
                f"{key}  from {fields['client'] or 'here'}{gone}"
            )
        identity = CURRENT_ID.get()
        line = f"{_time(record):%H:%M:%S} {record.levelname:<7} {message}" + (f"  [{identity}]" if identity else "")
        return f"{line}\n{self.formatException(record.exc_info)}" if record.exc_info else line


def configuration(settings: Settings) -> dict[str, Any]:
    """For `logging.config.dictConfig`, and for the server, which applies it in every process it starts."""
    form = settings.log_format
    if form == "auto":
        form = "text" if sys.stderr.isatty() else "json"
    lines = JsonLines if form == "json" else TextLines
    return {
        "version": 1,
        "disable_existing_loggers": False,
        "formatters": {"lines": {"()": f"{lines.__module__}.{lines.__qualname__}"}},
        "handlers": {
            "error": {"class": "logging.StreamHandler", "stream": "ext://sys.stderr", "formatter": "lines"},
        },
        "root": {"level": settings.log_level.upper(), "handlers": ["error"]},
        # Its lines about requests know no more than ours.
        "loggers": {"uvicorn.access": {"level": "CRITICAL", "propagate": False}},
    }


def configure(settings: Settings) -> None:
    """Have this process log so."""
    logging.config.dictConfig(configuration(settings))


def _time(record: logging.LogRecord) -> datetime:
    return datetime.fromtimestamp(record.created, UTC)
