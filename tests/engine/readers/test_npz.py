from __future__ import annotations

import io
import os
import struct
import zipfile

import numpy as np
import pytest

from engine.errors import InputError, TooLargeError
from engine.readers import read_npz

NAMES = ("h", "k", "l", "amplitude")
LIMIT = 2**20
PLAIN = "{'descr': '<f8', 'fortran_order': False, 'shape': (1,)}"


def read(data, limit=LIMIT):
    return read_npz(data, NAMES, max_bytes=limit)


def fault(data, limit=LIMIT):
    with pytest.raises(InputError) as caught:
        read(data, limit)
    assert caught.value.cure
    assert len(str(caught.value)) < 300
    return caught.value.reason


def saved(packer=np.savez, **arrays):
    packed = io.BytesIO()
    packer(packed, **arrays)
    return packed.getvalue()


def zipped(*members, packing=zipfile.ZIP_DEFLATED):
    packed = io.BytesIO()
    with zipfile.ZipFile(packed, "w", packing) as archive:
        for name, content in members:
            archive.writestr(name, content)
    return packed.getvalue()


def npy(header, data=b"12345678", version=(1, 0)):
    length = struct.pack("<H" if version == (1, 0) else "<I", len(header))
    return b"\x93NUMPY" + bytes(version) + length + header.encode("latin1") + data


def one(content, packing=zipfile.ZIP_DEFLATED):
    return zipped(("l.npy", content), packing=packing)


@pytest.mark.parametrize("packer", [np.savez, np.savez_compressed])
@pytest.mark.parametrize("dtype", ["i1", "u2", "<i4", ">i8", "f2", "<f4", ">f8", "u8"])
def test_columns_of_any_real_type(packer, dtype):
    column = np.array([0, 1, 2, 100]).astype(dtype)
    found = read(saved(packer, l=column, amplitude=column[::-1]))
    assert list(found) == ["l", "amplitude"]
    assert found["l"].dtype == np.float64
    np.testing.assert_array_equal(found["l"], [0, 1, 2, 100])
    np.testing.assert_array_equal(found["amplitude"], [100, 2, 1, 0])


def test_arrays_are_the_readers_own():
    assert read(saved(l=np.arange(3.0)))["l"].flags.writeable


def test_nan_and_empty_columns_are_passed_on():
    assert np.isnan(read(saved(l=np.array([np.nan])))["l"][0])
    assert read(saved(l=np.zeros(0)))["l"].shape == (0,)


def test_second_version_of_the_header():
    assert read(one(npy(PLAIN, struct.pack("<d", 1.5), (2, 0))))["l"].tolist() == [1.5]


@pytest.mark.parametrize(
    ("arrays", "reason"),
    [
        ({"l": np.ones((2, 2))}, "the array 'l' has 2 dimensions"),
        ({"l": np.array(3.0)}, "the array 'l' has 0 dimensions"),
        ({"l": np.array([1j])}, "the array 'l' does not hold real numbers"),
        ({"l": np.array([True])}, "the array 'l' does not hold real numbers"),
        ({"l": np.array(["1"])}, "the array 'l' does not hold real numbers"),
        ({"l": np.array([(1,)], dtype=[("a", "f8")])}, "the array 'l' does not hold real numbers"),
        ({"l": np.array(["2020"], dtype="M8[Y]")}, "the array 'l' does not hold real numbers"),
        ({"l": np.array([{"a": 1}], dtype=object)}, "the array 'l' does not hold real numbers"),
        ({"fobs": np.ones(2)}, "the archive holds the array 'fobs'"),
        ({}, "the archive holds no arrays"),
    ],
)
def test_what_are_no_columns(arrays, reason):
    assert fault(saved(**arrays)) == reason


def test_nothing_is_unpickled(tmp_path):
    """A pickle can run any command; this one would leave a mark."""
    mark = tmp_path / "mark"

    class Command:
        def __reduce__(self):
            return os.system, (f"touch {mark}",)

    fault(saved(l=np.array([Command()], dtype=object)))
    assert not mark.exists()


@pytest.mark.parametrize(
    "header",
    [
        "",
        "{'descr': (",
        "(" * 900,
        "-" * 9000 + "1",
        "{[]: 1}",
        "'''",
        "  a\n b\n    c",
        "\x00",
        "x" * 20_000,
        "[1, 2]",
        "{'descr': '<f8'}",
        "{'descr': '<f8', 'fortran_order': False, 'shape': (10**9,)}",
        "{'descr': '<f8', 'fortran_order': False, 'shape': 1}",
        "{'descr': '<f8', 'fortran_order': 3, 'shape': (1,)}",
        "{'descr': '<q9', 'fortran_order': False, 'shape': (1,)}",
        "{'descr': {'names': ['a'], 'formats': ['O']}, 'fortran_order': False, 'shape': (1,)}",
        "{'descr': '<f8', 'fortran_order': False, 'shape': (1,), 'more': 1}",
    ],
)
def test_headers_that_cannot_be_read(header):
    assert fault(one(npy(header))) == "the array 'l' has no readable header"


@pytest.mark.parametrize("content", [b"", b"\x93NUMPY", b"\x93NUMPY\x01\x00\xff\xff{", b"PK\x03\x04", b"1,2,3\n"])
def test_contents_that_are_no_arrays(content):
    assert fault(one(content)) == "the array 'l' has no readable header"


def test_versions_that_are_unknown():
    assert "unknown format version" in fault(one(npy(PLAIN, version=(3, 0))))


@pytest.mark.parametrize("shape", ["(2,)", "(0,)", "(-1,)", "(1000000000000000,)", "(4611686018427387904,)"])
def test_shapes_that_lie(shape):
    assert fault(one(npy(PLAIN.replace("(1,)", shape)))) == "the array 'l' is cut short or too long"


def test_bomb_is_not_unpacked():
    zeros = npy(PLAIN.replace("(1,)", "(10000000,)"), bytes(80_000_000))
    bomb = one(zeros)
    assert len(bomb) < 100_000
    with pytest.raises(TooLargeError) as caught:
        read(bomb)
    assert "unpacks to 80,0" in caught.value.reason
    # The same, but its directory says that it is small.
    lying = bytearray(bomb)
    place = lying.index(b"PK\x01\x02") + 24
    lying[place : place + 4] = struct.pack("<I", 1000)
    assert fault(bytes(lying)) == "the data is not a readable .npz archive"


def test_limit_is_of_all_arrays_together():
    data = saved(h=np.ones(100), k=np.ones(100))
    total = 2 * (128 + 800)
    assert set(read(data, total)) == {"h", "k"}
    with pytest.raises(TooLargeError):
        read(data, total - 1)


@pytest.mark.parametrize("packing", [zipfile.ZIP_BZIP2, zipfile.ZIP_LZMA])
def test_packings_whose_memory_is_not_bounded(packing):
    assert fault(one(npy(PLAIN), packing)) == "the array 'l' is packed in an unusual way"


def test_array_twice():
    with pytest.warns(UserWarning, match="Duplicate"):
        data = zipped(("l.npy", npy(PLAIN)), ("l.npy", npy(PLAIN)))
    assert fault(data) == "the archive holds the array 'l' twice"
    assert "twice" in fault(zipped(("l.npy", npy(PLAIN)), ("l", npy(PLAIN))))


@pytest.mark.parametrize("name", ["../l.npy", "/etc/passwd", "l.npy/x", "x" * 5000, "l\n.npy"])
def test_names_that_are_no_columns(name):
    assert "the archive holds the array" in fault(zipped((name, npy(PLAIN))))


def test_what_is_no_archive():
    good = saved(l=np.arange(3.0))
    for data in (b"", b"PK", b"1,2\n", good[:-10], good[: len(good) // 2], b"PK\x05\x06" + bytes(18)):
        assert fault(data) in ("the data is not a readable .npz archive", "the archive holds no arrays")


def test_encrypted():
    data = bytearray(one(npy(PLAIN)))
    data[6] |= 1
    data[data.index(b"PK\x01\x02") + 8] |= 1
    assert fault(bytes(data)) == "the data is not a readable .npz archive"


@pytest.mark.parametrize("packer", [np.savez, np.savez_compressed])
def test_any_byte_changed_is_read_or_refused(packer):
    """The archive may still be good; what may not happen is another fault, or a wrong number of rows."""
    good = saved(packer, l=np.arange(4.0))
    for place in range(len(good)):
        for value in {0, 255, good[place] ^ 1, good[place] ^ 0x80}:
            spoilt = bytearray(good)
            spoilt[place] = value
            try:
                found = read(bytes(spoilt))
            except InputError:
                continue
            assert set(found) <= set(NAMES)
            assert all(column.ndim == 1 for column in found.values())
