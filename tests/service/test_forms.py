from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.forms import split
from service.parts import Part
from service.problems import Problem
from tests.service import bodies


def detail(content_type, body):
    with pytest.raises(Problem) as caught:
        split(content_type, body)
    assert (caught.value.kind, caught.value.places) == ("malformed-body", ())
    return caught.value.detail


@given(st.lists(st.binary(max_size=200), min_size=1, max_size=4))
def test_data_come_back_byte_for_byte(contents):
    """RFC 7578: what stands between two boundaries is data, line ends and all."""
    contents = [content.replace(b"--frontier", b"") for content in contents]
    parts = [(f"p{place}", "application/octet-stream", content) for place, content in enumerate(contents)]
    found = split(bodies.FORM, bodies.form(*parts))
    assert [found[name].data for name, _, _ in parts] == contents


def test_names_and_types():
    body = (
        b"--frontier\r\ncontent-disposition: form-data; name=\"reflections\"; filename=\"a b.cif\"\r\n"
        b"CONTENT-TYPE: Chemical/X-CIF; charset=utf-8\r\n\r\ndata_x\r\n"
        b"--frontier\r\nContent-Disposition: form-data; name=request\r\n\r\n{}\r\n--frontier--\r\n"
    )  # fmt: skip
    assert split(bodies.FORM, body) == {
        "reflections": Part("chemical/x-cif", b"data_x", "a b.cif"),
        "request": Part("", b"{}", ""),
    }


def test_headers_of_one_part_do_not_reach_the_next():
    body = (
        b'--frontier\r\nContent-Disposition: form-data; name="a"\r\nContent-Type: text/csv\r\n\r\n1\r\n'
        b'--frontier\r\nContent-Disposition: form-data; name="b"\r\n\r\n2\r\n--frontier--\r\n'
    )
    assert split(bodies.FORM, body) == {"a": Part("text/csv", b"1"), "b": Part("", b"2")}


def test_quoted_boundary():
    body = bodies.form(("a", "text/csv", b"1"), boundary="x y'z")
    assert split('multipart/form-data; boundary="x y\'z"', body)["a"].data == b"1"


@pytest.mark.parametrize(
    ("content_type", "body", "words"),
    [
        ("multipart/form-data", bodies.form(("a", "text/csv", b"1")), "names no boundary"),
        (bodies.FORM, b"", "cut short"),
        (bodies.FORM, bodies.form(("a", "text/csv", b"1"), closed=False), "cut short"),
        (bodies.FORM, bodies.form(("a", "text/csv", b"1"), boundary="border"), "cannot be read"),
        (bodies.FORM, bodies.form(("a", "text/csv", b"1"), ("a", "text/csv", b"2")), "the part 'a' twice"),
        (bodies.FORM, b"--frontier\r\nno colon\r\n\r\n1\r\n--frontier--\r\n", "cannot be read"),
        (bodies.FORM, b"--frontier\r\n" + b"x" * 100_000 + b": 1\r\n\r\n1\r\n--frontier--\r\n", "cannot be read"),
    ],
)  # fmt: skip
def test_forms_that_cannot_be_read(content_type, body, words):
    told = detail(content_type, body)
    assert words in told
    assert len(told) < 400


def test_part_without_a_name_is_told_from_one_that_has():
    body = b"--frontier\r\nContent-Disposition: form-data\r\n\r\n1\r\n--frontier--\r\n"
    assert split(bodies.FORM, body) == {"": Part("", b"1")}
