from __future__ import annotations

import json

import numpy as np
import pytest

from service import intake
from service.intake import CSV, JSON, NPZ, check, columns, decode, read
from service.parts import Part
from service.problems import Problem
from service.schemas.products import GridIn, ProfileIn
from tests.service import bodies

LIMIT = 2**20


def refusal(function, *arguments, **options):
    with pytest.raises(Problem) as caught:
        function(*arguments, **options)
    return caught.value


def places(problem):
    return [place.pointer for place in problem.places]


def read_(product, media_type, body):
    return read(
        product, media_type, body if isinstance(body, bytes) else json.dumps(body).encode(), max_body_bytes=LIMIT
    )


@pytest.mark.parametrize("media_type", [JSON, "Application/JSON", "application/json; charset=utf-8"])
def test_json(media_type):
    product, request = read_("profile", media_type, bodies.PROFILE)
    assert product == "profile"
    assert isinstance(request, ProfileIn)
    np.testing.assert_array_equal(request.set.l, [1, 2, 3, 4])
    assert request.start == [0]


def test_null_phase_is_nan():
    body = bodies.changed(bodies.PROFILE, "set/phase_deg/2", None)
    _, request = read_("profile", JSON, body)
    np.testing.assert_array_equal(request.set.phase_deg, [0, 180, np.nan, 0])


@pytest.mark.parametrize(
    ("media_type", "data"),
    [
        (CSV, bodies.as_csv({**bodies.table_of(bodies.FILM), "phase_deg": [0, None, 0, 0]})),
        (NPZ, bodies.as_npz({**bodies.table_of(bodies.FILM), "phase_deg": [0, None, 0, 0]})),
    ],
)
def test_form(media_type, data):
    product, request = read_("profile", bodies.FORM, bodies.film_form((media_type, data)))
    assert product == "profile"
    np.testing.assert_array_equal(request.set.amplitude, bodies.FILM["amplitude"])
    np.testing.assert_array_equal(request.set.phase_deg, [0, np.nan, 0, 0])


def test_form_without_columns_is_a_request():
    sent = bodies.form(("request", JSON, json.dumps(bodies.PROFILE).encode()))
    _, request = read_("profile", bodies.FORM, sent)
    np.testing.assert_array_equal(request.set.l, [1, 2, 3, 4])


def test_some_columns_may_be_in_the_request():
    asked = bodies.changed(bodies.bare(bodies.PROFILE), "set/phase_deg", [0, 180, 0, 0])
    table = bodies.as_csv({name: bodies.FILM[name] for name in ("l", "amplitude")})
    _, request = read_("profile", bodies.FORM, bodies.film_form((CSV, table), request=asked))
    np.testing.assert_array_equal(request.set.phase_deg, [0, 180, 0, 0])
    np.testing.assert_array_equal(request.set.amplitude, bodies.FILM["amplitude"])


def test_boundary_may_be_in_the_data():
    """The boundary stands on a line of its own; the same characters within a line are data."""
    table = b"# frontier --frontier\n" + bodies.as_csv(bodies.table_of(bodies.FILM))
    _, request = read_("profile", bodies.FORM, bodies.film_form((CSV, table)))
    assert request.set.l.size == 4


def test_product_named_by_the_file():
    product, request = check(None, {**bodies.GRID, "product": "grid"}, None, max_body_bytes=LIMIT)
    assert product == "grid"
    assert isinstance(request, GridIn)
    assert check("grid", {**bodies.GRID, "product": "grid"}, None, max_body_bytes=LIMIT)[0] == "grid"


@pytest.mark.parametrize("named", [None, "cube", "", 3, ["grid"], {"grid": 1}, True])
def test_file_must_name_a_product(named):
    problem = refusal(check, None, {**bodies.GRID, "product": named}, None, max_body_bytes=LIMIT)
    assert places(problem) == ["/product"]
    assert "profile, slice, grid, points" in problem.detail


def test_decode_says_where():
    assert decode(b'{"a": [1.5, null, "x"]}') == {"a": [1.5, None, "x"]}
    problem = refusal(decode, b'{\n"a": 1,\n"b": NaN}')
    assert problem.status == 400
    assert "line 3, column 6" in problem.detail
    assert "object" in refusal(decode, b"3").detail


def test_last_of_members_given_twice_counts_nothing_else():
    """JSON leaves it open; what counts is that the check sees what is computed."""
    body = json.dumps(bodies.PROFILE).replace('"samples": 17', '"samples": "x", "samples": 17').encode()
    assert read_("profile", JSON, body)[1].samples == 17


def test_columns_of_tables():
    found = columns(Part(CSV, b"l,merit\n1,0.5\n"), max_body_bytes=LIMIT)
    assert {name: column.tolist() for name, column in found.items()} == {"l": [1], "merit": [0.5]}
    assert refusal(columns, Part("", b"l\n1"), max_body_bytes=LIMIT).status == 415
    problem = refusal(columns, Part(CSV, b"l\nx\n"), max_body_bytes=LIMIT)
    assert (problem.status, places(problem)) == (422, ["/set"])
    assert problem.detail.startswith("/set: the part columns: line 2, field 1 (l): 'x' is not a number")


def test_archive_may_unpack_to_a_multiple_of_a_body():
    packed = bodies.as_npz({"l": np.arange(1000)})
    unpacked = 8128
    assert columns(Part(NPZ, packed), max_body_bytes=unpacked // intake.UNPACKED_RATIO)["l"].size == 1000
    problem = refusal(columns, Part(NPZ, packed), max_body_bytes=unpacked // intake.UNPACKED_RATIO - 1)
    assert problem.kind == "too-costly"


@pytest.mark.parametrize(
    ("body", "detail"),
    [
        (b"--frontier\r\nno colon here\r\n\r\n\r\n--frontier--\r\n", "cannot be read"),
        (b"--frontier\r\n\r\ndata\r\n--frontier--\r\n", "has the part ''"),
        (b"--frontier\r\nContent-Disposition: \xff;;=\r\n\r\nx\r\n--frontier--\r\n", "has the part"),
        (b"preamble\r\n" + bodies.film_form((CSV, b"l\n1\n")), "cannot be read"),
        (bodies.form(("request", JSON, b"{}"), closed=False), "cut short"),
    ],
)
def test_forms_that_cannot_be_read(body, detail):
    problem = refusal(read_, "profile", bodies.FORM, body)
    assert problem.status == 400
    assert detail in problem.detail


@pytest.mark.parametrize(
    "parameters", ["", "; boundary=", "; boundary=" + "x" * 5000, "; boundary*=utf-8''%ff", '; boundary="a b"']
)
def test_boundaries_that_are_none(parameters):
    sent = bodies.film_form((CSV, b"l\n1\n"))
    assert refusal(read_, "profile", "multipart/form-data" + parameters, sent).status == 400


def test_what_is_refused_is_not_echoed_at_length():
    assert len(refusal(read_, "profile", "x" * 10_000, b"").detail) < 400
    sent = bodies.form(("p" * 300, CSV, b""))
    assert len(refusal(read_, "profile", bodies.FORM, sent).detail) < 400
