"""How far the contacts of an assembly, and of the crystal, go."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from structmap.contacts import COMPLEX, LATTICE
from structmap.quotient import assembly_extent
from tests.quotient.cases import archive, contacts_of

# What the entries say of themselves: 5wkd, 5e5z (decamers), 3jqh (24-mer) and 5i55
# (20-mer) list finite pieces of amyloid sheets and coiled coils that go on for ever;
# 3wup lists an author's monomer and a trimer found by software.
EXTENTS = [
    ("5wkd.pdb", "auto", "rod", 2, [[0, 1, 0]]),
    ("3jqh.cif", "auto", "rod", 4, [[0, 0, 1]]),
    ("5e5z.pdb", "auto", "layer", 2, [[0, 1, 0], [1, 0, 0]]),
    ("5i55.cif", "auto", "layer", 2, [[0, 1, 0], [1, 0, 0]]),
    ("1orc.pdb", "auto", "finite", 1, []),
    ("4cup.cif.gz", "auto", "ring", 2, []),
    ("1pfe.cif.gz", "auto", "ring", 2, []),
    ("3wup.json.gz", "auto", "finite", 1, []),
    ("3wup.json.gz", "2", "ring", 3, []),
    ("4zhl.cif.gz", "auto", "finite", 1, []),
    ("1a8o.pdb.gz", "auto", "ring", 2, []),
    ("1a7g.cif.gz", "auto", "ring", 2, []),
    ("7cfn.cif.gz", "auto", "finite", 1, []),
]


@pytest.mark.parametrize(("name", "choice", "closes", "order", "periods"), EXTENTS)
def test_extent_of_assemblies(data_folder, name, choice, closes, order, periods):
    structure = archive(data_folder, name)
    found = assembly_extent(structure, contacts_of(structure, choice))
    assert found.closes == closes
    assert found.is_endless == (closes in ("rod", "layer", "net"))
    assert found.parts[0].order == order
    periods = np.array(periods).reshape(-1, 3)
    np.testing.assert_array_equal(found.parts[0].periods, periods)


@pytest.mark.parametrize(
    ("name", "order"),
    [
        *(("3jqh.cif", 8), ("5e5z.pdb", 2), ("1orc.pdb", 4), ("4oz7.pdb", 4)),
        *(("1pfe.cif.gz", 12), ("3wup.json.gz", 12), ("4cup.cif.gz", 4)),
        *(("1a8o.pdb.gz", 8), ("1a7g.cif.gz", 12), ("5wkd.pdb", 2), ("5i55.cif", 2)),
    ],
)
def test_all_contacts_of_a_crystal_make_its_whole_net(data_folder, name, order):
    structure = archive(data_folder, name)
    found = assembly_extent(structure, contacts_of(structure), highest_kind=LATTICE)
    assert len(found.parts) == 1
    assert (found.closes, found.parts[0].order) == ("net", order)


def test_fragment_is_no_lattice(data_folder):
    structure = archive(data_folder, "4hhh_frag.pdb")
    contacts = contacts_of(structure)
    apart = assembly_extent(structure, contacts)
    joined = assembly_extent(structure, contacts, highest_kind=LATTICE)
    assert [part.chain_copies for part in apart.parts] == [(0,), (1,)]
    assert [part.chain_copies for part in joined.parts] == [(0, 1)]
    assert joined.closes == "finite"


def pieces_on_torus(structure, contacts, *, highest_kind, n_cells):
    """Return how many pieces a block of cells with joined ends falls into.

    Independent of the group arithmetic: copies are found again by where a general
    point goes, in floating point.
    """
    crystal = structure.crystal
    point = np.array([0.1234, 0.3456, 0.0789])
    n_operators = len(crystal.triplets)
    homes = crystal.rotations @ point + crystal.translations / 24
    cells = np.stack(np.meshgrid(*[np.arange(n_cells)] * 3, indexing="ij"), axis=-1)
    cells = cells.reshape(-1, 3)
    chain = structure.copy_of_residue
    keep = contacts.kind <= highest_kind
    labels = np.column_stack(
        [
            chain[contacts.residue_1[keep]],
            chain[contacts.residue_2[keep]],
            contacts.operator[keep],
            contacts.shift[keep],
        ]
    )
    first, second = [], []
    for chain_1, chain_2, k, *shift in np.unique(labels, axis=0).tolist():
        image = crystal.rotations[k] @ point + crystal.translations[k] / 24 + shift
        for own in range(n_operators):
            where = crystal.rotations[own] @ image + crystal.translations[own] / 24
            gap = where - homes
            whole = np.abs(gap - np.rint(gap)).max(axis=1) < 1e-6
            other = int(np.flatnonzero(whole)[0])
            target = (cells + np.rint(gap[other]).astype(int)) % n_cells
            first.append(node(chain_1, own, cells, n_cells, n_operators))
            second.append(node(chain_2, other, target, n_cells, n_operators))
    n_nodes = len(structure.chain_copies) * n_operators * n_cells**3
    ends = np.concatenate(first), np.concatenate(second)
    net = coo_array((np.ones(len(ends[0])), ends), shape=(n_nodes, n_nodes))
    return connected_components(net, directed=False)[0]


def node(chain, operator, cells, n_cells, n_operators):
    place = np.ravel_multi_index(tuple(cells.T), (n_cells,) * 3)
    return (chain * n_operators + operator) * n_cells**3 + place


@pytest.mark.parametrize(
    ("name", "choice"),
    [
        *(("3jqh.cif", "auto"), ("5e5z.pdb", "auto"), ("5wkd.pdb", "auto")),
        *(("5i55.cif", "auto"), ("1orc.pdb", "auto"), ("4cup.cif.gz", "auto")),
        *(("3wup.json.gz", "2"), ("4oz7.pdb", "auto"), ("1pfe.cif.gz", "auto")),
        ("1a8o.pdb.gz", "auto"),
    ],
)
def test_pieces_on_a_torus_grow_with_what_the_rank_leaves(data_folder, name, choice):
    structure = archive(data_folder, name)
    contacts = contacts_of(structure, choice)
    for kind in (COMPLEX, LATTICE):
        found = assembly_extent(structure, contacts, highest_kind=kind)
        n_operators = len(structure.crystal.triplets)
        for n_cells in (2, 3):
            expected = 0
            for part in found.parts:
                # A piece fills `order` images of the cell and wraps along its periods.
                vectors = np.concatenate([part.periods, n_cells * np.eye(3)])
                spanned = index_of_lattice(vectors)
                expected += n_operators * spanned / part.order
            pieces = pieces_on_torus(
                structure, contacts, highest_kind=kind, n_cells=n_cells
            )
            assert pieces == round(expected)


def index_of_lattice(vectors):
    """Return the volume of the cell that vectors span, by greatest common divisors."""
    whole = np.rint(24 * vectors).astype(int)
    minors = [
        round(np.linalg.det(whole[[i, j, k]]))
        for i in range(len(whole))
        for j in range(i)
        for k in range(j)
    ]
    return np.gcd.reduce(np.abs(minors)) / 24**3


def test_assembly_without_a_crystal_is_the_same_ring(data_folder):
    """Operators of the assembly alone must tell what the crystal's operators tell."""
    structure = archive(data_folder, "3wup.json.gz")
    alone = replace(structure, crystal=None, no_crystal_reason="left out")
    found = assembly_extent(alone, contacts_of(alone, "2"))
    assert (found.closes, found.parts[0].order) == ("ring", 3)
    assert not len(found.parts[0].periods)
