"""Atoms of ligands as sites: matching, contacts over the crystal, files and words."""

from collections import Counter
from pathlib import Path

import gemmi
import numpy as np
import pytest

import structmap
from structmap.analysis import compare_analyses
from structmap.contacts import (
    CHAIN,
    LATTICE,
    choose_assemblies,
    find_contacts,
    make_site_graph,
)
from structmap.lattice import judge_lattice
from structmap.page.listing import entry_components, entry_letters, list_entries
from structmap.sites import match_rows, match_sites, part_ligands, site_centres
from structmap.structure import LIGAND_PART, POLYMER, read_structure
from structmap.values import read_values

DATA = Path(__file__).parent / "data"
HEADER = "auth_asym_id,auth_seq_id,auth_comp_id,auth_atom_id,value,error"


def read_gemmi(path):
    found = gemmi.read_structure(str(path))
    found.setup_entities()
    return found


def is_polymer(residue):
    return residue.entity_type == gemmi.EntityType.Polymer


def polymer_rows(path, chains=None):
    rows = {}
    for chain in read_gemmi(path)[0]:
        for residue in chain:
            if is_polymer(residue) and (not chains or chain.name in chains):
                number = str(residue.seqid).strip()
                rows[chain.name, number] = f"{chain.name},{number},{residue.name},,10,1"
    return list(rows.values())


def ligand_rows(path, component, chains=None):
    return [
        f"{chain.name},{residue.seqid.num},{component},{atom.name},18,1"
        for chain in read_gemmi(path)[0]
        for residue in chain
        if residue.name == component and (not chains or chain.name in chains)
        for atom in residue
        if not atom.is_hydrogen()
    ]


def laid(tmp_path, path, rows, **choices):
    values = tmp_path / "values.csv"
    values.write_text("\n".join([HEADER, *rows]) + "\n")
    structure, table = read_structure(path), read_values(values)
    sites = match_sites(structure, table, **choices)
    return structure, table, sites


def contacts_of(parted, reach):
    assemblies = choose_assemblies(parted.structure, "auto")
    return find_contacts(parted.structure, reach_angstrom=reach, assemblies=assemblies)


# --- contacts against every operator and shift ----------------------------------------


def found_partners(parted, contacts):
    """Count the polymer residues and images that each atom touches, by distance."""
    structure, out = parted.structure, Counter()
    ends = contacts.residue_1, contacts.residue_2
    for own, other in (ends, ends[::-1]):
        for index in np.flatnonzero(
            (structure.kind_of_residue[own] == LIGAND_PART)
            & (structure.kind_of_residue[other] == POLYMER)
        ):
            atom, partner = int(own[index]), int(other[index])
            name = structure.atom_name[structure.residue_of_atom == atom][0]
            out[
                str(structure.auth_asym_id[atom]),
                int(structure.auth_seq_id[atom]),
                str(name),
                str(structure.auth_asym_id[partner]),
                f"{structure.auth_seq_id[partner]}{structure.ins_code[partner]}",
                round(float(contacts.distance_angstrom[index]), 2),
            ] += 1
    return out


def plain_partners(path, component, reach):
    """The same from every operator and shift, one entry a residue and image."""
    st, out = read_gemmi(path), Counter()
    atoms = [
        (chain.name, residue, atom)
        for chain in st[0]
        for residue in chain
        for atom in residue
        if not atom.is_hydrogen() and atom.occ > 0
    ]
    polymer = [one for one in atoms if is_polymer(one[1])]
    place = np.array([atom.pos.tolist() for _, _, atom in polymer])
    ligand = [one for one in atoms if one[1].name == component]
    own = np.array([atom.pos.tolist() for _, _, atom in ligand])
    for moved in all_images(st, place):
        near = np.linalg.norm(moved - own.mean(0), axis=1) < 40
        apart = np.linalg.norm(own[:, None] - moved[near], axis=2)
        nearest = {}
        for row, column in zip(*np.nonzero(apart <= reach), strict=True):
            chain, residue, atom = ligand[row]
            other, partner, touched = polymer[np.flatnonzero(near)[column]]
            if len({atom.altloc, touched.altloc} - {"\0"}) > 1:
                continue
            number = str(partner.seqid).strip()
            key = (chain, residue.seqid.num, atom.name, other, number)
            nearest[key] = min(apart[row, column], nearest.get(key, np.inf))
        out.update((*key, round(float(d), 2)) for key, d in nearest.items())
    return out


def all_images(st, place):
    """Yield places in all images up to two cells away."""
    cell, group = st.cell, st.find_spacegroup()
    orth, frac = np.array(cell.orth.mat.tolist()), np.array(cell.frac.mat.tolist())
    fractional = place @ frac.T
    for operation in group.operations():
        seitz = np.array(operation.float_seitz())
        turned = fractional @ seitz[:3, :3].T + seitz[:3, 3]
        for shift in np.ndindex(5, 5, 5):
            yield (turned + np.array(shift) - 2) @ orth.T


@pytest.mark.parametrize(
    ("name", "component", "has_lattice"),
    [
        ("4cup.cif.gz", "ZYB", True),
        ("1pfe.cif.gz", "QUI", True),  # a nucleic acid with an intercalated antibiotic
        ("1a28.pdb.gz", "STR", False),  # a steroid inside each of two chains
        ("5i55.cif", "MPD", False),
        ("4oz7.pdb", "CU1", True),  # an ion
    ],
)
def test_contacts_of_each_atom_are_those_of_a_plain_search(
    tmp_path, name, component, has_lattice
):
    path = DATA / name
    structure, _, sites = laid(
        tmp_path, path, polymer_rows(path) + ligand_rows(path, component)
    )
    parted = part_ligands(structure, sites)
    contacts = contacts_of(parted, 4.5)
    found, expected = (
        found_partners(parted, contacts),
        plain_partners(path, component, 4.5),
    )
    assert set(found) == set(expected)
    assert found == expected
    of_ligand = parted.structure.kind_of_residue == LIGAND_PART
    touching = of_ligand[contacts.residue_1] | of_ligand[contacts.residue_2]
    assert bool((touching & (contacts.kind == LATTICE)).any()) == has_lattice


def test_a_ligand_and_a_loop_of_a_neighbour_are_joined_by_the_lattice(tmp_path):
    """ZYB touches residue 1899 of a mate; some near that touch it in no other way."""
    path = DATA / "4cup.cif.gz"
    rows = polymer_rows(path) + ligand_rows(path, "ZYB")
    structure, _, sites = laid(tmp_path, path, rows)
    parted = part_ligands(structure, sites)
    contacts = contacts_of(parted, 4.5)
    graph = make_site_graph(contacts, parted.sites, cutoff_angstrom=4.5)
    ligand = np.flatnonzero(sites.atom != "").tolist()
    in_chain = [
        {int(a), int(b)}
        for a, b, kind in zip(graph.site_1, graph.site_2, graph.kind, strict=True)
        if kind == CHAIN
    ]
    pocket = set().union(*(pair for pair in in_chain if pair & set(ligand)))
    patch = {int(np.flatnonzero(sites.name == "A/1899")[0])}
    while len(patch) < 4:
        beside = set().union(*(pair for pair in in_chain if pair & patch))
        patch.add(min(beside - patch - pocket))
    verdict = judge_lattice(
        np.array(sorted([*ligand, *patch])),
        graph,
        structure=parted.structure,
        sites=parted.sites,
        contacts=contacts,
        assemblies=choose_assemblies(parted.structure, "auto"),
    )
    assert verdict.verdict == "lattice-joined"
    assert [len(piece) for piece in verdict.pieces_without_lattice] == [11, 4]
    assert verdict.operators == ("x,-y,-z [0 1 1]",)


def test_haems_of_two_chains(tmp_path, data_folder):
    path = data_folder / "archive" / "19hc.pdb.gz"
    structure, _, sites = laid(
        tmp_path, path, polymer_rows(path, "A") + ligand_rows(path, "HEM", "A")
    )
    assert not sites.unmatched
    iron = np.flatnonzero(sites.atom == "FE")
    assert len(iron) == 9
    copies = [
        structure.auth_asym_id[sites.copy_residue[sites.copy_site == site]].tolist()
        for site in iron
    ]
    assert copies == [["A", "B"]] * 9
    parted = part_ligands(structure, sites)
    found = found_partners(parted, contacts_of(parted, 4.5))
    assert found == plain_partners(path, "HEM", 4.5)
    # The nitrogen that is called NA, as a missing value is, stands four to a haem.
    nitrogens = [name for name in sites.atom if name in ("NA", "NB", "NC", "ND")]
    assert Counter(nitrogens) == dict.fromkeys(("NA", "NB", "NC", "ND"), 9)


@pytest.mark.parametrize(
    ("name", "component"), [("4cup.cif.gz", "ZYB"), ("1pfe.cif.gz", "QUI")]
)
def test_atoms_of_one_ligand_touch_within_the_chain(tmp_path, name, component):
    path = DATA / name
    structure, _, sites = laid(
        tmp_path, path, polymer_rows(path) + ligand_rows(path, component)
    )
    parted = part_ligands(structure, sites)
    graph = make_site_graph(contacts_of(parted, 4.5), parted.sites, cutoff_angstrom=4.5)
    centres = site_centres(parted.structure, parted.sites)
    kind = dict(
        zip(
            zip(graph.site_1.tolist(), graph.site_2.tolist(), strict=True),
            graph.kind.tolist(),
            strict=True,
        )
    )
    atoms = np.flatnonzero(sites.atom != "")
    bonded = 0
    for one in atoms.tolist():
        for two in atoms[atoms > one].tolist():
            same = sites.residue[one] == sites.residue[two]
            if same and np.linalg.norm(centres[one] - centres[two]) < 1.9:
                assert kind[one, two] == CHAIN
                bonded += 1
    assert bonded >= len(atoms) - 2  # rings have at least as many bonds as atoms


# --- matching -------------------------------------------------------------------------


def test_each_atom_is_a_site_of_its_own_and_lies_where_it_is(tmp_path):
    path = DATA / "4cup.cif.gz"
    rows = polymer_rows(path) + ligand_rows(path, "ZYB")
    structure, table, sites = laid(tmp_path, path, rows)
    parted = part_ligands(structure, sites)
    centres = site_centres(parted.structure, parted.sites)
    ligand = next(r for chain in read_gemmi(path)[0] for r in chain if r.name == "ZYB")
    place = {f"A/{ligand.seqid.num}/{a.name}": a.pos.tolist() for a in ligand}
    names = [name for name in sites.name if name.count("/") == 2]
    assert sorted(names) == sorted(n for n in place if n.split("/")[2][0] != "H")
    for site, name in enumerate(sites.name):
        if name in place:
            np.testing.assert_allclose(centres[site], place[name], atol=1e-3)
    written = match_rows(structure, table, sites)
    assert [r["status"] for r in written if r["atom"]] == ["matched"] * len(names)


def test_nothing_changes_without_rows_on_ligands(tmp_path):
    path = DATA / "4cup.cif.gz"
    structure, _, sites = laid(tmp_path, path, polymer_rows(path))
    parted = part_ligands(structure, sites)
    assert parted.structure is structure
    assert parted.sites is sites


def test_all_atoms_are_kept_and_the_polymer_stays_where_it_was(tmp_path):
    path = DATA / "4cup.cif.gz"
    rows = [*polymer_rows(path), *ligand_rows(path, "ZYB")[:3]]
    structure, _, sites = laid(tmp_path, path, rows)
    parted = part_ligands(structure, sites).structure
    n_polymer = int((structure.kind_of_residue == POLYMER).sum())
    before, after = (
        Counter(
            (*np.round(s.position[a], 3), str(s.atom_name[a]), str(s.auth_comp_id[r]))
            for a, r in enumerate(s.residue_of_atom)
        )
        for s in (structure, parted)
    )
    assert before == after
    np.testing.assert_array_equal(
        structure.auth_seq_id[:n_polymer], parted.auth_seq_id[:n_polymer]
    )
    assert (parted.kind_of_residue[n_polymer : n_polymer + 3] == LIGAND_PART).all()
    assert (np.diff(parted.residue_of_atom) >= 0).all()
    original = parted.original_residue
    np.testing.assert_array_equal(original, np.arange(len(original)))


def test_a_chain_that_is_a_copy_brings_its_ligand(tmp_path):
    path = DATA / "1a28.pdb.gz"
    rows = polymer_rows(path, "A") + ligand_rows(path, "STR", "A")
    structure, _, sites = laid(tmp_path, path, rows)
    site = int(np.flatnonzero(sites.name == "A/1/O3")[0])
    copies = sites.copy_residue[sites.copy_site == site]
    assert structure.auth_asym_id[copies].tolist() == ["A", "B"]
    alone = laid(tmp_path, path, rows, named_chains_only=True)[2]
    assert (np.bincount(alone.copy_site) == 1).all()


def test_copies_by_ncs_operators_keep_their_contacts_to_themselves(tmp_path):
    """A molecule and its copy 100 Å beside it, in a cell that keeps mates away."""
    st = read_gemmi(DATA / "4cup.cif.gz")
    st.cell, st.spacegroup_hm = gemmi.UnitCell(400, 400, 400, 90, 90, 90), "P 1"
    beside = gemmi.NcsOp()
    beside.id, beside.given = "2", False
    beside.tr.vec.fromlist([100.0, 0.0, 0.0])
    st.ncs.append(beside)
    del st.assemblies[:]
    path = tmp_path / "copies.cif"
    st.make_mmcif_document().write_file(str(path))
    rows = polymer_rows(path) + ligand_rows(path, "ZYB")
    structure, _, sites = laid(tmp_path, path, rows)
    parted = part_ligands(structure, sites)
    after, site = parted.structure, int(np.flatnonzero(sites.atom == "N1")[0])
    one, two = parted.sites.copy_residue[parted.sites.copy_site == site].tolist()
    assert after.original_residue[[one, two]].tolist() == [one, one]
    assert after.copy_of_residue[[one, two]].tolist() == [0, 1]
    contacts = contacts_of(parted, 4.5)
    partners = [
        Counter(
            np.concatenate(
                [
                    after.original_residue[contacts.residue_2[contacts.residue_1 == r]],
                    after.original_residue[contacts.residue_1[contacts.residue_2 == r]],
                ]
            ).tolist()
        )
        for r in (one, two)
    ]
    assert partners[0] == partners[1]
    assert len(partners[0]) > 3
    assert (contacts.kind == CHAIN).all()


def test_the_number_of_a_ligand_stands_as_it_is_when_the_polymer_is_shifted(tmp_path):
    path = DATA / "4cup.cif.gz"
    shifted = []
    for row in polymer_rows(path):
        chain, number, rest = row.split(",", 2)
        shifted.append(f"{chain},{int(number) - 1800},{rest}")
    _, _, sites = laid(tmp_path, path, [*shifted, "A,2971,ZYB,N1,18,1"])
    assert {match.offset for match in sites.chains} == {1800}
    assert sites.name[-1] == "A/2971/N1"
    assert not sites.unmatched


@pytest.mark.parametrize(
    ("row", "names"),
    [
        ("A,2971,ZYB,n1,18,1", ["A/2971/N1"]),
        (",2971,,N1,18,1", ["A/2971/N1"]),
        ("A,2971,ZYB,,18,1", ["A/2971"]),
    ],
)
def test_ways_to_name_a_ligand(tmp_path, row, names):
    path = DATA / "4cup.cif.gz"
    sites = laid(tmp_path, path, [*polymer_rows(path), row])[2]
    assert sites.name[-1:].tolist() == names
    assert not sites.unmatched


@pytest.mark.parametrize(
    ("rows", "reason"),
    [
        (
            ["A,2971,ZYB,XX,18,1"],
            "A/2971/XX: ZYB A/2971 has no heavy atom of that name",
        ),
        (
            ["A,2972,MOH,,1,1", "A,2972,MOH,C,1,1", "A,2972,MOH,O,1,1"],
            "A/2972: each of its atoms has a row of its own",
        ),
    ],
)
def test_rows_that_no_part_of_a_ligand_answers_to(tmp_path, rows, reason):
    path = DATA / "4cup.cif.gz"
    sites = laid(tmp_path, path, [*polymer_rows(path), *rows])[2]
    assert reason in sites.unmatched


def test_a_ligand_that_stands_in_unlike_chains_must_be_named(tmp_path):
    path = DATA / "4oz7.pdb"
    ions = [
        (chain.name, residue.seqid.num)
        for chain in read_gemmi(path)[0]
        for residue in chain
        if residue.name == "CU1"
    ]
    assert [chain for chain, _ in ions] == ["A", "B"]
    same = [number for _, number in ions]
    rows = [*polymer_rows(path), f",{same[0]},CU1,CU,18,1"]
    sites = laid(tmp_path, path, rows)[2]
    assert sites.name[sites.atom == "CU"].tolist() == [f"A/{same[0]}/CU"]


def test_atoms_of_the_polymer_share_their_residue_as_ever(tmp_path):
    path = DATA / "4cup.cif.gz"
    number = polymer_rows(path)[5].split(",")[1]
    rows = [f"A,{number},,{atom},1,1" for atom in ("N", "CA")]
    structure, _, sites = laid(tmp_path, path, [*polymer_rows(path)[20:], *rows])
    assert sites.residue[0] == sites.residue[1]
    assert part_ligands(structure, sites).structure is structure


def test_ligands_alone_can_be_measured(tmp_path):
    path = DATA / "4cup.cif.gz"
    sites = laid(tmp_path, path, ligand_rows(path, "ZYB"))[2]
    assert len(sites.name) == 11
    assert (sites.residue >= 0).all()


# --- the whole way --------------------------------------------------------------------


@pytest.fixture(scope="module")
def analysed(tmp_path_factory):
    """ZYB and the residue it touches through the crystal move; others are at rest."""
    folder, path = tmp_path_factory.mktemp("ligand"), DATA / "4cup.cif.gz"
    rng = np.random.default_rng(3)
    rows = []
    for row in polymer_rows(path) + ligand_rows(path, "ZYB"):
        *named, _, _ = row.split(",")
        centre = 18 if named[2] == "ZYB" else 10
        rows.append(",".join([*named, f"{centre + rng.standard_normal():.3f}", "1"]))
    values = folder / "values.csv"
    values.write_text("\n".join([HEADER, *rows]) + "\n")
    settings = structmap.Settings(most_permutations=199, repeats=8)
    result = structmap.analyse(path, values, settings)
    result.save(folder / "out")
    return result, folder / "out"


def test_a_ligand_that_moves_is_a_unit(analysed):
    result, _ = analysed
    (unit,) = result.record.units
    names = {str(name) for name in result.record.sites.name[unit.members]}
    assert {name for name in names if name.startswith("A/2971/")} >= {
        f"A/2971/{atom}" for atom in ("C", "C1", "N", "N1", "O", "F")
    }
    assert unit.lattice.verdict == "internal"


def test_tables_and_words_name_the_atoms(analysed):
    result, _ = analysed
    sites = result.sites[result.sites.auth_comp_id == "ZYB"]
    assert sites.atom.tolist() == sorted(sites.atom)
    assert sites.site.tolist() == [f"A/2971/{atom}" for atom in sites.atom]
    contacts = result.contacts
    mine = contacts[contacts.auth_comp_id_2 == "ZYB"]
    assert set(mine.atom_2) == set(sites.atom)
    text = result.summary()
    assert "115 were measured" not in text
    assert "115 and eleven sites of ligands were measured" in text
    assert "sites of ligands around ZYB2971" in text


def test_the_polymer_counts_as_contacts_of_an_atom(analysed):
    """The contact number of an atom counts the residues of a plain search."""
    result, _ = analysed
    path = DATA / "4cup.cif.gz"
    expected = Counter()
    for (_, _, atom, *_), count in plain_partners(path, "ZYB", 4.5).items():
        expected[atom] += count
    sites = result.sites[result.sites.auth_comp_id == "ZYB"]
    assert dict(zip(sites.atom, sites.contact_number, strict=True)) == {
        atom: expected[atom] for atom in sites.atom
    }


def test_mapped_coordinates_hold_the_values_of_the_atoms(analysed):
    result, folder = analysed
    mapped = gemmi.read_structure(str(folder / "mapped.cif"))
    record = result.record
    sites = record.sites.name[record.measurements.site].tolist()
    value = dict(zip(sites, record.behaviour.summary.tolist(), strict=True))
    seen = 0
    for residue in mapped[0]["A"]:
        for atom in residue:
            if residue.name == "ZYB":
                expected = value.get(f"A/2971/{atom.name}", 0.0)
                assert atom.b_iso == pytest.approx(expected, abs=0.01)
                seen += abs(expected) > 1
            elif residue.name in ("MOH", "HOH"):
                assert atom.b_iso == 0
    assert seen == 11
    block = gemmi.cif.read(str(folder / "mapped.cif")).sole_block()
    rows = block.find("_structmap_site.", ["auth_comp_id", "auth_atom_id"])
    assert sum(row[0] == "ZYB" and row[1] != "." for row in rows) == 11


def test_the_chain_shows_the_element_of_each_atom(analysed):
    result, _ = analysed
    record = result.record
    listing = list_entries(record)
    letters = entry_letters(record, listing)[-11:]
    assert letters == ["C"] * 7 + ["F", "N", "N", "O"]
    assert set(entry_components(record, listing)[-11:]) == {"ZYB"}
    assert entry_letters(record, listing)[0] == "S"
    assert entry_components(record, listing)[0] == "Ser"


def test_forms_are_compared_without_the_atoms_of_ligands(analysed, tmp_path):
    _, folder = analysed
    (line,) = compare_analyses([folder, folder], tmp_path)
    assert line == "U1: cannot be told: no other form models it"


def test_the_page_draws_and_names_the_atoms(analysed):
    _, folder = analysed
    page = (folder / "page.html").read_text()
    for atom in ("N1", "C5", "F"):
        assert f"ZYB2971\u00a0{atom}" in page or f"ZYB2971\\u00a0{atom}" in page
