from __future__ import annotations

import json

import pytest
from starlette.responses import PlainTextResponse

from service.guard.faults import Faults
from service.guard.origins import Origins, Sharing, host_name, is_own
from service.guard.record import Recording
from tests.service.guard.asgi import around, asked

PAGE = "https://dashboard.example"


def status(headers, hosts=(), origins=(), **options):
    answer = asked(around(Origins, hosts=hosts, origins=origins), headers=headers, **options)
    if answer.status >= 400:
        assert json.loads(answer.body)["detail"]
    return answer.status


@pytest.mark.parametrize(
    "host",
    [
        "127.0.0.1",
        "127.0.0.1:8420",
        "127.1.2.3",
        "localhost",
        "LOCALHOST:80",
        "localhost.",
        "a.localhost",
        "[::1]:8420",
        "[::1]",
    ],
)
def test_own_names(host):
    assert status({"Host": host}) == 200


@pytest.mark.parametrize(
    "host",
    [
        "evil.example",
        "evil.example:8420",
        "127.0.0.1.evil.example",
        "localhost.evil.example",
        "localhostevil",
        "192.0.2.7",
        "0.0.0.0",
        "[::2]",
        "",
        "127.0.0.1@evil.example",
        "evil.example#localhost",
    ],
)
def test_names_of_others_are_refused_without_keys(host):
    for method in ("GET", "POST", "DELETE", "OPTIONS"):
        assert status({"Host": host}, method=method) == 421
    # Keys protect by themselves; probes learn nothing that could hurt.
    assert status({"Host": host}, hosts=None) == 200
    assert status({"Host": host}, path="/health/ready") == 200


def test_names_that_were_given():
    assert status({"Host": "Density.example.org:8420"}, hosts=("density.example.org",)) == 200
    assert status({"Host": "x.density.example.org"}, hosts=("density.example.org",)) == 421


def test_address_that_the_connection_came_to():
    assert status({"Host": "192.0.2.7:8420"}, server=("192.0.2.7", 8420)) == 200
    assert status({"Host": "192.0.2.8:8420"}, server=("192.0.2.7", 8420)) == 421
    # A name is bound by others.
    assert status({"Host": "evil.example"}, server=("evil.example", 8420)) == 421
    assert status({"Host": "evil.example"}, server=None) == 421


@pytest.mark.parametrize("method", ["POST", "DELETE", "PUT", "PATCH"])
@pytest.mark.parametrize("hosts", [(), None])
def test_pages_of_others_may_not_send(method, hosts):
    def sent(**headers):
        return status(headers, hosts=hosts, origins=(PAGE,), method=method)

    assert sent() == 200
    assert sent(Origin=PAGE) == 200
    assert sent(Origin="http://127.0.0.1:8420") == 200
    assert sent(Origin="https://127.0.0.1:8420") == 200
    for other in (
        "https://evil.example",
        "null",
        "",
        "http://127.0.0.1:8421",
        f"{PAGE}.evil.example",
        "127.0.0.1:8420",
    ):
        assert sent(Origin=other) == 403
    assert sent(**{"Origin": "https://density.example", "Sec-Fetch-Site": "same-origin"}) == 200
    assert sent(**{"Origin": "https://evil.example", "Sec-Fetch-Site": "cross-site"}) == 403


def test_looking_is_for_the_browser_to_refuse():
    assert status({"Origin": "https://evil.example"}, method="GET") == 200


def shared(method, **headers):
    layer = Sharing(Faults(PlainTextResponse("within", headers={"Vary": "Accept"})), origins=(PAGE,))
    return asked(
        Recording(layer), method=method, headers={name.replace("_", "-"): text for name, text in headers.items()}
    )


def test_allowed_origin_may_read():
    answer = shared("GET", Origin=PAGE)
    assert answer.headers["access-control-allow-origin"] == PAGE
    assert "access-control-allow-credentials" not in answer.headers
    exposed = {name.strip() for name in answer.headers["access-control-expose-headers"].split(",")}
    assert {"ETag", "Location", "Retry-After", "Samples-Description", "X-Request-ID", "Server-Timing"} <= exposed
    assert "Origin" in answer.headers["vary"]
    assert "Accept" in answer.headers["vary"]
    assert "access-control-allow-origin" not in shared("GET", Origin="https://evil.example").headers


def test_what_is_asked_before():
    asks = {"Access_Control_Request_Method": "POST", "Access_Control_Request_Headers": "authorization,content-type"}
    answer = shared("OPTIONS", Origin=PAGE, **asks)
    assert answer.status == 200
    assert answer.headers["access-control-allow-origin"] == PAGE
    assert "DELETE" in answer.headers["access-control-allow-methods"]
    assert "Authorization" in answer.headers["access-control-allow-headers"]
    refused = shared("OPTIONS", Origin="https://evil.example", **asks)
    assert refused.status == 403
    assert refused.headers["content-type"] == "application/problem+json"
    assert int(refused.headers["content-length"]) == len(refused.body)
    assert "origin" in json.loads(refused.body)["detail"]


@pytest.mark.parametrize(
    ("name", "own"), [("localhost", True), ("::1", True), ("127.8.8.8", True), ("10.0.0.1", False), ("", False)]
)
def test_own(name, own):
    assert is_own(name) is own


def test_host_name():
    assert host_name("A.example.:80") == "a.example"
    assert host_name("[2001:DB8::1]:80") == "2001:db8::1"
