"""Assemblies without a crystal: their mates are found and named."""

import dataclasses

import numpy as np
import pytest

from structmap.contacts import (
    CHAIN,
    COMPLEX,
    LATTICE,
    choose_assemblies,
    contact_matrix,
    find_contacts,
    image_matrix,
    mate_matrix,
    operator_text,
)
from structmap.errors import UnknownAssemblyError
from structmap.structure import read_structure
from tests.crystals import DATA


def contacts_of(structure, reach=4.5, assembly="auto"):
    return find_contacts(
        structure,
        reach_angstrom=reach,
        assemblies=choose_assemblies(structure, assembly),
    )


def without_crystal(structure):
    return dataclasses.replace(
        structure, crystal=None, no_crystal_reason="it is a test"
    )


def pairs_and_distances(contacts, keep):
    return sorted(
        zip(
            contacts.residue_1[keep].tolist(),
            contacts.residue_2[keep].tolist(),
            np.round(contacts.distance_angstrom[keep], 5).tolist(),
            contacts.n_atom_pairs[keep].tolist(),
            strict=True,
        )
    )


@pytest.mark.parametrize(
    ("name", "assembly"),
    [
        ("4cup.cif.gz", "auto"),
        ("1pfe.cif.gz", "auto"),
        ("3wup.json.gz", "2"),
        ("3jqh.cif", "auto"),
        ("5i55.cif", "auto"),
        ("5e5z.pdb", "auto"),
        ("5wkd.pdb", "auto"),
    ],
)
def test_the_assembly_alone_has_the_complex_contacts_of_the_crystal(name, assembly):
    """Crystal operators and plain matrices of the assembly must tell the same."""
    structure = read_structure(DATA / name)
    crystal = contacts_of(structure, assembly=assembly)
    alone = contacts_of(without_crystal(structure), assembly=assembly)
    assert not (alone.kind == LATTICE).any()
    for kind in (CHAIN, COMPLEX):
        assert pairs_and_distances(alone, alone.kind == kind) == pairs_and_distances(
            crystal, crystal.kind == kind
        )


@pytest.mark.parametrize("name", ["3wup.json.gz", "5wkd.pdb", "3jqh.cif"])
def test_the_label_of_a_mate_leads_to_its_transform(name):
    structure = without_crystal(read_structure(DATA / name))
    contacts = contacts_of(structure, assembly=structure.assemblies[-1].name)
    mates = np.flatnonzero(contacts.operator < 0)
    assert mates.size
    for k in mates:
        assert not contacts.shift[k].any()
        matrix = contact_matrix(structure, contacts, int(k))
        label = str(contacts.assembly_operator[k])
        np.testing.assert_allclose(matrix, mate_matrix(structure, label))
        assert operator_text(structure, contacts, int(k)) == f"assembly {label}"
        first, second = structure.position[[contacts.atom_1[k], contacts.atom_2[k]]]
        apart = np.linalg.norm(first - (matrix[:3, :3] @ second + matrix[:3, 3]))
        assert apart == pytest.approx(contacts.distance_angstrom[k], abs=2e-3)


def test_a_closed_assembly_names_its_mates_by_single_operators():
    structure = without_crystal(read_structure(DATA / "3wup.json.gz"))
    contacts = contacts_of(structure, assembly="2")
    labels = set(contacts.assembly_operator[contacts.operator < 0].tolist())
    assert labels == {"2:2", "2:3"}


def test_a_slice_of_a_rod_needs_quotients_of_its_operators():
    # 5WKD: the ten operators are a cut-out; some neighbours meet only among mates.
    structure = without_crystal(read_structure(DATA / "5wkd.pdb"))
    contacts = contacts_of(structure)
    assert (contacts.operator[contacts.kind == COMPLEX] == -1).all()
    assert np.unique(contacts.assembly_operator[contacts.operator < 0]).size > 2


def test_without_assemblies_the_deposited_chains_are_one_complex():
    structure = read_structure(DATA / "1a28.pdb.gz")
    alone = contacts_of(without_crystal(structure), assembly="none")
    chain = structure.auth_asym_id
    between = chain[alone.residue_1] != chain[alone.residue_2]
    assert (alone.kind[between] == COMPLEX).all()
    assert (alone.kind[~between] == CHAIN).all()
    assert between.any()


def test_a_capsid_has_the_same_neighbours_with_and_without_its_crystal(
    data_folder, tmp_path
):
    """20 NCS copies and a threefold axis of the crystal, or 60 assembly operators.

    Of 60 turns, 3 belong to the crystal: an edge of the capsid stands for 20 edges of
    the crystal, one between the ends of a twofold axis for 10.
    """
    path = data_folder / "public" / "ncs" / "5cvz_final.pdb"
    (tmp_path / "em.pdb").write_text(
        f"EXPDTA    ELECTRON MICROSCOPY\n{path.read_text()}"
    )
    alone = read_structure(tmp_path / "em.pdb")
    assert len(alone.chain_copies) == 1
    found, crystal = contacts_of(alone), contacts_of(read_structure(path))
    assert np.count_nonzero(found.kind == CHAIN) == 617
    mates = found.kind == COMPLEX
    assert (found.operator[mates] == -1).all()
    twofold = 0
    for k in np.flatnonzero(mates & (found.residue_1 == found.residue_2)):
        matrix = mate_matrix(alone, str(found.assembly_operator[k]))
        twofold += bool(np.allclose(matrix @ matrix, np.eye(4), atol=0.5))
    expected = 20 * (np.count_nonzero(mates) - twofold) + 10 * twofold
    # the 20 copies differ by rounding of their matrices, a few edges near 4.5 Å
    assert abs(np.count_nonzero(crystal.kind == COMPLEX) - expected) <= 20


def test_an_assembly_that_the_crystal_does_not_make_keeps_its_own_mates():
    """1ORC with a made-up dimer axis that is no crystal axis."""
    structure = read_structure(DATA / "1orc.pdb")
    turn = np.diag([-1.0, -1.0, 1.0, 1.0])
    centre = structure.position[structure.residue_of_atom < 64].mean(axis=0)
    turn[:2, 3] = 2 * (centre[:2] + np.array([14.0, 0.0]))
    assembly = dataclasses.replace(
        structure.assemblies[0],
        chains=(("A",), ("A",)),
        matrices=np.array([np.eye(4), turn]),
    )
    structure = dataclasses.replace(structure, assemblies=(assembly,))
    contacts = contacts_of(structure)
    mates = contacts.operator < 0
    assert mates.any()
    assert set(contacts.assembly_operator[mates].tolist()) == {"1:2"}
    assert (contacts.kind[mates] == COMPLEX).all()
    plain = contacts_of(structure, assembly="none")
    assert pairs_and_distances(contacts, ~mates) == pairs_and_distances(
        plain, np.ones(len(plain.kind), dtype=bool)
    )


def test_unknown_assemblies_are_refused():
    structure = read_structure(DATA / "3wup.json.gz")
    with pytest.raises(
        UnknownAssemblyError, match=r"no assembly '7' \(it lists 1, 2\)"
    ):
        choose_assemblies(structure, "1, 7")
    assert [item.name for item in choose_assemblies(structure, "2,1")] == ["2", "1"]
    bare = dataclasses.replace(structure, assemblies=())
    assert choose_assemblies(bare, "auto") == ()
    with pytest.raises(UnknownAssemblyError, match="it lists none"):
        choose_assemblies(bare, "1")


def test_impossible_images_are_a_mistake_of_the_caller():
    structure = read_structure(DATA / "1orc.pdb")
    with pytest.raises(ValueError, match=r"^operator is 4; it must be 0 to 3"):
        image_matrix(structure, 4, (0, 0, 0))
    with pytest.raises(ValueError, match="the structure has no crystal"):
        image_matrix(without_crystal(structure), 1, (0, 0, 0))
    with pytest.raises(ValueError, match="there is no assembly operator '9:1'"):
        mate_matrix(structure, "9:1")
    np.testing.assert_array_equal(
        image_matrix(without_crystal(structure), 0, (0, 0, 0)), np.eye(4)
    )


def test_mates_that_are_all_out_of_reach_make_no_contacts():
    """Three residues of 4CUP lie far from the twofold axis of its dimer."""
    structure = without_crystal(read_structure(DATA / "4cup.cif.gz"))
    contacts = contacts_of(structure)
    near = np.unique(contacts.residue_2[contacts.kind == COMPLEX])
    far = np.array([r for r in range(60) if np.abs(near - r).min() > 10])[:3]
    keep = np.isin(structure.residue_of_atom, far)
    columns = ("position", "residue_of_atom", "model_of_atom", "atom_name", "element")
    few = dataclasses.replace(
        structure,
        **{
            name: getattr(structure, name)[keep]
            for name in (*columns, "altloc", "occupancy", "b_iso")
        },
    )
    found = contacts_of(few)
    assert len(found.kind) > 0
    assert set(found.kind.tolist()) == {CHAIN}
