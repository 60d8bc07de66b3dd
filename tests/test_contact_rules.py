"""Cutoffs, alternates, ensembles, group arithmetic, and what is refused."""

import dataclasses

import numpy as np
import pytest

from structmap.contacts import (
    CHAIN,
    COMPLEX,
    LATTICE,
    choose_assemblies,
    contact_cutoff,
    find_contacts,
    image_matrix,
    inverse_elements,
    make_group_table,
)
from structmap.errors import CrowdedCellError
from structmap.structure import read_structure
from tests.crystals import DATA, only_atoms


def contacts_of(structure, reach=4.5):
    return find_contacts(
        structure,
        reach_angstrom=reach,
        assemblies=choose_assemblies(structure, "auto"),
    )


def counts(contacts):
    return tuple(
        int(np.count_nonzero(contacts.kind == kind))
        for kind in (CHAIN, COMPLEX, LATTICE)
    )


def columns(contacts, *names):
    """Return rows of residue pairs with some columns."""
    return zip(
        contacts.residue_1.tolist(),
        contacts.residue_2.tolist(),
        *(getattr(contacts, name).tolist() for name in names),
        strict=True,
    )


# Cutoffs, alternates, ensembles


@pytest.mark.parametrize(
    ("name", "reach", "expected"),
    [
        # by the same enumeration as COUNTS
        ("1orc.pdb", 4.0, (220, 0, 33)),
        ("1orc.pdb", 5.0, (284, 0, 58)),
        ("1orc.pdb", 6.0, (342, 0, 85)),
        ("4cup.cif.gz", 4.0, (459, 16, 39)),
        ("4cup.cif.gz", 5.0, (548, 20, 55)),
        ("4cup.cif.gz", 6.0, (658, 31, 85)),
        ("1a8o.pdb.gz", 4.0, (278, 12, 25)),
        ("1a8o.pdb.gz", 5.0, (334, 17, 41)),
        ("1a8o.pdb.gz", 6.0, (402, 28, 63)),
        ("1lzh.pdb.gz", 7.5, (1106, 0, 84)),
        ("1lzh.pdb.gz", 8.0, (1261, 0, 113)),
    ],
)
def test_numbers_of_contacts_at_other_cutoffs(name, reach, expected):
    assert counts(contacts_of(read_structure(DATA / name), reach)) == expected


def test_files_of_ca_atoms_have_a_cutoff_of_their_own():
    cutoffs = {"cutoff_angstrom": 4.5, "ca_cutoff_angstrom": 7.5}
    assert contact_cutoff(read_structure(DATA / "1orc.pdb"), **cutoffs) == 4.5
    assert contact_cutoff(read_structure(DATA / "1lzh.pdb.gz"), **cutoffs) == 7.5


@pytest.mark.parametrize(
    ("name", "n_all", "n_of_first"),
    [("1orc.pdb", 304, 302), ("3jqh.cif", 123, 122), ("1pfe.cif.gz", 67, 66)],
)
def test_one_alternate_alone_loses_contacts(name, n_all, n_of_first):
    structure = read_structure(DATA / name)
    first = only_atoms(structure, np.isin(structure.altloc, ["", "A"]))
    assert len(contacts_of(structure).kind) == n_all
    assert len(contacts_of(first).kind) == n_of_first


def with_letters(structure, letters):
    """Give each residue of a structure one alternate letter."""
    return dataclasses.replace(
        structure, altloc=np.array(letters)[structure.residue_of_atom]
    )


def test_alternates_of_unlike_letters_touch_only_where_the_chain_joins_them():
    structure = read_structure(DATA / "1orc.pdb")
    n_residues = len(structure.kind_of_residue)
    letters = np.where(np.arange(n_residues) % 2, "A", "B")
    contacts = contacts_of(with_letters(structure, letters))
    unlike = letters[contacts.residue_1] != letters[contacts.residue_2]
    assert (contacts.residue_2[unlike] == contacts.residue_1[unlike] + 1).all()
    assert (contacts.kind[unlike] == CHAIN).all()
    assert np.count_nonzero(unlike) == 63  # 64 residues in one unbroken chain
    bond = contacts.distance_angstrom[unlike]
    assert bond.min() > 1.2  # C-N of the peptide bond: 1.33 (Engh and Huber 1991)
    assert bond.max() < 1.45
    plain = contacts_of(structure)
    assert len(contacts.kind) < len(plain.kind)


def test_an_ensemble_has_the_contacts_of_half_of_its_models():
    """1AS5, 14 models: 68 contacts in the first, 51 in all, 93 in any, 67 in half."""
    path = DATA / "1as5.cif.gz"
    distances = {}
    for number in range(1, 15):
        wide = contacts_of(read_structure(path, model=number), 6.0)
        for a, b, distance in columns(wide, "distance_angstrom"):
            distances.setdefault((a, b), []).append(distance)
    within = {pair: sum(d <= 4.5 for d in every) for pair, every in distances.items()}
    first = contacts_of(read_structure(path, model=1))
    assert len(first.kind) == 68
    assert sum(n == 14 for n in within.values()) == 51
    assert sum(n > 0 for n in within.values()) == 93
    together = contacts_of(read_structure(path))
    assert len(together.kind) == 67
    half = {pair for pair, n in within.items() if n >= 7}
    assert {(a, b) for a, b in columns(together)} == half
    of_first = {(a, b): n for a, b, n in columns(first, "n_atom_pairs")}
    names = "distance_angstrom", "share_of_models", "n_atom_pairs"
    for a, b, distance, share, n_atom_pairs in columns(together, *names):
        assert distance == pytest.approx(sorted(distances[a, b])[6])
        assert share == pytest.approx(within[a, b] / 14)
        assert n_atom_pairs == of_first.get((a, b), 0)


@pytest.mark.parametrize(
    ("name", "first", "half", "every", "ever"),
    [
        ("1as5.cif.gz", 68, 67, 51, 93),
        ("2ofg.cif.gz", 347, 287, 242, 400),
    ],
)
def test_contacts_of_ensembles_in_one_half_all_or_any_model(
    name, first, half, every, ever
):
    """By the same enumeration as COUNTS."""
    structure = read_structure(DATA / name)
    models = []
    for number in range(structure.n_models):  # some residues are not in every model
        alone = read_structure(DATA / name, model=number + 1)
        label = alone.auth_seq_id
        pairs = columns(contacts_of(alone))
        models.append({(int(label[a]), int(label[b])) for a, b in pairs})
    assert len(models[0]) == first
    assert len(contacts_of(structure).kind) == half
    assert len(set.intersection(*models)) == every
    assert len(set.union(*models)) == ever


def test_a_chosen_part_of_an_ensemble_need_not_be_in_every_model():
    structure = read_structure(DATA / "1as5.cif.gz")
    lost = (structure.residue_of_atom == 3) & (structure.model_of_atom < 10)
    part = only_atoms(structure, ~lost)
    chosen = np.arange(len(structure.kind_of_residue)) == 3
    found = find_contacts(part, reach_angstrom=4.5, assemblies=(), residues=chosen)
    assert len(found.kind) == 0
    assert not (contacts_of(part).residue_1 == 3).any()  # 4 of 14 models are too few


def test_the_closest_atoms_of_an_ensemble_are_of_the_model_that_decides():
    structure = read_structure(DATA / "1as5.cif.gz")
    contacts = contacts_of(structure)
    first, second = structure.position[[contacts.atom_1, contacts.atom_2]]
    apart = np.linalg.norm(first - second, axis=1)
    np.testing.assert_allclose(apart, contacts.distance_angstrom)
    models = structure.model_of_atom
    np.testing.assert_array_equal(models[contacts.atom_1], models[contacts.atom_2])


# Mistakes


def test_a_reach_that_is_not_above_zero_is_refused():
    structure = read_structure(DATA / "5e5z.pdb")
    with pytest.raises(ValueError, match=r"^reach_angstrom is nan; it must be above 0"):
        contacts_of(structure, float("nan"))


def test_images_beyond_counting_are_refused():
    structure = read_structure(DATA / "5e5z.pdb")
    position = structure.position.copy()
    position[0] = 8000.0, -8000.0, 8000.0
    far = dataclasses.replace(structure, position=position)
    with pytest.raises(CrowdedCellError, match="coordinates that lie far away"):
        contacts_of(far)


def test_operators_that_are_no_group_are_refused():
    crystal = read_structure(DATA / "1orc.pdb").crystal
    part = dataclasses.replace(
        crystal,
        rotations=crystal.rotations[:3],
        translations=crystal.translations[:3],
        triplets=crystal.triplets[:3],
    )
    with pytest.raises(ValueError, match="operators do not form a group"):
        make_group_table(part)


@pytest.mark.parametrize(
    "name", ["1orc.pdb", "3wup.json.gz", "1pfe.cif.gz", "4zhl.cif.gz"]
)
def test_products_and_inverses_are_those_of_the_matrices(name):
    structure = read_structure(DATA / name)
    table = make_group_table(structure.crystal)
    rng = np.random.default_rng(3)
    n_operators = len(structure.crystal.triplets)
    k, other_k = rng.integers(n_operators, size=(2, 30))
    n, other_n = rng.integers(-4, 5, size=(2, 30, 3))
    product_k, product_n = table.product((k, n), (other_k, other_n))
    back_k, back_n = table.inverse(k, n)
    for i in range(30):
        first = image_matrix(structure, k[i], n[i])
        second = image_matrix(structure, other_k[i], other_n[i])
        product = image_matrix(structure, product_k[i], product_n[i])
        np.testing.assert_allclose(first @ second, product, atol=1e-6)
        back = image_matrix(structure, back_k[i], back_n[i])
        np.testing.assert_allclose(first @ back, np.eye(4), atol=1e-6)


@pytest.mark.parametrize(
    "name", ["1orc.pdb", "4zhl.cif.gz", "1pfe.cif.gz", "3wup.json.gz", "4hhh_frag.pdb"]
)
def test_an_element_and_its_inverse_undo_each_other(name):
    structure = read_structure(DATA / name)
    n_operators = len(structure.crystal.triplets)
    rng = np.random.default_rng(8)
    elements = np.column_stack(
        [rng.integers(0, n_operators, 60), rng.integers(-4, 5, (60, 3))]
    )
    back = inverse_elements(structure.crystal, elements)
    for one, two in zip(elements, back, strict=True):
        product = image_matrix(structure, int(one[0]), one[1:]) @ image_matrix(
            structure, int(two[0]), two[1:]
        )
        np.testing.assert_allclose(product, np.eye(4), atol=1e-6)
