"""Columns that no set can be made from: every one is refused, with its column and its rows."""

from __future__ import annotations

import numpy as np
import pytest

from engine import Columns, assemble
from engine.arrays import MAX_INDEX
from tests.strategies import CRYSTAL, PLANAR, STACK, refusal_of

ORDERS = ((1, 2, 3),)
GOOD = {"amplitude": [1.0, 2.0, 3.0], "phase_deg": [0.0, 10.0, 20.0]}

REFUSED = [
    ("too few index columns", CRYSTAL, ((1, 2, 3),), GOOD, ("h",), ()),
    ("too many index columns", STACK, ((1, 2, 3), (0, 0, 0)), GOOD, ("l",), ()),
    ("index column short", PLANAR, ((1, 2, 3), (0, 1)), GOOD, ("k",), ()),
    ("indices not a column", STACK, ([[1, 2, 3]],), GOOD, ("l",), ()),
    ("indices ragged", STACK, ([1, [2, 3], 4],), GOOD, ("l",), ()),
    ("no rows", STACK, ((),), {"amplitude": []}, ("l",), ()),
    ("index not whole", CRYSTAL, ((1, 2, 3), (1, 1.5, 1), (0, 0, 0)), GOOD, ("k",), (1,)),
    ("index not finite", CRYSTAL, ((1, 2, np.nan), (1, 1, 1), (0, 0, 0)), GOOD, ("h",), (2,)),
    ("index infinite", STACK, ((np.inf, 2, 3),), GOOD, ("l",), (0,)),
    ("index too large", STACK, ((1, MAX_INDEX + 1, -MAX_INDEX - 1),), GOOD, ("l",), (1, 2)),
    ("index beyond whole numbers", STACK, ((1, 10**30, 3),), GOOD, ("l",), ()),
    ("index huge", STACK, ((1, 1e300, 3),), GOOD, ("l",), (1,)),
    ("index a word", STACK, (("1", "2", "3"),), GOOD, ("l",), ()),
    ("amplitude short", STACK, ORDERS, {**GOOD, "amplitude": [1.0, 2.0]}, ("amplitude",), ()),
    ("amplitude negative", STACK, ORDERS, {**GOOD, "amplitude": [1, -2, -3]}, ("amplitude",), (1, 2)),
    ("amplitude not finite", STACK, ORDERS, {**GOOD, "amplitude": [1, 2, np.nan]}, ("amplitude",), (2,)),
    ("amplitude infinite", STACK, ORDERS, {**GOOD, "amplitude": [np.inf, 2, 3]}, ("amplitude",), (0,)),
    ("amplitude complex", STACK, ORDERS, {**GOOD, "amplitude": [1j, 2, 3]}, ("amplitude",), ()),
    ("amplitude absent", STACK, ORDERS, {"phase_deg": [0.0, 1.0, 2.0]}, ("amplitude",), ()),
    ("no strengths", STACK, ORDERS, {}, ("amplitude",), ()),
    ("phase short", STACK, ORDERS, {**GOOD, "phase_deg": [0.0]}, ("phase_deg",), ()),
    ("phase infinite", STACK, ORDERS, {**GOOD, "phase_deg": [0, np.inf, 1]}, ("phase_deg",), (1,)),
    ("phase a table", STACK, ORDERS, {**GOOD, "phase_deg": [[0, 1, 2]]}, ("phase_deg",), ()),
    ("both forms", STACK, ORDERS, {**GOOD, "real": [1.0, 2.0, 3.0]}, ("amplitude",), ()),
    ("real alone", STACK, ORDERS, {"real": [1.0, 2.0, 3.0]}, ("imag",), ()),
    ("imag alone", STACK, ORDERS, {"imag": [1.0, 2.0, 3.0]}, ("real",), ()),
    ("real not finite", STACK, ORDERS, {"real": [1, np.nan, 3], "imag": [1, 2, 3]}, ("real",), (1,)),
    ("imag infinite", STACK, ORDERS, {"real": [1, 2, 3], "imag": [1, 2, -np.inf]}, ("imag",), (2,)),
    ("sigma negative", STACK, ORDERS, {**GOOD, "sigma": [0.1, -0.1, 0.1]}, ("sigma",), (1,)),
    ("sigma not finite", STACK, ORDERS, {**GOOD, "sigma": [0.1, 0.1, np.nan]}, ("sigma",), (2,)),
    ("sigma long", STACK, ORDERS, {**GOOD, "sigma": [0.1] * 4}, ("sigma",), ()),
    ("sigma ragged", STACK, ORDERS, {**GOOD, "sigma": [0.1, [0.1], 0.1]}, ("sigma",), ()),
    ("phase sigma negative", STACK, ORDERS, {**GOOD, "phase_sigma_deg": [1, 1, -1]}, ("phase_sigma_deg",), (2,)),
    ("phase sigma infinite", STACK, ORDERS, {**GOOD, "phase_sigma_deg": [1, np.inf, 1]}, ("phase_sigma_deg",), (1,)),
    ("merit above one", STACK, ORDERS, {**GOOD, "merit": [0.5, 1.01, 1]}, ("merit",), (1,)),
    ("merit below zero", STACK, ORDERS, {**GOOD, "merit": [-0.01, 0, 1]}, ("merit",), (0,)),
    ("merit not finite", STACK, ORDERS, {**GOOD, "merit": [0.5, 0.5, np.nan]}, ("merit",), (2,)),
]


@pytest.mark.parametrize("case", REFUSED, ids=[case[0] for case in REFUSED])
def test_refused_with_column_and_rows(case):
    _, lattice, indices, columns, path, rows = case
    refusal = refusal_of(lambda: assemble(lattice, Columns(indices=indices, **columns), values="density_coefficient"))
    assert refusal.path == path
    assert refusal.rows == rows


def test_the_bound_of_an_index_is_itself_allowed():
    columns = Columns(indices=((MAX_INDEX, -MAX_INDEX + 1),), amplitude=[1.0, 1.0], phase_deg=[0.0, 0.0])
    made = assemble(STACK, columns, values="density_coefficient")
    np.testing.assert_array_equal(made.indices[:, 0], [MAX_INDEX - 1, MAX_INDEX])


@pytest.mark.parametrize(
    ("options", "path"),
    [
        ({"values": "structure_factors"}, ("values",)),
        ({"values": "density_coefficient", "density": "imaginary"}, ("density",)),
        ({"values": "density_coefficient", "missing_phase": "zero"}, ("missing_phase",)),
    ],
    ids=["values", "density", "missing_phase"],
)
def test_an_unknown_word_is_not_taken_for_another(options, path):
    columns = Columns(indices=((1, 2, 3),), **GOOD)
    assert refusal_of(lambda: assemble(STACK, columns, **options)).path == path
