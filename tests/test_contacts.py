import gemmi
import numpy as np
import pytest
from scipy.spatial import cKDTree

from structmap.contacts import (
    CHAIN,
    COMPLEX,
    LATTICE,
    choose_assemblies,
    contact_matrix,
    contacts_within,
    find_contacts,
    image_matrix,
    make_group_table,
)
from structmap.contacts.assemblies import assembly_frames
from structmap.structure import POLYMER, read_structure, residue_label
from tests.brute_force import count_directed_pairs, find_edges
from tests.crystals import (
    DATA,
    as_p1,
    edges_of_contacts,
    moved,
    n_self_inverse,
    turned_frame,
)

SMALL = [
    "5wkd.pdb",
    "5e5z.pdb",
    "5i55.cif",
    "1yjp.cif",
    "7etn.cif.gz",
    "3jqh.cif",
    "1pfe.cif.gz",
    "3wup.json.gz",
    "4oz7.pdb",
    "4hhh_frag.pdb",
    "1orc.pdb",
    "1ejg.pdb.gz",
]
# Residue edges, those of a residue with its own image, different elements (identity
# included), chain, complex and lattice contacts at 4.5 Å. Found by enumeration of all
# operators, shifts and atom pairs with a program of its own, confirmed by gemmi's raw
# search.
COUNTS = {
    "5wkd.pdb": (44, 9, 10, 10, 23, 11),
    "5e5z.pdb": (40, 4, 14, 9, 16, 15),
    "5i55.cif": (129, 3, 11, 80, 43, 6),
    "1orc.pdb": (304, 0, 6, 256, 0, 48),
    "3jqh.cif": (123, 11, 8, 80, 32, 11),
    "1pfe.cif.gz": (67, 5, 9, 29, 28, 10),
    "3wup.json.gz": (155, 4, 6, 118, 0, 37),
    "4oz7.pdb": (76, 4, 8, 33, 0, 43),
    "4cup.cif.gz": (564, 3, 6, 498, 19, 47),
    "4zhl.cif.gz": (1321, 1, 11, 1206, 45, 70),
    "1a8o.pdb.gz": (353, 3, 6, 304, 14, 35),
    "1a7g.cif.gz": (403, 4, 4, 357, 28, 18),
    "2xhe.pdb.gz": (3832, 7, 6, 3656, 113, 63),
    "2beg.pdb.gz": (526, 0, 1, 265, 261, 0),
    "7ddo.pdb.gz": (3728, 0, 1, 3686, 42, 0),
    "archive/3dg1_final.cif": (34, 9, 10, 9, 0, 25),
    "1gbt.cif.gz": (1085, 0, 6, 1048, 0, 37),
    "archive/6wg6.cif.gz": (11705, 0, 9, 10889, 287, 529),
    "public/ncs/5cvz_final.pdb": (14676, None, 8, 12340, 2286, 50),
    "archive/7cfn.cif.gz": (4853, 0, 1, 4543, 310, 0),
}
# Of these contacts those between neighbours in the list of modelled residues.
ADJACENT = {
    "archive/3dg1_final.cif": 5,
    "5wkd.pdb": 6,
    "5e5z.pdb": 5,
    "5i55.cif": 21,
    "1orc.pdb": 63,
    "1a8o.pdb.gz": 69,
    "1a7g.cif.gz": 81,
    "3jqh.cif": 22,
    "1pfe.cif.gz": 14,
    "3wup.json.gz": 30,
    "4oz7.pdb": 18,
    "4cup.cif.gz": 114,
    "4zhl.cif.gz": 255,
    "1gbt.cif.gz": 222,
    "2xhe.pdb.gz": 782,
    "archive/6wg6.cif.gz": 2477,
}
# Ordered atom pairs within 4.5 Å, those inside residues too, alternates respected.
DIRECTED_PAIRS = {
    "5wkd.pdb": 1056,
    "5e5z.pdb": 906,
    "5i55.cif": 4168,
    "1orc.pdb": 9596,
    "3jqh.cif": 4504,
    "1pfe.cif.gz": 7106,
    "3wup.json.gz": 4872,
    "4oz7.pdb": 3037,
    "1a7g.cif.gz": 12883,
}


def contacts_of(structure, reach=4.5, assembly="auto"):
    return find_contacts(
        structure,
        reach_angstrom=reach,
        assemblies=choose_assemblies(structure, assembly),
    )


def counts(contacts, kind=None):
    if kind is not None:
        return int(np.count_nonzero(contacts.kind == kind))
    return tuple(counts(contacts, kind) for kind in (CHAIN, COMPLEX, LATTICE))


def located(name, request):
    if "/" in name:
        path = request.getfixturevalue("data_folder") / name
        if not path.exists():
            pytest.skip(f"the folder of larger data holds no {name}")
        return path
    return DATA / name


@pytest.mark.parametrize("reach", [3.6, 4.5, 7.0])
@pytest.mark.parametrize("name", SMALL)
def test_equals_all_pairs_over_all_images(name, reach):
    structure = read_structure(DATA / name)
    expected = find_edges(DATA / name, reach)
    polymers = np.flatnonzero(structure.kind_of_residue == POLYMER)
    assert [residue_label(structure, int(i)) for i in polymers] == expected.residues
    contacts = contacts_of(structure, reach)
    found = edges_of_contacts(structure, contacts)
    assert set(found) == set(expected.edges)
    for edge, (distance, n_atom_pairs) in expected.edges.items():
        assert found[edge][0] == pytest.approx(distance, abs=1e-6)
        assert found[edge][1] == n_atom_pairs, edge


@pytest.mark.parametrize("name", DIRECTED_PAIRS)
def test_the_slow_way_counts_as_many_atom_pairs_as_gemmi(name):
    """What the other tests lean on: enumeration against gemmi's cell lists."""
    structure = gemmi.read_structure(str(DATA / name))
    structure.remove_hydrogens()
    search = gemmi.NeighborSearch(structure[0], structure.cell, 5.0)
    search.populate(include_h=False)
    contacts = gemmi.ContactSearch(4.5)
    contacts.ignore = gemmi.ContactSearch.Ignore.Nothing
    contacts.twice = True
    contacts.special_pos_cutoff_sq = 0.0
    found = contacts.find_contacts(search)
    letters = [(c.partner1.atom.altloc, c.partner2.atom.altloc) for c in found]
    n_agreeing = sum(a == b or "\0" in (a, b) for a, b in letters)
    assert n_agreeing - structure[0].count_atom_sites() == DIRECTED_PAIRS[name]
    assert count_directed_pairs(DATA / name, 4.5) == DIRECTED_PAIRS[name]


@pytest.mark.parametrize("name", COUNTS)
def test_numbers_of_contacts_are_the_published_ones(name, request):
    structure = read_structure(located(name, request))
    contacts = contacts_of(structure)
    n_edges, n_self, n_elements, *kinds = COUNTS[name]
    elements = np.column_stack([contacts.operator, contacts.shift])
    with_identity = np.unique(np.vstack([elements, np.zeros((1, 4))]), axis=0)
    assert len(contacts.residue_1) == n_edges
    assert len(with_identity) == n_elements
    assert counts(contacts) == tuple(kinds)
    if n_self is not None:
        assert np.count_nonzero(contacts.residue_1 == contacts.residue_2) == n_self


@pytest.mark.parametrize("name", ADJACENT)
def test_neighbours_in_the_chain_touch(name, request):
    structure = read_structure(located(name, request))
    contacts = contacts_of(structure)
    following = contacts.residue_2 == contacts.residue_1 + 1
    assert np.count_nonzero(following & (contacts.kind == CHAIN)) == ADJACENT[name]


def test_alternates_of_atoms_that_have_no_occupancy_are_left_out():
    """Three atoms of 1A8O: with them a plain search finds 11,530 ordered pairs."""
    assert count_directed_pairs(DATA / "1a8o.pdb.gz", 4.5) == 11495
    structure = gemmi.read_structure(str(DATA / "1a8o.pdb.gz"))
    assert sum(atom.occ == 0 for c in structure[0] for r in c for atom in r) == 3


def test_choice_of_assembly_decides_the_kind():
    structure = read_structure(DATA / "3wup.json.gz")
    assert counts(contacts_of(structure, assembly="1")) == (118, 0, 37)
    assert counts(contacts_of(structure, assembly="2")) == (118, 21, 16)
    assert counts(contacts_of(structure, assembly="1,2")) == (118, 21, 16)
    assert counts(contacts_of(structure, assembly="none")) == (118, 0, 37)


def test_chains_of_different_assemblies_touch_as_lattice_without_any_operator():
    # 1A28: two monomeric assemblies, chains A and B touch in the asymmetric unit.
    structure = read_structure(DATA / "1a28.pdb.gz")
    contacts = contacts_of(structure, 4.0)
    chain = structure.auth_asym_id
    between = (
        (contacts.operator == 0)
        & ~contacts.shift.any(axis=1)
        & (chain[contacts.residue_1] != chain[contacts.residue_2])
    )
    assert np.count_nonzero(between) == 23
    assert (contacts.kind[between] == LATTICE).all()


@pytest.mark.parametrize(
    ("name", "assembly", "n_pairs"),
    [
        ("4cup.cif.gz", "auto", 38),
        ("1pfe.cif.gz", "auto", 55),
        ("3wup.json.gz", "2", 63),
        ("3jqh.cif", "auto", 744),
        ("5i55.cif", "auto", 645),
        ("5e5z.pdb", "auto", 106),
        ("5wkd.pdb", "auto", 194),
        ("4zhl.cif.gz", "auto", 45),
        ("1a8o.pdb.gz", "auto", 25),
        ("1a7g.cif.gz", "auto", 53),
        ("2xhe.pdb.gz", "auto", 113),
    ],
)
def test_complex_contacts_are_those_of_the_assembly_built_atom_by_atom(
    name, assembly, n_pairs
):
    """The assembly as gemmi makes it, counted by plain distances between its chains."""
    structure = read_structure(DATA / name)
    chosen = choose_assemblies(structure, assembly)
    built = gemmi.read_structure(str(DATA / name))
    built.setup_entities()
    built.remove_hydrogens()
    built.transform_to_assembly(
        chosen[0].name, gemmi.HowToNameCopiedChain.AddNumber, keep_spacegroup=False
    )
    chains, residues, positions, letters = [], [], [], []
    for number, chain in enumerate(built[0]):
        for item in chain.get_polymer():
            for atom in item:
                if atom.occ > 0:
                    chains.append(number)
                    residues.append(f"{number}/{item.seqid}")
                    positions.append(atom.pos.tolist())
                    letters.append(atom.altloc.strip("\0"))
    pairs = {
        (residues[i], residues[j])
        for i, j in cKDTree(positions).query_pairs(4.5)
        if chains[i] != chains[j]
        and (letters[i] == letters[j] or "" in (letters[i], letters[j]))
    }
    assert len(pairs) == n_pairs
    contacts = contacts_of(structure, assembly=assembly)
    assert pairs_in_assembly(structure, chosen, contacts) == n_pairs


def pairs_in_assembly(structure, chosen, contacts):
    """Sum over complex edges (a, b, g) of the members h of a with h g a member of b."""
    table = make_group_table(structure.crystal)
    (frame,) = assembly_frames(structure, chosen)
    total = 0.0
    for k in np.flatnonzero(contacts.kind == COMPLEX):
        copy_1, copy_2 = structure.copy_of_residue[
            [contacts.residue_1[k], contacts.residue_2[k]]
        ]
        g = contacts.operator[k : k + 1], contacts.shift[k : k + 1]
        own = 0
        for h in frame.members[copy_1]:
            operator, shift = table.product((np.array(h[:1]), np.array([h[1:]])), g)
            own += (*operator.tolist(), *shift[0].tolist()) in frame.members[copy_2]
        back, back_shift = table.inverse(*g)
        twofold = back[0] == g[0][0] and (back_shift == g[1]).all()
        same = contacts.residue_1[k] == contacts.residue_2[k]
        total += own / 2 if twofold and same else own
    return total


# Laws


MOVED = ["5wkd.pdb", "5i55.cif", "3jqh.cif", "1pfe.cif.gz", "3wup.json.gz", "4oz7.pdb"]


def described(contacts):
    """What does not depend on which copy of the crystal the file lists."""
    pairs = zip(
        contacts.residue_1.tolist(),
        contacts.residue_2.tolist(),
        contacts.kind.tolist(),
        np.round(contacts.distance_angstrom, 6).tolist(),
        strict=True,
    )
    return sorted(pairs)


@pytest.mark.parametrize("name", MOVED)
def test_any_other_copy_of_the_crystal_has_the_same_contacts(name):
    structure = read_structure(DATA / name)
    expected = described(contacts_of(structure))
    n_operators = len(structure.crystal.triplets)
    for operator, shift in ((0, (3, -2, 5)), (n_operators - 1, (-1, 0, 2))):
        other = moved(structure, image_matrix(structure, operator, shift))
        assert described(contacts_of(other)) == expected


@pytest.mark.parametrize("name", MOVED)
def test_another_cartesian_frame_leaves_contacts_and_labels(name):
    structure = read_structure(DATA / name)
    angle = 0.7
    matrix = np.eye(4)
    matrix[:2, :2] = [[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]]
    matrix[:3, :3] = matrix[:3, :3] @ np.array([[0, 0, 1], [1, 0, 0], [0, 1, 0]])
    matrix[:3, 3] = 11.0, -47.5, 3.25
    other = turned_frame(structure, matrix)
    before, after = contacts_of(structure), contacts_of(other)
    for column in ("residue_1", "residue_2", "operator", "shift", "kind"):
        np.testing.assert_array_equal(getattr(before, column), getattr(after, column))
    np.testing.assert_allclose(before.distance_angstrom, after.distance_angstrom)


def turned_line(line):
    """Write x, y, z of 1ORC as y, z + 10, x, and its SCALE records to match."""
    if line.startswith(("ATOM", "HETATM")):
        x, y, z = (float(line[i : i + 8]) for i in (30, 38, 46))
        return f"{line[:30]}{y:8.3f}{z + 10:8.3f}{x:8.3f}{line[54:]}"
    if not line.startswith("SCALE"):
        return line
    row = int(line[5]) - 1
    a, b, c = 1 / 34.77, 1 / 39.17, 1 / 48.31
    numbers = ([0, 0, a], [b, 0, 0], [0, c, 0])[row]
    shift = (0, 0, -10 * c)[row]
    return (
        f"SCALE{row + 1}    "
        + "".join(f"{n:10.6f}" for n in numbers)
        + (f"     {shift:10.5f}")
    )


def test_scale_records_of_the_file_set_the_frame(tmp_path):
    """The axes of the atoms need not be those that cell lengths and angles imply."""
    text = (DATA / "1orc.pdb").read_text().splitlines()
    path = tmp_path / "turned.pdb"
    path.write_text("\n".join(turned_line(line) for line in text))
    before = contacts_of(read_structure(DATA / "1orc.pdb"))
    after = contacts_of(read_structure(path))
    for column in ("residue_1", "residue_2", "operator", "shift", "kind"):
        np.testing.assert_array_equal(getattr(before, column), getattr(after, column))


@pytest.mark.parametrize(
    ("name", "n_in_p1"),
    [
        ("4cup.cif.gz", 4500),
        ("3jqh.cif", 968),
        ("1pfe.cif.gz", 780),
        ("4oz7.pdb", 592),
        ("5wkd.pdb", 174),
        ("3wup.json.gz", 1860),
        ("4zhl.cif.gz", 11889),
        ("1a8o.pdb.gz", 2812),
        ("1a7g.cif.gz", 4812),
    ],
)
def test_writing_all_operators_out_multiplies_the_contacts(name, n_in_p1):
    """m operators turn E edges into m (E - s) + m s / 2, s over their own inverse."""
    structure = read_structure(DATA / name)
    contacts = contacts_of(structure)
    m, s = len(structure.crystal.triplets), n_self_inverse(structure, contacts)
    expected = m * (len(contacts.residue_1) - s) + m * s // 2
    expanded = contacts_of(as_p1(structure))
    assert len(expanded.residue_1) == expected == n_in_p1


def test_a_wider_search_holds_the_narrower_one():
    structure = read_structure(DATA / "5i55.cif")
    narrow = contacts_of(structure, 4.5)
    cut = contacts_within(contacts_of(structure, 8.0), 4.5)
    assert cut.reach_angstrom == 4.5
    for column in ("residue_1", "residue_2", "operator", "shift", "kind"):
        np.testing.assert_array_equal(getattr(narrow, column), getattr(cut, column))
    with pytest.raises(ValueError, match=r"^cutoff_angstrom is 9\.0; contacts were"):
        contacts_within(narrow, 9.0)


def test_some_residues_give_the_contacts_among_them():
    structure = read_structure(DATA / "4cup.cif.gz")
    chosen = np.zeros(len(structure.kind_of_residue), dtype=bool)
    chosen[10:60:2] = True
    assemblies = choose_assemblies(structure, "auto")
    part = find_contacts(
        structure, reach_angstrom=9.0, assemblies=assemblies, residues=chosen
    )
    whole = contacts_of(structure, 9.0)
    keep = chosen[whole.residue_1] & chosen[whole.residue_2]
    for column in ("residue_1", "residue_2", "operator", "shift", "kind", "atom_1"):
        np.testing.assert_array_equal(
            getattr(part, column), getattr(whole, column)[keep]
        )
    nothing = find_contacts(
        structure, reach_angstrom=9.0, assemblies=assemblies, residues=chosen & False
    )
    assert len(nothing.residue_1) == 0


@pytest.mark.parametrize("name", ["1orc.pdb", "1pfe.cif.gz", "4cup.cif.gz"])
def test_the_closest_atoms_are_as_far_apart_as_the_contact_says(name):
    structure = read_structure(DATA / name)
    contacts = contacts_of(structure)
    for k in range(0, len(contacts.residue_1), 5):
        matrix = contact_matrix(structure, contacts, k)
        first, second = structure.position[[contacts.atom_1[k], contacts.atom_2[k]]]
        apart = np.linalg.norm(first - (matrix[:3, :3] @ second + matrix[:3, 3]))
        assert apart == pytest.approx(contacts.distance_angstrom[k])
        assert structure.residue_of_atom[contacts.atom_1[k]] == contacts.residue_1[k]
        assert structure.residue_of_atom[contacts.atom_2[k]] == contacts.residue_2[k]
