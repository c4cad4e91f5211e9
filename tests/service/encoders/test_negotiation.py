from __future__ import annotations

import pytest

from service.encoders.negotiation import MEDIA_TYPES, choose, formats_of
from service.problems import Problem
from service.schemas.products import PRODUCTS


@pytest.mark.parametrize(
    ("accept", "form"),
    [
        (None, "json"),
        ("", "json"),
        ("*/*", "json"),
        ("application/*", "json"),
        ("text/*", "csv"),
        ("TEXT/CSV", "csv"),
        ("text/csv; charset=utf-8", "csv"),
        ("application/x-npz", "npz"),
        ("application/x-npy, application/x-npz", "npy"),
        ("application/x-npy;q=0.3, application/x-npz;q=0.31", "npz"),
        ("application/x-npy; Q=0.3, application/x-npz ; q = 0.31", "npz"),
        # The most specific range decides, not the first and not the best.
        ("*/*;q=1, application/json;q=0.1", "npy"),
        ("application/*;q=0.2, application/x-npz;q=0.1, text/csv;q=0.15", "json"),
        ("application/json;q=0, application/*", "npy"),
        ("text/html, application/xhtml+xml, application/xml;q=0.9, */*;q=0.8", "json"),
        ("image/png;q=0, nonsense, text/csv;q=0.001", "csv"),
        ("image/*, text/csv;q=0.5", "png"),
        ("image/svg+xml, application/json;q=0.9", "svg"),
        # Bad weights count as none.
        ("application/json;q=high, text/csv;q=0.1", "csv"),
        ("application/json;q=nan, text/csv;q=0.1", "csv"),
        ("application/json;q=-1, text/csv;q=0.1", "csv"),
        ("application/x-npy;q=7, application/json", "json"),
    ],
)
def test_accept(accept, form):
    assert choose("profile", accept, None) == form


@pytest.mark.parametrize(
    "accept", ["image/gif", "nonsense", ",;,", "*/*;q=0", "application/json;q=0", "text/html, */xml", "json"]
)
def test_nothing_acceptable(accept):
    with pytest.raises(Problem) as caught:
        choose("profile", accept, None)
    assert caught.value.status == 406
    assert all(MEDIA_TYPES[form].split(";")[0] in caught.value.detail for form in formats_of("profile"))


@pytest.mark.parametrize("product", PRODUCTS)
def test_format_goes_before_accept(product):
    for form in formats_of(product):
        assert choose(product, "image/gif", form) == form


@pytest.mark.parametrize(("product", "wanted"), [("grid", "csv"), ("slice", "csv"), ("profile", "JSON"), ("grid", "")])
def test_unknown_format(product, wanted):
    with pytest.raises(Problem) as caught:
        choose(product, None, wanted)
    assert caught.value.status == 406


def test_what_was_asked_for_is_not_echoed_at_length():
    with pytest.raises(Problem) as caught:
        choose("grid", None, "x" * 10_000)
    assert len(caught.value.detail) < 500


def test_rows_alone_are_had_as_csv():
    assert {product for product in PRODUCTS if "csv" in formats_of(product)} == {"profile", "points"}
    assert set(MEDIA_TYPES) == {form for product in PRODUCTS for form in formats_of(product)}
