"""The door to all readers."""

import io
import zipfile

import numpy as np
import pytest

from engine.errors import InputError, TooLargeError
from engine.readers import read
from engine.readers.table import ReadTable

from .cif_texts import CELL, CORE, INTENSITIES, RAW

CSV = b"h,k,l,amplitude\n1,0,0,2.5\n0,1,0,3.5\n"


def archive(**arrays):
    buffer = io.BytesIO()
    np.savez_compressed(buffer, **arrays)
    return buffer.getvalue()


NPZ = archive(h=np.array([1, 0]), k=np.array([0, 1]), l=np.array([0, 0]), amplitude=np.array([2.5, 3.5], np.float32))


@pytest.mark.parametrize(
    ("data", "ending", "kind"),
    [(CSV, ".csv", "delimited"), (CORE.encode(), ".cif", "cif"), (NPZ, ".npz", "npz"), (CSV, ".dat", "delimited")],
)
def test_kind_by_ending_and_by_content(data, ending, kind, tmp_path):
    path = tmp_path / f"measured{ending}"
    path.write_bytes(data)
    table = read(path)
    assert isinstance(table, ReadTable)
    assert (table.kind, table.source) == (kind, f"measured{ending}")
    assert read(str(path), name="shown").source == "shown"
    for same in (read(data), read(data, name=f"x{ending}"), read(data, kind)):
        assert same.kind == kind
        assert same.rows_read == table.rows_read


def test_content_behind_comments():
    assert read(b"\xef\xbb\xbf# remark\n\n" + CORE.encode(), name="x.txt").kind == "cif"
    assert read(b"# data_x is not here\n" + CSV).kind == "delimited"


def test_the_same_table_in_both_forms():
    text, arrays = read(CSV), read(NPZ)
    assert set(text.columns) == set(arrays.columns)
    for name, column in text.columns.items():
        np.testing.assert_array_equal(arrays.columns[name], column)
        assert arrays.columns[name].dtype == np.float64
    assert text.lines.tolist() == [2, 3]
    assert arrays.lines is None


def test_options_reach_their_reader():
    assert read((RAW + INTENSITIES).encode(), block="merged").block == "merged"
    both = RAW + INTENSITIES.replace("data_merged", "").replace(CELL, "")
    assert read(both.encode(), category="refln").category == "refln"
    mapped = read(b"a;x\n1;2.5\n", delimiter=";", mapping={"a": "l", "x": "intensity"})
    assert set(mapped.columns) == {"l", "intensity"}
    held = read(archive(a=np.arange(2), note=np.array(["p", "q"])), mapping={"a": "l", "note": "ignore"})
    np.testing.assert_array_equal(held.columns["l"], [0, 1])
    assert held.names["l"] == "a"
    calls = []
    read(CSV, progress=lambda done, total: calls.append((done, total)))
    assert calls == [(len(CSV), len(CSV))]


def test_statuses_of_an_archive_are_numbers():
    table = read(archive(h=np.arange(3), status=np.array([0, 1, 7], dtype=np.uint8)))
    np.testing.assert_array_equal(table.status, [0, 1, 7])


@pytest.mark.parametrize(
    ("options", "place"),
    [
        ({"source": CORE.encode(), "mapping": {}}, "mapping"),
        ({"source": CORE.encode(), "delimiter": ","}, "delimiter"),
        ({"source": CSV, "block": "a"}, "block"),
        ({"source": NPZ, "category": "refln"}, "category"),
        ({"source": NPZ, "delimiter": ","}, "delimiter"),
        ({"source": CSV, "kind": "xml"}, "kind"),
    ],
)
def test_arguments_of_another_kind(options, place):
    with pytest.raises(InputError) as caught:
        read(**options)
    assert caught.value.path == (place,)


@pytest.mark.parametrize(
    ("data", "reason"),
    [
        (b"PK\x03\x04 broken", "not a readable .npz archive"),
        (NPZ[: len(NPZ) // 2], "not a readable .npz archive"),
        (archive(flux=np.arange(2)), "nothing says what the columns 'flux' are"),
        (archive(h=np.arange(2), k=np.arange(3)), "differ in length"),
        (archive(h=np.array(["a"])), "does not hold real numbers"),
        (archive(h=np.zeros((2, 2))), "has 2 dimensions"),
        (archive(h=np.array([0.5])), "is not a whole number"),
        (archive(h=np.array([1]), H=np.array([1])), "are both h"),
        (archive(h=np.array([])), "no rows"),
    ],
)
def test_broken_archives(data, reason):
    with pytest.raises(InputError) as caught:
        read(data, name="broken.npz")
    assert reason in caught.value.reason
    assert caught.value.path[0] == "broken.npz"


def test_an_archive_that_is_empty():
    buffer = io.BytesIO()
    zipfile.ZipFile(buffer, "w").close()
    with pytest.raises(InputError, match="holds no arrays"):
        read(buffer.getvalue(), "npz")


def test_limits():
    with pytest.raises(TooLargeError, match="more than the limit of 10"):
        read(CSV, max_bytes=10)
    packed = archive(h=np.zeros(100_000))
    assert len(packed) < 50_000
    with pytest.raises(TooLargeError, match="unpacks to"):
        read(packed, name="big.npz", max_bytes=50_000)


def test_a_file_that_is_not_there(tmp_path):
    with pytest.raises(InputError, match=r"absent\.csv: the file cannot be read"):
        read(tmp_path / "absent.csv")
