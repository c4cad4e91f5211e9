"""Cell, symmetry and radiation. Volumes by the triclinic formula, symbols from International Tables A."""

import importlib
import math

import numpy as np
import pytest

from engine.errors import InputError
from engine.readers.cif import read_document
from engine.readers.cif_crystal import read_crystal

from .cif_texts import CELL, CORE, DDLM, MACROMOLECULAR


def crystal_of(text):
    (block,), _ = read_document(text.encode())
    return read_crystal(block, "a.cif")


def kinds(remarks):
    return [(remark.kind, remark.items) for remark in remarks]


def test_core_dictionary():
    crystal, remarks = crystal_of(CORE)
    np.testing.assert_array_equal(crystal.cell, [5.4321, 6.5, 7.25, 90, 101.5, 90])
    np.testing.assert_array_equal(crystal.cell_sigma, [0.0012, np.nan, 0.03, np.nan, 0.2, np.nan])
    # Monoclinic volume: abc sin β.
    volume = 5.4321 * 6.5 * 7.25 * math.sin(math.radians(101.5))
    assert crystal.lattice.volume == pytest.approx(volume, rel=1e-12)
    assert crystal.symmetry.operations == ("x, y, z", "-x, y+1/2, -z+1/2", "-x, -y, -z", "x, -y+1/2, z+1/2")
    assert (crystal.symmetry.hall, crystal.symmetry.hermann_mauguin) == ("-P 2ybc", "P 21/c")
    assert crystal.symmetry.number == 14
    assert crystal.wavelength == 0.71073
    assert crystal.radiation == "MoK\\a"
    assert remarks == ()


def test_new_names():
    crystal, remarks = crystal_of(DDLM)
    assert crystal.symmetry.operations == ("x,y,z", "-x,-y,-z")
    assert (crystal.symmetry.hermann_mauguin, crystal.symmetry.number) == ("P 1 21/c 1", 14)
    assert remarks == ()


def test_macromolecular_names():
    crystal, remarks = crystal_of(MACROMOLECULAR)
    np.testing.assert_array_equal(crystal.cell, [40, 50, 60, 90, 90, 90])
    assert crystal.cell_sigma[0] == 0.04
    assert crystal.symmetry.hermann_mauguin == "P 21 21 21"
    assert crystal.wavelengths == (0.9795,)
    assert remarks == ()


def test_absent_items_are_named():
    crystal, remarks = crystal_of("data_a\n_cell_length_a 5\n_cell_length_b ?\n")
    assert crystal.lattice is None
    assert crystal.cell is None
    assert kinds(remarks)[0] == ("absent", ("_cell_length_b", "_cell_length_c"))
    assert remarks[1].kind == "absent"
    assert "space group" in str(remarks[1])


def test_absent_angles_are_the_dictionarys_default():
    crystal, remarks = crystal_of(
        "data_a\n_cell_length_a 4\n_cell_length_b 5\n_cell_length_c 6\n_cell_angle_beta 100\n"
    )
    np.testing.assert_array_equal(crystal.cell[3:], [90, 100, 90])
    assert kinds(remarks)[0] == ("default", ("_cell_angle_alpha", "_cell_angle_gamma"))


def test_an_unknown_angle_is_not_a_default():
    crystal, remarks = crystal_of("data_a\n_cell_length_a 4\n_cell_length_b 5\n_cell_length_c 6\n_cell_angle_beta ?\n")
    assert crystal.lattice is None
    assert kinds(remarks)[0] == ("absent", ("_cell_angle_beta",))


@pytest.mark.parametrize(
    ("volume", "told"), [("250.85", False), ("250.9(2)", False), ("253", False), ("260", True), ("502(300)", False)]
)
def test_volume_against_cell(volume, told):
    # abc sin β = 250.85 Å³, known by 0.03 in 7.25 Å to 0.4 %: 253 lies within four times that, 260 does not.
    _, remarks = crystal_of(
        f"data_a\n{CELL}_cell_volume {volume}\n_symmetry_Int_Tables_number 14\n".replace("(12)", "")
    )
    assert [remark.kind for remark in remarks] == (["contradictory"] if told else [])


def test_volume_that_the_cell_cannot_have():
    exact = CELL.replace("(12)", "").replace("(3)", "").replace("(2)", "")
    _, remarks = crystal_of(f"data_a\n{exact}_cell_volume 252\n_symmetry_Int_Tables_number 14\n")
    assert [(remark.kind, remark.items[0]) for remark in remarks] == [("contradictory", "_cell_volume")]
    assert "252" in str(remarks[0])
    assert "250.8" in str(remarks[0])


@pytest.mark.parametrize(
    ("items", "contradictory"),
    [
        ("_symmetry_space_group_name_H-M 'P 21/c'\n_symmetry_Int_Tables_number 14", False),
        ("_symmetry_space_group_name_H-M 'P 21/n'\n_symmetry_Int_Tables_number 14", False),
        ("_symmetry_space_group_name_H-M 'P 1 21/c 1'\n_symmetry_Int_Tables_number 14", False),
        ("_symmetry_space_group_name_H-M P21/c\n_symmetry_Int_Tables_number 15", True),
        ("_symmetry_space_group_name_H-M 'R -3 m :H'\n_symmetry_Int_Tables_number 166", False),
        ("_symmetry_space_group_name_H-M 'F d -3 m'\n_symmetry_Int_Tables_number 227", False),
        ("_symmetry_space_group_name_H-M 'F d -3 m'\n_symmetry_Int_Tables_number 225", True),
        ("_symmetry_space_group_name_Hall '-P 2ybc'\n_symmetry_Int_Tables_number 14", False),
        ("_symmetry_space_group_name_Hall '-P 2ybc'\n_symmetry_Int_Tables_number 4", True),
        ("_symmetry_space_group_name_Hall '-P 2ybc'\n_space_group_name_H-M_alt 'P -1'", True),
        ("_space_group_name_H-M_alt 'P 21/c'\n_space_group_IT_number 14\n_symmetry_Int_Tables_number 15", True),
        ("_symmetry_space_group_name_H-M 'Q 99'\n_symmetry_Int_Tables_number 14", False),
    ],
)
def test_symbol_against_number(items, contradictory):
    _, remarks = crystal_of(f"data_a\n{CELL}{items}\n")
    assert ("contradictory" in [remark.kind for remark in remarks]) == contradictory


def test_two_lists_of_operations_that_differ():
    text = "data_a\n_symmetry_Int_Tables_number 2\nloop_\n_symmetry_equiv_pos_as_xyz\nx,y,z\n-x,-y,-z\n"
    more = "loop_\n_space_group_symop_operation_xyz\n'x, y, z'\n{}\n"
    crystal, same = crystal_of(text + CELL + more.format("'-X, -Y, -Z'"))
    assert crystal.symmetry.operations == ("x, y, z", "-X, -Y, -Z")
    assert same == ()
    _, other = crystal_of(text + CELL + more.format("'-x, y, -z'"))
    assert kinds(other) == [("contradictory", ("_space_group_symop_operation_xyz", "_symmetry_equiv_pos_as_xyz"))]


def test_without_the_table_of_symbols_nothing_is_compared(monkeypatch):
    real = importlib.import_module

    def absent(name):
        if name == "engine.symmetry.tables":
            raise ImportError(name)
        return real(name)

    monkeypatch.setattr(importlib, "import_module", absent)
    text = f"data_a\n{CELL}_symmetry_space_group_name_H-M 'P -1'\n_symmetry_Int_Tables_number 14\n"
    _, remarks = crystal_of(text)
    assert [remark.kind for remark in remarks] == ["absent"]
    assert "not compared" in str(remarks[0])


def test_several_wavelengths():
    crystal, _ = crystal_of(f"data_a\n{CELL}loop_\n_diffrn_radiation_wavelength\n1.54056\n1.54439\n")
    assert crystal.wavelengths == (1.54056, 1.54439)
    assert crystal.wavelength is None


def test_probe_stands_for_an_unstated_type():
    assert crystal_of(f"data_a\n{CELL}_diffrn_radiation_probe neutron\n")[0].radiation == "neutron"


@pytest.mark.parametrize(
    ("item", "place"),
    [
        ("_cell_length_a long", "_cell_length_a"),
        ("_cell_length_a -5", "cell"),
        ("_cell_angle_beta 190", "cell"),
        ("_symmetry_Int_Tables_number 231", "_symmetry_int_tables_number"),
        ("_symmetry_Int_Tables_number P21", "_symmetry_int_tables_number"),
        ("_diffrn_radiation_wavelength 0", "_diffrn_radiation_wavelength"),
        ("_cell_volume big", "_cell_volume"),
    ],
)
def test_what_is_refused(item, place):
    name = item.split()[0]
    kept = "".join(line + "\n" for line in CELL.splitlines() if not line.startswith(name))
    with pytest.raises(InputError) as caught:
        crystal_of(f"data_a\n{kept}{item}\n")
    assert caught.value.path[:2] == ("a.cif", place)
