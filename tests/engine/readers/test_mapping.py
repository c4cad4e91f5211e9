"""Column names to quantities; data names are those of the core and macromolecular CIF dictionaries."""

import pytest

from engine.errors import InputError
from engine.readers.mapping import CATEGORIES, QUANTITIES, STATUS_LETTERS, Status, dictionary_item, resolve


def test_every_item_is_of_a_known_quantity():
    for items in CATEGORIES.values():
        assert set(items.values()) <= set(QUANTITIES)
        assert all(name == name.lower() for name in items)


def test_letters_are_those_of_the_dictionaries():
    # _refln.include_status (core) has o < - x h l; _refln.status (macromolecular) adds f.
    assert "".join(sorted(STATUS_LETTERS)) == "-<fhlox"
    assert set(STATUS_LETTERS.values()) == set(Status) - {Status.UNSTATED}


def test_own_names_stand_for_themselves_in_any_case():
    assert resolve(list(QUANTITIES)) == tuple(QUANTITIES)
    assert resolve(["H", "K", "L", "Amplitude"]) == ("h", "k", "l", "amplitude")
    assert resolve(["order", "q"]) == ("l", "q")


@pytest.mark.parametrize(
    ("name", "category", "quantity"),
    [
        ("_refln_index_h", "refln", "h"),
        ("_refln.index_h", "refln", "h"),
        ("_refln_F_squared_sigma", "refln", "f_squared_sigma"),
        ("_refln.F_squared_meas_su", "refln", "f_squared_sigma"),
        ("_refln.F_meas_sigma_au", "refln", "amplitude_sigma"),
        ("_refln_sint/lambda", "refln", "sin_theta_over_lambda"),
        ("_refln.pdbx_HL_C_iso", "refln", "hl_c"),
        ("_diffrn_refln_intensity_net", "diffrn_refln", "intensity_net"),
        ("_diffrn_refln.intensity_net_su", "diffrn_refln", "intensity_net_sigma"),
        ("_refln_observed_status", "refln", "status"),
    ],
)
def test_dictionary_names(name, category, quantity):
    assert dictionary_item(name) == (category, quantity)
    assert resolve([name]) == (quantity,)


@pytest.mark.parametrize(
    "name", ["_reflns_number_total", "_refln", "_refln_", "index_h", "_diffrn_refln_F_meas", "_cell_length_a"]
)
def test_other_names_are_not_of_a_reflection(name):
    assert dictionary_item(name) is None


@pytest.mark.parametrize(
    ("names", "owner"),
    [
        (["amplitude", "sigma"], "amplitude_sigma"),
        (["sigma", "intensity"], "intensity_sigma"),
        (["real", "imag", "sigma"], "amplitude_sigma"),
        (["f_squared", "f_calc", "sigma"], "f_squared_sigma"),
    ],
)
def test_sigma_belongs_to_the_one_measured_quantity(names, owner):
    assert resolve(names)[names.index("sigma")] == owner


def test_explicit_mapping_goes_first():
    names = ["h", "k", "l", "I", "remark", "intensity"]
    mapping = {"I": "intensity_net", "remark": "ignore"}
    assert resolve(names, mapping) == ("h", "k", "l", "intensity_net", None, "intensity")
    assert resolve(["h", "x", "y"], {"*": "ignore"}) == ("h", None, None)
    assert resolve(["l", "order"], {"l": "ignore"}) == (None, "l")


@pytest.mark.parametrize(
    ("names", "mapping", "reason"),
    [
        (["h", "flux", "n"], None, "what the columns 'flux', 'n' are"),
        (["h", "H"], None, "the columns 'h', 'H' are both h"),
        (["l", "order"], None, "are both l"),
        (["_refln_F_meas", "amplitude"], None, "are both amplitude"),
        (["amplitude", "sigma", "amplitude_sigma"], None, "are both amplitude_sigma"),
        (["amplitude", "intensity", "sigma"], None, "'sigma' could belong to amplitude, intensity"),
        (["h", "sigma"], None, "'sigma' could belong to no measured quantity"),
        (["h"], {"x": "k"}, "names the column 'x', which the file has not"),
        (["x"], {"x": "colour"}, "'colour', which is not a quantity"),
        (["x"], {"*": "h"}, "takes all other columns to 'h'"),
        ([f"c{place}" for place in range(25)], None, "and 5 more"),
    ],
)
def test_what_is_refused(names, mapping, reason):
    with pytest.raises(InputError, match=reason) as caught:
        resolve(names, mapping, where=("a.csv", "line 1"))
    assert caught.value.path == ("a.csv", "line 1")
