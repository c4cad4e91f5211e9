"""Schemas of requests about films: what is wanted at least, and how the members of a run are completed."""

from __future__ import annotations

import dataclasses
import json
from pathlib import Path

import numpy as np
import pytest
from pydantic import ValidationError

from engine.films.scans import Scan
from engine.films.task import FilmTask
from service.schemas.films import SCAN_COLUMNS, FilmIn, FilmRunIn, FilmTaskIn, ScanIn
from tests.service.films.asked import FILM, RUN, SIMPLE, changed

MODELS = {"film": FilmIn, "film_run": FilmRunIn}


def test_a_scan_and_phases_are_enough():
    made = FilmIn.model_validate({"scan": {"q": [0.3]}, "phases": {}})
    assert made.samples == FilmTask.__dataclass_fields__["samples"].default
    assert made.table == "layers"
    for name in ("scan", "phases"):
        with pytest.raises(ValidationError, match=name):
            FilmIn.model_validate(changed(SIMPLE, **{name: ...}))


def test_defaults_are_the_engine_s():
    made = FilmIn.model_validate(SIMPLE)
    default = {one.name: one.default for one in dataclasses.fields(FilmTask)}
    for theirs, ours in (
        ("rule", made.amplitudes),
        ("negative", made.negative),
        ("keep_saturated", made.keep_saturated),
        ("rank", made.phases.use - 1),
        ("unit", made.unit),
        ("baseline", made.baseline),
        ("least_significance", made.least_significance),
        ("instrument_rule", made.instrument_rule),
        ("zero_shift", made.spacing.zero_shift),
        ("displacement", made.spacing.displacement),
    ):
        assert default[theirs] == ours, theirs


def test_a_scan_s_columns_are_those_of_the_engine():
    fields = set(ScanIn.model_fields)
    assert fields == set(SCAN_COLUMNS) | {"wavelength", "radiation", "period"}
    assert fields == set(Scan.of.__kwdefaults__)


@pytest.mark.parametrize("column", SCAN_COLUMNS)
def test_columns_are_arrays_of_numbers(column):
    for bad in (1.0, "1", [True], ["1"], {"0": 1.0}):
        with pytest.raises(ValidationError):
            ScanIn.model_validate({column: bad})
    np.testing.assert_array_equal(getattr(ScanIn.model_validate({column: [1, 2.5]}), column), [1, 2.5])


def test_unknown_orders_are_null():
    np.testing.assert_array_equal(ScanIn.model_validate({"order": [1, None]}).order, [1, np.nan])


def test_members_of_a_run_are_completed_by_the_shared_scan():
    body = changed(RUN, scan__radiation="neutron", scan__period=19.0, members__1__scan__period=20.0)
    made = FilmRunIn.model_validate(body)
    assert [one.scan.wavelength for one in made.members] == [RUN["scan"]["wavelength"]] * 2
    assert [one.scan.radiation for one in made.members] == ["neutron"] * 2
    assert [one.scan.period for one in made.members] == [19.0, 20.0]
    np.testing.assert_array_equal(made.members[1].scan.q or [], [])
    assert "wavelength" not in body["members"][0]["scan"]


@pytest.mark.parametrize(
    "body",
    [
        {**RUN, "members": []},
        {**RUN, "members": {}},
        {**RUN, "members": [3]},
        {**RUN, "members": [{"value": 1}]},
        {**RUN, "members": [{"value": 1, "scan": 4}]},
        {**RUN, "scan": 4},
        {**RUN, "scan": None},
        [RUN],
        None,
    ],
)
def test_runs_of_no_form_are_refused(body):
    with pytest.raises(ValidationError):
        FilmRunIn.model_validate(body)


@pytest.mark.parametrize("product", MODELS)
def test_products(product):
    model = MODELS[product]
    assert issubclass(model, FilmTaskIn)
    assert model.__doc__
    body = {"film": FILM, "film_run": RUN}[product]
    assert model.model_validate({**body, "product": product}).product == product
    with pytest.raises(ValidationError):
        model.model_validate({**body, "product": "layers"})


@pytest.mark.parametrize("product", MODELS)
def test_schemas_are_json(product):
    told = json.dumps(MODELS[product].model_json_schema())
    assert str(Path.cwd()) not in told
    assert '"from"' in told
