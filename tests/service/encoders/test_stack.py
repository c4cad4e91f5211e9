from __future__ import annotations

import io
import json

import numpy as np
import pytest

from service import stacks
from service.encoders.stack import describe_stack, require_form, write_stack
from service.problems import Problem
from service.settings import Settings
from tests.service import bodies
from tests.service.analyses.asked import numbers, request, table
from tests.service.series_bodies import SERIES, SLICES

SIGMA = {**SERIES, "uncertainty": True}
COMPLEX = {
    **SLICES,
    "set": bodies.ABSORBING,
    "members": [{"value": 1.0, "set": {}}, {"value": 2.0, "set": {"mean": 4.0}}],
    "scale": {"kind": "as_given"},
}


def written(body, form, **limits):
    asked, settings = request("series", body), Settings(**limits)
    made = stacks.stack(asked, settings, threads=1)
    return made, write_stack(made, form, asked, settings)


@pytest.mark.parametrize("body", [SERIES, SIGMA, SLICES])
def test_json(body):
    made, content = written(body, "json")
    told = json.loads(content)
    np.testing.assert_array_equal(told["values"], made.values)
    assert (told["uncertainty"] is None) == (made.sigma is None)
    if made.sigma is not None:
        np.testing.assert_array_equal(told["uncertainty"], made.sigma)
        assert told["members"][0]["uncertainty"]["contains"]
    assert told["shape"] == list(made.values.shape)
    assert len(told["members"]) == len(body["members"])


def test_complex_values_in_json_have_two_arrays():
    made, content = written(COMPLEX, "json")
    told = json.loads(content)["values"]
    np.testing.assert_array_equal(np.array(told["real"]) + 1j * np.array(told["imag"]), made.values)


def test_npz_tells_the_same():
    made, content = written(SIGMA, "npz")
    with np.load(io.BytesIO(content), allow_pickle=False) as archive:
        assert set(archive.files) == {"values", "uncertainty", "variable", "axis_1", "metadata"}
        np.testing.assert_array_equal(archive["values"], made.values)
        np.testing.assert_array_equal(archive["uncertainty"], made.sigma)
        np.testing.assert_array_equal(archive["variable"], [290, 310, 330])
        np.testing.assert_allclose(archive["axis_1"], np.linspace(0, bodies.PERIOD, 17))
        told = json.loads(str(archive["metadata"]))
    assert told == json.loads(json.dumps(describe_stack(made, request("series", SIGMA))))
    _, content = written(SLICES, "npz")
    with np.load(io.BytesIO(content), allow_pickle=False) as archive:
        assert {"axis_1", "axis_2"} < set(archive.files)
        assert "uncertainty" not in archive.files


def test_npy_is_the_stack():
    made, content = written(SLICES, "npy")
    np.testing.assert_array_equal(np.load(io.BytesIO(content)), made.values)


def test_csv_has_a_column_a_member():
    made, content = written(SIGMA, "csv")
    head, columns = table(content)
    assert head[0] == "series along temperature (K): 1: 290, 2: 310, 3: 330"
    assert list(columns) == [
        "distance_angstrom",
        *(name for number in (1, 2, 3) for name in (f"value_{number}", f"uncertainty_{number}")),
    ]
    assert numbers(columns["value_2"]) == made.values[1].tolist()
    assert numbers(columns["uncertainty_3"]) == made.sigma[2].tolist()
    _, columns = table(written(SERIES, "csv")[1])
    assert list(columns) == ["distance_angstrom", "value_1", "value_2", "value_3"]


def test_names_cannot_break_out_of_the_comments():
    _, content = written({**SERIES, "variable": "a\nb\r\n1,2", "variable_unit": "\u2028x"}, "csv")
    assert content.decode().splitlines()[0].startswith("# series along a b 1,2 ( x)")


def test_equal_remarks_are_told_once():
    head, _ = table(written(SERIES, "csv")[1])
    assert len(head) == len(set(head))
    assert "no termination window" in head


def refused(body, form, **limits):
    with pytest.raises(Problem) as caught:
        written(body, form, **limits)
    return caught.value


def test_forms_that_cannot_hold_it():
    assert refused(SIGMA, "npy").kind == "not-acceptable"
    assert refused(SLICES, "csv").kind == "not-acceptable"
    assert refused({**SERIES, "field": "gradient"}, "csv").kind == "not-acceptable"


@pytest.mark.parametrize(("body", "numbers"), [(SERIES, 51), (SIGMA, 102), (COMPLEX, 120)])
def test_text_is_limited_by_the_numbers_in_it(body, numbers):
    made, content = written(body, "json", max_json_values=numbers)
    assert content
    assert made.values.size * (1 + np.iscomplexobj(made.values) + (made.sigma is not None)) == numbers
    problem = refused(body, "json", max_json_values=numbers - 1)
    assert problem.kind == "too-costly"
    assert f"{numbers:,} numbers" in problem.detail
    assert written(body, "npz", max_json_values=1)


def test_what_no_form_holds_is_known_before():
    asked = request("series", SIGMA)
    require_form(None, asked, 51, Settings(max_json_values=10))
    require_form("npz", asked, 51, Settings(max_json_values=10))
    require_form("json", asked, 51, Settings(max_json_values=102))
    with pytest.raises(Problem, match="102 numbers"):
        require_form("csv", asked, 51, Settings(max_json_values=101))
    with pytest.raises(Problem, match="one array"):
        require_form("npy", asked, 51, Settings())
