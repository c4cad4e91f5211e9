"""Delimited text. Expected numbers are those the text was printed from, or stand in it."""

import io
import math
import tracemalloc

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine.errors import InputError
from engine.readers import tabular
from engine.readers.mapping import Status
from engine.readers.tabular import read_tabular


def read(text, **options):
    data = text.encode() if isinstance(text, str) else text
    return read_tabular(io.BytesIO(data), len(data), **{"source": "a.csv", **options})


def test_a_table_with_everything():
    table = read(
        "# made up\n\n h, k ,l,amplitude,phase_deg,sigma,merit,status # columns\n"
        "1,0,0,12.5,90,0.5,0.75,o\n"
        "   \n"
        "-1,2, 0 ,+1.5e1,,0.25,nan,f # a remark\n"
        "# between\n"
        "2,2,2,0,-180.0,0,1,\n"
    )
    assert (table.kind, table.source, table.count, table.rejected) == ("delimited", "a.csv", 3, ())
    np.testing.assert_array_equal(table.columns["k"], [0, 2, 2])
    np.testing.assert_array_equal(table.columns["amplitude"], [12.5, 15, 0])
    np.testing.assert_array_equal(table.columns["amplitude_sigma"], [0.5, 0.25, 0])
    np.testing.assert_array_equal(table.columns["phase_deg"], [90, np.nan, -180])
    np.testing.assert_array_equal(table.columns["merit"], [0.75, np.nan, 1])
    np.testing.assert_array_equal(table.status, [Status.INCLUDED, Status.SET_ASIDE, Status.UNSTATED])
    np.testing.assert_array_equal(table.lines, [4, 6, 8])
    assert table.names["amplitude_sigma"] == "sigma"


@pytest.mark.parametrize(
    "text",
    [
        "h,k,l,intensity\n1,-2,3,4.5\n",
        "h;k;l;intensity\n1;-2;3;4.5\n",
        "h\tk\tl\tintensity\n1\t-2\t3\t4.5\n",
        "  h k   l intensity\n  1  -2\t3   4.5  \n",
        "h,k,l,intensity\r\n1,-2,3,4.5\r\n",
        "h,k,l,intensity\r1,-2,3,4.5\r",
        "h,k,l,intensity\n1,-2,3,4.5",
        "\ufeffh,k,l,intensity\n1,-2,3,4.5\n",
        '"h","k","l","intensity"\n1,-2,3,4.5\n',
        "_refln_index_h _refln_index_k _refln_index_l _refln_intensity_meas\n1 -2 3 4.5\n",
        "H, K, L, Intensity\n 1, -2, 3, 4.5\n",
    ],
)
def test_delimiters_and_line_ends(text):
    table = read(text)
    assert {name: column.tolist() for name, column in table.columns.items()} == {
        "h": [1],
        "k": [-2],
        "l": [3],
        "intensity": [4.5],
    }
    assert table.lines.tolist() == [2]


def test_delimiter_and_mapping_given():
    table = read(
        "my h;I;note\n1;2.5;see, there\n2;3.5;\u00e9\n",
        delimiter=";",
        mapping={"my h": "h", "I": "intensity", "note": "ignore"},
    )
    assert set(table.columns) == {"h", "intensity"}
    np.testing.assert_array_equal(table.columns["intensity"], [2.5, 3.5])
    others = read("l,intensity,a,b\n1,2,x,y\n", mapping={"*": "ignore"})
    assert set(others.columns) == {"l", "intensity"}


def test_one_column():
    np.testing.assert_array_equal(read("q\n0.5\n\n0.25\n").columns["q"], [0.5, 0.25])


def test_empty_fields_at_both_ends_and_rejected_rows():
    table = read("h,amplitude,phase_deg\n,1,2\n3,,\n4, ,5\n,,\n")
    assert (table.rows_read, table.count) == (4, 2)
    np.testing.assert_array_equal(table.rejected[0].rows, [0, 3])
    np.testing.assert_array_equal(table.columns["amplitude"], [np.nan, np.nan])
    np.testing.assert_array_equal(table.columns["phase_deg"], [np.nan, 5])
    tabbed = read("h\tamplitude\tphase_deg\n1\t\t2\n \n3\t4\t\n")
    np.testing.assert_array_equal(tabbed.columns["amplitude"], [np.nan, 4])
    np.testing.assert_array_equal(tabbed.columns["phase_deg"], [2, np.nan])


NUMBERS = st.one_of(st.floats(allow_nan=True, allow_infinity=False), st.integers(-10, 10).map(float))


@settings(max_examples=150, deadline=None)
@given(
    rows=st.lists(st.tuples(st.integers(-50, 50), NUMBERS, NUMBERS), min_size=1, max_size=12),
    delimiter=st.sampled_from([",", ";", "\t", " "]),
    end=st.sampled_from(["\n", "\r\n", "\r"]),
    fillers=st.lists(st.sampled_from(["", "# note, with; marks", "   "]), max_size=12),
    empty=st.booleans(),
    last=st.booleans(),
    chunk=st.integers(1, 200),
)
def test_round_trip(rows, delimiter, end, fillers, empty, last, chunk):
    """repr of a double names it uniquely, so every number returns to the last bit, whatever the chunks."""

    def printed(number):
        return "" if empty and delimiter != " " and math.isnan(number) else repr(number)

    lines = [delimiter.join(["h", "intensity", "real"])]
    expected = []
    for place, (h, first, second) in enumerate(rows):
        if place < len(fillers):
            lines.append(fillers[place])
        lines.append(delimiter.join([str(h), printed(first), printed(second)]))
        expected.append(len(lines))
    text = end.join(lines) + (end if last else "")
    whole = tabular.CHUNK_BYTES
    tabular.CHUNK_BYTES = chunk
    try:
        table = read(text)
    finally:
        tabular.CHUNK_BYTES = whole
    np.testing.assert_array_equal(table.columns["h"], [row[0] for row in rows])
    np.testing.assert_array_equal(table.columns["intensity"], [row[1] for row in rows])
    np.testing.assert_array_equal(table.columns["real"], [row[2] for row in rows])
    np.testing.assert_array_equal(table.lines, expected)


def test_progress_reaches_the_total(monkeypatch):
    monkeypatch.setattr(tabular, "CHUNK_BYTES", 1000)
    text = "h,intensity\n" + "".join(f"{place},{place / 4}\n" for place in range(1000))
    calls = []
    read(text, progress=lambda done, total: calls.append((done, total)))
    assert calls[-1] == (len(text), len(text))
    assert [done for done, _ in calls] == sorted({done for done, _ in calls})
    assert len(calls) >= len(text) // 1000


BROKEN = [
    ("", (), "the table is empty"),
    ("# only\n\n", (), "the table is empty"),
    ("h,k,l,amplitude\n", (), "a header and no rows"),
    ("h,k,l,amplitude\n# none\n\n", (), "a header and no rows"),
    ("1,0,0,5\n2,0,0,6\n", ("line 1",), "names the column '0' twice"),
    ("1,2,3,5.5\n", ("line 1",), "nothing says what the columns '1', '2', '3', '5.5' are"),
    ("h,k,l,flux\n1,0,0,1\n", ("line 1",), "nothing says what the columns 'flux' are"),
    ("\n\nh,k,l,flux\n1,0,0,1\n", ("line 3",), "nothing says what the columns 'flux' are"),
    ("h,k,,amplitude\n1,0,0,1\n", ("line 1",), "column 3 of the header has no name"),
    ("h,h,l,amplitude\n1,0,0,1\n", ("line 1",), "names the column 'h' twice"),
    (b"h,k,\xff\n1,0,0\n", ("line 1",), "not UTF-8"),
    ("h,amplitude\n1,2\n3\n", ("line 3",), "there are 1 fields"),
    ("h,amplitude\n1,2,3\n", ("line 2",), "there are 3 fields"),
    ("h,amplitude\n1,2,\n", ("line 2",), "there are 3 fields"),
    ("h,amplitude\n1 2\n", ("line 2",), "there are 1 fields"),
    ("h amplitude\n1 2\n\n3 4 5\n", ("line 4",), "there are 3 fields"),
    ("h,amplitude\n1,2\n3,abc\n", ("line 3", "column 2 (amplitude)"), "'abc' is not a finite number"),
    ("h,amplitude\n# c\n\n1,2\n3 4,5\n", ("line 5", "column 1 (h)"), "'3 4' is not a finite number"),
    ("h,amplitude\n1,inf\n", ("line 2", "column 2 (amplitude)"), "'inf' is not a finite number"),
    ("h,amplitude\n1,1e999\n", ("line 2", "column 2 (amplitude)"), "'1e999' is not a finite number"),
    ("h,amplitude\n1,1_0\n", ("line 2", "column 2 (amplitude)"), "'1_0' is not a finite number"),
    ("h,amplitude\n1,0x1p3\n", ("line 2", "column 2 (amplitude)"), "'0x1p3' is not a finite number"),
    ("h,amplitude\n1,?\n", ("line 2", "column 2 (amplitude)"), "'?' is not a finite number"),
    ("h,amplitude\n1,'2'\n", ("line 2", "column 2 (amplitude)"), "is not a finite number"),
    ("h;amplitude\n1;2,5\n", ("line 2", "column 2 (amplitude)"), "'2,5' is not a finite number"),
    ("h,amplitude\n1,\u0663\n", ("line 2", "column 2 (amplitude)"), "is not a finite number"),
    ("h amplitude\n1 2\u00a03\n", ("line 2", "column 2 (amplitude)"), "is not a finite number"),
    ("h,amplitude\n1,\u22122\n", ("line 2", "column 2 (amplitude)"), "is not a finite number"),
    ("h,status\n1,q\n", ("line 2", "column 2 (status)"), "'q' is not a status"),
    ("h,amplitude\n1,2\n\x00,1\n", ("line 3",), "NUL byte"),
    ("h,amplitude\n1.5,2\n", ("h",), "is not a whole number (line 2)"),
    ("h,amplitude\n\n1,2\n3,-4\n", ("amplitude",), "is negative (line 4)"),
    ("h,amplitude\n,1\n,2\n", (), "no row has all its indices"),
    ("h" * 70_000, ("a line",), "longer than"),
]


@pytest.mark.parametrize(("text", "place", "reason"), BROKEN)
@pytest.mark.parametrize("chunk", [tabular.CHUNK_BYTES, 7])
def test_broken_tables(text, place, reason, chunk, monkeypatch):
    monkeypatch.setattr(tabular, "CHUNK_BYTES", chunk)
    with pytest.raises(InputError) as caught:
        read(text)
    assert reason in caught.value.reason
    assert caught.value.path == ("a.csv", *place)


def test_arguments():
    with pytest.raises(InputError, match="delimiter: is not one that is read"):
        read("h|k\n1|2\n", delimiter="|")
    with pytest.raises(InputError, match="all columns are ignored"):
        read("a,b\n1,2\n", mapping={"*": "ignore"})


def test_memory_is_bounded_by_the_columns(monkeypatch):
    """The columns twice over (parts and whole) and a few chunks; the text, 0.46 times the columns, is never held."""
    monkeypatch.setattr(tabular, "CHUNK_BYTES", 2**15)
    rows = 50_000
    text = ("h,k,l,intensity,intensity_sigma\n" + "12,-7,3,1234.50,12.25\n" * rows).encode()
    stream = io.BytesIO(text)
    columns = 6 * 8 * rows  # five columns and the lines
    tracemalloc.start()
    try:
        table = read_tabular(stream, len(text))
        _, peak = tracemalloc.get_traced_memory()
    finally:
        tracemalloc.stop()
    assert table.count == rows
    assert peak < 2.25 * columns + 12 * tabular.CHUNK_BYTES
