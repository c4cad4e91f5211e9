from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine.errors import InputError
from engine.readers import read_delimited

NAMES = ("h", "k", "l", "amplitude", "phase_deg")


def read(text):
    found = read_delimited(text if isinstance(text, bytes) else text.encode(), NAMES)
    for column in found.values():
        assert column.dtype == np.float64
        assert column.flags.c_contiguous
    return {name: column.tolist() for name, column in found.items()}


def fault(text):
    with pytest.raises(InputError) as caught:
        read(text)
    assert caught.value.reason
    assert caught.value.cure
    assert len(str(caught.value)) < 300
    return caught.value.reason


@pytest.mark.parametrize(
    ("text", "columns"),
    [
        ("l,amplitude\n1,2.5\n-3,4e-1\n", {"l": [1, -3], "amplitude": [2.5, 0.4]}),
        ("l,amplitude\n1,2\n3,4", {"l": [1, 3], "amplitude": [2, 4]}),
        ("l,amplitude\r\n1,2\r\n3,4\r\n", {"l": [1, 3], "amplitude": [2, 4]}),
        ("l,amplitude\r1,2\r3,4\r", {"l": [1, 3], "amplitude": [2, 4]}),
        ("\ufeffl,amplitude\n1,2\n", {"l": [1], "amplitude": [2]}),
        (" l , amplitude \n 1 ,\t2 \n", {"l": [1], "amplitude": [2]}),
        ("amplitude,l\n1,2\n", {"amplitude": [1], "l": [2]}),
        ("l\n1\n2\n", {"l": [1, 2]}),
        ("# made, by\n\nl,amplitude\n# one\n1,2\n\n  \n3,4 # two, both\n#end", {"l": [1, 3], "amplitude": [2, 4]}),
        ("l\n1\n \n\n2\n\t", {"l": [1, 2]}),
    ],
)  # fmt: skip
def test_tables(text, columns):
    assert read(text) == columns
    assert list(read(text)) == list(columns)


@pytest.mark.parametrize(
    ("text", "rows"),
    [
        ("h,k,l\n1,2,\n", [[1, 2, np.nan]]),
        ("h,k,l\n,2,3\n", [[np.nan, 2, 3]]),
        ("h,k,l\n1,,3\n", [[1, np.nan, 3]]),
        ("h,k,l\n1, ,3\n", [[1, np.nan, 3]]),
        ("h,k,l\n,,\n", [[np.nan] * 3]),
        ("h,k,l\r\n1,2,\r\n,2,3\r\n", [[1, 2, np.nan], [np.nan, 2, 3]]),
        ("h,k,l\n1,2,", [[1, 2, np.nan]]),
        ("h,k,l\n1,2, # none\n", [[1, 2, np.nan]]),
        ("h,k,l\n1,nan,3\n", [[1, np.nan, 3]]),
    ],
)
def test_empty_fields_are_unknown(text, rows):
    np.testing.assert_array_equal(np.array(list(read(text).values())).T, rows)


@pytest.mark.parametrize(
    ("text", "reason"),
    [
        ("h,k\n1,2\n3,4x\n", "line 3, field 2 (k): '4x' is not a number"),
        ("# c\n\nh,k\n1,2\n\n# d\n3,\n,\n5,six\n", "line 9, field 2 (k): 'six' is not a number"),
        ("h,k\r\n1,2\r\nthree,4\r\n", "line 3, field 1 (h): 'three' is not a number"),
        ('h,k\n"1",2\n', "line 2, field 1 (h): '\"1\"' is not a number"),
        ("h,k\n1,2,3\n", "line 2 has 3 fields"),
        ("h,k\n1,2\n3\n", "line 3 has 1 fields"),
        ("h,k\n1,2\n3,4,\n", "line 3 has 3 fields"),
        ("h,k\n1;2\n", "line 2 has 1 fields"),
        ("h,k\n1 2,3\n", "line 2, field 1 (h): '1 2' is not a number"),
        ("h,k\n1,0x10\n", "line 2, field 2 (k): '0x10' is not a number"),
        ("h,k\n1,1_000\n", "line 2, field 2 (k): '1_000' is not a number"),
        ("h,k\n1,1+2j\n", "line 2, field 2 (k): '1+2j' is not a number"),
        ("h,k\n1,\u22122\n", "line 2, field 2 (k): '\u22122' is not a number"),
        ("h,k\n1," + "9" * 10_000 + "x\n", "line 2, field 2 (k): '" + "9" * 20 + "' is not a number"),
        ("", "the table is empty"),
        ("\n \n# only words\n", "the table is empty"),
        ("h,k\n", "the table has a header and no rows"),
        ("h,k", "the table has a header and no rows"),
        ("h,k\n\n# none\n \n", "the table has a header and no rows"),
        ("h,h\n1,2\n", "the header names a column twice"),
        ("h,Fobs\n1,2\n", "the header names the column 'Fobs'"),
        ("h,k,\n1,2,\n", "the header names the column ''"),
        ("1,2\n3,4\n", "the header names the column '1'"),
        ("x" * 10_000 + "\n1\n", "the header names the column '" + "x" * 40 + "'"),
        (b"h,\xff\n1,2\n", "the header is not UTF-8 text"),
        (b"h,k\n1,2\x00\n", "the text holds a NUL byte"),
        ("h,k\n1,2\n".encode("utf-16"), "the text holds a NUL byte"),
    ],
)
def test_faults_are_named_by_line_and_field(text, reason):
    assert fault(text) == reason


def test_numbers_keep_every_digit():
    values = [0.1, 1 / 3, 5e-324, 1.7976931348623157e308, -2.2250738585072014e-308, 1e22, 123456789.123456789]
    assert read("amplitude\n" + "\n".join(map(repr, values)))["amplitude"] == values


@given(
    st.lists(
        st.tuples(st.integers(-99, 99), st.one_of(st.none(), st.floats(allow_nan=False, allow_infinity=False))),
        min_size=1,
        max_size=20,
    ),
    st.sampled_from(["\n", "\r\n", "\r"]),
    st.booleans(),
)
def test_what_is_written_is_read(rows, end, closed):
    lines = ["h,phase_deg", *(f"{h},{'' if phase is None else repr(phase)}" for h, phase in rows)]
    found = read(end.join(lines) + (end if closed else ""))
    assert found["h"] == [h for h, _ in rows]
    np.testing.assert_array_equal(found["phase_deg"], [np.nan if phase is None else phase for _, phase in rows])


@given(st.text(alphabet='hkl,.#0123456789e-+ \t\r\nnaif\x1c\u2028\ufeff_"', max_size=60))
def test_any_text_is_read_or_refused(text):
    try:
        found = read("h,k\n" + text)
    except InputError:
        return
    assert set(found) == {"h", "k"}
    assert len(found["h"]) == len(found["k"]) >= 1
