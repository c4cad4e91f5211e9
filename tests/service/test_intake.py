from __future__ import annotations

import json

import numpy as np
import pytest

from service import intake
from service.intake import CSV, FILE_TYPES, JSON, NPZ, check, columns, decode, read
from service.parts import Part
from service.problems import Problem
from service.schemas.products import GridIn, ProfileIn
from service.schemas.requests import INSPECT, InspectIn
from tests.service import bodies
from tests.service.raw_files import CIF, GRID, TABLE, sent, with_set

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
    product, request = check(None, {**bodies.GRID, "product": "grid"}, {}, max_body_bytes=LIMIT)
    assert product == "grid"
    assert isinstance(request, GridIn)
    assert check("grid", {**bodies.GRID, "product": "grid"}, {}, max_body_bytes=LIMIT)[0] == "grid"


@pytest.mark.parametrize("named", [None, "cube", "", 3, ["grid"], {"grid": 1}, True])
def test_file_must_name_a_product(named):
    problem = refusal(check, None, {**bodies.GRID, "product": named}, {}, max_body_bytes=LIMIT)
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


@pytest.mark.parametrize("media_type", FILE_TYPES)
def test_file_of_reflections(media_type):
    """It is kept as it came: what it is, is for its reader to find out."""
    product, request = read_("grid", bodies.FORM, sent(GRID, CIF, media_type))
    assert product == "grid"
    assert isinstance(request, GridIn)
    assert request.set.reflections == Part(media_type, CIF.encode(), "reflections")
    assert request.set.h is None


@pytest.mark.parametrize("media_type", [*FILE_TYPES, "Text/CSV; charset=utf-8"])
def test_file_as_the_whole_body_of_an_inspection(media_type):
    product, request = read_(INSPECT, media_type, TABLE.encode())
    assert product == "inspect"
    assert isinstance(request, InspectIn)
    assert request.set.reflections == Part(media_type.split(";")[0].lower(), TABLE.encode())


@pytest.mark.parametrize("media_type", FILE_TYPES)
def test_density_needs_more_than_a_file(media_type):
    problem = refusal(read_, "grid", media_type, TABLE.encode())
    assert problem.kind == "unsupported-media-type"
    assert "multipart/form-data" in problem.detail


def test_form_of_an_inspection_may_lack_its_request():
    _, request = read_(INSPECT, bodies.FORM, sent(None, CIF))
    assert request.set.reflections.data == CIF.encode()
    assert request.set.preparation is None
    assert "no part request" in refusal(read_, "grid", bodies.FORM, sent(None, CIF)).detail


def test_media_types_of_an_inspection_are_named_where_another_came():
    problem = refusal(read_, INSPECT, "image/png", b"")
    assert problem.status == 415
    assert [kind for kind in (*FILE_TYPES, "image/png") if kind not in problem.detail] == []


def test_preparation_comes_with_the_request():
    asked = with_set(GRID, preparation={"block": "x", "omit": ["set_aside"]}, symmetry={"space_group": 19})
    _, request = read_("grid", bodies.FORM, sent(asked, CIF))
    assert (request.set.preparation.block, request.set.preparation.omit) == ("x", ["set_aside"])
    assert request.set.symmetry.space_group == 19
    assert request.set.cell is None


@pytest.mark.parametrize(
    ("request_body", "pointer"),
    [
        (with_set(GRID, reflections="data_x"), "/set/reflections"),
        (with_set(GRID, reflections=None), "/set/reflections"),
        ({"shape": [4, 4, 4]}, "/set"),
        ({**GRID, "set": [1]}, "/set"),
    ],
)
def test_files_that_a_request_leaves_no_room_for(request_body, pointer):
    assert places(refusal(read_, "grid", bodies.FORM, sent(request_body, CIF))) == [pointer]


@pytest.mark.parametrize("file", [None, "data_x", {"data": "data_x"}, b"data_x".hex()])
def test_file_is_no_json(file):
    asked = with_set(bodies.GRID, reflections=file)
    if file is None:
        assert read_("grid", JSON, asked)[1].set.reflections is None
        return
    problem = refusal(read_, "grid", JSON, asked)
    assert places(problem) == ["/set/reflections"]
    assert "part of a form" in problem.detail


COMBINED = {
    **bodies.bare(bodies.PROFILE),
    "combination": {"kind": "difference", "scale": {"kind": "as_given"}, "with": bodies.bare(bodies.PROFILE)["set"]},
}
COMPARED = {name: bodies.bare(bodies.PROFILE)["set"] for name in ("set", "with")}
TABLES = {
    "columns": Part(CSV, bodies.as_csv(bodies.table_of(bodies.FILM))),
    "with_columns": Part(NPZ, bodies.as_npz({**bodies.table_of(bodies.FILM), "amplitude": [1, 2, 3, 4]})),
}


@pytest.mark.parametrize(("product", "body"), [("profile", COMBINED), ("compare", COMPARED)])
def test_tables_of_two_sets(product, body):
    _, request = check(product, body, TABLES, max_body_bytes=LIMIT)
    other = request.combination.other if product == "profile" else request.other
    np.testing.assert_array_equal(request.set.amplitude, bodies.FILM["amplitude"])
    np.testing.assert_array_equal(other.amplitude, [1, 2, 3, 4])
    assert "amplitude" not in body["set"], "the caller's document was changed"


def test_files_of_the_second_set():
    files = {"with_reflections": Part("", CIF.encode(), "a.cif"), "with_reference": Part("", TABLE.encode(), "b.csv")}
    _, request = check("compare", {"set": bodies.FILM, "with": GRID["set"]}, files, max_body_bytes=LIMIT)
    assert request.other.reflections.data == CIF.encode()
    assert request.other.reference.name == "b.csv"
    assert request.set.reflections is None


@pytest.mark.parametrize(
    ("product", "body", "files", "place"),
    [
        ("profile", bodies.PROFILE, {"with_columns": TABLES["with_columns"]}, "/with"),
        ("compare", {"set": bodies.FILM}, {"with_columns": TABLES["with_columns"]}, "/with"),
        ("compare", {"set": bodies.FILM, "with": 3}, {"with_columns": TABLES["with_columns"]}, "/with"),
        (
            "profile",
            {**bodies.PROFILE, "combination": [1]},
            {"with_columns": TABLES["with_columns"]},
            "/combination/with",
        ),
        (
            "profile",
            {**bodies.PROFILE, "combination": {}},
            {"with_columns": TABLES["with_columns"]},
            "/combination/with",
        ),
        (
            "compare",
            {"set": bodies.FILM, "with": bodies.FILM},
            {"with_columns": TABLES["with_columns"]},
            "/with/amplitude",
        ),
        ("compare", COMPARED, {"columns": TABLES["columns"], "with_columns": Part(CSV, b"l\nx\n")}, "/with"),
        ("profile", COMBINED, {"with_columns": Part(CSV, b"l,widow\n1,2\n")}, "/combination/with"),
    ],
)
def test_second_sets_at_fault(product, body, files, place):
    problem = refusal(check, product, body, files, max_body_bytes=LIMIT)
    assert places(problem) == [place]


def test_part_of_the_second_set_is_named():
    problem = refusal(check, "compare", COMPARED, {"with_columns": Part(CSV, b"l\nx\n")}, max_body_bytes=LIMIT)
    assert "the part with_columns: line 2" in problem.detail
    problem = refusal(check, "compare", COMPARED, {"with_columns": Part("text/html", b"")}, max_body_bytes=LIMIT)
    assert problem.status == 415
    assert "with_columns" in problem.detail
