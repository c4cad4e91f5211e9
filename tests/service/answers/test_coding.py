from __future__ import annotations

import gzip

import pytest
import zstandard

from service.answers.coding import SMALLEST, choose_coding, encode
from service.encoders.negotiation import MEDIA_TYPES


@pytest.mark.parametrize(
    ("accepted", "coding"),
    [
        ("", None),
        ("identity", None),
        ("gzip", "gzip"),
        ("gzip, deflate, br, zstd", "zstd"),
        ("GZIP", "gzip"),
        ("gzip;q=0", None),
        ("zstd;q=0, gzip", "gzip"),
        ("zstd;q=0.2, gzip;q=0.9", "gzip"),
        ("*", "zstd"),
        ("*;q=0", None),
        ("zstd;q=0, *", "gzip"),
        ("identity;q=1, gzip;q=0.5", None),
        ("br", None),
        ("gzip;q=x", None),
        (",,", None),
    ],
)
def test_the_client_chooses(accepted, coding):
    assert choose_coding(accepted, "application/json", 10**6) == coding


def test_only_what_shrinks_is_coded():
    coded = {name for name, kind in MEDIA_TYPES.items() if choose_coding("gzip", kind, 10**6)}
    assert coded == {"json", "csv", "svg", "u8", "u16", "glb"}
    assert choose_coding("gzip", "application/json", SMALLEST - 1) is None


@pytest.mark.parametrize(("coding", "decode"), [("gzip", gzip.decompress), ("zstd", zstandard.decompress)])
def test_a_coded_body_is_the_body(coding, decode):
    body = b'{"values":[1,2,3]}' * 1000
    coded = encode(memoryview(body), coding)
    assert decode(coded) == body
    assert len(coded) < len(body) / 5
    assert coded == encode(memoryview(body), coding), "a strong tag stands for the same bytes"
