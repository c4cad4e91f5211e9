"""Documents and numbers. Expected values are written out beside each text."""

import importlib
import math
from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine.errors import InputError
from engine.readers import cif
from engine.readers.cif import numbers, read_document


def one(text):
    (block,), _ = read_document(text.encode())
    return block


def test_items_loops_text_fields_and_comments():
    block = one(
        "# a remark\nDATA_Name\n_One 1 # behind\n_two 'a b''c'\n_three\n;line 1\n line 2\n;\n"
        "loop_\n_p\n_q\n1 2\n# between\n3\n4\n_last a#b\n"
    )
    assert block.name == "name"
    assert block.items["_one"] == ("1",)
    assert block.items["_two"] == ("a b''c",)
    assert block.items["_three"] == ("line 1\n line 2",)
    assert (list(block.items["_p"]), list(block.items["_q"])) == (["1", "3"], ["2", "4"])
    assert block.loops == (("_p", "_q"),)
    assert block.items["_last"] == ("a#b",)


@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
def test_line_ends(end):
    block = one(f"data_a{end}_x 1{end}loop_{end}_p{end}_q{end}1 2{end}3 4{end}_t{end};field{end};{end}")
    assert list(block.items["_q"]) == ["2", "4"]
    assert block.items["_t"] == ("field",)


def test_value_passes_over_unknown_ones():
    block = one("data_a\n_x ?\n_y .\n_z 3\nloop_\n_w\n1\n2\n")
    assert block.value("_x", "_y", "_w", "_z") == ("_z", "3")
    assert block.value("_x") is None


def test_several_blocks_and_save_frames():
    blocks, _ = read_document(b"data_a\n_x 1\ndata_B\nsave_frame\n_x 2\nsave_\n_x 3\n")
    assert [(block.name, block.items["_x"]) for block in blocks] == [("a", ("1",)), ("b", ("3",))]


def test_characters_beyond_ascii_are_remarked():
    (block,), remarks = read_document("data_a\n_x 'caf\u00e9'\n_y 2\n".encode())
    assert block.items["_x"] == ("caf~~",)
    assert [remark.kind for remark in remarks] == ["text"]
    assert "2 bytes" in str(remarks[0])
    (same,), _ = read_document("data_a\n_x 'caf\u00e9'\n_y 2\n".encode("latin-1"))
    assert same.items["_x"] == ("caf~",)


def test_second_version_keeps_its_characters_and_passes_over_lists():
    (block,), remarks = read_document("#\\#CIF_2.0\ndata_a\n_x 'caf\u00e9'\n_list [1 2]\nloop_\n_p\n1.5(2)\n".encode())
    assert block.items == {"_x": ("caf\u00e9",), "_p": ["1.5(2)"]}
    assert remarks == ()


def test_what_only_the_first_grammar_allowed_is_read_by_the_slow_scanner():
    assert one("data_a\n_x [1]\n_y 2\n").items["_x"] == ("[1]",)


def test_long_names():
    name = "_" + "x" * 100
    assert one(f"data_a\n{name} 1\n").items[name] == ("1",)


BROKEN = [
    ("", None, "empty"),
    ("  \n \n", None, "empty"),
    ("# nothing\n", None, "no data block"),
    ("hello\n", 1, "does not begin with a data block"),
    ("\n_x 1\n", 2, "does not begin with a data block"),
    ("data_\n_x 1\n", 1, "no name"),
    ("data_a\n_x\n_y 2\n", 2, "_x has no value"),
    ("data_a\n_y 1\n_x\n", 3, "_x has no value"),
    ("data_a\n_x\ndata_b\n_y 1\n", 2, "_x has no value"),
    ("data_a\n_x 1 2\n", 2, "belongs to no item"),
    ("data_a\n_x 1\n_X 2\n", 3, "a second time"),
    ("data_a\n_x 1\nloop_\n_x\n1\n", 4, "a second time"),
    ("data_a\n_x 1\ndata_A\n_x 2\n", 3, "a second time"),
    ("data_a\nloop_\n_p\n_q\n1 2 3\n", 2, "3 values"),
    ("data_a\n_y 1\nloop_\n_p\n_q\n1 2 3\n_x 1\n", 3, "3 values"),
    ("data_a\n_y 1\nloop_\n_p\n_q\n_r\n1 2 3 4\nloop_\n_s\n1\n", 3, "4 values"),
    ("data_a\nloop_\n_p\n", 2, "no values"),
    ("data_a\nloop_\n1 2\n", 3, "belongs to no item"),
    ("data_a\n_x 'open\n_y 1\n", 2, "quotation mark"),
    ('data_a\n_x "open\n_y 1\n', 2, "quotation mark"),
    ("data_a\n_y 1\n_x\n;field\nwithout end\n", 4, "never closed"),
    ("data_a\nloop_\n_p\n1\nstop_\n", 5, "reserved"),
    ("data_a\n_y 1\nglobal_\n_x 1\n", 3, "reserved"),
    ("data_a\n_x 1\x00\n", 2, "control character"),
    ("data_a\n_x 1\n\x1a_y 2\n", 3, "control character"),
    ("#\\#CIF_2.0\ndata_a\n_x [1 2\n", None, "not valid CIF"),
]


@pytest.mark.parametrize(("text", "line", "reason"), BROKEN)
def test_broken_documents(text, line, reason):
    with pytest.raises(InputError) as caught:
        read_document(text.encode(), "broken.cif")
    assert reason in caught.value.reason
    assert caught.value.path[0] == "broken.cif"
    if line is not None:
        assert caught.value.path[1:] == (f"line {line}",)


def test_second_version_must_be_utf8():
    with pytest.raises(InputError, match=r"broken\.cif\.line 3: the text is not UTF-8"):
        read_document(b"#\\#CIF_2.0\ndata_a\n_x '\xe9'\n", "broken.cif")


def test_threads_do_not_mix_their_texts():
    def first(number):
        rows = "\n".join(f"{number} {place}" for place in range(300))
        return set(one(f"data_a\nloop_\n_p\n_q\n{rows}\n").items["_p"])

    with ThreadPoolExecutor(4) as pool:
        assert list(pool.map(first, range(40))) == [{str(number)} for number in range(40)]


def test_absent_library_is_named(monkeypatch):
    def absent(name):
        raise ImportError(name)

    monkeypatch.setattr(importlib, "import_module", absent)
    with pytest.raises(InputError, match="PyCifRW"):
        read_document(b"data_a\n_x 1\n")


def test_absent_fast_scanner_is_no_hindrance(monkeypatch):
    monkeypatch.setattr(cif, "_has_fast_scanner", lambda: False)
    assert one("data_a\nloop_\n_p\n1\n2\n").items["_p"] == ["1", "2"]


@pytest.mark.parametrize(
    ("text", "value", "sigma"),
    [
        ("1.234(5)", 1.234, 0.005),
        ("1.23(45)", 1.23, 0.45),
        ("123(4)", 123.0, 4.0),
        ("123.(4)", 123.0, 4.0),
        ("-.5(1)", -0.5, 0.1),
        ("+2.50E-3(7)", 0.0025, 0.00007),
        ("1.2e3(4)", 1200.0, 400.0),
        ("17", 17.0, math.nan),
        ("?", math.nan, math.nan),
        (".", math.nan, math.nan),
    ],
)
def test_numbers_with_uncertainties(text, value, sigma):
    for others in ([], ["3.00(1)"], ["2", "?"]):
        values, sigmas = numbers([text, *others], "_x")
        np.testing.assert_array_equal(values[0], value)
        np.testing.assert_array_equal(sigmas[0], sigma)


@pytest.mark.parametrize(
    "text",
    ["abc", "1.2.3", "nan", "inf", "1_000", "0x10", "1,5", "", "1.5()", "1.5(a)", "(5)", "1 2", "1\n2", "..", "٣"],
)
def test_what_is_not_a_number(text):
    with pytest.raises(InputError, match="is not a number") as caught:
        numbers(["1", text, "2"], "_x", "a.cif")
    assert caught.value.path == ("a.cif", "_x")
    assert caught.value.rows == (1,)


@settings(max_examples=60, deadline=None)
@given(st.lists(st.tuples(st.floats(-1e12, 1e12), st.integers(1, 99)), min_size=1, max_size=20))
def test_printed_numbers_return(pairs):
    # 17 digits name a double uniquely; an uncertainty of n units of the fourth decimal is n·10⁻⁴.
    plain, _ = numbers([f"{value:.17g}" for value, _ in pairs], "_x")
    np.testing.assert_array_equal(plain, [value for value, _ in pairs])
    rounded, sigmas = numbers([f"{value:.4f}({units})" for value, units in pairs], "_x")
    np.testing.assert_array_equal(rounded, [float(f"{value:.4f}") for value, _ in pairs])
    np.testing.assert_array_equal(sigmas, [float(f"{units}e-4") for _, units in pairs])


def test_many_rows():
    rows = "".join(f"{i % 31 - 15} {i // 31 % 31} {i // 961} {1.5 * i:.2f}({i % 9 + 1})\n" for i in range(20_000))
    values, sigmas = numbers(one("data_a\nloop_\n_h\n_k\n_l\n_f\n" + rows).items["_f"], "_f")
    np.testing.assert_array_equal(values, [float(f"{1.5 * i:.2f}") for i in range(20_000)])
    np.testing.assert_array_equal(sigmas, [float(f"{i % 9 + 1}e-2") for i in range(20_000)])
