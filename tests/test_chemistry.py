import dataclasses
import itertools

import numpy as np
import pytest

from structmap.chemistry import CHEMISTRY_KINDS, find_bridges, find_chemistry
from structmap.chemistry.atom_types import find_ring_centres
from structmap.contacts import (
    KINDS,
    choose_assemblies,
    contact_matrix,
    find_contacts,
    image_matrix,
    make_group_table,
)
from structmap.structure import POLYMER, WATER, read_structure, residue_label
from tests.crystals import DATA, apply, moved

# Residue contacts of each kind in the chain, the complex, the lattice. Counted by a
# prototype of its own. Hydrogen bonds of 1GBT are two fewer than it had: it took the
# nitrogens of Pro 92 and Pro 173, which have no hydrogen, for donors.
COUNTS = {
    ("1orc.pdb", "salt bridge"): (4, 0, 1),
    ("4cup.cif.gz", "salt bridge"): (8, 0, 2),
    ("4zhl.cif.gz", "salt bridge"): (8, 1, 1),
    ("1orc.pdb", "hydrogen bond"): (84, 0, 10),
    ("1gbt.cif.gz", "hydrogen bond"): (202, 0, 5),
    ("1orc.pdb", "hydrophobic"): (35, 0, 5),
    ("4cup.cif.gz", "hydrophobic"): (84, 5, 6),
    ("1orc.pdb", "cation-pi"): (2, 0, 2),
    ("1gbt.cif.gz", "cation-pi"): (6, 0, 0),
    ("4cup.cif.gz", "cation-pi"): (5, 0, 1),
    ("1a8o.pdb.gz", "salt bridge"): (2, 0, 2),
    ("2xhe.pdb.gz", "salt bridge"): (49, 4, 5),
    ("1a8o.pdb.gz", "hydrogen bond"): (126, 2, 8),
    ("1a8o.pdb.gz", "disulfide"): (1, 0, 0),
    ("1gbt.cif.gz", "disulfide"): (6, 0, 0),
    ("4zhl.cif.gz", "disulfide"): (6, 0, 0),
}
# Pairs bridged by a water, and those of them not in direct contact. For the lattice of
# 1ORC the prototype had one pair more (13); the enumeration below gives 12.
BRIDGED = {
    "1orc.pdb": ((30, 0, 12), (5, 0, 4)),
    "1gbt.cif.gz": ((128, 0, 14), (36, 0, 12)),
    "4cup.cif.gz": ((70, 2, 20), (10, 0, 6)),
    "3jqh.cif": ((6, 9, 5), (1, 5, 2)),
    "1a8o.pdb.gz": ((35, 4, 18), (7, 2, 6)),
}


@pytest.fixture(scope="module")
def chemistry_of():
    known = {}

    def make(name):
        if name not in known:
            structure = read_structure(DATA / name)
            assemblies = choose_assemblies(structure, "auto")
            contacts = find_contacts(
                structure, reach_angstrom=4.5, assemblies=assemblies
            )
            found = find_chemistry(structure, contacts, assemblies=assemblies)
            known[name] = structure, contacts, found
        return known[name]

    return make


def by_kind(kind):
    return tuple(np.bincount(kind, minlength=3).tolist())


def keys_of(pairs):
    columns = (pairs.residue_1, pairs.residue_2, pairs.operator, pairs.shift)
    return [tuple(row) for row in np.column_stack(columns).tolist()]


# --- outside values -------------------------------------------------------------------


@pytest.mark.parametrize(("name", "kind"), COUNTS)
def test_contacts_of_each_kind(chemistry_of, name, kind):
    _, contacts, found = chemistry_of(name)
    assert by_kind(contacts.kind[found.contacts_of(kind)]) == COUNTS[name, kind]


@pytest.mark.parametrize("name", BRIDGED)
def test_pairs_bridged_by_a_water(chemistry_of, name):
    _, contacts, found = chemistry_of(name)
    bridges, touching = found.bridges, set(keys_of(contacts))
    apart = np.array([key not in touching for key in keys_of(bridges)])
    water = bridges.through == 0
    counts = by_kind(bridges.kind[water]), by_kind(bridges.kind[water & apart])
    assert counts == BRIDGED[name]


def waters_by_enumeration(structure):
    """Bridged pairs from all images one by one, named as contacts are."""
    table = make_group_table(structure.crystal)
    kind = structure.kind_of_residue[structure.residue_of_atom]
    waters = np.flatnonzero((kind == WATER) & (structure.element == "O"))
    ends = (kind == POLYMER) & np.isin(structure.element, ["N", "O"])
    ends = np.flatnonzero(ends)
    legs = {}
    for operator in range(len(structure.crystal.triplets)):
        for shift in itertools.product(range(-4, 5), repeat=3):
            image = apply(
                image_matrix(structure, operator, shift), structure.position[ends]
            )
            apart = structure.position[waters][:, None] - image[None]
            for w, e in zip(
                *np.nonzero(np.linalg.norm(apart, axis=2) <= 3.5), strict=True
            ):
                letters = {structure.altloc[waters[w]], structure.altloc[ends[e]]}
                if len(letters - {""}) < 2:
                    leg = (int(structure.residue_of_atom[ends[e]]), operator, *shift)
                    legs.setdefault(w, set()).add(leg)

    def element(operator, shift):
        return np.array([operator]), np.array([shift])

    def between(one, two):
        operator, shift = table.product(
            table.inverse(*element(one[1], one[2:])), element(two[1], two[2:])
        )
        return (one[0], two[0], int(operator[0]), *shift[0].tolist())

    pairs = set()
    for of_water in legs.values():
        for one, two in itertools.combinations(of_water, 2):
            pair = min(between(one, two), between(two, one))
            if not (pair[0] == pair[1] and pair[2:] == (0, 0, 0, 0)):
                pairs.add(pair)
    return pairs


@pytest.mark.parametrize("name", ["1orc.pdb", "5wkd.pdb", "1pfe.cif.gz"])
def test_bridges_are_those_of_an_enumeration(name):
    structure = read_structure(DATA / name)
    found = find_bridges(structure, assemblies=choose_assemblies(structure, "auto"))
    water = found.through == 0
    keys = [
        key for key, is_water in zip(keys_of(found), water, strict=True) if is_water
    ]
    assert len(keys) == len(set(keys))
    assert set(keys) == waters_by_enumeration(structure)


def test_a_copper_ion_holds_a_chain_to_its_image(chemistry_of):
    # LINK records of 4OZ7: copper between a chain and an image.
    structure, _, found = chemistry_of("4oz7.pdb")
    metal = found.bridges.through == 1
    assert metal.any()
    centres = found.bridges.centre[metal]
    assert set(structure.element[centres].tolist()) <= {"Cu", "CU"}
    assert (found.bridges.kind[metal] == KINDS.index("lattice")).any()


def test_a_peptide_without_end_is_bonded_to_its_image(chemistry_of):
    # C of residue 23 of 3JQH stands 1.33 Å, a peptide bond, from N of residue 1 of an
    # image.
    structure, contacts, found = chemistry_of("3jqh.cif")
    bonds = found.contacts_of("covalent bond")
    across = bonds[contacts.kind[bonds] != 0]
    assert len(across) == 1
    ends = contacts.residue_1[across[0]], contacts.residue_2[across[0]]
    assert {residue_label(structure, int(end)) for end in ends} == {"A/1", "A/23"}
    assert len(found.contacts_of("clash")) == 0


def test_atoms_that_overlap_across_the_lattice_are_a_clash(chemistry_of):
    # OD1 of Asn 76 and NH1 of Arg 206 of 4ZHL are 1.87 Å apart in the crystal.
    structure, contacts, found = chemistry_of("4zhl.cif.gz")
    clash = found.kind == CHEMISTRY_KINDS.index("clash")
    clash &= contacts.kind[found.contact] == KINDS.index("lattice")
    (index,) = np.flatnonzero(clash)
    names = structure.atom_name[[found.atom_1[index], found.atom_2[index]]]
    assert names.tolist() == ["OD1", "NH1"]
    assert found.distance_angstrom[index] == pytest.approx(1.87, abs=0.01)


# --- laws -----------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["1orc.pdb", "4cup.cif.gz", "1pfe.cif.gz", "4oz7.pdb"])
def test_every_distance_is_that_of_its_atoms(chemistry_of, name):
    structure, contacts, found = chemistry_of(name)
    rings = [CHEMISTRY_KINDS.index(kind) for kind in ("cation-pi", "aromatic")]
    bridged = [CHEMISTRY_KINDS.index(kind) for kind in ("metal", "water bridge")]
    for contact, kind, distance, atom_1, atom_2 in zip(
        found.contact,
        found.kind,
        found.distance_angstrom,
        found.atom_1,
        found.atom_2,
        strict=True,
    ):
        assert structure.residue_of_atom[atom_1] == contacts.residue_1[contact]
        assert structure.residue_of_atom[atom_2] == contacts.residue_2[contact]
        if kind in rings or kind in bridged:
            continue
        matrix = contact_matrix(structure, contacts, int(contact))
        there = apply(matrix, structure.position[[atom_2]])[0]
        apart = np.linalg.norm(structure.position[atom_1] - there)
        assert apart == pytest.approx(distance, abs=1e-6)
        assert distance >= contacts.distance_angstrom[contact] - 1e-6


def test_which_copy_the_file_lists_does_not_matter():
    structure = read_structure(DATA / "4cup.cif.gz")
    other = moved(structure, image_matrix(structure, 2, (1, 0, -2)))
    counts = []
    for one in (structure, other):
        assemblies = choose_assemblies(one, "auto")
        contacts = find_contacts(one, reach_angstrom=4.5, assemblies=assemblies)
        found = find_chemistry(one, contacts, assemblies=assemblies)
        tags = np.column_stack([found.kind, contacts.kind[found.contact]])
        counts.append(
            (np.unique(tags, axis=0, return_counts=True), by_kind(found.bridges.kind))
        )
    np.testing.assert_array_equal(counts[0][0][0], counts[1][0][0])
    np.testing.assert_array_equal(counts[0][0][1], counts[1][0][1])
    assert counts[0][1] == counts[1][1]


def test_a_water_moved_to_another_cell_bridges_the_same_pairs():
    structure = read_structure(DATA / "1orc.pdb")
    position = structure.position.copy()
    water = structure.kind_of_residue[structure.residue_of_atom] == WATER
    position[water] = apply(image_matrix(structure, 2, (1, -1, 3)), position[water])
    other = dataclasses.replace(structure, position=position)
    one, two = (find_bridges(s, assemblies=()) for s in (structure, other))
    assert keys_of(one) == keys_of(two)
    np.testing.assert_allclose(one.leg_1_angstrom, two.leg_1_angstrom, atol=1e-6)


# --- words, rings, odd files ----------------------------------------------------------


def test_text_names_every_kind_with_its_distance(chemistry_of):
    _, contacts, found = chemistry_of("1orc.pdb")
    index = found.contacts_of("salt bridge")
    lattice = [k for k in index if contacts.kind[k] == 2]
    assert len(lattice) == 1
    text = str(found.text[lattice[0]])
    assert text.startswith("salt bridge ")
    for part in text.split("; "):
        kind, _, distance = part.rpartition(" ")
        assert kind in CHEMISTRY_KINDS
        assert 0.9 < float(distance) <= 7.0
    told = np.array([len(t.split("; ")) if t else 0 for t in found.text.tolist()])
    np.testing.assert_array_equal(
        told, np.bincount(found.contact, minlength=len(contacts.kind))
    )


def test_ring_centres_are_those_of_regular_rings():
    structure = read_structure(DATA / "1gbt.cif.gz")
    first, centre, _ = find_ring_centres(structure)
    names = structure.auth_comp_id[structure.residue_of_atom[first]].tolist()
    comp = structure.auth_comp_id[structure.kind_of_residue == POLYMER].tolist()
    assert names.count("PHE") == comp.count("PHE")
    assert names.count("TYR") == comp.count("TYR")
    assert names.count("TRP") == 2 * comp.count("TRP")
    # 1.39 Å from the centre of a benzene ring to its carbons; less in five-rings.
    radius = np.linalg.norm(structure.position[first] - centre, axis=1)
    six = np.isin(names, ["PHE", "TYR"])
    assert radius[six] == pytest.approx(np.full(six.sum(), 1.39), abs=0.06)


def test_a_file_without_waters_or_side_chains_is_no_trouble(chemistry_of):
    structure, contacts, found = chemistry_of("1lzh.pdb.gz")
    assert structure.ca_only
    assert len(found.text) == len(contacts.kind)
    assert len(found.bridges.through) == 0


def test_an_ensemble_is_told_from_its_first_model(chemistry_of):
    structure, _, found = chemistry_of("1as5.cif.gz")
    assert structure.n_models > 1
    assert (structure.model_of_atom[found.atom_1] == 0).all()
    assert len(found.contacts_of("disulfide")) > 0


def test_a_disulfide_is_found_across_the_lattice(chemistry_of):
    # The fragment of 4HHH has SG atoms of an image 2.37 Å away.
    structure, contacts, found = chemistry_of("4hhh_frag.pdb")
    index = found.contacts_of("disulfide")
    assert contacts.kind[index].tolist() == [KINDS.index("lattice")]
    tag = (found.kind == CHEMISTRY_KINDS.index("disulfide")).argmax()
    assert found.distance_angstrom[tag] == pytest.approx(2.37, abs=0.01)
    assert structure.atom_name[found.atom_1[tag]] == "SG"
    assert len(found.contacts_of("clash")) == 0
