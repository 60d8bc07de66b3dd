"""Every space group: operators of another library, contacts by enumeration."""

import warnings

import gemmi
import numpy as np
import pytest

from structmap.contacts import find_contacts
from structmap.structure import read_structure
from tests.brute_force import edges_of, heavy_atoms
from tests.crystals import edges_of_contacts

EVERY = list(gemmi.spacegroup_table())
SETTINGS = [
    group
    for index, group in enumerate(EVERY)
    if group.is_reference_setting() or index % 4 == 0
]
REACH = 4.5
CELLS = {
    gemmi.CrystalSystem.Triclinic: (9.3, 11.2, 13.1, 82.0, 75.0, 68.0),
    gemmi.CrystalSystem.Orthorhombic: (11.3, 13.2, 15.1, 90.0, 90.0, 90.0),
    gemmi.CrystalSystem.Tetragonal: (12.3, 12.3, 15.1, 90.0, 90.0, 90.0),
    gemmi.CrystalSystem.Trigonal: (13.2, 13.2, 16.3, 90.0, 90.0, 120.0),
    gemmi.CrystalSystem.Hexagonal: (13.2, 13.2, 16.3, 90.0, 90.0, 120.0),
    gemmi.CrystalSystem.Cubic: (22.3, 22.3, 22.3, 90.0, 90.0, 90.0),
}


def cell_for(group):
    """Return a cell that has the symmetry of the setting."""
    if group.ext == "R":
        return 12.1, 12.1, 12.1, 74.0, 74.0, 74.0
    if group.crystal_system() == gemmi.CrystalSystem.Monoclinic:
        angles = [90.0, 90.0, 90.0]
        angles["abc".index(group.monoclinic_unique_axis())] = 103.0
        return 9.3, 11.2, 13.1, *angles
    return CELLS[group.crystal_system()]


def fractional_atoms(group, rng):
    """Six residues of one to three atoms anywhere, one of them on an element."""
    whole = rng.integers(-3, 4, size=3)
    atoms = [
        (k, place) for k in range(6) for place in rng.random((rng.integers(1, 4), 3))
    ]
    operators = list(group.operations())[1:]
    if operators:
        operator = operators[rng.integers(len(operators))]
        place = np.array(atoms[-1][1])
        orbit = [place]
        for _ in range(24):
            orbit.append(np.array(operator.apply_to_xyz(orbit[-1].tolist())))
            if np.allclose(orbit[-1], place, atol=1e-6):
                atoms.append((6, np.mean(orbit[:-1], axis=0)))
                break
    return [(k, place + whole) for k, place in atoms]


def written(group, rng):
    """Return an mmCIF file of glycines with one atom name a place."""
    cell = gemmi.UnitCell(*cell_for(group))
    rows = []
    for serial, (k, place) in enumerate(fractional_atoms(group, rng), start=1):
        x, y, z = cell.orthogonalize(gemmi.Fractional(*place)).tolist()
        rows.append(
            f"ATOM {serial} C C{serial} . GLY A 1 {k + 1} ? {x:.9f} {y:.9f} {z:.9f} "
            f"1.0 10.0 {k + 1} A 1"
        )
    names = ["a", "b", "c"], ["alpha", "beta", "gamma"]
    lengths = [
        f"_cell.length_{n} {v}"
        for n, v in zip(names[0], cell.parameters[:3], strict=True)
    ]
    angles = [
        f"_cell.angle_{n} {v}"
        for n, v in zip(names[1], cell.parameters[3:], strict=True)
    ]
    columns = (
        "group_PDB id type_symbol label_atom_id label_alt_id label_comp_id "
        "label_asym_id label_entity_id label_seq_id pdbx_PDB_ins_code Cartn_x Cartn_y "
        "Cartn_z occupancy B_iso_or_equiv auth_seq_id auth_asym_id pdbx_PDB_model_num"
    )
    return "\n".join(
        [
            "data_random",
            "_exptl.method 'X-RAY DIFFRACTION'",
            *lengths,
            *angles,
            f"_symmetry.space_group_name_H-M '{group.xhm()}'",
            "_entity.id 1",
            "_entity.type polymer",
            "loop_",
            *(f"_atom_site.{name}" for name in columns.split()),
            *rows,
            "",
        ]
    )


@pytest.mark.parametrize("part", range(10))
def test_no_contact_is_lost_or_doubled_in_any_space_group(part, tmp_path):
    rng = np.random.default_rng(20 + part)
    n_own_images = 0
    for index, group in enumerate(SETTINGS):
        if index % 10 != part:
            continue
        path = tmp_path / f"{index}.cif"
        path.write_text(written(group, rng))
        structure = read_structure(path)
        crystal = structure.crystal
        operators = list(group.operations())
        assert set(crystal.triplets) == {op.triplet() for op in operators}, group.xhm()
        parsed = gemmi.read_structure(str(path))
        parsed.setup_entities()
        # ranks of the operators decide which of two ways to write a contact is kept
        operators.sort(key=lambda op: crystal.triplets.index(op.triplet()))
        expected = edges_of(heavy_atoms(parsed[0]), parsed.cell, operators, REACH)
        contacts = find_contacts(structure, reach_angstrom=REACH, assemblies=())
        found = edges_of_contacts(structure, contacts)
        assert set(found) == set(expected.edges), group.xhm()
        for edge, (distance, n_atom_pairs) in expected.edges.items():
            assert found[edge][0] == pytest.approx(distance, abs=1e-6)
            assert found[edge][1] == n_atom_pairs
        n_own_images += sum(edge[0] == edge[1] for edge in found)
    assert n_own_images > 50


def test_operators_are_those_of_an_independent_table(tmp_path):
    """All settings that spglib's table of 530 holds too, matched by Hall symbol."""
    spglib = pytest.importorskip("spglib", reason="spglib is not installed")
    warnings.simplefilter("ignore", DeprecationWarning)  # spglib announces version 3
    tables = {}
    for number in range(1, 531):
        hall = spglib.get_spacegroup_type(number).hall_symbol
        tables[hall.replace("=", '"').upper()] = number
    rng = np.random.default_rng(4)
    numbers = set()
    for index, group in enumerate(EVERY):
        number = tables.get(group.hall.upper())
        if number is None:
            continue
        listed = spglib.get_symmetry_from_database(number)
        path = tmp_path / f"{index}.cif"
        path.write_text(written(group, rng))
        crystal = read_structure(path).crystal
        expected = {
            (*rotation.ravel().tolist(), *np.rint(24 * move).astype(int) % 24)
            for rotation, move in zip(
                listed["rotations"], listed["translations"], strict=True
            )
        }
        found = {
            (*rotation.ravel().tolist(), *move)
            for rotation, move in zip(
                crystal.rotations, crystal.translations, strict=True
            )
        }
        assert found == expected, group.xhm()
        numbers.add(group.number)
    assert numbers == set(range(1, 231))
