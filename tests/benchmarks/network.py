"""Time of the quotient graph and the elastic network, as ratios in one run.

Usage::

    python -m tests.benchmarks.network FILE [FILE ...]

Layout and cycle test of the whole net are compared with gemmi's plain contact search at
4.5 Å. Selected inversion is compared with the 50 softest modes by shift and invert,
with the same diagonal by block solves and, up to 7,000 nodes, with a dense Cholesky
factorisation. The file is also written out in P 1, which makes it grow by its number
of operators. Nothing here fails: the figures are for people to read.
"""

import dataclasses
import statistics
import sys
from collections.abc import Callable
from pathlib import Path

import numpy as np
from scipy.linalg import cho_factor
from scipy.sparse import csc_array, csr_array

from structmap.contacts import choose_assemblies, find_contacts
from structmap.network import (
    build_network,
    find_slow_modes,
    fluctuations_of,
    judge_moving_together,
    laplacian_of,
)
from structmap.network.inversion import _diagonal_by_solves, factorise
from structmap.quotient import (
    Edges,
    cycle_elements,
    elements_of_contacts,
    make_elements,
    place_nodes,
)
from structmap.structure import POLYMER, Structure, read_structure
from tests.benchmarks.contacts import plain_search, plain_structure, seconds
from tests.crystals import as_p1, only_atoms

CUTOFF_ANGSTROM = 4.5
REPEATS = 3
DENSE_UP_TO = 7_000
SOLVES_UP_TO = 12_000


def median(function: Callable[[], object]) -> float:
    return statistics.median(seconds(function) for _ in range(REPEATS))


def time_layout(label: str, structure: Structure) -> None:
    assemblies = choose_assemblies(structure, "auto")
    contacts = find_contacts(
        structure, reach_angstrom=CUTOFF_ANGSTROM, assemblies=assemblies
    )

    def lay_out() -> None:
        elements = make_elements(structure, contacts)
        edges = Edges(
            first=contacts.residue_1,
            second=contacts.residue_2,
            element=elements_of_contacts(
                structure,
                contacts,
                elements=elements,
                indices=np.arange(len(contacts.kind)),
            ),
            kind=contacts.kind,
        )
        n_residues = int((structure.kind_of_residue == POLYMER).sum())
        placement = place_nodes(n_residues, edges, elements=elements)
        around, _ = cycle_elements(edges, placement, elements=elements)
        elements.close(elements.distinct(around))

    plain = plain_structure(structure)
    ratio = median(lay_out) / median(lambda: plain_search(plain))
    print(
        f"{label:22s} {len(structure.position):7d} atoms, {len(contacts.kind):6d} "
        f"edges: layout and cycle test {ratio:5.2f} x gemmi's plain search"
    )


def time_network(label: str, laplacian: csr_array) -> None:
    n_nodes = laplacian.shape[0]
    own = median(lambda: fluctuations_of(laplacian))
    modes = median(lambda: find_slow_modes(laplacian, n_modes=50))
    text = (
        f"{label:22s} {n_nodes:7d} nodes: {own:6.2f} s, {own / modes:5.2f} x 50 modes"
    )
    if n_nodes <= SOLVES_UP_TO:
        rest = csc_array(laplacian[1:][:, 1:])
        factor = factorise(rest)
        solves = seconds(lambda: _diagonal_by_solves(factor))
        text += f", {own / solves:5.2f} x block solves"
    if n_nodes <= DENSE_UP_TO:
        dense = laplacian.toarray() + 1 / n_nodes
        cholesky = seconds(lambda: cho_factor(dense, overwrite_a=True))
        text += f", {own / cholesky:5.2f} x dense Cholesky"
    print(text)


def time_togetherness(label: str, laplacian: csr_array) -> None:
    modes = find_slow_modes(laplacian)
    nodes = np.arange(100, 120)
    taken = seconds(
        lambda: judge_moving_together(
            nodes, laplacian, modes=modes, rng=np.random.default_rng(1)
        )
    )
    print(f"{label:22s} 20 sites against 199 random groups: {taken:6.2f} s")


def main(paths: list[Path]) -> None:
    for path in paths:
        structure = read_structure(path)
        if structure.crystal is None:
            print(f"{path.name}: no crystal")
            continue
        polymer = structure.kind_of_residue[structure.residue_of_atom] == POLYMER
        structure = only_atoms(structure, polymer)
        expanded = dataclasses.replace(as_p1(structure), assemblies=())
        for label, form in ((path.name, structure), (f"{path.name} in P 1", expanded)):
            time_layout(label, form)
            network = build_network(form, ())
            laplacian = laplacian_of(network, "crystal")
            time_network(label, laplacian)
            time_togetherness(label, laplacian)


if __name__ == "__main__":
    main([Path(argument) for argument in sys.argv[1:]])
