"""Coordinates as text, against Python's own arithmetic on the same text."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from engine.symmetry import Operation, format_operation, parse_operation
from tests.strategies import refusal_of, unimodular


def rows(operation):
    return operation.rotation.tolist(), [str(shift) for shift in operation.translation]


@pytest.mark.parametrize(
    ("text", "rotation", "translation"),
    [
        ("x,y,z", [[1, 0, 0], [0, 1, 0], [0, 0, 1]], ["0", "0", "0"]),
        ("X, Y, Z", [[1, 0, 0], [0, 1, 0], [0, 0, 1]], ["0", "0", "0"]),
        (" -x + 1/2 , 1/2-y,+z", [[-1, 0, 0], [0, -1, 0], [0, 0, 1]], ["1/2", "1/2", "0"]),
        ("−y,x−y,z+2/3", [[0, -1, 0], [1, -1, 0], [0, 0, 1]], ["0", "0", "2/3"]),
        ("0.5+x,-y+.25,z-0.75", [[1, 0, 0], [0, -1, 0], [0, 0, 1]], ["1/2", "1/4", "1/4"]),
        (".333+x,y+0.6667,z+.8333", [[1, 0, 0], [0, 1, 0], [0, 0, 1]], ["1/3", "2/3", "5/6"]),
        ("x+0.042,y+0.125,z+0.1", [[1, 0, 0], [0, 1, 0], [0, 0, 1]], ["1/24", "1/8", "1/10"]),
        ("x-1/2,y+3/2,z+1", [[1, 0, 0], [0, 1, 0], [0, 0, 1]], ["1/2", "1/2", "0"]),
        ("x+1/4+1/4,1/3+y-1/3,z+1.", [[1, 0, 0], [0, 1, 0], [0, 0, 1]], ["1/2", "0", "0"]),
        ("y+x-y,2x-y-2*x+2y,z", [[1, 0, 0], [0, 1, 0], [0, 0, 1]], ["0", "0", "0"]),
        ("-y,x", [[0, -1], [1, 0]], ["0", "0"]),
        ("1/2-x,y", [[-1, 0], [0, 1]], ["1/2", "0"]),
        ("-z+1/2", [[-1]], ["1/2"]),
        ("-X", [[-1]], ["0"]),
    ],
)
def test_spellings(text, rotation, translation):
    assert rows(parse_operation(text, len(rotation))) == (rotation, translation)


COMPONENT = st.tuples(
    st.permutations(["{sx}x", "{sy}y", "{sz}z", "{st}{t}"]),
    st.lists(st.sampled_from("+-"), min_size=4, max_size=4),
    st.sampled_from(["1/2", "3/4", "5/6", "0.25", ".125", "2", "7/24"]),
    st.sets(st.sampled_from([0, 1, 2, 3]), min_size=1),
)


@given(st.tuples(COMPONENT, COMPONENT, COMPONENT), st.booleans(), st.randoms(use_true_random=False))
def test_any_order_of_terms_means_what_arithmetic_says(components, capitals, random):
    """Python evaluates the same text at a point; only texts with determinant ±1 are operations."""
    texts = []
    for order, (sx, sy, sz, shift_sign), shift, kept in components:
        written = [
            term.format(sx=sx, sy=sy, sz=sz, st=shift_sign, t=shift) for i, term in enumerate(order) if i in kept
        ]
        texts.append("".join(written))
    text = ",".join(texts)
    evaluated = [
        np.array(eval(text, {"x": p[0], "y": p[1], "z": p[2]}), dtype=float)
        for p in ((0, 0, 0), (1, 0, 0), (0, 1, 0), (0, 0, 1))
    ]
    matrix = np.column_stack([column - evaluated[0] for column in evaluated[1:]])
    spaced = "".join(c + " " * random.randint(0, 2) if c in "+-,xyz" else c for c in text)
    spaced = spaced.upper() if capitals else spaced
    if abs(round(np.linalg.det(matrix))) != 1:
        assert "determinant" in refusal_of(lambda: parse_operation(spaced, 3)).reason
        return
    found = parse_operation(spaced, 3)
    assert found.rotation.tolist() == np.rint(matrix).tolist()
    # The eval is in binary, so 5/6 is exact to a rounding only; a turn more or less is the same.
    apart = np.array([float(t) for t in found.translation]) - evaluated[0]
    np.testing.assert_allclose(apart, np.rint(apart), atol=1e-12)


@given(st.data(), st.sampled_from([1, 2, 3]))
def test_what_is_written_is_read_back(data, dimension):
    rotation = data.draw(unimodular(dimension)) * data.draw(st.sampled_from([1, -1]))
    fractions = st.fractions(0, Fraction(23, 24), max_denominator=24)
    operation = Operation(rotation, tuple(data.draw(fractions) for _ in range(dimension)))
    again = parse_operation(format_operation(operation), dimension)
    assert rows(again) == rows(operation)


@pytest.mark.parametrize(
    ("text", "written"),
    [("1/2 - X, .5+Y, -Z", "-x+1/2,y+1/2,-z"), ("x - y, x, 1/6+z", "x-y,x,z+1/6"), ("2y-x,y,z", "-x+2y,y,z")],
)
def test_the_form_written(text, written):
    assert format_operation(parse_operation(text, 3)) == written


@pytest.mark.parametrize(
    ("text", "part"),
    [
        ("x,y", "2 components"),
        ("x,y,z,x", "4 components"),
        ("x,,z", "empty"),
        ("x y,y,z", "no sum"),
        ("xy,y,z", "no sum"),
        ("x,y,w", "no sum"),
        ("x/2,y,z", "no sum"),
        ("x,y,z+", "no sum"),
        ("x,y,z+-1/2", "no sum"),
        ("x,y,z+1 2", "blank"),
        ("x,y,z+1/0", "zero"),
        ("x,y,z+0.33", "no fraction"),
        ("x,y,z+0.3345", "no fraction"),
        ("x,y,z+1/25", "no fraction"),
        ("x,y,z+0.123", "no fraction"),
        ("x,y,1/2", "determinant 0"),
        ("2x,y,z", "determinant 2"),
        ("x,y,1000x+z", "coefficient"),
        ("x,y,z+1/2/3", "no sum"),
        ("x,y,z+1e-1", "no sum"),
    ],
)
def test_refusals_name_place_and_cure(text, part):
    refusal = refusal_of(lambda: parse_operation(text, 3, ("operations", 4)))
    assert refusal.path == ("operations", 4)
    assert part in refusal.reason
    assert text in refusal.reason
    assert refusal.cure


@pytest.mark.parametrize(("text", "dimension"), [("x,z", 2), ("y", 1)])
def test_coordinates_that_the_dimension_lacks(text, dimension):
    assert refusal_of(lambda: parse_operation(text, dimension)).cure
