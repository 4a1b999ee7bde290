//! The list of all diagnostic codes: one row each, with cause and remedy. The manual page is made from this table.

use serde::{Serialize, Serializer};
use std::fmt;

macro_rules! codes {
    ($($variant:ident = $code:literal, $cause:literal, $remedy:literal;)*) => {
        /// A stable name for a kind of finding, such as `cell-001`. A code is never given a new meaning.
        #[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
        pub enum Code {
            $(#[doc = concat!("`", $code, "`: ", $cause, ".")] $variant,)*
        }

        impl Code {
            /// Every code, in the order of the table.
            pub const ALL: &'static [Self] = &[$(Self::$variant),*];

            /// The code as printed.
            #[must_use]
            pub fn as_str(self) -> &'static str {
                match self { $(Self::$variant => $code,)* }
            }

            /// What makes this finding appear.
            #[must_use]
            pub fn cause(self) -> &'static str {
                match self { $(Self::$variant => $cause,)* }
            }

            /// What to do about it.
            #[must_use]
            pub fn remedy(self) -> &'static str {
                match self { $(Self::$variant => $remedy,)* }
            }
        }
    };
}

codes! {
    // Reading a file.
    FileUnreadable = "file-001", "the file cannot be opened or read", "check the path and its permissions";
    FileEmpty = "file-002", "the file holds no data", "give a file with at least one data block";
    FileNoInput = "file-003", "a folder or an archive holds nothing that is read", "name the file itself; in folders and archives these are read: .cif, .mcif, .vasp, .poscar, POSCAR*, CONTCAR*, .json, .jsonl, each also with .gz, and in folders .zip, .tar, .tar.gz, .tgz";
    FileUnknownBlock = "file-004", "the file has no data block, or no entry, of the name asked for", "use one of the names the message lists";
    FileTooLarge = "file-005", "the file is larger than the limit", "split the file";
    // Archives and compressed files.
    ArchiveTooLarge = "archive-001", "more comes out of an archive or a compressed file than the limit", "raise --max-unpacked, or unpack it and name the folder";
    ArchiveNested = "archive-002", "an archive lies inside another, or has the name of a structure", "unpack it and name the folder, or rename it to end in .zip, .tar or .tar.gz";
    ArchiveEncrypted = "archive-003", "a member of an archive is encrypted", "unpack it with its password and name the folder";
    ArchivePath = "archive-004", "the path of a member is absolute or leads out of the archive, or the member is a link", "pack the archive again with plain relative paths";
    ArchiveDamaged = "archive-005", "an archive or a compressed file is damaged", "fetch or pack it again";
    ArchiveMethod = "archive-006", "a member is packed by a method that is not read", "pack it again with the method deflate";
    // The syntax of a CIF.
    CifEncoding = "cif-001", "the file is not in ASCII or UTF-8", "convert it: iconv -f UTF-16 -t UTF-8";
    CifNotUtf8 = "cif-002", "the file holds bytes that are not UTF-8", "convert it: iconv -f ISO-8859-1 -t UTF-8";
    CifControlByte = "cif-003", "the file holds control bytes", "remove them";
    CifQuoteOpen = "cif-004", "a quote is not closed on its line", "close it with the same quote followed by a blank";
    CifTextOpen = "cif-005", "a text field is not closed", "end it with a line that begins with a semicolon";
    CifTagRepeated = "cif-006", "a tag is given twice in one block", "remove one of the two";
    CifBlockRepeated = "cif-007", "two data blocks have the same name", "rename one of them";
    CifBlockUnnamed = "cif-008", "a data block has no name", "write a name directly after data_";
    CifLoopRagged = "cif-009", "the values of a loop do not fill whole rows", "put values with blanks in quotes, and ? for a missing value";
    CifLoopNoTags = "cif-010", "a loop has no tags", "write the tags after loop_";
    CifLoopEmpty = "cif-011", "a loop has no values", "remove it";
    CifNoValue = "cif-012", "a tag has no value", "write ? for an unknown value";
    CifNoTag = "cif-013", "a value has no tag", "put values with blanks in quotes";
    CifNoHeader = "cif-014", "something stands before the first data block", "begin the file with data_ and a name";
    CifReserved = "cif-015", "a reserved word is used that is not part of CIF", "remove it";
    CifFrame = "cif-016", "a save frame is not opened or closed properly", "end each save frame with save_";
    CifNumber = "cif-017", "a number cannot be read", "write it as 4.1163 or 4.1163(2)";
    CifNoStructure = "cif-018", "a data block holds no crystal structure", "name another block";
    CifMacromolecule = "cif-019", "a data block describes a macromolecule", "this program answers for crystals of ions";
    CifLineLong = "cif-020", "a line is longer than the 2,048 characters the standard allows", "break the line";
    CifNameLong = "cif-021", "a tag or the name of a block is longer than the standard allows", "use a name of at most 75 characters, or declare CIF 2.0";
    CifCharacter = "cif-022", "the file holds a character that is not in the set of its edition of CIF", "begin the file with #\\#CIF_2.0, which allows most of Unicode, or remove the character";
    CifListOpen = "cif-023", "a list or table is not closed", "end a list with ] and a table with }";
    CifTableEntry = "cif-024", "an entry of a table is not a key in quotes, a colon and a value", "write it as {'key': value}";
    CifNoBlank = "cif-025", "there is no blank between a value and what follows", "put a blank between them";
    CifBracket = "cif-026", "a value begins with a reserved character, or a bracket closes nothing", "put the value in quotes, or remove the bracket";
    CifProtocol = "cif-027", "a text field announces a prefix that not all of its lines have", "begin every line of the text with the prefix";
    CifEdition = "cif-028", "the first line declares an edition of CIF that is not known", "write #\\#CIF_1.1 or #\\#CIF_2.0";
    CifKeyRepeated = "cif-029", "a key is given twice in one table", "remove one of the two";
    // The POSCAR format.
    PoscarShort = "poscar-001", "a POSCAR file ends before all of its lines", "complete the file: title, scale, three vectors, species, counts, Direct or Cartesian, positions";
    PoscarNumber = "poscar-002", "a number of a POSCAR file cannot be read", "write it as 0.25 or 2.5E-1";
    PoscarScale = "poscar-003", "the scale factor is zero, or one of three is not positive", "write 1.0, or minus the volume of the cell";
    PoscarCounts = "poscar-004", "the line of atom counts is missing, or holds something else", "write one whole number for each species";
    PoscarSpecies = "poscar-005", "the species line does not fit the line of counts", "write one element symbol for each count";
    PoscarMode = "poscar-006", "the line before the positions says neither Direct nor Cartesian", "write Direct or Cartesian before the positions";
    PoscarAnonymous = "poscar-007", "the elements of the atoms cannot be told", "write a line of element symbols before the counts";
    PoscarLabel = "poscar-008", "the label behind a position contradicts the species line", "correct the species line or the label";
    PoscarTitle = "poscar-009", "the elements of a POSCAR file without a species line were taken from its title", "write a line of element symbols before the counts";
    // The JSON of the OPTIMADE standard.
    OptimadeSyntax = "optimade-001", "a file or a line is not JSON that can be read", "correct the JSON at the place named";
    OptimadeNoEntries = "optimade-002", "JSON without structures of the OPTIMADE standard", "give a response with the entries in data, one entry, or one entry a line";
    OptimadeType = "optimade-003", "an entry is not of the type structures", "give entries of the type structures";
    OptimadeProperty = "optimade-004", "a property of an entry is missing, null or of the wrong shape", "ask for all properties of structures: response_fields=lattice_vectors,cartesian_site_positions,species,species_at_sites";
    OptimadeCounts = "optimade-005", "an entry has different numbers of positions, species at sites and sites", "correct the entry";
    OptimadeSpecies = "optimade-006", "a species of an entry is not listed, or is not a chemical element", "list it in species, with element symbols";
    OptimadeDimensions = "optimade-007", "an entry is not periodic in three dimensions", "give a crystal; this program has no answer for molecules and single layers";
    OptimadeFeature = "optimade-008", "an entry has a structure feature that cannot be used or is not known", "use an entry whose atoms all have positions";
    // The unit cell.
    CellMissing = "cell-001", "a cell length or angle is missing", "add the six _cell_ items";
    CellNotFinite = "cell-002", "a cell length or angle is not a finite number", "correct the value";
    CellDegenerate = "cell-003", "the cell has no volume, or lengths or angles out of range", "correct the cell parameters";
    CellVolume = "cell-004", "the stated volume is not that of the cell parameters", "correct the value that was mistyped";
    CellMetric = "cell-005", "the cell parameters differ from what the symmetry asks for by more than their uncertainty", "correct the cell parameter, or the symmetry";
    // Sites.
    SitesMissing = "site-001", "there are no atom sites", "add an _atom_site_ loop with fractional coordinates";
    SitePositionInvalid = "site-002", "a coordinate is missing or is not a finite number", "correct the coordinate";
    SiteElementUnknown = "site-003", "the element of a site cannot be told", "give _atom_site_type_symbol";
    SitesTooClose = "site-004", "two atoms are closer than is physically possible", "remove the duplicate or lower --min-distance";
    SiteOccupancyInvalid = "site-005", "an occupancy is negative or above one", "correct the occupancy";
    SiteShared = "site-006", "a site is partly occupied or shared by several species, so the polarization is not quantized", "use an ordered model of the structure";
    SiteOverfull = "site-007", "the occupancies on one position add up to more than one", "correct the occupancies";
    SiteTooMany = "site-008", "there are more sites than the limit", "use a smaller cell";
    SiteMultiplicity = "site-009", "the stated multiplicity differs from the number of images found", "check the coordinates against the special position";
    SiteListedTwice = "site-010", "a site is listed again as an image of another", "remove the repetition from the file";
    SiteHydrogenAttached = "site-011", "hydrogen atoms are attached to sites but not listed", "add the hydrogen atoms with coordinates";
    SiteFormula = "site-012", "the sites do not make up the stated formula", "add the missing sites, or correct the formula";
    SiteHydrogenMissing = "site-013", "the formula holds hydrogen but no site does", "add the hydrogen atoms with coordinates";
    SiteDropped = "site-014", "a site is a dummy or is never occupied, and was dropped", "remove it from the file";
    SiteDisorder = "site-015", "a site of a disorder group is fully occupied", "state its occupancy";
    SiteOxidation = "site-016", "the oxidation numbers of the file contradict each other, or cannot be read", "keep the one that is right";
    SiteCartesian = "site-017", "positions were read from Cartesian coordinates", "add _atom_site_fract_x, _y and _z";
    SiteRounded = "site-018", "a site near a special position was set to it", "write the coordinates of the special position with more digits";
    SiteAlternatives = "site-019", "sites of alternative groups of one disorder assembly are all fully occupied", "keep the sites of one group, or state their occupancies";
    // Symmetry.
    SymmetryMissing = "symmetry-001", "the file states no symmetry", "add the operations, or a space-group symbol";
    SymmetryUnknown = "symmetry-002", "a space-group symbol or number is not known", "give the operations as _space_group_symop_operation_xyz";
    SymmetryContradiction = "symmetry-003", "the file's statements about symmetry contradict each other", "keep the statement that is right";
    SymmetryEngine = "symmetry-004", "the symmetry search failed", "try another --symmetry-tolerance or --engine";
    SymmetryTolerance = "symmetry-005", "the symmetry search used another tolerance than asked for", "set --symmetry-tolerance to the one used";
    SymmetryNotFound = "symmetry-006", "the operations found do not map the sites onto themselves", "lower --symmetry-tolerance";
    SymmetryMoved = "symmetry-007", "symmetrising moved an atom further than the tolerance", "lower --symmetry-tolerance";
    ParentRefused = "parent-001", "there is no parent cell, or it could not be classified", "set --parent-tolerance, or leave the parent out with --no-parent";
    SymmetryOperation = "symmetry-008", "a symmetry operation cannot be read", "write it as -x,y+1/2,-z+1/2";
    SymmetryNotGroup = "symmetry-009", "the listed symmetry operations are not a group", "list every operation once, centring included";
    SymmetrySetting = "symmetry-010", "a space-group symbol or number stands for several settings", "give the operations as _space_group_symop_operation_xyz";
    SymmetryModulated = "symmetry-011", "the structure is modulated", "use the average structure or an approximant";
    SymmetryMagnetic = "symmetry-012", "the symmetry is stated for the magnetic structure alone", "give the operations of the crystal structure";
    SymmetryMetric = "symmetry-013", "the symmetry does not fit the cell parameters", "correct the cell or the symmetry";
    SymmetryDoubtful = "symmetry-014", "the operations of a space-group name do not make the stated formula of the sites", "give the operations as _space_group_symop_operation_xyz";
    // Charges.
    ChargeSyntax = "charge-001", "a charge given on the command line cannot be read", "write --charges 'Ta=5,K=1,O=-2'";
    ChargeUnknownSite = "charge-002", "a charge was given for an element or label that the structure does not have", "use one of the labels the message lists";
    ChargeMissing = "charge-003", "some sites were given no charge", "add the missing element to --charges";
    ChargeNotNeutral = "charge-004", "the charges do not add up to zero", "correct the charges or the composition";
    ChargeAveraged = "charge-005", "a charge is not a whole number, so the polarization is not quantized", "use an ordered model with whole charges";
    ChargeMetal = "charge-006", "all charges are zero, or all elements are metals", "formal polarization is defined for insulators; give --charges if this is one";
    ChargeNone = "charge-007", "no neutral assignment of known oxidation states exists", "give --charges";
    ChargeAmbiguous = "charge-008", "two assignments of oxidation states are about equally likely", "type one of the assignments the message lists into --charges";
    ChargeElement = "charge-009", "no oxidation state is tabulated for an element", "give --charges";
    ChargeBroken = "charge-010", "symmetry-equivalent sites carry different charges", "lower the symmetry of the file, or correct the charges";
    ChargeInferred = "charge-011", "charges were inferred", "give --charges to fix them";
    ChargeMixedValence = "charge-012", "one element carries several charges on inequivalent sites", "give --charges per site label to fix them";
    ChargeSetAside = "charge-013", "the file's oxidation numbers were not used: some are missing, all are zero, or one is beyond any nuclear charge", "complete the numbers in the file, or give --charges";
    BondValenceTable = "charge-014", "a table of bond-valence parameters cannot be read", "give a CIF with a loop of _valence_param_atom_1, _valence_param_atom_2, _valence_param_Ro and _valence_param_B";
    ChargeHydrogen = "charge-015", "atoms are missing, most often hydrogen", "add the hydrogen atoms, or give --charges";
    ChargeOpenShell = "charge-016", "cations have open shells, so a band gap depends on how strongly their electrons interact", "make sure that the crystal is an insulator";
    ChargeLikelyMetal = "charge-017", "a state is known mostly from metals", "make sure that the crystal is an insulator; formal polarization is not defined for a metal";
    ChargeBonds = "charge-019", "bond-valence sums are far from the charges", "check cell and positions, add hydrogen atoms that are missing, or give --charges";
    ChargeSearch = "charge-018", "the search for charges was cut short to bound its time", "give --charges";
    // Polarization.
    PolarizationResidual = "polarization-001", "the sum of charges and positions is not at a value that symmetry permits", "check charges and positions, or lower --symmetry-tolerance";
    PolarizationRoutes = "polarization-002", "two independent routes to the offset disagree", "report this file as a fault of the program";
    PolarizationOverflow = "polarization-003", "an exact number left the range of 128-bit integers", "reduce the cell or the charges";
    PolarizationWindow = "polarization-004", "the number of basis choices asked for is over the limit", "use a smaller --window";
    // Facets.
    FacetIndices = "facet-001", "the indices do not name a plane", "write a plane as --plane 0,0,1";
    // Writing a structure.
    BuildNoCentre = "build-001", "the crystal has no centre of inversion, so its origin was not moved to one", "nothing is wrong; the origin is stated in the file written";
    BuildUncertainty = "build-002", "standard uncertainties do not hold in the setting written and were left out", "use --axes file to keep the axes";
    BuildStandard = "build-003", "the engine gives no standardised cell", "use --engine moyo, or --axes primitive";
    BuildSymmetryFound = "build-004", "the atoms have more symmetry than the file states, and were averaged over it", "lower --symmetry-tolerance to keep them apart";
    BuildSymmetryKept = "build-005", "the symmetry found was not written", "raise --symmetry-tolerance, or use --axes primitive";
    BuildWithoutResult = "build-006", "the structure was refused, so it is written without results", "see the reason in the message";
    BuildItemDropped = "build-007", "an item of the source cannot be written and was left out", "copy it by hand";
    BuildNotFaithful = "build-008", "what was written is not read back as the same crystal", "report this file as a fault of the program";
}

impl fmt::Display for Code {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.as_str())
    }
}

impl Serialize for Code {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.serialize_str(self.as_str())
    }
}

impl schemars::JsonSchema for Code {
    fn schema_name() -> std::borrow::Cow<'static, str> {
        "Code".into()
    }

    fn json_schema(_: &mut schemars::SchemaGenerator) -> schemars::Schema {
        let names: Vec<_> = Self::ALL.iter().map(|code| code.as_str()).collect();
        schemars::json_schema!({ "type": "string", "enum": names })
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::collections::BTreeSet;

    #[test]
    fn codes_are_unique() {
        let names: BTreeSet<_> = Code::ALL.iter().map(|code| code.as_str()).collect();
        assert_eq!(names.len(), Code::ALL.len());
    }
}
