from __future__ import annotations

import asyncio

import pytest
from starlette.responses import PlainTextResponse, StreamingResponse

from service.guard.record import CURRENT, CURRENT_ID, LONGEST_TOLD, UNROUTED, Recording, record_of
from tests.service.guard.asgi import ask, asked, scope


def recorded(app, *pieces, **options):
    seen = []
    answer = asked(Recording(app, [seen.append]), *pieces, **options)
    (record,) = seen
    return record, answer


@pytest.mark.parametrize("name", ["a", "A-z_0.9", "x" * 64])
def test_name_of_a_request_is_kept(name):
    record, answer = recorded(PlainTextResponse("it"), headers={"X-Request-ID": name})
    assert record.id == answer.headers["x-request-id"] == name


@pytest.mark.parametrize("name", [None, "", "x" * 65, "a b", "a\nb", "é", "<script>", "a;b"])
def test_other_names_are_replaced(name):
    record, answer = recorded(PlainTextResponse("it"), headers={"X-Request-ID": name} if name is not None else {})
    assert record.id == answer.headers["x-request-id"] != name
    assert len(record.id) == 16
    again, _ = recorded(PlainTextResponse("it"))
    assert again.id != record.id


def test_what_is_recorded():
    async def app(scope, receive, send):
        while (await receive())["more_body"]:
            pass
        assert CURRENT.get() is record_of(scope)
        assert CURRENT_ID.get() == "known"
        scope["route"] = type("Route", (), {"path_format": "/v1/{all}"})
        await StreamingResponse(iter([b"123", b"4567"]), 207)(scope, receive, send)

    record, answer = recorded(
        app, b"ab", b"cde", method="POST", path="/v1/x", query=b"a=b", headers={"X-Request-ID": "known"}
    )
    assert (record.method, record.path, record.query) == ("POST", "/v1/x", "a=b")
    assert (record.status, record.received, record.sent) == (207, 5, 7)
    assert (record.route, record.address, record.key, record.gone) == ("/v1/{all}", "127.0.0.1", None, False)
    assert record.seconds > 0
    assert answer.status == 207


def test_long_addresses_are_cut():
    record, _ = recorded(PlainTextResponse("it"), path="/" + "x" * 5000, query=b"y" * 5000)
    assert len(record.path) == len(record.query) == LONGEST_TOLD


def test_without_route_and_answer():
    async def fails(*_):
        raise RuntimeError("before anything was said")

    seen = []
    with pytest.raises(RuntimeError, match="before"):
        asked(Recording(fails, [seen.append]))
    assert (seen[0].route, seen[0].status) == (UNROUTED, 500)


def test_client_that_leaves():
    async def app(scope, receive, send):
        await send({"type": "http.response.start", "status": 200, "headers": []})
        await receive()
        await receive()

    async def gone():
        return {"type": "http.disconnect"}

    async def sent(_):
        pass

    seen = []
    asyncio.run(Recording(app, [seen.append])(scope(), gone, sent))
    assert seen[0].gone


@pytest.mark.parametrize(
    ("client", "address"),
    [
        (("192.0.2.7", 5), "192.0.2.7"),
        (("2001:db8:1:2:3:4:5:6", 5), "2001:db8:1:2::/64"),
        (("::ffff:192.0.2.7", 5), "192.0.2.7"),
        (("::1", 5), "::1"),
        (None, ""),
        (("a proxy's word", 0), "a proxy's word"),
    ],
)
def test_addresses(client, address):
    assert recorded(PlainTextResponse("it"), client=client)[0].address == address


def test_requests_do_not_mix():
    """Each runs in a task of its own, and sees its own record."""

    async def app(scope, receive, send):
        await asyncio.sleep(0.01)
        await PlainTextResponse(CURRENT_ID.get())(scope, receive, send)

    async def scenario():
        recording = Recording(app)
        answers = await asyncio.gather(
            *(asyncio.create_task(ask(recording, headers={"X-Request-ID": f"r{number}"})) for number in range(20))
        )
        assert [answer.body.decode() for answer in answers] == [f"r{number}" for number in range(20)]

    asyncio.run(scenario())


def test_nothing_passes_around():
    with pytest.raises(RuntimeError, match="around"):
        record_of(scope())
