from __future__ import annotations

import csv
import io
import json

import numpy as np
import pytest

from service.analyses.report import Report
from service.encoders.report import report_csv, report_json, report_value
from service.schemas.reports import REPORTS
from tests.service import bodies
from tests.service.analyses import asked


def made(table=(), told=("x",), **members):
    return Report(document={}, table=tuple(table), told=told, **members)


def rows(content):
    lines = [line for line in content.decode().splitlines() if not line.startswith("#")]
    return list(csv.reader(io.StringIO("\n".join(lines))))


def test_json_writes_arrays_of_any_order_and_no_number_that_is_none():
    columns = np.asfortranarray(np.arange(6.0).reshape(2, 3))
    document = {"a": columns, "b": np.nan, "c": np.float64(np.inf), "d": np.array([1.0, np.nan]), "e": np.int64(3)}
    content = report_json(Report(document=document, table=(), told=()))
    assert json.loads(content) == {"a": columns.tolist(), "b": None, "c": None, "d": [1.0, None], "e": 3}


def test_json_refuses_what_is_no_data():
    with pytest.raises(TypeError):
        report_json(Report(document={"a": object()}, table=(), told=()))


def test_csv_leaves_empty_what_does_not_exist():
    table = [("a", np.array([1.5, np.nan, np.inf])), ("b", [None, 2, True]), ("c", ["x", None, "y"])]
    assert rows(report_csv(made(table))) == [["a", "b", "c"], ["1.5", "", "x"], ["", "2", ""], ["", "True", "y"]]


def test_csv_keeps_every_digit():
    values = np.random.default_rng(1).normal(size=20) * 10.0 ** np.arange(-10, 10)
    assert [float(row[0]) for row in rows(report_csv(made([("a", values)])))[1:]] == values.tolist()


@pytest.mark.parametrize("label", ["=1+1", "+1", "-1", "@x", "=cmd|' /c'!A0"])
def test_labels_start_no_formula(label):
    assert rows(report_csv(made([("label", [label])])))[1][0] == f"'{label}"


@pytest.mark.parametrize("label", ["a,b", 'say "a"', "a\nb", "a\r\nb\u2028c", "\t=1"])
def test_labels_stay_in_their_cell(label):
    content = report_csv(made([("label", [label]), ("n", [1])]))
    assert len(content.decode().splitlines()) == 3
    assert rows(content)[1] == [" ".join(label.split()), "1"] or label.startswith("\t")


def test_comment_lines():
    content = report_csv(made(told=("one\ntwo", "three"), figures={"k": 1.25, "n": None, "shape": (2, 3), "s": "word"}))
    assert content.decode().splitlines()[:6] == [
        "# one two",
        "# three",
        "# k: 1.25",
        "# n: null",
        "# shape: [2,3]",
        "# s: word",
    ]


def test_figures_are_json():
    assert [report_value(value) for value in (np.float64(0.1), float("nan"), 3, True)] == ["0.1", "null", "3", "true"]


def finite(value):
    if isinstance(value, dict):
        return all(finite(one) for one in value.values())
    if isinstance(value, list):
        return all(map(finite, value))
    return not isinstance(value, float) or np.isfinite(value)


def same(model, document):
    """A model of an answer, made strictly, holds all of it and nothing else."""
    return model.model_validate(document, strict=True).model_dump() == document


CASES = [
    *((product, body) for product, body in asked.GOOD.items()),
    *((product, bodies.without(body, "set/sigma")) for product, body in asked.GOOD.items()),
    ("extrema", {"set": asked.FILM, "kinds": ["minimum"]}),
    ("extrema", {"set": asked.FEW, "least_value": 1e9}),
    ("extrema", {"set": asked.FEW, "region": {"centre": [0, 0, 0], "radius": 4.0}}),
    ("layers", {"set": asked.FILM, "from": [0.1], "to": [0.3]}),
    ("layers", {"set": asked.FILM, "from": [0], "to": [0.01]}),
    ("layers", {"set": {**asked.FILM, "amplitude": [0.0] * 4, "mean": 1.0}, "along": [1]}),
    ("statistics", {"set": asked.FILM, "field": "autocorrelation"}),
    ("statistics", {"set": {**asked.FILM, "amplitude": [0.0] * 4, "mean": 1.0}}),
    ("windows", {"set": bodies.ABSORBING}),
    ("windows", {"set": bodies.SHEET, "windows": [{"kind": "gaussian", "b": 50.0}]}),
    ("compare", {"set": asked.FILM, "with": {**asked.FILM, "l": [5, 6, 7, 8]}}),
    ("compare", {"set": asked.FILM, "with": {**asked.FILM, "amplitude": [0.0] * 4, "mean": 0.0}}),
    ("integrals", {"set": {**asked.FILM, "unit": "10⁻⁶ Å⁻²"}, "regions": [{"kind": "slab", "from": 0, "to": 1}]}),
]


@pytest.mark.parametrize(("product", "body"), CASES)
def test_answers_are_as_documented(product, body):
    document = json.loads(asked.answered(product, body))
    assert same(REPORTS[product], document)
    assert finite(document)
    head, columns = asked.table(asked.answered(product, body, "csv"))
    assert head[0].startswith(f"{product}; unit: ")
    assert not any("nan" in cell or "None" in cell for column in columns.values() for cell in column)
