from __future__ import annotations

import httpx
import numpy as np
import pytest

from engine import evaluate, sampling
from service.client import Client, ServiceError
from tests.service import bodies
from tests.service.series_bodies import SERIES


@pytest.fixture(scope="module")
def connected(service):
    with Client(service.address) as client:
        yield client


def test_arrays_come_back(connected):
    result = connected.compute("grid", bodies.GRID)
    crystal = bodies.coefficients(bodies.CRYSTAL)
    field = evaluate(crystal, sampling.full_cell(crystal.lattice, (5, 6, 8)))
    np.testing.assert_array_equal(result.values, field.values)
    assert len(result.axes) == 3
    for axis, expected in zip(result.axes, field.axes, strict=True):
        np.testing.assert_array_equal(axis, expected.coordinates())
    assert result.positions is None
    assert result.metadata["unit"] == "e/Å³"
    assert result.metadata["summary"]["coefficients"]["rows"] == 40
    assert "values" not in result.metadata


def test_points_come_with_their_positions(connected):
    result = connected.compute("points", {**bodies.POINTS, "field": "gradient"})
    assert result.axes == ()
    np.testing.assert_array_equal(result.positions, bodies.POINTS["positions"])
    assert result.values.shape == (3, 3)


def test_complex_values_come_back(connected):
    assert connected.compute("points", {**bodies.POINTS, "set": bodies.ABSORBING}).values.dtype == np.complex128


def test_columns_travel_in_binary(connected):
    columns = {name: np.array(column) for name, column in bodies.table_of(bodies.FILM).items()}
    columns["phase_deg"] = columns["phase_deg"].astype(float)
    result = connected.compute("profile", bodies.bare(bodies.PROFILE), columns)
    np.testing.assert_array_equal(result.values, connected.compute("profile", bodies.PROFILE).values)
    columns["phase_deg"][1] = np.nan
    result = connected.compute("profile", bodies.bare(bodies.PROFILE), columns)
    assert result.metadata["summary"]["coefficients"]["without_phase"] == 1


def test_body_may_hold_arrays(connected):
    given = {**bodies.FILM, "l": np.arange(1, 5), "amplitude": np.array(bodies.FILM["amplitude"])}
    result = connected.compute("profile", {**bodies.PROFILE, "set": given})
    np.testing.assert_array_equal(result.values, connected.compute("profile", bodies.PROFILE).values)


def test_errors_carry_the_problem(connected):
    with pytest.raises(ServiceError) as caught:
        connected.compute("profile", {**bodies.PROFILE, "samples": 1})
    assert caught.value.status == 422
    assert caught.value.problem["errors"][0]["pointer"] == "/samples"
    assert caught.value.retry_after is None
    assert "/samples" in str(caught.value)
    with pytest.raises(ServiceError) as caught:
        connected.compute("picture", bodies.PROFILE)
    assert caught.value.status == 404


def refused(answer):
    http = httpx.Client(transport=httpx.MockTransport(lambda _: answer), base_url="http://here")
    with Client("", http=http) as client, pytest.raises(ServiceError) as caught:
        client.compute("profile", bodies.PROFILE)
    assert http.is_closed
    return caught.value


def test_time_to_wait():
    busy = {"title": "All workers are busy", "detail": "Wait."}
    fault = refused(httpx.Response(503, json=busy, headers={"Retry-After": "7"}))
    assert (fault.status, fault.retry_after, fault.problem) == (503, 7.0, busy)
    date = {"Retry-After": "Fri, 31 Dec 1999 23:59:59 GMT"}
    assert refused(httpx.Response(503, json=busy, headers=date)).retry_after is None


@pytest.mark.parametrize(
    "answer",
    [
        httpx.Response(502, text="<html>Bad gateway</html>"),
        httpx.Response(502, json=["not", "ours"]),
        httpx.Response(502, content=b"\xff\xfe"),
    ],
)
def test_answers_that_are_not_ours(answer):
    fault = refused(answer)
    assert fault.status == 502
    assert str(fault) == "502: Bad Gateway"


def test_no_service():
    with Client("http://127.0.0.1:9", timeout=5) as client, pytest.raises(httpx.TransportError):
        client.compute("profile", bodies.PROFILE)


def test_reports_come_as_documents(connected):
    made = connected.report("layers", {"set": bodies.FILM, "along": [1]})
    assert made["product"] == "layers"
    assert made["layers"][0]["position"] == 0
    given = {name: np.array(column, float) for name, column in bodies.table_of(bodies.FILM).items()}
    bare = bodies.bare({"set": bodies.FILM, "along": [1]})
    bare["along"] = [1]
    assert connected.report("layers", bare, given) == made
    with pytest.raises(ServiceError) as caught:
        connected.report("layers", {"set": bodies.FILM})
    assert caught.value.problem["errors"][0]["pointer"] == "/from"


def test_what_goes_beside_the_values(connected):
    given = {**bodies.FILM, "sigma": [0.1, 0.2, 0.3, 0.4]}
    body = {**bodies.PROFILE, "set": given}
    plain = connected.compute("profile", body)
    assert (plain.uncertainty, plain.unmeasured, plain.variable) == (None, None, None)
    full = connected.compute("profile", {**body, "uncertainty": True, "unmeasured": {"amplitude": 1.0, "b": 30.0}})
    film = bodies.coefficients(given)
    direct = evaluate(film, sampling.line(film.lattice, [0], [1], 17), uncertainty=True)
    np.testing.assert_array_equal(full.uncertainty, direct.sigma.values)
    np.testing.assert_array_equal(full.values, plain.values)
    assert full.unmeasured.shape == (17,)
    assert full.unmeasured.min() > 0
    assert not np.allclose(full.unmeasured, full.uncertainty)
    assert full.metadata["summary"]["unmeasured"]["rms"] == pytest.approx(np.sqrt((full.unmeasured**2).mean()))


def test_series_come_with_their_variable(connected):
    made = connected.compute("series", {**SERIES, "uncertainty": True})
    np.testing.assert_array_equal(made.variable, [290, 310, 330])
    assert made.values.shape == made.uncertainty.shape == (3, 17)
    np.testing.assert_allclose(made.axes[0], np.linspace(0, bodies.PERIOD, 17))
    assert made.metadata["variable"]["unit"] == "K"


def test_a_kept_set_gives_the_same_numbers(connected):
    columns = {name: np.array(column, dtype=float) for name, column in bodies.table_of(bodies.CRYSTAL).items()}
    # A set of its own: others of this service may hold the common one already.
    whole = {**bodies.CRYSTAL, "mean": 61.75}
    record = connected.keep(bodies.bare({"set": whole})["set"], columns, name="client's", tags=["a", "b"])
    assert connected.keep(whole)["id"] == record["id"]
    assert record["tags"] == ["a", "b"]
    identity = record["id"]
    request = {name: value for name, value in bodies.GRID.items() if name != "set"}
    request |= {"window": {"kind": "lanczos"}, "field": "laplacian"}
    result = connected.fetch(identity, "grid", request)
    np.testing.assert_array_equal(result.values, connected.compute("grid", {**request, "set": whole}).values)
    np.testing.assert_array_equal(result.values, connected.compute("grid", {**request, "set_id": identity}).values)
    found = connected.fetch_report(identity, "statistics", {"bins": 7})
    assert found == connected.report("statistics", {"set": whole, "bins": 7})
    for name, column in connected.columns(identity).items():
        np.testing.assert_array_equal(column, columns[name])
    connected.forget(identity)
    with pytest.raises(ServiceError) as caught:
        connected.fetch(identity, "grid", request)
    assert caught.value.status == 404
    with pytest.raises(ServiceError):
        connected.forget(identity)


def test_kept_sets_are_listed_to_the_last(connected):
    kept = [connected.keep({**bodies.FILM, "mean": 100.0 + number}, tags=["listed"])["id"] for number in range(203)]
    assert [one["id"] for one in connected.sets(tags=["listed"])] == kept[::-1]
    assert not list(connected.sets(search="nothing such"))
    for identity in kept:
        connected.forget(identity)


@pytest.mark.parametrize("key", [None, "dl_0_0"])
def test_key_travels_with_every_request(key):
    sent = []

    def answer(request):
        sent.append(request.headers.get("authorization"))
        return httpx.Response(401, json={"title": "no"})

    http = httpx.Client(transport=httpx.MockTransport(answer), base_url="http://here")
    with Client("", key=key, http=http) as client:
        for columns in (None, {"l": [1]}):
            with pytest.raises(ServiceError):
                client.compute("profile", bodies.PROFILE, columns)
        with pytest.raises(ServiceError):
            client.report("layers", bodies.PROFILE)
    assert sent == [key and f"Bearer {key}"] * 3


CALLS = {
    "compute": lambda client: client.compute("profile", bodies.PROFILE),
    "columns beside": lambda client: client.compute("profile", bodies.bare(bodies.PROFILE), {"l": [1]}),
    "report": lambda client: client.report("layers", {"set": bodies.FILM}),
    "picture": lambda client: client.picture("profile", bodies.PROFILE),
    "keep": lambda client: client.keep(bodies.FILM),
    "sets": lambda client: list(client.sets()),
    "columns": lambda client: client.columns("0" * 64),
    "fetch": lambda client: client.fetch("0" * 64, "profile", {}),
    "fetch_report": lambda client: client.fetch_report("0" * 64, "layers", {}),
    "forget": lambda client: client.forget("0" * 64),
}


@pytest.mark.parametrize("call", CALLS.values(), ids=CALLS)
def test_every_call_brings_the_key(call):
    seen = []

    def answer(request):
        seen.append(request.headers.get("authorization"))
        return httpx.Response(503, json={"title": "x", "status": 503})

    transport = httpx.MockTransport(answer)
    http = httpx.Client(base_url="http://lab", transport=transport)
    with Client("http://lab", key="dl_x", http=http) as client, pytest.raises(ServiceError):
        call(client)
    assert seen == ["Bearer dl_x"]


def test_every_public_call_is_tried_with_a_key():
    public = {name for name in vars(Client) if not name.startswith("_")} - {"close"}
    assert public == set(CALLS) - {"columns beside"}
