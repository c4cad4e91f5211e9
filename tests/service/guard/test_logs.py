from __future__ import annotations

import json
import logging
import sys

import pytest

from service.guard import logs
from service.guard.record import CURRENT_ID, Record
from service.settings import Settings

RECORD = Record(
    id="r1",
    method="POST",
    path="/v1/profile",
    query="format=npy",
    address="192.0.2.7",
    begun=0.0,
    key="0123456789abcdef",
    route="/v1/profile",
    status=200,
    received=12,
    sent=3456,
    seconds=0.0123,
)


def event(message="it", level=logging.INFO, exc_info=None, **extra):
    made = logging.LogRecord("densityloom.x", level, __file__, 1, message, (), exc_info)
    made.__dict__.update(extra)
    return made


def of_request(caplog, record=RECORD):
    with caplog.at_level(logging.INFO, "densityloom.requests"):
        logs.observe(record)
    return caplog.records[-1]


def test_json_line_of_a_request(caplog):
    CURRENT_ID.set("r1")
    line = logs.JsonLines().format(of_request(caplog))
    assert "\n" not in line
    told = json.loads(line)
    assert told.pop("time").endswith("Z")
    assert told == {
        "level": "info",
        "logger": "densityloom.requests",
        "message": "POST /v1/profile 200",
        "request_id": "r1",
        "method": "POST",
        "path": "/v1/profile",
        "query": "format=npy",
        "route": "/v1/profile",
        "status": 200,
        "seconds": 0.0123,
        "bytes_in": 12,
        "bytes_out": 3456,
        "key": "0123456789abcdef",
        "client": "192.0.2.7",
    }
    CURRENT_ID.set(None)


def test_text_line_of_a_request(caplog):
    line = logs.TextLines().format(of_request(caplog))
    assert "POST /v1/profile 200" in line
    assert "12.3 ms" in line
    assert "out 3,456 B" in line
    assert "0123456789abcdef" in line
    assert "from 192.0.2.7" in line
    assert "[" not in line


@pytest.mark.parametrize(("status", "level"), [(200, "INFO"), (499, "INFO"), (500, "WARNING"), (503, "WARNING")])
def test_level_tells_whose_fault(caplog, status, level):
    RECORD.status = status
    assert of_request(caplog).levelname == level
    RECORD.status = 200


@pytest.mark.parametrize("lines", [logs.JsonLines(), logs.TextLines()])
@pytest.mark.parametrize("text", ["a\nINFO forged", "a\r\nb", "\x1b[2J", "a\u2028b", "\x9b2J"])
def test_no_text_looks_like_a_line_of_ours(lines, text):
    line = lines.format(event(text))
    assert len(line.splitlines()) == 1
    assert "\x1b" not in line
    assert "\x9b" not in line


@pytest.mark.parametrize("lines", [logs.JsonLines(), logs.TextLines()])
def test_broken_text_does_not_cost_the_line(lines):
    assert "a" in lines.format(event("a \udcff b"))


def test_traces():
    try:
        raise RuntimeError("deep down")
    except RuntimeError:
        made = event("it failed", logging.ERROR, sys.exc_info())
    line = logs.JsonLines().format(made)
    assert "\n" not in line
    assert "deep down" in json.loads(line)["trace"]
    text = logs.TextLines().format(made)
    assert text.splitlines()[0].endswith("it failed")
    assert "deep down" in text


@pytest.mark.parametrize(
    ("form", "terminal", "lines"),
    [
        ("auto", True, "TextLines"),
        ("auto", False, "JsonLines"),
        ("json", True, "JsonLines"),
        ("text", False, "TextLines"),
    ],
)
def test_form_follows_the_setting_and_the_terminal(monkeypatch, form, terminal, lines):
    monkeypatch.setattr(sys.stderr, "isatty", lambda: terminal, raising=False)
    made = logs.configuration(Settings(log_format=form, log_level="warning"))
    assert made["formatters"]["lines"]["()"] == f"service.guard.logs.{lines}"
    assert made["root"]["level"] == "WARNING"


def test_configuration_is_one_that_the_library_takes(capfd):
    root = logging.getLogger()
    before = (root.level, list(root.handlers))
    try:
        logs.configure(Settings(log_format="json", log_level="error"))
        logging.getLogger("uvicorn.access").error("nobody")
        logging.getLogger("uvicorn.error").error("somebody")
        logging.getLogger("densityloom").warning("too low")
    finally:
        logging.getLogger("uvicorn.access").propagate = True
        logging.getLogger("uvicorn.access").setLevel(logging.NOTSET)
        root.setLevel(before[0])
        root.handlers[:] = before[1]
    (line,) = capfd.readouterr().err.splitlines()
    assert json.loads(line)["message"] == "somebody"
