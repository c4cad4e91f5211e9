"""Where texts break the syntax; `test_cif` has the table of faults as they reach the reader."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine.errors import InputError
from engine.readers.cif import read_document
from engine.readers.cif_fault import find_fault

from .cif_texts import COMPLEX_PARTS, CORE, DDLM, INTENSITIES, MACROMOLECULAR, RAW

WHOLE = [CORE, DDLM, MACROMOLECULAR, INTENSITIES, RAW, COMPLEX_PARTS]


@pytest.mark.parametrize("text", WHOLE)
def test_none_in_whole_texts(text):
    assert find_fault(text) is None


def test_what_looks_like_a_fault_and_is_none():
    text = (
        "data_a\n_x 'O'Neil'\n_y \"a'b\"\n_z\n;loop_\n'open\n _w\n;\n_u a;b\n"
        "loop_\n_p\n;x\n;\n;y\n;\nsave_f\n_x 1\nsave_\n"
    )
    assert find_fault(text) is None


@pytest.mark.parametrize(
    ("text", "line"), [("data_a\n_x 1\n 2\n", 3), ("\n\n\nx", 4), ("data_a\n\nloop_\n_p\n_q\n1\n", 3)]
)
def test_line_of_the_fault(text, line):
    fault = find_fault(text)
    assert fault is not None
    assert fault[0] == line


@settings(max_examples=80, deadline=None)
@given(st.sampled_from(WHOLE), st.data())
def test_agrees_with_the_reading_library(text, data):
    """A text with one word taken out is refused by the library exactly where a fault is found."""
    words = text.split(" ")
    place = data.draw(st.integers(0, len(words) - 1))
    cut = " ".join(words[:place] + words[place + 1 :])
    try:
        read_document(cut.encode())
        refused = False
    except InputError:
        refused = True
    assert refused == (find_fault(cut) is not None)
