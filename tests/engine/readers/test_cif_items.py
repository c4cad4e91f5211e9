"""Reflections of CIF; every expected number stands in the text it is read from."""

import numpy as np
import pytest

from engine.errors import InputError
from engine.readers.cif_items import read_cif
from engine.readers.mapping import Status

from .cif_texts import CELL, COMPLEX_PARTS, CORE, DDLM, INTENSITIES, MACROMOLECULAR, RAW, loop


def equal(table, **columns):
    assert set(table.columns) == {"h", "k", "l", *columns}
    for name, expected in columns.items():
        np.testing.assert_array_equal(table.columns[name], expected, err_msg=name)


def test_core_dictionary():
    table = read_cif(CORE.encode(), source="a.cif")
    nan = np.nan
    equal(table, f_squared=[11.25, -0.75, nan], f_squared_sigma=[0.5, 0.25, nan], f_squared_calc=[10.5, 20, 3])
    np.testing.assert_array_equal(table.columns["h"], [1, 0, -1])
    np.testing.assert_array_equal(table.columns["l"], [0, 0, 3])
    np.testing.assert_array_equal(table.status, [Status.INCLUDED, Status.BELOW_CUTOFF, Status.UNRELIABLE])
    assert (table.kind, table.source, table.block, table.category) == ("cif", "a.cif", "invented", "refln")
    assert table.names["f_squared"] == "_refln_f_squared_meas"
    assert (table.rows_read, table.count, table.rejected, table.remarks) == (3, 3, (), ())
    assert table.lines is None
    assert table.crystal.symmetry.number == 14


def test_dotted_spelling():
    table = read_cif(DDLM.encode())
    equal(table, amplitude=[3.5, 4.5], amplitude_sigma=[0.1, 0.2], phase_calc_deg=[180, 0])
    np.testing.assert_array_equal(table.status, [1, 1])


def test_macromolecular_dictionary():
    table = read_cif(MACROMOLECULAR.encode())
    nan = np.nan
    equal(
        table,
        amplitude=[120.5, 220.5, nan],
        amplitude_sigma=[1.5, 2.5, nan],
        phase_deg=[45, nan, nan],
        merit=[0.9, nan, nan],
        hl_a=[1, 0.5, nan],
        hl_b=[2, 0, nan],
        hl_c=[3, 0, nan],
        hl_d=[4, 0, nan],
    )
    np.testing.assert_array_equal(table.status, [Status.INCLUDED, Status.SET_ASIDE, Status.ABSENT_BY_SYMMETRY])
    assert [(remark.kind, remark.items) for remark in table.remarks] == [("unread", ("_refln.crystal_id",))]


def test_intensities_raw_lists_and_parts():
    equal(read_cif(INTENSITIES.encode()), intensity=[100.5], intensity_sigma=[2], intensity_calc=[99])
    raw = read_cif(RAW.encode())
    equal(raw, intensity_net=[1012, 998, -4], intensity_net_sigma=[30, 29, 12])
    assert raw.category == "diffrn_refln"
    equal(read_cif(COMPLEX_PARTS.encode()), real=[3, -5], imag=[4, 0], real_calc=[3.1, -5.5], imag_calc=[4.2, 0.1])


def test_uncertainty_in_brackets():
    table = read_cif(loop("index_h index_k index_l F_meas", "1 0 0 12.3(4)\n2 0 0 5.0"))
    np.testing.assert_array_equal(table.columns["amplitude_sigma"], [0.4, np.nan])
    both = read_cif(loop("index_h index_k index_l F_meas F_sigma", "1 0 0 12.3(4) 0.7"))
    np.testing.assert_array_equal(both.columns["amplitude_sigma"], [0.7])
    assert any("brackets" in str(remark) for remark in both.remarks)


def test_a_single_reflection_need_not_be_looped():
    text = "data_a\n_refln_index_h 1\n_refln_index_k 2\n_refln_index_l 3\n_refln_F_meas 4.5\n"
    equal(read_cif(text.encode()), amplitude=[4.5])


def test_unknown_index_is_rejected_and_counted():
    table = read_cif(loop("index_h index_k index_l F_meas", "1 0 0 1\n? 0 0 2\n3 0 . 3\n4 0 0 4"))
    assert (table.rows_read, table.count) == (4, 2)
    ((reason, rows),) = [(part.reason, part.rows.tolist()) for part in table.rejected]
    assert (reason, rows) == ("an index is unknown", [1, 2])
    np.testing.assert_array_equal(table.row, [0, 3])
    np.testing.assert_array_equal(table.columns["amplitude"], [1, 4])


def test_a_column_without_any_value_is_absent():
    table = read_cif(loop("index_h index_k index_l F_meas phase_meas", "1 0 0 1 ?\n2 0 0 2 ."))
    equal(table, amplitude=[1, 2])
    assert any(remark.kind == "absent" and "_refln_phase_meas" in remark.items for remark in table.remarks)


def test_strange_status_is_remarked():
    table = read_cif(loop("index_h index_k index_l F_meas observed_status", "1 0 0 1 o\n2 0 0 1 9\n3 0 0 1 ?"))
    np.testing.assert_array_equal(table.status, [1, 0, 0])
    assert any("1 rows" in str(remark) and "'9'" in str(remark) for remark in table.remarks)


def test_block_is_chosen_by_name_or_by_having_reflections():
    structure = f"data_structure\n{CELL}_x 1\n"
    assert read_cif((structure + RAW).encode()).block == "raw"
    two = (structure + RAW + INTENSITIES).encode()
    with pytest.raises(InputError, match=r"2 data blocks have reflections\. choose the block, one of raw, merged"):
        read_cif(two)
    assert read_cif(two, block="Merged").block == "merged"
    assert read_cif(two, block="data_raw").block == "raw"
    with pytest.raises(InputError, match="has no reflections"):
        read_cif(two, block="structure")
    with pytest.raises(InputError, match="no data block 'other'"):
        read_cif(two, block="other")


def test_category_is_chosen_where_there_are_two():
    both = (RAW + INTENSITIES.replace("data_merged", "").replace(CELL, "")).encode()
    with pytest.raises(InputError, match="choose the category, one of refln, diffrn_refln"):
        read_cif(both)
    assert set(read_cif(both, category="refln").columns) > {"intensity"}
    assert set(read_cif(both, category="diffrn_refln").columns) > {"intensity_net"}
    with pytest.raises(InputError, match="no category 'refln'"):
        read_cif(RAW.encode(), category="refln")


@pytest.mark.parametrize(
    ("data", "reason"),
    [
        (f"data_a\n{CELL}".encode(), "no data block has reflections"),
        (loop("index_h index_k index_l F_meas", "1 0 0 abc"), "'abc' is not a number"),
        (loop("index_h index_k index_l F_meas", "1.5 0 0 1"), "not a whole number"),
        (loop("index_h index_k index_l F_meas", "1e9 0 0 1"), "lies beyond"),
        (loop("index_h index_k index_l F_meas", "? 0 0 1"), "no row has all its indices"),
        (loop("index_h index_k index_l F_meas F_sigma", "1 0 0 1 -1"), "is negative"),
        (loop("index_h index_k index_l F_meas", "1 0 0 -1"), "is negative"),
        (loop("index_h index_k index_l F_meas", "1 0 0 1e999"), "is infinite"),
        (loop("index_h index_k index_l F_meas fom", "1 0 0 1 1.5"), "lies outside"),
        (loop("index_h index_k index_l F_meas F_meas_au", "1 0 0 1 2"), "both give amplitude"),
        (loop("index_h index_k index_l F_meas", "1 0 0"), "3 values"),
        (
            loop("index_h index_k F_meas", "1 0 1") + loop("index_l F_sigma", "1 1\n2 2", head=""),
            "stand in several loops",
        ),
    ],
)
def test_what_is_refused(data, reason):
    with pytest.raises(InputError, match=reason) as caught:
        read_cif(data, source="broken.cif")
    assert caught.value.path[0] == "broken.cif"
