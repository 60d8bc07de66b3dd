"""Contacts, images and operators against figures that others published or computed."""

import re

import numpy as np
import pandas as pd
import pytest

from structmap.chemistry import find_chemistry
from structmap.contacts import (
    KINDS,
    choose_assemblies,
    find_contacts,
    image_matrix,
    make_group_table,
    operator_text,
)
from structmap.contacts.assemblies import assembly_frames
from structmap.errors import StructmapError
from structmap.exposure import find_exposure
from structmap.structure import POLYMER, read_structure
from tests.crystals import DATA, apply, only_atoms

REFERENCE = DATA / "reference"
IMAGES = pd.read_csv(REFERENCE / "image_contacts_4A.csv", comment="#")
PUBLISHED = pd.read_csv(REFERENCE / "published_symmetry_contacts.csv", comment="#")
PUBLISHED = PUBLISHED[~PUBLISHED["atom_1"].str.endswith("/D")]  # no hydrogens are read
ASSEMBLIES = pd.read_csv(REFERENCE / "assembly_images.csv", comment="#")
WITH_NCS = "5cvz_final.pdb"  # most operators there are copies that NCS makes

# There two residues at one place are both kept and touch whatever their letters.
COUNTED_OTHERWISE = {"3jqh.cif"}


def located(name, request):
    """Return a file that is committed, else one of the shared folder."""
    if (DATA / name).exists():
        return DATA / name
    folder = request.getfixturevalue("data_folder")
    return next(folder.rglob(name))


def first_alternatives(structure):
    """Keep of every residue the alternative that stands first, and what has none."""
    letter = structure.altloc
    first = {}
    for residue, own in zip(structure.residue_of_atom, letter, strict=True):
        if own:
            first.setdefault(residue, own)
    wanted = [first.get(residue, "") for residue in structure.residue_of_atom]
    return only_atoms(structure, (letter == "") | (letter == wanted))


def ordered_pairs(structure, contacts):
    """Pairs (atom or residue of the file, of the image), by operator and shift."""
    table = make_group_table(structure.crystal)
    back = np.column_stack(table.inverse(contacts.operator, contacts.shift))
    here = np.column_stack([contacts.operator, contacts.shift])
    out = {}
    for k in range(len(here)):
        same = contacts.residue_1[k] == contacts.residue_2[k]
        seen = {tuple(here[k].tolist()): 1, tuple(back[k].tolist()): 1}
        if len(seen) == 1:  # the element undoes itself: both ways in one image
            n_same = atoms_near_own_image(structure, contacts, k) if same else 0
            seen = {tuple(here[k].tolist()): 2}
        for element, times in seen.items():
            atoms, residues, closest = out.get(element, (0, 0, np.inf))
            n_atoms = times * int(contacts.n_atom_pairs[k])
            if times == 2:
                n_atoms -= n_same
            residues += 1 if same else times
            closest = min(closest, contacts.distance_angstrom[k])
            out[element] = atoms + n_atoms, residues, closest
    return out


def atoms_near_own_image(structure, contacts, k):
    own = structure.residue_of_atom == contacts.residue_1[k]
    position = structure.position[own]
    matrix = image_matrix(structure, int(contacts.operator[k]), contacts.shift[k])
    apart = np.linalg.norm(apply(matrix, position) - position, axis=1)
    return int(np.count_nonzero(apart <= contacts.reach_angstrom))


@pytest.mark.parametrize("name", sorted(IMAGES["file"].unique()))
def test_images_and_pairs_are_those_of_another_program(name, request):
    structure = first_alternatives(read_structure(located(name, request)))
    contacts = find_contacts(structure, reach_angstrom=4.0, assemblies=())
    found = ordered_pairs(structure, contacts)
    triplets = structure.crystal.triplets
    n_expected = 0
    for row in IMAGES[IMAGES["file"] == name].itertuples():
        element = (
            triplets.index(row.operator),
            row.shift_a,
            row.shift_b,
            row.shift_c,
        )
        n_expected += 1
        atoms, residues, closest = found[element]
        if name not in COUNTED_OTHERWISE:
            assert (atoms, residues) == (row.atom_pairs, row.residue_pairs), element
            assert closest == pytest.approx(row.closest_A, abs=6e-4)
    images = set(found) - {(0, 0, 0, 0)}
    assert len(images) == n_expected


def find_atom(structure, text):
    """Return the positions of an atom written like A/CYS 247/SG."""
    chain, residue, atom = text.split("/")
    number = residue.split()[1]
    of = structure.residue_of_atom
    match = (
        (structure.auth_asym_id[of] == chain)
        & (structure.auth_seq_id[of] == int(re.match(r"-?\d+", number)[0]))
        & (structure.atom_name == atom)
    )
    return structure.position[match]


@pytest.mark.parametrize(
    "row", list(PUBLISHED.itertuples()), ids=lambda row: row.atom_1
)
def test_published_contacts_have_their_published_length(row, request):
    """SSBOND, LINK, REMARK 500, struct_conn and validation records of the files."""
    structure = read_structure(located(row.file, request))
    operator = structure.crystal.triplets.index(row.operator)
    shift = (row.shift_a, row.shift_b, row.shift_c)
    image = apply(
        image_matrix(structure, operator, shift), find_atom(structure, row.atom_2)
    )
    here = find_atom(structure, row.atom_1)
    apart = np.linalg.norm(here[:, None] - image[None], axis=2).min()
    assert apart == pytest.approx(float(str(row.published_A).split()[0]), abs=0.0065)


def residue_of(structure, text):
    """Return the residue of an atom written like A/CYS 247/SG."""
    chain, residue, _ = text.split("/")
    number = int(re.match(r"-?\d+", residue.split()[1])[0])
    same = (structure.auth_asym_id == chain) & (structure.auth_seq_id == number)
    return int(np.flatnonzero(same & (structure.kind_of_residue == POLYMER))[0])


# Of the contacts that files state those between residues of polymers.
BETWEEN_POLYMERS = {
    "4hhh_frag.pdb": ("lattice", "disulfide"),
    "3jqh.cif": ("complex", "covalent bond"),
    "4zhl.cif.gz": ("lattice", "clash"),
    "1pfe.cif.gz": ("complex", "hydrogen bond"),
    "trp_repressor.cif": ("complex", "salt bridge"),
}


@pytest.mark.parametrize("name", BETWEEN_POLYMERS)
def test_contacts_that_files_state_are_found_with_image_kind_and_chemistry(
    name, request
):
    """SSBOND, validation records, struct_conn, REMARK 500: what depositors saw."""
    structure = read_structure(located(name, request))
    assemblies = choose_assemblies(structure, "auto")
    contacts = find_contacts(structure, reach_angstrom=4.5, assemblies=assemblies)
    chemistry = find_chemistry(structure, contacts, assemblies=assemblies)
    table = make_group_table(structure.crystal)
    back = np.column_stack(table.inverse(contacts.operator, contacts.shift))
    here = np.column_stack([contacts.operator, contacts.shift])
    (row,) = PUBLISHED[PUBLISHED["file"] == name].itertuples()
    operator = structure.crystal.triplets.index(row.operator)
    element = [operator, row.shift_a, row.shift_b, row.shift_c]
    one, two = residue_of(structure, row.atom_1), residue_of(structure, row.atom_2)
    forth = (contacts.residue_1 == one) & (contacts.residue_2 == two)
    forth &= (here == element).all(axis=1)
    inverted = (contacts.residue_1 == two) & (contacts.residue_2 == one)
    inverted &= (back == element).all(axis=1)
    (found,) = np.flatnonzero(forth | inverted)
    kind, seen = BETWEEN_POLYMERS[name]
    assert KINDS[contacts.kind[found]] == kind
    published = float(str(row.published_A).split()[0])
    assert contacts.distance_angstrom[found] <= published + 0.0065
    assert seen in chemistry.text[found]


@pytest.mark.parametrize(
    ("name", "stated"), [("4zhl.cif.gz", 1460), ("2xhe.pdb.gz", 4680)]
)
def test_assemblies_bury_what_the_file_says(name, stated):
    """Buried area of the dimer that REMARK 350 and struct_assembly_prop state."""
    structure = read_structure(DATA / name)
    found = find_exposure(structure, assemblies=choose_assemblies(structure, "auto"))
    assert np.nansum(found.complex_burial) == pytest.approx(stated, rel=0.05)


@pytest.mark.parametrize(
    ("name", "assembly"),
    sorted(
        {
            (row.file, str(row.assembly))
            for row in ASSEMBLIES.itertuples()
            if row.file != WITH_NCS
        }
    ),
)
def test_assembly_operators_are_the_images_of_another_program(name, assembly, request):
    structure = read_structure(located(name, request))
    chosen = choose_assemblies(structure, assembly)
    (frame,) = assembly_frames(structure, chosen)
    rows = ASSEMBLIES[
        (ASSEMBLIES["file"] == name) & (ASSEMBLIES["assembly"].astype(str) == assembly)
    ]
    for members in frame.members.values():
        found = {
            number + 1: (structure.crystal.triplets[element[0]], *element[1:])
            for element, number in members.items()
        }
        assert found == {
            row.operator_in_file: (row.operator, row.shift_a, row.shift_b, row.shift_c)
            for row in rows.itertuples()
        }


def test_strict_ncs_makes_the_capsid_from_one_chain(request):
    """60 assembly operators are 20 copies times the three turns of the crystal."""
    structure = read_structure(located(WITH_NCS, request))
    (frame,) = assembly_frames(structure, choose_assemblies(structure, "auto"))
    assert len(frame.members) == 20
    assert {len(elements) for elements in frame.members.values()} == {3}


def test_contacts_name_their_image_as_the_international_tables_do():
    structure = read_structure(DATA / "1orc.pdb")
    contacts = find_contacts(structure, reach_angstrom=4.0, assemblies=())
    texts = {operator_text(structure, contacts, k) for k in range(len(contacts.kind))}
    of_file = IMAGES[IMAGES["file"] == "1orc.pdb"]
    assert texts - {""} <= {
        f"{row.operator} [{row.shift_a} {row.shift_b} {row.shift_c}]"
        for row in of_file.itertuples()
    }
    assert "" in texts
    assert len(texts) == 6  # of an image and its inverse one is written


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        # residue pairs at 4.0 Å inside the asymmetric unit, by another program
        ("3o21.cif.gz", {"AB": (49, 1), "CD": (32, 1), "BC": (6, 2), "BD": (19, 2)}),
        ("3kpr.cif.gz", {"DF": (6, 2), "DI": (1, 2), "DJ": (19, 2), "EF": (5, 2)}),
        ("1a28.pdb.gz", {"AB": (23, 2)}),
    ],
)
def test_chains_of_one_assembly_are_complex_and_others_lattice(name, expected, request):
    structure = first_alternatives(read_structure(located(name, request)))
    contacts = find_contacts(
        structure,
        reach_angstrom=4.0,
        assemblies=choose_assemblies(structure, "auto"),
    )
    here = (contacts.operator == 0) & ~contacts.shift.any(axis=1)
    chain = structure.auth_asym_id
    pairs = np.char.add(chain[contacts.residue_1], chain[contacts.residue_2])
    for pair, (number, kind) in expected.items():
        kinds = contacts.kind[here & (pairs == pair)]
        assert kinds.tolist() == [kind] * number


def test_every_shared_file_gives_contacts_or_one_line(data_folder):
    """No file may end in a traceback, whatever it is."""
    n_read = 0
    for path in sorted(data_folder.rglob("*")):
        if path.is_dir() or path.suffix in {".md", ""}:
            continue
        complaint = ""
        try:
            structure = read_structure(path)
        except StructmapError as error:
            complaint = str(error)
        if complaint:
            assert complaint.startswith(str(path))
            assert "\n" not in complaint
            continue
        n_read += 1
        chosen = choose_assemblies(structure, "auto")
        contacts = find_contacts(structure, reach_angstrom=4.5, assemblies=chosen)
        assert (structure.kind_of_residue == POLYMER).any()
        assert len(contacts.kind) > 0
        assert (contacts.residue_1 <= contacts.residue_2).all()
    assert n_read >= 47
