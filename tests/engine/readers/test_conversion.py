"""Choosing what a table's strengths are; the arithmetic is moduli and arguments of complex numbers."""

import cmath
import math

import numpy as np
import pytest

from engine.assembly import assemble
from engine.errors import InputError
from engine.lattice import Lattice
from engine.readers.cif_items import read_cif
from engine.readers.conversion import to_columns, to_reflections
from engine.readers.mapping import Status
from engine.readers.table import make_table

from .cif_texts import COMPLEX_PARTS, CORE, DDLM, MACROMOLECULAR, RAW

CUBIC = Lattice.from_parameters(5, 6, 7, 90, 90, 90)
NAN = np.nan


def table_of(**columns):
    arrays = {name: np.array(column, dtype=np.float64) for name, column in columns.items()}
    return make_table(arrays, {name: name for name in arrays}, kind="npz")


HKL = {"h": [1, 2, 3], "k": [0, 0, 1], "l": [0, 1, 0]}


def test_the_one_measured_quantity_is_taken():
    reflections, left = to_reflections(read_cif(CORE.encode()))
    assert (reflections.quantity, reflections.scale) == ("intensity", "arbitrary")
    np.testing.assert_array_equal(reflections.indices, [[1, 0, 0], [0, 2, 0]])
    np.testing.assert_array_equal(reflections.observed, [11.25, -0.75])
    np.testing.assert_array_equal(reflections.sigma, [0.5, 0.25])
    assert reflections.phase is None
    assert [(part.reason, part.rows.tolist()) for part in left] == [("f_squared is unknown", [2])]
    assert reflections.lattice.lengths[0] == pytest.approx(5.4321)
    assert reflections.indices.dtype == np.int64


def test_raw_measurements_and_phases():
    raw, _ = to_reflections(read_cif(RAW.encode()))
    assert raw.quantity == "intensity"
    np.testing.assert_array_equal(raw.observed, [1012, 998, -4])
    dotted, _ = to_reflections(read_cif(DDLM.encode()), scale="absolute")
    np.testing.assert_allclose(dotted.phase, [math.pi, 0], rtol=1e-15)
    assert (dotted.quantity, dotted.scale) == ("amplitude", "absolute")
    none, _ = to_reflections(read_cif(DDLM.encode()), phase="none")
    assert none.phase is None


def test_phases_merits_and_rows_of_a_macromolecule():
    reflections, left = to_reflections(read_cif(MACROMOLECULAR.encode()))
    np.testing.assert_array_equal(reflections.phase, [math.pi / 4, NAN])
    np.testing.assert_array_equal(reflections.merit, [0.9, NAN])
    np.testing.assert_array_equal(reflections.row, [0, 1])
    assert [part.count for part in left] == [1]
    omitted, left = to_reflections(read_cif(MACROMOLECULAR.encode()), omit=[Status.SET_ASIDE])
    np.testing.assert_array_equal(omitted.row, [0])
    assert [(part.reason, part.rows.tolist()) for part in left] == [
        ("status set_aside", [1]),
        ("amplitude is unknown", [2]),
    ]


def test_real_and_imaginary_parts():
    reflections, _ = to_reflections(read_cif(COMPLEX_PARTS.encode()))
    expected = [3 + 4j, -5 + 0j]
    # Modulus and argument to the last digit but one.
    np.testing.assert_allclose(reflections.observed, [abs(value) for value in expected], rtol=4e-16)
    np.testing.assert_allclose(reflections.phase, [cmath.phase(value) for value in expected], rtol=4e-16)
    calculated, _ = to_reflections(read_cif(COMPLEX_PARTS.encode()), observed="real_calc", phase="none")
    np.testing.assert_allclose(calculated.observed, [abs(3.1 + 4.2j), abs(-5.5 + 0.1j)], rtol=4e-16)
    assert calculated.phase is None
    columns, _ = to_columns(read_cif(COMPLEX_PARTS.encode()))
    np.testing.assert_array_equal(columns.real, [3, -5])
    np.testing.assert_array_equal(columns.imag, [4, 0])
    assert columns.amplitude is None


def test_columns_make_a_set():
    table = table_of(
        **HKL, amplitude=[10, 20, 30], phase_deg=[0, 90, NAN], merit=[1, 0.5, NAN], phase_sigma_deg=[1, 2, NAN]
    )
    columns, left = to_columns(table)
    assert left == ()
    np.testing.assert_array_equal(columns.merit, [1, 0.5, 0])
    # Variance of a uniform distribution over an interval of length a: a²/12.
    np.testing.assert_allclose(columns.phase_sigma_deg, [1, 2, 360 / math.sqrt(12)], rtol=1e-15)
    made = assemble(CUBIC, columns, values="structure_factor")
    assert (made.count, made.unphased) == (3, 1)


@pytest.mark.parametrize("name", ["merit", "phase_sigma_deg"])
def test_a_phase_without_its_weight_is_refused(name):
    table = table_of(**HKL, amplitude=[1, 2, 3], phase_deg=[0, 90, 180], **{name: [1, NAN, 1]})
    with pytest.raises(InputError, match="is unknown in a row that has a phase") as caught:
        to_columns(table)
    assert caught.value.rows == (1,)


def test_rows_without_uncertainty():
    table = table_of(**HKL, intensity=[1, NAN, 3], intensity_sigma=[0.1, NAN, NAN])
    with pytest.raises(InputError, match="is unknown in some rows") as caught:
        to_reflections(table, lattice=CUBIC)
    # Row 1 has no intensity either and needs no uncertainty.
    assert caught.value.rows == (2,)
    some, left = to_reflections(table, lattice=CUBIC, missing_sigma="omit_rows")
    np.testing.assert_array_equal(some.row, [0])
    assert [part.reason for part in left] == ["intensity is unknown", "intensity_sigma is unknown"]
    bare, left = to_reflections(table, lattice=CUBIC, missing_sigma="without")
    assert bare.sigma is None
    np.testing.assert_array_equal(bare.row, [0, 2])
    whole, _ = to_reflections(
        table_of(**HKL, intensity=[1, 2, 3], intensity_sigma=[1, 1, 1]), lattice=CUBIC, missing_sigma="without"
    )
    np.testing.assert_array_equal(whole.sigma, [1, 1, 1])
    empty, _ = to_reflections(table_of(**HKL, intensity=[1, 2, 3], intensity_sigma=[NAN] * 3), lattice=CUBIC)
    assert empty.sigma is None


def test_other_dimensions():
    stack, _ = to_reflections(table_of(l=[1, 2], intensity=[5, 6]), lattice=Lattice.from_period(60))
    np.testing.assert_array_equal(stack.indices, [[1], [2]])
    planar, _ = to_reflections(
        table_of(h=[1, 2], k=[0, 1], amplitude=[5, 6]), lattice=Lattice.from_planar_parameters(4, 5, 90)
    )
    np.testing.assert_array_equal(planar.indices, [[1, 0], [2, 1]])


STRENGTHS = {"amplitude": [1, 2, 3], "intensity": [1, 4, 9], "f_calc": [1, 2, 3]}


@pytest.mark.parametrize(
    ("columns", "options", "reason"),
    [
        (STRENGTHS, {}, "several measured quantities. choose one of amplitude, intensity, f_calc"),
        ({"f_calc": [1, 2, 3]}, {}, "calculated quantities only. choose one of f_calc"),
        ({"q": [1, 2, 3]}, {}, "no measured strengths"),
        ({"q": [1, 2, 3]}, {"observed": "amplitude"}, "is not among the strengths"),
        (STRENGTHS, {"observed": "f_squared"}, "'f_squared' is not among the strengths"),
        ({"real": [1, 2, 3]}, {}, "real stands without imag"),
        (
            {"amplitude": [1, 2, 3], "phase_deg": [0] * 3, "phase_calc_deg": [0] * 3},
            {},
            "phase_deg, phase_calc_deg, none",
        ),
        ({"amplitude": [1, 2, 3], "phase_deg": [0] * 3}, {"phase": "phase_calc_deg"}, "choose one of phase_deg, none"),
        ({"real": [1, 2, 3], "imag": [0] * 3}, {"phase": "phase_deg"}, "is given by real already"),
        ({"amplitude": [1, 2, 3]}, {"omit": [Status.UNRELIABLE]}, "names statuses, and the table has none"),
        ({"amplitude": [NAN] * 3}, {}, "no row is left .amplitude is unknown: 3."),
        ({"amplitude": [1, 2, 3]}, {"scale": "odd"}, "is not a known word"),
        ({"amplitude": [1, 2, 3]}, {"missing_sigma": "odd"}, "is not a known word"),
        ({"amplitude": [1, 2, 3]}, {"lattice": None}, "gives no complete cell"),
        ({"amplitude": [1, 2, 3]}, {"lattice": Lattice.from_period(5)}, "the table has the indices h, k, l"),
    ],
)
def test_what_is_refused_as_reflections(columns, options, reason):
    with pytest.raises(InputError, match=reason):
        to_reflections(table_of(**HKL, **columns), **{"lattice": CUBIC, **options})


@pytest.mark.parametrize(
    ("columns", "options", "reason"),
    [
        ({"amplitude": [1, 2, 3]}, {}, "there are no phases"),
        ({"amplitude": [1, 2, 3], "phase_deg": [0] * 3}, {"phase": "none"}, "there are no phases"),
        ({"real": [1, 2, 3], "imag": [0] * 3}, {"phase": "none"}, "there are no phases"),
        ({"intensity": [1, 2, 3], "phase_deg": [0] * 3}, {}, "no measured strengths"),
        ({"intensity": [1, 2, 3], "phase_deg": [0] * 3}, {"strength": "intensity"}, "is not among the strengths"),
        ({"amplitude": [1, 2, 3], "phase_deg": [0] * 3}, {"missing_sigma": "odd"}, "is not a known word"),
    ],
)
def test_what_is_refused_as_columns(columns, options, reason):
    with pytest.raises(InputError, match=reason):
        to_columns(table_of(**HKL, **columns), **options)
