"""Time of the contact search, as ratios to gemmi's plain search in the same run.

Usage::

    python -m tests.benchmarks.contacts [--million] FILE [FILE ...]

The baseline is gemmi's NeighborSearch, filled, and its ContactSearch at 4.5 Å on the
same atoms with every pair listed: no labels, no residues. Each figure is the median of
several runs, the two taken in turn. The file is also written out in P 1 to grow, with
``--million`` as a block of such cells with about a million atoms too, and then the
exponent of time over atoms is printed. What reading atoms as arrays and giving contacts
their kind take stands beside: in parts of the same plain search.
"""

import dataclasses
import statistics
import sys
import time
import tracemalloc
from collections.abc import Callable
from pathlib import Path

import gemmi
import numpy as np

from structmap.contacts import choose_assemblies, find_contacts, make_group_table
from structmap.contacts.assemblies import assembly_frames
from structmap.contacts.kinds import kinds_of_contacts
from structmap.structure import POLYMER, Structure, read_structure
from structmap.structure.entries import _atom_table, collect_entries
from structmap.structure.files import parse_file
from tests.crystals import as_p1, only_atoms

CUTOFF_ANGSTROM = 4.5
REPEATS = 9
MILLION = 1_000_000


def plain_structure(structure: Structure) -> gemmi.Structure:
    """Return the same polymer atoms as a gemmi structure with the same crystal."""
    model = gemmi.Model(1)
    chains = {}
    for index, (position, residue) in enumerate(
        zip(
            structure.position.tolist(), structure.residue_of_atom.tolist(), strict=True
        )
    ):
        name = str(structure.copy_of_residue[residue])
        chain = chains.setdefault(name, gemmi.Chain(name))
        if not len(chain) or chain[-1].seqid.num != residue:
            item = gemmi.Residue()
            item.name = "GLY"
            item.seqid = gemmi.SeqId(residue, " ")
            chain.add_residue(item)
        atom = gemmi.Atom()
        atom.name, atom.element = f"C{index % 999}", gemmi.Element("C")
        atom.pos = gemmi.Position(*position)
        chain[-1].add_atom(atom)
    for chain in chains.values():
        model.add_chain(chain)
    out = gemmi.Structure()
    out.add_model(model)
    out.cell = gemmi.UnitCell(*structure.crystal.cell)
    out.spacegroup_hm = structure.crystal.space_group
    out.setup_cell_images()
    return out


def plain_search(structure: gemmi.Structure) -> None:
    search = gemmi.NeighborSearch(structure[0], structure.cell, CUTOFF_ANGSTROM)
    search.populate()
    contacts = gemmi.ContactSearch(CUTOFF_ANGSTROM)
    contacts.ignore = gemmi.ContactSearch.Ignore.Nothing
    contacts.find_contacts(search)


def seconds(function: Callable[[], object]) -> float:
    start = time.process_time()
    function()
    return time.process_time() - start


def block_of_cells(structure: Structure, n_atoms: int) -> Structure:
    """Return a P 1 structure as a block of its cells with at least so many atoms."""
    crystal = structure.crystal
    side = 1
    while side**3 * len(structure.position) < n_atoms:
        side += 1
    steps = np.stack(np.meshgrid(*[np.arange(side)] * 3, indexing="ij"), -1)
    steps = steps.reshape(-1, 3)[: -(-n_atoms // len(structure.position))]
    times = steps.max(axis=0) + 1
    moves = steps @ crystal.orthogonalisation.T
    n, n_residues = len(steps), len(structure.kind_of_residue)
    n_copies = len(structure.chain_copies)
    tiled = {
        column.name: np.tile(getattr(structure, column.name), n)
        for column in dataclasses.fields(structure)
        if isinstance(getattr(structure, column.name), np.ndarray)
        and column.name != "position"
    }
    block = np.repeat(np.arange(n), n_residues)
    tiled["copy_of_residue"] += block * n_copies
    tiled["original_residue"] += block * n_residues
    tiled["residue_of_atom"] += np.repeat(
        np.arange(n) * n_residues, len(structure.position)
    )
    grown = dataclasses.replace(
        crystal,
        cell=tuple(
            length * time for length, time in zip(crystal.cell, times, strict=False)
        )
        + crystal.cell[3:],
        orthogonalisation=crystal.orthogonalisation * times,
        fractionalisation=crystal.fractionalisation / times[:, None],
    )
    return dataclasses.replace(
        structure,
        crystal=grown,
        chain_copies=structure.chain_copies * n,
        position=np.concatenate([structure.position + move for move in moves]),
        **tiled,
    )


@dataclasses.dataclass(frozen=True)
class Figure:
    """What one comparison gave: size, and microseconds an atom of both sides."""

    n_atoms: int
    own: float
    plain: float


def compare(label: str, structure: Structure, repeats: int) -> Figure:
    chosen = choose_assemblies(structure, "auto")
    plain = plain_structure(structure)

    def own() -> object:
        return find_contacts(
            structure, reach_angstrom=CUTOFF_ANGSTROM, assemblies=chosen
        )

    pairs = [
        (seconds(lambda: plain_search(plain)), seconds(own)) for _ in range(repeats)
    ]
    ratio = statistics.median(mine / theirs for theirs, mine in pairs)
    theirs, mine = (statistics.median(column) for column in zip(*pairs, strict=True))
    tracemalloc.start()
    own()
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    n_atoms = len(structure.position)
    print(
        f"{label:24s} {n_atoms:8d} atoms  {ratio:5.2f} x gemmi's plain search  "
        f"{1e6 * mine / n_atoms:5.2f} us and {peak / n_atoms / 1000:4.2f} kB an atom",
        flush=True,
    )
    return Figure(
        n_atoms=n_atoms, own=1e6 * mine / n_atoms, plain=1e6 * theirs / n_atoms
    )


def time_parts(path: Path, structure: Structure) -> None:
    """Print what arrays and kinds take, as parts of the plain search."""
    parsed = parse_file(path)
    parsed.content.setup_entities()
    models = [parsed.content[0]]
    flat = gemmi.FlatStructure(parsed.content)
    every = np.ones(len(flat.occ), dtype=np.bool_)
    zeros = np.zeros(len(every), dtype=np.int64)
    arrays, entries = (
        statistics.median(seconds(job) for _ in range(REPEATS))
        for job in (
            lambda: _atom_table(flat, every, zeros, zeros),
            lambda: collect_entries(parsed, models),
        )
    )
    chosen = choose_assemblies(structure, "auto")
    found = find_contacts(structure, reach_angstrom=CUTOFF_ANGSTROM, assemblies=chosen)
    table, frames = (
        make_group_table(structure.crystal),
        assembly_frames(structure, chosen),
    )
    rows = np.column_stack([found.operator, found.shift])
    elements, place = np.unique(rows, axis=0, return_inverse=True)
    first, second = (
        structure.copy_of_residue[found.residue_1],
        structure.copy_of_residue[found.residue_2],
    )
    kinds = statistics.median(
        seconds(
            lambda: kinds_of_contacts(
                first,
                second,
                place=place.reshape(-1),
                elements=elements,
                frames=frames,
                table=table,
            )
        )
        for _ in range(REPEATS)
    )
    plain = plain_structure(structure)
    whole = statistics.median(
        seconds(lambda: plain_search(plain)) for _ in range(REPEATS)
    )
    print(
        f"{path.name:24s} arrays of atoms {arrays / whole:5.2f}, with residues "
        f"{entries / whole:5.2f}, kinds {kinds / whole:5.2f} of the plain search"
    )


def exponent(small: Figure, large: Figure) -> str:
    """Return how time grows with atoms between two sizes, on both sides."""
    size = np.log(large.n_atoms / small.n_atoms)
    own = 1 + np.log(large.own / small.own) / size
    plain = 1 + np.log(large.plain / small.plain) / size
    return (
        f"exponent from {small.n_atoms} to {large.n_atoms} atoms: {own:.2f}, of the "
        f"plain search {plain:.2f}"
    )


def main(arguments: list[str]) -> None:
    for path in (Path(text) for text in arguments if text != "--million"):
        structure = read_structure(path)
        if structure.crystal is None:
            print(f"{path.name}: no crystal")
            continue
        polymer = structure.kind_of_residue[structure.residue_of_atom] == POLYMER
        structure = only_atoms(structure, polymer)
        time_parts(path, structure)
        figures = [compare(path.name, structure, repeats=REPEATS)]
        expanded = dataclasses.replace(as_p1(structure), assemblies=())
        if len(expanded.position) <= 200_000:
            figures.append(compare(f"{path.name} in P 1", expanded, repeats=3))
        if "--million" in arguments:
            block = block_of_cells(expanded, MILLION)
            figures.append(compare(f"{path.name}, block", block, repeats=1))
            print(exponent(figures[0], figures[-1]))


if __name__ == "__main__":
    main(sys.argv[1:])
