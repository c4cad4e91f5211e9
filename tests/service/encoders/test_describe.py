from __future__ import annotations

import json

import numpy as np
import pytest

from engine import Treatment, evaluate, sampling
from service.encoders.describe import SIGN_CONVENTION, Shown, columns, describe
from service.schemas.answers import Answer
from tests.service import bodies

FILM = bodies.coefficients(bodies.FILM)
SHEET = bodies.coefficients(bodies.SHEET)
CRYSTAL = bodies.coefficients(bodies.CRYSTAL)
ABSORBING = bodies.coefficients(bodies.ABSORBING)


def shown(coefficients, made, product="grid", field="density"):
    return Shown(product=product, kind=field, quantity="value", coefficients=coefficients, field=made)


def described(coefficients, where, product="grid", field="density"):
    made = evaluate(coefficients, where, Treatment(field=field))
    return made, describe(shown(coefficients, made, product, field))


def test_everything_is_plain_data_and_as_described_to_clients():
    where = sampling.box(CRYSTAL.lattice, [0.1, 0, 0], np.eye(3) / 2, (2, 3, 4))
    made, told = described(CRYSTAL, where)
    assert json.loads(json.dumps(told)) == told
    Answer.model_validate({"values": None, "uncertainty": None, "unmeasured": None, **told}, strict=True)
    assert set(Answer.model_fields) == {"values", "uncertainty", "unmeasured", *told}
    assert told["shape"] == [2, 3, 4]
    assert [axis["label"] for axis in told["axes"]] == ["edge_1", "edge_2", "edge_3"]
    assert told["axes"][0]["step"] == pytest.approx(5.1 / 2 / 2)
    assert told["axes"][0]["direction"] == [1, 0, 0]
    assert told["origin"]["cartesian"] == pytest.approx([0.51, 0, 0])
    assert told["summary"]["sign_convention"] == SIGN_CONVENTION
    assert told["summary"]["coefficients"]["summed"] == 2 * 40 + 1
    assert told["notes"] == list(made.notes)


def test_mean_of_complex_values_has_two_parts():
    where = sampling.full_cell(ABSORBING.lattice, (9, 10, 11))
    _, told = described(ABSORBING, where)
    volume = ABSORBING.lattice.volume
    assert told["summary"]["mean"] == pytest.approx({"real": 3 / volume, "imag": -0.25 / volume})
    assert told["summary"]["minimum"] >= 0


def test_free_points_have_neither_axes_nor_origin():
    _, told = described(SHEET, sampling.points(SHEET.lattice, [[0, 0]]), "points")
    assert told["axes"] == []
    assert told["origin"] is None


def test_components_are_named():
    _, told = described(SHEET, sampling.full_cell(SHEET.lattice, (4, 5)), field="gradient")
    assert told["components"] == ["x", "y"]
    assert told["shape"] == [4, 5, 2]


@pytest.mark.parametrize(
    ("coefficients", "where", "field", "names"),
    [
        (FILM, sampling.line(FILM.lattice, [0], [1], 4), "density", ["distance_angstrom", "value"]),
        (FILM, sampling.points(FILM.lattice, [[0.5]]), "density", ["x_3", "value"]),
        (SHEET, sampling.points(SHEET.lattice, [[0.5, 0]]), "gradient", ["x_1", "x_2", "value_x", "value_y"]),
        (
            ABSORBING,
            sampling.points(ABSORBING.lattice, [[0, 0, 0]]),
            "density",
            ["x_1", "x_2", "x_3", "value_real", "value_imag"],
        ),
    ],
)
def test_columns(coefficients, where, field, names):
    made = evaluate(coefficients, where, Treatment(field=field))
    found = columns(shown(coefficients, made))
    assert [name for name, _ in found] == names
    assert {column.shape for _, column in found} == {where.shape}
