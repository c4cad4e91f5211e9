"""Malformed requests for analyses, series and combinations over HTTP: problems that name the place, never a 500.

What each refuses in detail is tested beside its module; here the whole way is gone, with the service's limits.
"""

from __future__ import annotations

import json

import pytest

from tests.service import bodies
from tests.service.analyses.asked import CRYSTAL, FILM, GOOD, LATER
from tests.service.bodies import FORM, changed, form, without
from tests.service.conftest import SMALL, worker_processes
from tests.service.problem_shape import assert_problem
from tests.service.series_bodies import SERIES, SLICES

JSON = "application/json"
DIFFERENCE = {
    **bodies.PROFILE,
    "set": FILM,
    "combination": {"kind": "difference", "with": LATER, "scale": {"kind": "as_given"}},
}
LONG = "x" * 10_000
BIG = {"l": list(range(1, 61)), "amplitude": [1.0] * 60, "phase_deg": [0.0] * 60, "sigma": [1.0] * 60}


def sent(body, *parts):
    return form(("request", JSON, json.dumps(body).encode()), *parts)


COMPARED = {"set": FILM, "with": bodies.bare({"set": LATER})["set"]}
ROWS = [
    *(
        row
        for product, good in {**GOOD, "series": SERIES}.items()
        for row in (
            (product, {}, 422, "/set"),
            (product, [good], 400, None),
            (product, b"", 400, None),
            (product, b"{", 400, None),
            (product, {**good, "widow": 1}, 422, "/widow"),
            (product, {**good, "product": "profile"}, 422, "/product"),
            (product, {**good, "product": 3}, 422, "/product"),
            (product, {**good, "set": [1]}, 422, "/set"),
            (product, {**good, "set": None}, 422, "/set"),
            (product, without(good, "set"), 422, "/set"),
            (product, {**good, "remark": 1}, 422, "/remark"),
            (product, {**good, "remark": LONG}, 422, "/remark"),
            (product, {**good, "missing_phase": LONG}, 422, "/missing_phase"),
            (product, {**good, LONG: 1}, 422, "/" + LONG[:80]),
            (product, {**good, "resolution": {"d_min": -1}}, 422, "/resolution/d_min"),
            (product, {**good, "combination": 1}, 422, "/combination"),
        )
    ),
    *(
        (product, {**GOOD[product], "resolution": {"d_min": 5, "d_max": 2}}, 422, "/resolution/d_min")
        for product in GOOD
    ),
    *((product, changed(GOOD[product], "set/amplitude/1", -1.0), 422, "/set/amplitude/1") for product in GOOD),
    *(
        (
            product,
            {**GOOD[product], "combination": {**DIFFERENCE["combination"], "with": other}},
            422,
            "/combination/with",
        )
        for product, other in (("layers", CRYSTAL), ("statistics", FILM), ("windows", FILM), ("extrema", FILM))
    ),
    ("extrema", changed(GOOD["extrema"], "kinds", "maximum"), 422, "/kinds"),
    ("extrema", {**GOOD["extrema"], "spacing": 0.03}, 422, "/spacing"),
    ("integrals", changed(GOOD["integrals"], "regions/2/from", {}), 422, "/regions/2/from"),
    ("integrals", changed(GOOD["integrals"], "regions/2/from", [0, 0, "0"]), 422, "/regions/2/from"),
    ("integrals", changed(GOOD["integrals"], "regions/3", None), 422, "/regions/3"),
    ("layers", {**GOOD["layers"], "baseline": {}}, 422, "/baseline"),
    ("layers", {"set": FILM, "from": [0], "to": [1e6]}, 422, "/to"),
    ("statistics", {**GOOD["statistics"], "spacing": 0.05}, 422, "/spacing"),
    ("compare", {**GOOD["compare"], "with": LATER | BIG}, 422, "/with/l"),
    ("compare", {"set": FILM | BIG, "with": LATER}, 422, "/set/l"),
    ("series", changed(SERIES, "members/2/set", BIG), 422, "/members/2/set/l"),
    ("series", changed(SERIES, "profile/samples", 200_000), 422, "/members"),
    ("series", changed(SERIES, "profile/samples", 10**18), 422, "/members"),
    ("series", changed(SERIES, "profile/samples", 10**30), 422, "/profile/samples"),
    ("series", {**SLICES, "slice": {**SLICES["slice"], "spacing": 1e-300}}, 422, "/slice/spacing"),
    ("series", changed(SERIES, "profile/samples", 90_000), 422, None),
    ("series", changed(SERIES, "members/1/set/amplitude/2", 1e300), 422, "/members/1/set"),
    (
        "series",
        {**changed(SERIES, "members/1/set/amplitude/2", 1e60), "scale": {"kind": "fitted", "robust": True}},
        422,
        "/scale",
    ),
    ("profile", changed(DIFFERENCE, "combination/with", LATER | BIG), 422, "/combination/with/l"),
    ("profile", changed(DIFFERENCE, "combination/with/amplitude/2", 1e300), 422, "/combination/with"),
    ("profile", changed(DIFFERENCE, "combination/scale", {"kind": "given", "k": 1e300}), 422, "/combination/scale/k"),
    (
        "profile",
        changed(DIFFERENCE, "combination/scale", {"kind": "given", "k": 1.0, "k_sigma": 1e299}),
        422,
        "/combination/scale/k_sigma",
    ),
    ("profile", {**bodies.PROFILE, "unmeasured": {"amplitude": 1e300, "b": 1.0}}, 422, "/unmeasured/amplitude"),
    ("grid", {**bodies.GRID, "unmeasured": {"amplitude": 1.0, "b": 1e-9}}, 422, "/unmeasured"),
    (
        "grid",
        {**bodies.GRID, "set": {**bodies.CRYSTAL, "symmetry": {"space_group": 2, "columns": "full"}}},
        422,
        "/set/symmetry",
    ),
    (
        "grid",
        {**bodies.GRID, "set": {**bodies.CRYSTAL, "symmetry": {"space_group": 19, "columns": "full"}}},
        422,
        "/set/cell",
    ),
    (
        "grid",
        {**bodies.GRID, "set": {**bodies.CRYSTAL, "symmetry": {"space_group": 2, "columns": "half"}}},
        422,
        "/set/symmetry/columns",
    ),
]
FORMS = [
    ("compare", sent(COMPARED, ("with_columns", "text/csv", b"l\nx\n")), 422, "/with"),
    ("compare", sent(COMPARED, ("with_columns", "text/csv", b"")), 422, "/with"),
    ("compare", sent(COMPARED, ("with_columns", "application/x-npz", b"PK")), 422, "/with"),
    ("compare", sent(COMPARED, ("with_columns", "text/html", b"l\n1\n")), 415, None),
    ("compare", sent(COMPARED, ("with_column", "text/csv", b"l\n1\n")), 400, None),
    ("compare", sent(GOOD["compare"], ("with_columns", "text/csv", b"l\n1\n")), 422, "/with/l"),
    ("profile", sent(bodies.PROFILE, ("with_columns", "text/csv", b"l\n1\n")), 422, "/with"),
    ("profile", sent(DIFFERENCE, ("with_columns", "text/csv", b"l\n1\n")), 422, "/combination/with/l"),
    ("compare", sent(COMPARED, ("with_reflections", "text/csv", b"h,k\n1,2\n")), 422, "/with/mean"),
    ("compare", sent(COMPARED, ("with_reference", "text/csv", b"h,k\n1,2\n")), 422, "/with/l"),
]


@pytest.fixture(scope="module", autouse=True)
def _same_workers_before_and_after(small_service):
    """No request may cost a worker its life."""
    found = worker_processes(small_service)
    assert len(found) == SMALL["compute_workers"]
    yield
    assert worker_processes(small_service) == found


@pytest.mark.parametrize(
    ("product", "body", "status", "pointer"),
    [pytest.param(*row, id=f"{row[0]} {number}") for number, row in enumerate(ROWS)],
)
def test_malformed(small_client, product, body, status, pointer):
    content = body if isinstance(body, bytes) else json.dumps(body).encode()
    answer = small_client.post(f"/v1/{product}", content=content, headers={"Content-Type": JSON})
    assert_problem(answer, status, pointer)


@pytest.mark.parametrize(
    ("members", "pointer"),
    [({"distances": [[1, 2**63]]}, "/distances/0"), ({"within": 1e8}, "/within"), ({"within": 300.0}, "/within")],
)
def test_what_is_known_after_the_search_alone(client, members, pointer):
    assert_problem(client.post("/v1/extrema", json={**GOOD["extrema"], **members}), 422, pointer)


@pytest.mark.parametrize(("product", "content", "status", "pointer"), FORMS)
def test_malformed_forms(small_client, product, content, status, pointer):
    answer = small_client.post(f"/v1/{product}", content=content, headers={"Content-Type": FORM})
    assert_problem(answer, status, pointer)


@pytest.mark.parametrize(
    ("product", "wanted"),
    [
        *((product, form) for product in GOOD for form in ("npz", "npy", "png", "xml", "")),
        ("series", "png"),
        ("series", "svg"),
    ],
)
def test_forms_of_answer_that_there_are_none_of(client, product, wanted):
    body = GOOD.get(product, SERIES)
    answer = client.post(f"/v1/{product}", params={"format": wanted}, json=body)
    document = assert_problem(answer, 406, None, "not-acceptable")
    assert "json" in document["detail"]


@pytest.mark.parametrize("product", [*GOOD, "series"])
def test_answers_by_negotiation(client, product):
    body = GOOD.get(product, SERIES)
    answer = client.post(f"/v1/{product}", json=body, headers={"Accept": "text/csv, application/json;q=0.5"})
    assert answer.status_code == 200
    assert answer.headers["content-type"].startswith("text/csv")
    assert answer.headers["content-disposition"] == f'attachment; filename="{product}.csv"'
    assert_problem(client.post(f"/v1/{product}", json=body, headers={"Accept": "text/html"}), 406)
    assert_problem(client.get(f"/v1/{product}"), 405)
