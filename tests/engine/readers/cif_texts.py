"""Invented CIF texts in every spelling that is read."""

CELL = """\
_cell_length_a 5.4321(12)
_cell_length_b 6.5
_cell_length_c 7.25(3)
_cell_angle_alpha 90
_cell_angle_beta 101.5(2)
_cell_angle_gamma 90
"""

CORE = f"""\
data_invented
{CELL}
_cell_volume 250.85
_symmetry_space_group_name_H-M 'P 21/c'
_symmetry_space_group_name_Hall '-P 2ybc'
_symmetry_Int_Tables_number 14
_diffrn_radiation_wavelength 0.71073
_diffrn_radiation_type 'MoK\\a'
loop_
_symmetry_equiv_pos_as_xyz
 'x, y, z'
 '-x, y+1/2, -z+1/2'
 '-x, -y, -z'
 'x, -y+1/2, z+1/2'
loop_
_refln_index_h
_refln_index_k
_refln_index_l
_refln_F_squared_calc
_refln_F_squared_meas
_refln_F_squared_sigma
_refln_observed_status
 1 0 0  10.5  11.25 0.50 o
 0 2 0  20.0 -0.75  0.25 <
-1 2 3   3.0   ?     ?   x
"""

DDLM = f"""\
data_new_names
{CELL}
_space_group_name_H-M_alt 'P 1 21/c 1'
_space_group.IT_number 14
loop_
_space_group_symop.operation_xyz
x,y,z
-x,-y,-z
loop_
_refln.index_h
_refln.index_k
_refln.index_l
_refln.F_meas
_refln.F_meas_su
_refln.phase_calc
_refln.include_status
1 0 0 3.5 0.1 180.0 o
0 2 0 4.5 0.2 0.0 o
"""

MACROMOLECULAR = """\
data_r1abcsf
_cell.length_a 40.0
_cell.length_b 50.0
_cell.length_c 60.0
_cell.angle_alpha 90.0
_cell.angle_beta 90.0
_cell.angle_gamma 90.0
_cell.length_a_esd 0.04
_symmetry.space_group_name_H-M 'P 21 21 21'
_diffrn_radiation_wavelength.wavelength 0.9795
loop_
_refln.crystal_id
_refln.index_h
_refln.index_k
_refln.index_l
_refln.F_meas_au
_refln.F_meas_sigma_au
_refln.phase_meas
_refln.fom
_refln.status
_refln.pdbx_HL_A_iso
_refln.pdbx_HL_B_iso
_refln.pdbx_HL_C_iso
_refln.pdbx_HL_D_iso
1 0 0 4 120.5 1.5 45.0 0.9 o 1.0 2.0 3.0 4.0
1 0 0 6 220.5 2.5 ?    ?   f 0.5 0.0 0.0 0.0
1 0 1 1 ?     ?   ?    ?   - ?   ?   ?   ?
"""

INTENSITIES = f"""\
data_merged
{CELL}
loop_
_refln_index_h
_refln_index_k
_refln_index_l
_refln_intensity_meas
_refln_intensity_sigma
_refln_intensity_calc
2 0 0 100.5 2.0 99.0
"""

RAW = f"""\
data_raw
{CELL}
loop_
_diffrn_refln_index_h
_diffrn_refln_index_k
_diffrn_refln_index_l
_diffrn_refln_intensity_net
_diffrn_refln_intensity_u
1 0 0 1012.0 30.0
1 0 0  998.0 29.0
-1 0 0 -4.0 12.0
"""

COMPLEX_PARTS = f"""\
data_parts
{CELL}
loop_
_refln_index_h
_refln_index_k
_refln_index_l
_refln_A_meas
_refln_B_meas
_refln_A_calc
_refln_B_calc
1 1 0  3.0 4.0  3.1 4.2
1 1 1 -5.0 0.0 -5.5 0.1
"""


def loop(items: str, rows: str, head: str = "data_a\n") -> bytes:
    """A loop of REFLN: its item names without the category, and its values."""
    names = "\n".join(f"_refln_{item}" for item in items.split())
    return f"{head}loop_\n{names}\n{rows}\n".encode()
