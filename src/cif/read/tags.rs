//! The tags the reader knows, in the spellings of the core dictionary, its dotted form, and older files.

/// Spellings of one item, the most usual first.
pub(super) type Spellings = &'static [&'static str];

pub(super) const CELL: [Spellings; 6] = [
    &["_cell_length_a", "_cell.length_a"],
    &["_cell_length_b", "_cell.length_b"],
    &["_cell_length_c", "_cell.length_c"],
    &["_cell_angle_alpha", "_cell.angle_alpha"],
    &["_cell_angle_beta", "_cell.angle_beta"],
    &["_cell_angle_gamma", "_cell.angle_gamma"],
];
pub(super) const CELL_VOLUME: Spellings = &["_cell_volume", "_cell.volume"];
pub(super) const FORMULA_UNITS: Spellings =
    &["_cell_formula_units_Z", "_cell.formula_units_Z", "_cell.Z_PDB"];
pub(super) const FORMULA_SUM: Spellings = &["_chemical_formula_sum", "_chemical_formula.sum"];

pub(super) const OPERATIONS: Spellings = &[
    "_space_group_symop_operation_xyz",
    "_symmetry_equiv_pos_as_xyz",
    "_space_group_symop.operation_xyz",
    "_symmetry_equiv.pos_as_xyz",
];
pub(super) const HALL: Spellings = &[
    "_space_group_name_Hall",
    "_symmetry_space_group_name_Hall",
    "_space_group.name_Hall",
    "_symmetry.space_group_name_Hall",
];
pub(super) const HERMANN_MAUGUIN: Spellings = &[
    "_space_group_name_H-M_alt",
    "_symmetry_space_group_name_H-M",
    "_space_group.name_H-M_alt",
    "_symmetry.space_group_name_H-M",
    "_space_group_name_H-M",
    "_space_group_name_H-M_full",
    "_space_group.name_H-M_full",
    "_space_group.name_H-M_ref",
    "_space_group_name_H-M_ref",
];
pub(super) const NUMBER: Spellings = &[
    "_space_group_IT_number",
    "_symmetry_Int_Tables_number",
    "_space_group.IT_number",
    "_symmetry.Int_Tables_number",
];
pub(super) const COORDINATE_SYSTEM: Spellings =
    &["_space_group_IT_coordinate_system_code", "_space_group.IT_coordinate_system_code"];

/// Columns of the atom sites, by the constants in [`site`].
pub(super) const SITE: [Spellings; 14] = [
    &["_atom_site_fract_x", "_atom_site.fract_x"],
    &["_atom_site_fract_y", "_atom_site.fract_y"],
    &["_atom_site_fract_z", "_atom_site.fract_z"],
    &["_atom_site_Cartn_x", "_atom_site.Cartn_x"],
    &["_atom_site_Cartn_y", "_atom_site.Cartn_y"],
    &["_atom_site_Cartn_z", "_atom_site.Cartn_z"],
    &["_atom_site_label", "_atom_site.label", "_atom_site.id"],
    &["_atom_site_type_symbol", "_atom_site.type_symbol"],
    &["_atom_site_occupancy", "_atom_site.occupancy"],
    &["_atom_site_calc_flag", "_atom_site.calc_flag"],
    &["_atom_site_attached_hydrogens", "_atom_site.attached_hydrogens"],
    &["_atom_site_disorder_group", "_atom_site.disorder_group"],
    &[
        "_atom_site_symmetry_multiplicity",
        "_atom_site_site_symmetry_multiplicity",
        "_atom_site.site_symmetry_multiplicity",
        "_atom_site.symmetry_multiplicity",
    ],
    &["_atom_site_disorder_assembly", "_atom_site.disorder_assembly"],
];

/// Numbers of the columns of [`SITE`].
pub(super) mod site {
    pub(in super::super) const FRACTIONAL: usize = 0;
    pub(in super::super) const CARTESIAN: usize = 3;
    pub(in super::super) const LABEL: usize = 6;
    pub(in super::super) const TYPE: usize = 7;
    pub(in super::super) const OCCUPANCY: usize = 8;
    pub(in super::super) const CALCULATED: usize = 9;
    pub(in super::super) const ATTACHED_HYDROGENS: usize = 10;
    pub(in super::super) const DISORDER_GROUP: usize = 11;
    pub(in super::super) const MULTIPLICITY: usize = 12;
    pub(in super::super) const DISORDER_ASSEMBLY: usize = 13;
}

pub(super) const ATOM_TYPE: [Spellings; 2] = [
    &["_atom_type_symbol", "_atom_type.symbol"],
    &["_atom_type_oxidation_number", "_atom_type.oxidation_number"],
];

/// Tags of a structure that is more than a crystal in three dimensions.
pub(super) const MODULATION_DIMENSION: Spellings =
    &["_cell_modulation_dimension", "_cell.modulation_dimension", "_cell_modulation.dimension"];
pub(super) const SUPERSPACE: Spellings = &[
    "_space_group_ssg_name",
    "_space_group_ssg_name_IT",
    "_space_group_ssg_name_WJJ",
    "_space_group.ssg_name",
    "_space_group_symop_ssg_operation_algebraic",
    "_space_group_symop_ssg.operation_algebraic",
    "_space_group_symop_magn_ssg_operation_algebraic",
    "_space_group_symop_magn_ssg_operation.algebraic",
];
pub(super) const MAGNETIC: Spellings = &[
    "_space_group_symop_magn_operation_xyz",
    "_space_group_symop_magn_operation.xyz",
    "_space_group_symop.magn_operation_xyz",
    "_space_group_magn_number_BNS",
    "_space_group_magn.number_BNS",
    "_space_group.magn_number_BNS",
    "_space_group_magn_name_BNS",
    "_space_group_magn.name_BNS",
];
pub(super) const MACROMOLECULE: Spellings =
    &["_atom_site.label_comp_id", "_atom_site.auth_asym_id", "_entity_poly.entity_id"];

/// Elements of the matrix and vector of `x_Cartesian = M x_fractional + v`.
pub(super) const CARTESIAN_MATRIX: [Spellings; 9] = [
    &["_atom_sites_Cartn_tran_matrix_11", "_atom_sites.Cartn_transf_matrix[1][1]"],
    &["_atom_sites_Cartn_tran_matrix_12", "_atom_sites.Cartn_transf_matrix[1][2]"],
    &["_atom_sites_Cartn_tran_matrix_13", "_atom_sites.Cartn_transf_matrix[1][3]"],
    &["_atom_sites_Cartn_tran_matrix_21", "_atom_sites.Cartn_transf_matrix[2][1]"],
    &["_atom_sites_Cartn_tran_matrix_22", "_atom_sites.Cartn_transf_matrix[2][2]"],
    &["_atom_sites_Cartn_tran_matrix_23", "_atom_sites.Cartn_transf_matrix[2][3]"],
    &["_atom_sites_Cartn_tran_matrix_31", "_atom_sites.Cartn_transf_matrix[3][1]"],
    &["_atom_sites_Cartn_tran_matrix_32", "_atom_sites.Cartn_transf_matrix[3][2]"],
    &["_atom_sites_Cartn_tran_matrix_33", "_atom_sites.Cartn_transf_matrix[3][3]"],
];
pub(super) const CARTESIAN_VECTOR: [Spellings; 3] = [
    &["_atom_sites_Cartn_tran_vector_1", "_atom_sites.Cartn_transf_vector[1]"],
    &["_atom_sites_Cartn_tran_vector_2", "_atom_sites.Cartn_transf_vector[2]"],
    &["_atom_sites_Cartn_tran_vector_3", "_atom_sites.Cartn_transf_vector[3]"],
];
