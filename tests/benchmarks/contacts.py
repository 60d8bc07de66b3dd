"""Time of the contact search, as ratios to gemmi's plain search in the same run.

Usage::

    python -m tests.benchmarks.contacts FILE [FILE ...]

The baseline is gemmi's NeighborSearch, filled, and its ContactSearch at 4.5 Å on the
same atoms with every pair listed: no labels, no residues. Each figure is the median of
several runs, the two taken in turn. The file is also written out in P 1 to grow.
"""

import dataclasses
import statistics
import sys
import time
import tracemalloc
from collections.abc import Callable
from pathlib import Path

import gemmi

from structmap.contacts import choose_assemblies, find_contacts
from structmap.structure import POLYMER, Structure, read_structure
from tests.crystals import as_p1, only_atoms

CUTOFF_ANGSTROM = 4.5


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


def compare(label: str, structure: Structure, repeats: int) -> None:
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
    mine = statistics.median(mine for _, mine in pairs)
    tracemalloc.start()
    own()
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    n_atoms = len(structure.position)
    print(
        f"{label:24s} {n_atoms:8d} atoms  {ratio:5.2f} x gemmi's plain search  "
        f"{1e6 * mine / n_atoms:5.2f} us and {peak / n_atoms / 1000:4.2f} kB an atom"
    )


def main(paths: list[Path]) -> None:
    for path in paths:
        structure = read_structure(path)
        if structure.crystal is None:
            print(f"{path.name}: no crystal")
            continue
        polymer = structure.kind_of_residue[structure.residue_of_atom] == POLYMER
        structure = only_atoms(structure, polymer)
        compare(path.name, structure, repeats=9)
        expanded = dataclasses.replace(as_p1(structure), assemblies=())
        if len(expanded.position) <= 200_000:
            compare(f"{path.name} in P 1", expanded, repeats=3)


if __name__ == "__main__":
    main([Path(argument) for argument in sys.argv[1:]])
