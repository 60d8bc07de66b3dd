import dataclasses
import gzip
import hashlib
import pickle

import gemmi
import numpy as np
import pytest

from structmap.errors import (
    CoordinateFormatError,
    FileProblemError,
    NonsenseCellError,
    NoPolymerError,
    RepeatedResidueError,
    StructmapError,
    UnknownModelError,
    UnknownSymmetryError,
    UnplacedAtomError,
)
from structmap.structure import (
    LIGAND,
    POLYMER,
    WATER,
    Structure,
    one_letter,
    read_structure,
    residue_label,
)
from tests.crystals import DATA

ORC = (DATA / "1orc.pdb").read_text()
ARRAYS = [
    field.name
    for field in dataclasses.fields(Structure)
    if "NDArray" in str(field.type) and field.name != "label_asym_id"
]
CRYST1 = next(line for line in ORC.splitlines() if line.startswith("CRYST1"))


def labels(structure, kind=POLYMER):
    return [
        residue_label(structure, int(index))
        for index in np.flatnonzero(structure.kind_of_residue == kind)
    ]


def with_cell(cryst1, *, operators=True):
    """Return 1ORC with another CRYST1 record, its frame records left out."""
    kept = [
        cryst1 if line.startswith("CRYST1") else line
        for line in ORC.splitlines()
        if not line.startswith("SCALE")
        and (operators or not line.startswith("REMARK 290"))
    ]
    return "\n".join(kept)


def read_text(tmp_path, text, name="made.pdb"):
    path = tmp_path / name
    path.write_text(text)
    return read_structure(path)


# What is read


def test_residues_atoms_and_labels_of_a_small_crystal():
    # Counts: REMARK 3 and the ATOM records of 1ORC; 56A to 56E is the inserted turn.
    structure = read_structure(DATA / "1orc.pdb")
    found = labels(structure)
    assert len(found) == 64
    assert found[0] == "A/3"
    assert found[53:60] == ["A/56", "A/56A", "A/56B", "A/56C", "A/56D", "A/56E", "A/57"]
    assert len(structure.position) == 559
    assert structure.entry_id == "1ORC"
    assert structure.method == "X-RAY DIFFRACTION"
    assert structure.resolution_angstrom == pytest.approx(1.54)
    assert structure.sha256 == hashlib.sha256(ORC.encode()).hexdigest()
    assert structure.warnings == ()


def test_full_sequence_is_that_of_seqres():
    structure = read_structure(DATA / "1orc.pdb")
    seqres = [
        name
        for line in ORC.splitlines()
        if line.startswith("SEQRES")
        for name in line[19:].split()
    ]
    assert list(structure.chain_copies[0].sequence) == seqres
    placed = structure.label_seq_id[structure.kind_of_residue == POLYMER] - 1
    names = structure.auth_comp_id[structure.kind_of_residue == POLYMER]
    assert [seqres[index] for index in placed] == names.tolist()


@pytest.mark.parametrize(
    "name", ["4cup.cif.gz", "4zhl.cif.gz", "1gbt.cif.gz", "5i55.cif"]
)
def test_full_sequence_is_that_of_the_entity(name):
    structure = read_structure(DATA / name)
    block = gemmi.cif.read(str(DATA / name))[0]
    sequences = {}
    for entity, number, comp_id in block.find(
        "_entity_poly_seq.", ["entity_id", "num", "mon_id"]
    ):
        sequences.setdefault(entity, {}).setdefault(int(number), comp_id)
    of_asym = dict(block.find("_struct_asym.", ["id", "entity_id"]))
    for chain in structure.chain_copies:
        expected = sequences[of_asym[chain.label_asym_id]]
        assert list(chain.sequence) == [expected[k] for k in sorted(expected)]


@pytest.mark.parametrize(
    ("name", "n_polymer", "n_atoms"),
    [
        # residues and heavy atoms of nonzero occupancy, by a plain loop over gemmi
        ("1ejg.pdb.gz", 46, None),
        ("3jqh.cif", 23, 238),
        ("1pfe.cif.gz", 16, 342),
        ("7etn.cif.gz", 8, None),
        ("4cup.cif.gz", 115, 1100),
        ("1gbt.cif.gz", 223, 1761),
    ],
)
def test_keeps_all_alternates_and_no_hydrogens(name, n_polymer, n_atoms):
    structure = read_structure(DATA / name)
    plain = gemmi.read_structure(str(DATA / name))
    kept = [
        (cra.chain.name, cra.residue.seqid.num, cra.atom.name, cra.atom.altloc)
        for cra in plain[0].all()
        if not cra.atom.is_hydrogen() and cra.atom.occ > 0
    ]
    assert (structure.kind_of_residue == POLYMER).sum() == n_polymer
    assert len(structure.position) == len(kept)
    of = structure.residue_of_atom
    found = zip(
        structure.auth_asym_id[of],
        structure.auth_seq_id[of].tolist(),
        structure.atom_name,
        (letter or "\0" for letter in structure.altloc),
        strict=True,
    )
    assert sorted(found) == sorted(kept)
    if n_atoms:
        assert n_atoms in (
            len(kept),
            np.count_nonzero(structure.kind_of_residue[of] == POLYMER),
        )


def test_two_residues_at_one_place_are_one_residue():
    # 1EJG: 22 is PRO or SER, 25 LEU or ILE (SEQADV and REMARK records of the entry).
    structure = read_structure(DATA / "1ejg.pdb.gz")
    assert labels(structure).count("A/22") == 1
    index = labels(structure).index("A/22")
    own = structure.residue_of_atom == index
    assert {"CG", "OG"} <= set(structure.atom_name[own])
    assert len(labels(structure)) == 46 == len(structure.chain_copies[0].sequence)


def test_deuterium_is_a_hydrogen(tmp_path):
    text = ORC.replace("ATOM      2  CA  GLN A   3", "ATOM      2  D   GLN A   3")
    lines = text.splitlines()
    place = next(k for k, line in enumerate(lines) if " D   GLN A   3 " in line)
    lines[place] = lines[place][:76] + " D" + lines[place][78:]
    assert len(read_text(tmp_path, "\n".join(lines)).position) == 558


def test_atoms_of_zero_occupancy_are_left_out(tmp_path):
    lines = ORC.splitlines()
    place = next(k for k, line in enumerate(lines) if line.startswith("ATOM     20 "))
    lines[place] = f"{lines[place][:54]}  0.00{lines[place][60:]}"
    assert len(read_text(tmp_path, "\n".join(lines)).position) == 558


def test_ligands_and_waters_are_residues_after_the_polymer():
    structure = read_structure(DATA / "4oz7.pdb")
    kinds = structure.kind_of_residue
    assert (np.diff(kinds) >= 0).all()
    assert set(kinds.tolist()) == {POLYMER, LIGAND, WATER}
    assert (structure.copy_of_residue[kinds != POLYMER] == -1).all()
    assert "CU1" in structure.auth_comp_id[kinds == LIGAND]


def test_numbers_may_be_negative(data_folder):
    structure = read_structure(data_folder / "archive" / "6wqa.cif.gz")
    assert np.count_nonzero(structure.auth_seq_id < 0) == 2
    assert labels(structure)[0].startswith("A/-")


# Formats


def test_pdb_mmcif_mmjson_and_gzip_give_the_same_arrays(tmp_path):
    plain = gemmi.read_structure(str(DATA / "1orc.pdb"))
    plain.setup_entities()
    plain.assign_label_seq_id()
    document = plain.make_mmcif_document()
    written = {
        "a.cif": document.as_string().encode(),
        "a.json": document.as_json(mmjson=True).encode(),
        "a.txt.gz": gzip.compress(document.as_string().encode(), mtime=0),
        "odd.name": ORC.encode(),
        "windows.pdb": b"\xef\xbb\xbf" + ORC.replace("\n", "\r\n").encode(),
    }
    expected = read_structure(DATA / "1orc.pdb")
    for name, content in written.items():
        (tmp_path / name).write_bytes(content)
        found = read_structure(tmp_path / name)
        for column in ARRAYS:
            left, right = getattr(expected, column), getattr(found, column)
            if left.dtype.kind == "f":
                np.testing.assert_allclose(left, right, atol=1e-5, err_msg=name)
            else:
                np.testing.assert_array_equal(left, right, err_msg=f"{name} {column}")
        assert found.crystal.triplets == expected.crystal.triplets
        assert found.chain_copies[0].sequence == expected.chain_copies[0].sequence
        assert found.assemblies[0].chains == (("A",),)


def test_letters_outside_ascii_do_no_harm(tmp_path):
    path = tmp_path / "latin.pdb"
    path.write_bytes(ORC.replace("CRO REPRESSOR", "CR\xd6 REPRESSOR").encode("latin-1"))
    assert len(read_structure(path).position) == 559


# Models


def test_an_ensemble_has_all_its_models_and_one_can_be_taken_alone():
    ensemble = read_structure(DATA / "1as5.cif.gz")
    assert ensemble.n_models == 14
    assert ensemble.no_crystal_reason == "the structure is from NMR"
    assert (np.diff(ensemble.model_of_atom) >= 0).all()
    assert np.bincount(ensemble.model_of_atom).tolist() == [185] * 14
    third = read_structure(DATA / "1as5.cif.gz", model=3)
    assert third.n_models == 1
    np.testing.assert_array_equal(
        third.position, ensemble.position[ensemble.model_of_atom == 2]
    )


def test_a_crystal_of_several_models_uses_the_first_and_says_so(tmp_path):
    atoms = [line for line in ORC.splitlines() if line.startswith("ATOM")]
    models = ["MODEL        1", *atoms, "ENDMDL", "MODEL        2", *atoms, "ENDMDL"]
    text = "\n".join(["EXPDTA    X-RAY DIFFRACTION", CRYST1, *models, "END"])
    structure = read_text(tmp_path, text)
    assert structure.n_models == 1
    assert structure.warnings == (
        "The file holds 2 models of a crystal; the first is used.",
    )
    assert read_structure(tmp_path / "made.pdb", model=2).warnings == ()


# Crystal


@pytest.mark.parametrize(
    "name",
    ["1orc.pdb", "5i55.cif", "1pfe.cif.gz", "3wup.json.gz", "4zhl.cif.gz", "5wkd.pdb"],
)
def test_cell_geometry_follows_the_textbook(name):
    """Volume and orthogonal axes (a along x, b in the xy plane).

    Source: International Tables for Crystallography B, section 3.3.1 (from memory).
    """
    crystal = read_structure(DATA / name).crystal
    a, b, c = crystal.cell[:3]
    cos = np.cos(np.radians(crystal.cell[3:]))
    sin_gamma = np.sin(np.radians(crystal.cell[5]))
    root = np.sqrt(1 - (cos**2).sum() + 2 * cos.prod())
    expected = [
        [a, b * cos[2], c * cos[1]],
        [0, b * sin_gamma, c * (cos[0] - cos[1] * cos[2]) / sin_gamma],
        [0, 0, c * root / sin_gamma],
    ]
    np.testing.assert_allclose(crystal.orthogonalisation, expected, atol=2e-3)
    volume = np.linalg.det(crystal.orthogonalisation)
    assert volume == pytest.approx(a * b * c * root, rel=1e-4)
    product = crystal.orthogonalisation @ crystal.fractionalisation
    np.testing.assert_allclose(product, np.eye(3), atol=1e-9)


@pytest.mark.parametrize(
    "name",
    ["1orc.pdb", "5wkd.pdb", "5e5z.pdb", "4oz7.pdb", "1a28.pdb.gz", "pdb1ubi.pdb"],
)
def test_operators_are_those_that_remark_290_lists(name):
    raw = (DATA / name).read_bytes()
    text = (gzip.decompress(raw) if name.endswith("gz") else raw).decode()
    lines = [line.split() for line in text.splitlines() if line[:10] == "REMARK 290"]
    listed = {
        gemmi.Op(words[3]).wrap().triplet()
        for words in lines
        if len(words) == 4 and words[2].endswith("555")
    }
    crystal = read_structure(DATA / name).crystal
    assert set(crystal.triplets) == listed
    assert crystal.triplets[0] == "x,y,z"


@pytest.mark.parametrize(
    ("name", "reason"),
    [
        ("1as5.cif.gz", "the structure is from NMR"),
        ("5a7u.pdb", "the structure is from electron microscopy"),
    ],
)
def test_no_crystal_and_why(name, reason):
    structure = read_structure(DATA / name)
    assert structure.crystal is None
    assert structure.no_crystal_reason == reason


def test_method_decides_before_a_leftover_cell(tmp_path):
    text = ORC.replace("X-RAY DIFFRACTION", "SOLUTION NMR")
    structure = read_text(tmp_path, text)
    assert structure.crystal is None
    assert structure.no_crystal_reason == "the structure is from NMR"


@pytest.mark.parametrize(
    "cryst1",
    [
        "REMARK",
        "CRYST1    1.000    1.000    1.000  90.00  90.00  90.00 P 1           1",
    ],
)
def test_no_cell_or_a_placeholder_is_no_crystal(tmp_path, cryst1):
    structure = read_text(tmp_path, with_cell(cryst1))
    assert structure.crystal is None
    assert structure.no_crystal_reason == "the file states no unit cell"


def test_operators_of_the_file_stand_in_for_a_missing_name(tmp_path):
    text = with_cell("CRYST1   34.770   39.170   48.310  90.00  90.00  90.00")
    crystal = read_text(tmp_path, text).crystal
    expected = read_structure(DATA / "1orc.pdb").crystal
    assert set(crystal.triplets) == set(expected.triplets)
    assert crystal.space_group == "P 21 21 21"


@pytest.mark.parametrize(
    ("name", "setting", "n_operators"),
    [
        ("P21", "P 1 21 1", 2),
        ("P 1 1 21", "P 1 1 21", 2),
        ("B 2", "B 1 1 2", 4),
        ("P 21 2 21", "P 21 2 21", 4),
        ("I 2", "I 1 2 1", 4),
    ],
)
def test_short_and_unusual_names_are_understood(tmp_path, name, setting, n_operators):
    cryst1 = f"CRYST1   34.770   39.170   48.310  90.00  90.00  90.00 {name:<11}"
    crystal = read_text(tmp_path, with_cell(cryst1, operators=False)).crystal
    assert crystal.space_group == setting
    assert len(crystal.triplets) == n_operators


def test_rhombohedral_and_hexagonal_axes_are_told_apart_by_the_cell(tmp_path):
    hexagonal = "CRYST1   60.000   60.000   80.000  90.00  90.00 120.00 R 3         "
    rhombic = "CRYST1   50.000   50.000   50.000  80.00  80.00  80.00 R 3         "
    for cryst1, n_operators in ((hexagonal, 9), (rhombic, 3)):
        crystal = read_text(tmp_path, with_cell(cryst1, operators=False)).crystal
        assert len(crystal.triplets) == n_operators


def test_warns_of_a_cell_without_the_symmetry_of_its_group(tmp_path):
    cryst1 = "CRYST1   34.770   39.170   48.310  90.00  80.00  90.00 P 21 21 21    4"
    assert read_text(tmp_path, with_cell(cryst1)).warnings == (
        "The unit cell 34.77 39.17 48.31 90 80 90 does not have the symmetry of "
        "P 21 21 21.",
    )


def test_warns_of_operators_that_are_not_those_of_the_group(tmp_path):
    cryst1 = "CRYST1   34.770   39.170   48.310  90.00  90.00  90.00 P 21 21 2     4"
    (warning,) = read_text(tmp_path, with_cell(cryst1)).warnings
    assert warning.startswith("The operators listed in the file are not those of P 21")


def test_warns_of_a_fragment():
    (warning,) = read_structure(DATA / "4hhh_frag.pdb").warnings
    assert warning.startswith("The cell has 4")
    assert "fragment" in warning


@pytest.mark.parametrize("name", ["5wkd.pdb", "5e5z.pdb", "1yjp.cif", "7etn.cif.gz"])
def test_tightly_packed_peptides_are_nothing_odd(name):
    assert read_structure(DATA / name).warnings == ()


# NCS


def test_given_ncs_operators_make_no_copies():
    # 1LZH and 1A28: chain B is in the file, and MTRIX says how it follows from A.
    for name, n_residues in (("1lzh.pdb.gz", 258), ("1a28.pdb.gz", 500)):
        structure = read_structure(DATA / name)
        assert [chain.ncs for chain in structure.chain_copies] == [0, 0]
        assert np.count_nonzero(structure.kind_of_residue == POLYMER) == n_residues


def test_other_ncs_operators_make_chains_of_their_own(tmp_path):
    mtrix = [
        "MTRIX1   1  0.000000 -1.000000  0.000000       30.00000",
        "MTRIX2   1  1.000000  0.000000  0.000000        0.00000",
        "MTRIX3   1  0.000000  0.000000  1.000000       12.50000",
    ]
    text = ORC.replace(CRYST1, "\n".join([CRYST1, *mtrix]))
    structure, plain = read_text(tmp_path, text), read_structure(DATA / "1orc.pdb")
    assert [chain.ncs for chain in structure.chain_copies] == [0, 1]
    polymer = structure.kind_of_residue == POLYMER
    assert polymer.sum() == 128
    np.testing.assert_array_equal(structure.original_residue[64:128], np.arange(64))
    assert len(structure.position) == 2 * len(plain.position)
    first = structure.position[structure.residue_of_atom < 64]
    copy = structure.position[
        (structure.residue_of_atom >= 64) & (structure.residue_of_atom < 128)
    ]
    expected = np.column_stack([30 - first[:, 1], first[:, 0], first[:, 2] + 12.5])
    np.testing.assert_allclose(copy, expected, atol=1e-9)
    waters = structure.original_residue[~polymer]
    assert np.unique(waters, return_counts=True)[1].tolist() == [2] * 57


def test_a_virus_is_built_from_its_twenty_copies(data_folder):
    structure = read_structure(data_folder / "public" / "ncs" / "5cvz_final.pdb")
    built = gemmi.read_structure(str(data_folder / "public" / "ncs" / "5cvz_final.pdb"))
    built.setup_entities()
    built.expand_ncs(gemmi.HowToNameCopiedChain.AddNumber)
    expected = [atom.atom.pos.tolist() for atom in built[0].all()]
    np.testing.assert_allclose(structure.position, expected, atol=1e-3)
    assert len(structure.chain_copies) == 20


# Assemblies and secondary structure


def test_assemblies_name_author_chains(data_folder):
    # 3KPR lists label names A-E and K-O and so on; author chains are A-E and F-J.
    structure = read_structure(data_folder / "archive" / "3kpr.cif.gz")
    assert [item.name for item in structure.assemblies] == ["1", "2"]
    assert structure.assemblies[0].chains == (("A", "B", "C", "D", "E"),)
    assert structure.assemblies[1].chains == (("F", "G", "H", "I", "J"),)


def test_assembly_says_who_determined_it_and_its_operators():
    author, software = read_structure(DATA / "3wup.json.gz").assemblies
    assert (author.by_author, author.by_software) == (True, False)
    assert (software.by_author, software.by_software) == (False, True)
    assert (author.oligomer, software.oligomer) == ("monomeric", "trimeric")
    assert software.matrices.shape == (3, 4, 4)
    rotations = software.matrices[:, :3, :3]
    np.testing.assert_allclose(np.linalg.det(rotations), 1.0, atol=1e-6)


def test_helices_are_those_that_the_file_records():
    # HELIX records of 1ORC.
    structure = read_structure(DATA / "1orc.pdb")
    expected = set()
    for line in ORC.splitlines():
        if line.startswith("HELIX"):
            expected |= set(range(int(line[21:25]), int(line[33:37]) + 1))
    helix = structure.secondary_structure == "H"
    assert set(structure.auth_seq_id[helix].tolist()) == expected
    assert structure.has_secondary_structure
    assert not read_structure(DATA / "5e5z.pdb").has_secondary_structure


def test_strands_are_read_from_mmcif():
    # _struct_sheet_range of 1GBT.
    structure = read_structure(DATA / "1gbt.cif.gz")
    block = gemmi.cif.read(str(DATA / "1gbt.cif.gz"))[0]
    ranges = block.find("_struct_sheet_range.", ["beg_auth_seq_id", "end_auth_seq_id"])
    polymer = structure.kind_of_residue == POLYMER
    helix = structure.secondary_structure == "H"
    for first, last in ranges:
        inside = (structure.auth_seq_id >= int(first)) & (
            structure.auth_seq_id <= int(last)
        )
        strand = structure.secondary_structure[inside & polymer & ~helix]
        assert set(strand.tolist()) == {"E"}


def test_ca_only_files_are_told_from_others():
    assert read_structure(DATA / "1lzh.pdb.gz").ca_only
    assert not read_structure(DATA / "1orc.pdb").ca_only


@pytest.mark.parametrize(
    ("comp_id", "letter"),
    [
        ("ALA", "A"),
        ("MSE", "M"),
        ("SEP", "S"),
        ("DAL", "A"),
        ("DG", "G"),
        ("U", "U"),
        ("HOH", "X"),
        ("22Q", "X"),
        ("", "X"),
    ],
)
def test_one_letter_codes(comp_id, letter):
    assert one_letter(comp_id) == letter


# Refusals


def number_line(text, start, column, number):
    """Return the text with other digits in one line."""
    lines = text.splitlines()
    place = next(k for k, line in enumerate(lines) if line.startswith(start))
    end = column + len(number)
    lines[place] = lines[place][:column] + number + lines[place][end:]
    return "\n".join(lines)


BAD_CELLS = {
    "    0.000   39.170   48.310  90.00  90.00  90.00": "has a length that is not",
    "  -34.770   39.170   48.310  90.00  90.00  90.00": "has a length that is not",
    "      nan   39.170   48.310  90.00  90.00  90.00": "has a length that is not",
    "   34.770   39.170   48.310  90.00 190.00  90.00": "has an angle that is not",
    "   34.770   39.170   48.310  90.00  30.00  30.00": "has angles that do not close",
}


@pytest.mark.parametrize("cell", BAD_CELLS)
def test_nonsense_cells_are_refused(tmp_path, cell):
    with pytest.raises(NonsenseCellError, match=BAD_CELLS[cell]) as caught:
        read_text(tmp_path, with_cell(f"CRYST1{cell} P 21 21 21    4"))
    assert "correct CRYST1" in str(caught.value)


@pytest.mark.parametrize(
    ("group", "words"),
    [("", "no space group, and no operators"), (" Q 99", "'Q 99' is not known")],
)
def test_a_cell_without_operators_is_never_taken_as_p1(tmp_path, group, words):
    cryst1 = f"CRYST1   34.770   39.170   48.310  90.00  90.00  90.00{group}"
    with pytest.raises(UnknownSymmetryError, match=words):
        read_text(tmp_path, with_cell(cryst1, operators=False))


@pytest.mark.parametrize(
    ("name", "content", "words"),
    [
        ("absent.pdb", None, "there is no such file; check the name"),
        ("empty.cif", b"", "the file is empty"),
        ("blank.cif.gz", gzip.compress(b" \n"), "the file is empty"),
        ("binary.pdb", bytes(range(256)), "the file is binary"),
        ("cut.pdb.gz", gzip.compress(ORC.encode())[:2000], "damaged or cut short"),
    ],
)
def test_unreadable_files_are_refused(tmp_path, name, content, words):
    if content is not None:
        (tmp_path / name).write_bytes(content)
    with pytest.raises(FileProblemError, match=words):
        read_structure(tmp_path / name)


def test_a_folder_is_refused(tmp_path):
    with pytest.raises(FileProblemError, match="this is a folder"):
        read_structure(tmp_path)


def test_text_that_cannot_be_parsed_is_refused(tmp_path):
    with pytest.raises(CoordinateFormatError, match="Wrong format for charge"):
        read_structure(DATA / "pdb1gdr.ent")
    half = (DATA / "3jqh.cif").read_text()[:30000]
    with pytest.raises(CoordinateFormatError, match="Wrong number of values in loop"):
        read_text(tmp_path, half, "half.cif")
    cut = ORC[: ORC.index("ATOM    200") + 40]
    with pytest.raises(CoordinateFormatError, match="too short"):
        read_text(tmp_path, cut)


@pytest.mark.parametrize(
    ("text", "missing"),
    [
        ("data_x\n_cell.length_a 10\n", "no atoms"),
        ("<html><body>404</body></html>", "no atoms"),
        ("\n".join(line for line in ORC.splitlines() if "HOH" in line), "no polymer"),
    ],
)
def test_files_without_polymers_are_refused(tmp_path, text, missing):
    with pytest.raises(NoPolymerError, match=missing):
        read_text(tmp_path, text)


def test_a_missing_model_is_refused():
    with pytest.raises(UnknownModelError, match=r"no model 99 \(models 1 to 14\)"):
        read_structure(DATA / "1as5.cif.gz", model=99)


@pytest.mark.parametrize("number", ["9999.000", "     nan"])
def test_atoms_without_a_place_are_refused(tmp_path, number):
    text = number_line(ORC, "ATOM      1 ", 30, number)
    with pytest.raises(UnplacedAtomError, match="position of atom A/3/N is missing"):
        read_text(tmp_path, text)


def test_two_chains_without_names_are_refused(tmp_path):
    text = gzip.decompress((DATA / "1a28.pdb.gz").read_bytes()).decode()
    lines = [
        f"{line[:21]} {line[22:]}" if line.startswith(("ATOM", "TER")) else line
        for line in text.splitlines()
    ]
    with pytest.raises(RepeatedResidueError, match="give the two chains different"):
        read_text(tmp_path, "\n".join(lines))


def test_a_number_that_comes_back_in_its_chain_is_refused(tmp_path):
    text = ORC.replace(" A  30 ", " A  12 ")
    with pytest.raises(RepeatedResidueError, match="residue A/12 stands in two places"):
        read_text(tmp_path, text)


@pytest.mark.parametrize(
    "error",
    [
        NonsenseCellError("a.pdb", "1 1", "is odd"),
        UnknownSymmetryError("a.pdb", "Q 9"),
        UnknownModelError("a.pdb", 9, 1, 2),
        RepeatedResidueError("a.pdb", "A/1"),
        UnplacedAtomError("a.pdb", "A/1/N"),
        NoPolymerError("a.pdb", "atoms"),
        CoordinateFormatError("a.pdb", "line 3"),
    ],
)
def test_errors_survive_pickling_in_one_line(error):
    again = pickle.loads(pickle.dumps(error))
    assert str(again) == str(error)
    assert "\n" not in str(error)
    assert isinstance(again, StructmapError)
