import dataclasses

import numpy as np
import pytest
from Bio.PDB.Atom import Atom
from Bio.PDB.DSSP import residue_max_acc
from Bio.PDB.Residue import Residue
from Bio.PDB.SASA import ShrakeRupley
from Bio.SeqUtils import seq1

from structmap.atom_pairs import keep_atoms, one_conformation
from structmap.contacts import COMPLEX, LATTICE, choose_assemblies, image_matrix
from structmap.exposure import find_exposure, find_interfaces
from structmap.exposure.burial import LARGEST_AREA
from structmap.exposure.sphere import (
    PROBE_ANGSTROM,
    find_open_share,
    golden_spiral,
    make_shades,
    sphere_radii,
)
from structmap.structure import POLYMER, read_structure
from tests.crystals import DATA, apply, as_p1, moved, turned_frame


def read(name):
    structure = read_structure(DATA / name)
    return structure, choose_assemblies(structure, "auto")


def library_areas(position, element):
    """Areas of atoms by the general library, with our radii and number of points."""
    atoms = [
        Atom(f"X{k}", xyz, 0.0, 1.0, " ", f"X{k}", k, element=symbol.upper())
        for k, (xyz, symbol) in enumerate(zip(position, element, strict=True))
    ]
    residue = Residue((" ", 1, " "), "XXX", "")
    for atom in atoms:
        residue.add(atom)
    radii = sphere_radii(np.array(element)) - PROBE_ANGSTROM
    own = {s.upper(): float(r) for s, r in zip(element, radii, strict=True)}
    ShrakeRupley(probe_radius=PROBE_ANGSTROM, n_points=960, radii_dict=own).compute(
        residue, level="A"
    )
    return np.array([atom.sasa for atom in atoms])


def polymer_atoms(structure):
    """One conformation of the polymer, and the chain copy of each of its atoms."""
    structure = keep_atoms(structure, one_conformation(structure))
    return structure, structure.copy_of_residue[structure.residue_of_atom]


# --- against outside values -----------------------------------------------------------


@pytest.mark.parametrize(
    "name", ["1orc.pdb", "3jqh.cif", "4cup.cif.gz", "pdb1ubi.pdb", "1ejg.pdb.gz"]
)
def test_residue_areas_agree_with_the_general_library(name):
    structure, assemblies = read(name)
    found = find_exposure(structure, assemblies=assemblies).area_alone
    structure, copy = polymer_atoms(structure)
    expected = np.zeros(len(found))
    for chain in np.unique(copy):
        own = copy == chain
        areas = library_areas(structure.position[own], structure.element[own])
        np.add.at(expected, structure.residue_of_atom[own], areas)
    polymer = ~np.isnan(found)
    assert polymer.sum() == (structure.kind_of_residue == POLYMER).sum()
    off = np.abs(found - expected)[polymer]
    assert off.sum() <= 0.02 * expected.sum()
    assert off.max() < 4.0  # two samplings of 960 points, each good to about 2 Å²
    assert found[polymer].sum() == pytest.approx(expected.sum(), rel=0.003)


# Areas alone, buried by the assembly, buried by the lattice, in Å²: a prototype of its
# own with the same radii and other points.
TOTALS = {
    "1orc.pdb": (4542, 0, 1756),
    "4cup.cif.gz": (7751, 576, 1606),
    "4zhl.cif.gz": (12916, 1464, 3288),
    "3jqh.cif": (2583, 1329, 408),
    "1a8o.pdb.gz": (4667, 552, 1325),
    "1a7g.cif.gz": (5332, 909, 659),
    "2xhe.pdb.gz": (42241, 4538, 2743),
}


@pytest.mark.parametrize("name", TOTALS)
def test_totals_at_three_levels(name):
    structure, assemblies = read(name)
    found = find_exposure(structure, assemblies=assemblies)
    totals = (found.area_alone, found.complex_burial, found.lattice_burial)
    totals = [float(np.nansum(area)) for area in totals]
    assert totals == pytest.approx(TOTALS[name], rel=0.006)


# Kind, area in Å² and residue pairs within 4.5 Å, of the same prototype.
INTERFACES = {
    "1orc.pdb": [(LATTICE, 857, 24), (LATTICE, 632, 14), (LATTICE, 347, 10)],
    "4cup.cif.gz": [
        (COMPLEX, 1150, 19),
        (LATTICE, 945, 14),
        (LATTICE, 695, 18),
        (LATTICE, 596, 15),
    ],
    "4zhl.cif.gz": [(COMPLEX, 1461, 45), (LATTICE, 992, 28)],
    "1a8o.pdb.gz": [
        (COMPLEX, 1108, 14),
        (LATTICE, 589, 18),
        (LATTICE, 583, 14),
        (LATTICE, 160, 3),
    ],
    "1a7g.cif.gz": [(COMPLEX, 1817, 28), (LATTICE, 613, 17), (LATTICE, 93, 1)],
}


@pytest.mark.parametrize("name", INTERFACES)
def test_interfaces_stand_once_each_by_area(name):
    structure, assemblies = read(name)
    found = find_interfaces(structure, assemblies=assemblies)
    expected = INTERFACES[name]
    n = len(expected)
    assert found.kind[:n].tolist() == [kind for kind, _, _ in expected]
    assert found.n_residue_pairs[:n].tolist() == [count for _, _, count in expected]
    areas = [area for _, area, _ in expected]
    assert found.area[:n] == pytest.approx(areas, rel=0.015)
    assert (np.diff(found.area) <= 0).all()
    if name != "4zhl.cif.gz":
        assert len(found.area) == n


def test_an_interface_is_what_two_chains_lose_by_meeting():
    structure, assemblies = read("4oz7.pdb")
    found = find_interfaces(structure, assemblies=assemblies)
    structure, copy = polymer_atoms(structure)
    for index in range(4):
        matrix = image_matrix(structure, int(found.operator[index]), found.shift[index])
        one, two = copy == found.copy_1[index], copy == found.copy_2[index]
        here = structure.position[one]
        there = apply(matrix, structure.position[two])
        element = structure.element
        alone = library_areas(here, element[one]).sum()
        alone += library_areas(there, element[two]).sum()
        both = library_areas(
            np.concatenate([here, there]), np.concatenate([element[one], element[two]])
        )
        assert found.area[index] == pytest.approx(alone - both.sum(), rel=0.03, abs=3)


def test_largest_areas_are_those_published():
    # Values of Tien et al. (2013) as the general library has them under "Wilke".
    known = {seq1(name): area for name, area in residue_max_acc["Wilke"].items()}
    assert known == LARGEST_AREA


# --- laws -----------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["5wkd.pdb", "5i55.cif", "1pfe.cif.gz", "4oz7.pdb"])
def test_neighbours_only_take_area(name):
    structure, assemblies = read(name)
    found = find_exposure(structure, assemblies=assemblies)
    polymer = structure.kind_of_residue == POLYMER
    assert (found.complex_burial[polymer] >= 0).all()
    assert (found.lattice_burial[polymer] >= 0).all()
    assert (found.area_in_crystal[polymer] >= 0).all()
    assert np.isnan(found.area_alone[~polymer]).all()
    joined = found.contact_number[:, LATTICE] > 0
    # A heavy atom within 4.5 Å stands inside the shell of probe centres.
    assert (found.lattice_burial[joined & polymer] > 0).mean() > 0.9


def test_areas_do_not_change_when_the_frame_turns():
    structure, assemblies = read("4cup.cif.gz")
    turn = np.linalg.qr(np.random.default_rng(4).normal(size=(3, 3)))[0]
    matrix = np.eye(4)
    matrix[:3, :3] = turn * np.sign(np.linalg.det(turn))
    matrix[:3, 3] = (3.0, -70.0, 11.0)
    turned = turned_frame(structure, matrix)
    one = find_exposure(structure, assemblies=assemblies)
    two = find_exposure(turned, assemblies=choose_assemblies(turned, "auto"))
    for name in ("area_alone", "area_in_assembly", "area_in_crystal"):
        off = getattr(one, name) - getattr(two, name)
        assert np.sqrt(np.nanmean(off**2)) < 0.8
        total = np.nansum(getattr(one, name))
        assert np.nansum(getattr(two, name)) == pytest.approx(total, rel=0.003)
    np.testing.assert_array_equal(one.contact_number, two.contact_number)
    np.testing.assert_allclose(
        one.mate_distance_angstrom, two.mate_distance_angstrom, atol=1e-3
    )


def test_which_copy_the_file_lists_does_not_matter():
    structure, assemblies = read("3jqh.cif")
    other = moved(structure, image_matrix(structure, 3, (2, -1, 0)))
    one = find_exposure(structure, assemblies=assemblies)
    two = find_exposure(other, assemblies=choose_assemblies(other, "auto"))
    assert np.nansum(two.complex_burial) == pytest.approx(
        np.nansum(one.complex_burial), rel=0.02
    )
    np.testing.assert_array_equal(one.contact_number, two.contact_number)
    areas = [
        find_interfaces(s, assemblies=choose_assemblies(s, "auto")).area[:4]
        for s in (structure, other)
    ]
    assert areas[0] == pytest.approx(areas[1], rel=0.03)


def test_each_copy_in_a_whole_cell_is_buried_like_the_original():
    structure, _ = read("3jqh.cif")
    whole = as_p1(structure)
    one = find_exposure(structure, assemblies=())
    all_copies = find_exposure(whole, assemblies=())
    n = int((structure.kind_of_residue == POLYMER).sum())
    expected = one.lattice_burial[:n].sum()
    per_copy = all_copies.lattice_burial.reshape(-1, n).sum(axis=1)
    assert len(per_copy) == len(structure.crystal.triplets)
    assert per_copy == pytest.approx(np.full(len(per_copy), expected), rel=0.02)
    distances = all_copies.mate_distance_angstrom.reshape(-1, n)
    np.testing.assert_allclose(
        distances,
        np.tile(one.mate_distance_angstrom[:n], (len(distances), 1)),
        atol=2e-3,
    )


def test_a_few_residues_have_the_areas_they_have_among_all():
    structure, assemblies = read("1orc.pdb")
    some = np.zeros(len(structure.kind_of_residue), dtype=bool)
    some[10:14] = True
    whole = find_exposure(structure, assemblies=assemblies)
    part = find_exposure(structure, assemblies=assemblies, residues=some)
    np.testing.assert_array_equal(
        part.area_in_crystal[some], whole.area_in_crystal[some]
    )
    assert np.isnan(part.area_alone[~some]).all()


def test_area_between_members_alone_is_part_of_the_interface():
    structure, assemblies = read("1orc.pdb")
    everything = find_interfaces(structure, assemblies=assemblies)
    members = np.zeros(len(structure.kind_of_residue), dtype=bool)
    members[::2] = True
    between = find_interfaces(structure, assemblies=assemblies, residues=members)
    assert 0 < between.area.sum() < everything.area.sum()
    assert between.n_residue_pairs.sum() < everything.n_residue_pairs.sum()
    every = np.ones_like(members)
    same = find_interfaces(structure, assemblies=assemblies, residues=every)
    np.testing.assert_array_equal(same.area, everything.area)


# --- spheres --------------------------------------------------------------------------


@pytest.mark.parametrize("apart", [0.7, 2.0, 3.9, 5.5, 6.2])
def test_a_cap_takes_its_exact_share(apart):
    # A sphere of radius R loses a cap of height h: share h / 2R.
    radius, other = 3.1, 2.92
    cap = make_shades(
        np.array([0]),
        np.array([[0.3, -0.5, 0.8]]) * apart / np.linalg.norm([0.3, -0.5, 0.8]),
        radius=np.array([radius]),
        other_radius=np.array([other]),
        group=np.array([0]),
    )
    edge = (radius**2 + apart**2 - other**2) / (2 * apart)
    expected = 1 - max(radius - edge, 0) / (2 * radius) if apart < radius + other else 1
    nothing = dataclasses.replace(
        cap, atom=cap.atom[:0], group=cap.group[:0], cap=cap.cap[:0]
    )
    left = find_open_share(cap, nothing, atoms=np.array([True]))
    assert left.share[0] == pytest.approx(expected, abs=4 / 960)
    # The same neighbour as a further one takes the same points.
    lost = find_open_share(nothing, cap, atoms=np.array([True])).lost
    assert 1 - lost.sum() == pytest.approx(left.share[0], abs=1e-12)


def test_spiral_points_lie_evenly():
    points = golden_spiral(960)
    np.testing.assert_allclose(np.linalg.norm(points, axis=1), 1.0)
    np.testing.assert_allclose(points.mean(axis=0), 0.0, atol=2e-3)
    np.testing.assert_allclose(points.T @ points / 960, np.eye(3) / 3, atol=2e-3)


# --- odd files ------------------------------------------------------------------------


def test_a_file_of_ca_atoms_has_packing_but_no_areas():
    structure, assemblies = read("1lzh.pdb.gz")
    found = find_exposure(structure, assemblies=assemblies)
    assert np.isnan(found.area_alone).all()
    assert found.contact_number[:, 0].mean() > 4
    assert np.isnan(find_interfaces(structure, assemblies=assemblies).area).all()


def test_without_a_crystal_there_is_no_mate():
    structure, assemblies = read("1as5.cif.gz")
    found = find_exposure(structure, assemblies=assemblies)
    assert np.isnan(found.mate_distance_angstrom).all()
    assert np.nansum(found.lattice_burial) == 0
    assert len(find_interfaces(structure, assemblies=assemblies).area) == 0


def test_bases_have_areas_but_no_relative_ones():
    structure, assemblies = read("1pfe.cif.gz")
    found = find_exposure(structure, assemblies=assemblies)
    base = np.isin(structure.auth_comp_id, ["DA", "DC", "DG", "DT"])
    assert base.sum() > 5
    assert (found.area_alone[base] > 50).all()
    assert np.isnan(found.relative_alone[base]).all()


def test_mate_distance_is_that_of_the_nearest_lattice_contact():
    structure, assemblies = read("4cup.cif.gz")
    found = find_exposure(structure, assemblies=assemblies)
    near = found.mate_distance_angstrom <= 4.5
    np.testing.assert_array_equal(near, found.contact_number[:, LATTICE] > 0)
