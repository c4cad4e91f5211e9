from __future__ import annotations

import io
import json
import zipfile

import numpy as np
import pytest

from engine import Demand, Treatment, evaluate, prepare, sampling
from service.encoders.write import Wanted, write
from service.spool import Spool
from tests.service import bodies

CRYSTAL = bodies.coefficients(bodies.CRYSTAL)
ABSORBING = bodies.coefficients(bodies.ABSORBING)
FILM = bodies.coefficients(bodies.FILM)
CELL = sampling.full_cell(CRYSTAL.lattice, (4, 5, 6))


def written(form, coefficients=CRYSTAL, where=CELL, treatment=None, demand=None, product="grid"):
    work = prepare(coefficients, where, treatment, demand)
    with Spool.unnamed() as spool:
        made = write(Wanted(product=product), work, form, spool).field
        return made, bytes(spool.view())


@pytest.mark.parametrize("precision", ["single", "double"])
@pytest.mark.parametrize("coefficients", [CRYSTAL, ABSORBING])
@pytest.mark.parametrize("field", ["density", "gradient", "gradient_magnitude"])
def test_npy_is_computed_where_it_is_read(coefficients, precision, field):
    treatment, demand = Treatment(field=field), Demand(precision=precision)
    made, content = written("npy", coefficients, treatment=treatment, demand=demand)
    loaded = np.load(io.BytesIO(content), allow_pickle=False)
    assert loaded.dtype == made.values.dtype
    np.testing.assert_array_equal(loaded, evaluate(coefficients, CELL, treatment, demand).values)
    # The values of a mapped file lie aligned.
    assert (len(content) - loaded.nbytes) % 64 == 0


def test_npz_is_an_archive_like_any_other():
    made, content = written("npz")
    with zipfile.ZipFile(io.BytesIO(content)) as archive:
        assert archive.testzip() is None
        assert set(archive.namelist()) == {f"{n}.npy" for n in ("values", "axis_1", "axis_2", "axis_3", "metadata")}
        assert {member.compress_type for member in archive.infolist()} == {zipfile.ZIP_STORED}
    with np.load(io.BytesIO(content), allow_pickle=False) as loaded:
        np.testing.assert_array_equal(loaded["values"], made.values)
        np.testing.assert_allclose(loaded["axis_3"], np.arange(6) * 7.3 / 6)
        assert json.loads(str(loaded["metadata"]))["unit"] == "e/Å³"


def test_json_keeps_every_digit():
    made, content = written("json")
    np.testing.assert_array_equal(json.loads(content)["values"], made.values)
    made, content = written("json", demand=Demand(precision="single"))
    np.testing.assert_array_equal(np.array(json.loads(content)["values"], dtype=np.float32), made.values)
    # The shortest digits that read back: eight or nine are enough for single precision.
    assert len(content) < len(written("json")[1])


def test_complex_values_in_json_have_two_arrays():
    made, content = written("json", ABSORBING)
    values = json.loads(content)["values"]
    np.testing.assert_array_equal(np.array(values["real"]) + 1j * np.array(values["imag"]), made.values)


def test_csv_tells_what_it_holds():
    made, content = written("csv", FILM, sampling.line(FILM.lattice, [0], [1], 5), product="profile")
    lines = content.decode().splitlines()
    assert lines[0] == "# field: density; quantity: value; unit: e/Å³"
    head = [line for line in lines if line.startswith("#")]
    assert any("sign convention" in line for line in head)
    assert any("no termination window" in line for line in head)
    assert lines[len(head)] == "distance_angstrom,value"
    assert content.endswith(b"\n")
    np.testing.assert_array_equal(
        np.loadtxt(io.BytesIO(content), delimiter=",", skiprows=len(head) + 1)[:, 1], made.values
    )


def test_unit_cannot_break_out_of_the_comments():
    given = bodies.coefficients({**bodies.FILM, "unit": "e\nvalue,1\r\n\u2028x"})
    _, content = written("csv", given, sampling.points(given.lattice, [[0.25]]), product="points")
    lines = content.decode().splitlines()
    assert [line.split(",")[0] for line in lines if not line.startswith("#")] == ["x_3", "0.25"]


def test_progress_is_passed_on():
    told = []
    with Spool.unnamed() as spool:
        write(
            Wanted(product="grid"),
            prepare(CRYSTAL, CELL),
            "json",
            spool,
            lambda done, total: told.append((done, total)),
        )
    assert told[-1] == (4, 4)
