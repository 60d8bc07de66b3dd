"""Time evidence about structures against general libraries, in one run.

Run as ``python -m tests.benchmarks.evidence``; larger files are taken from the folder
that STRUCTMAP_DATA names. Both sides of a ratio run in turn, so that whatever else the
machine does hits them alike; the best of each is compared. Nothing here fails: the
figures are for people to read. Accessible areas are compared with Lee and Richards'
method at 100 slices of freesasa where that is installed, else with the Shrake-Rupley
of biopython at 960 points.
"""

import importlib.util
import os
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
from Bio.PDB.Atom import Atom
from Bio.PDB.Residue import Residue
from Bio.PDB.SASA import ShrakeRupley

from structmap.atom_pairs import keep_atoms, one_conformation
from structmap.chemistry import find_chemistry
from structmap.contacts import choose_assemblies, find_contacts
from structmap.exposure import find_exposure
from structmap.exposure.sphere import PROBE_ANGSTROM, sphere_radii
from structmap.secondary import assign_secondary_structure
from structmap.structure import Structure, read_structure

ROUNDS = 3
DATA = Path(__file__).parent.parent / "data"
COMMITTED = ("1orc.pdb", "4zhl.cif.gz")
LARGER = ("archive/6flr.pdb.gz", "archive/6wg6.cif.gz")


def files() -> list[Path]:
    """Return the coordinate files to time, by rising size."""
    named = os.environ.get("STRUCTMAP_DATA", "")
    larger = [Path(named) / name for name in LARGER] if named else []
    return [*(DATA / name for name in COMMITTED), *larger]


def best_seconds(*jobs: Callable[[], object]) -> list[float]:
    """Return the shortest time of each job, run in turn."""
    seconds = np.zeros((ROUNDS, len(jobs)))
    for row in seconds:
        for column, job in enumerate(jobs):
            start = time.perf_counter()
            job()
            row[column] = time.perf_counter() - start
    return seconds.min(axis=0).tolist()


def library_area(structure: Structure) -> Callable[[], object]:
    """Return a job: the accessible area of the asymmetric unit by a general library."""
    polymer = keep_atoms(structure, one_conformation(structure))
    radii = sphere_radii(polymer.element) - PROBE_ANGSTROM
    if importlib.util.find_spec("freesasa") is None:
        return lambda: ShrakeRupley(n_points=960).compute(as_residue(polymer))
    freesasa = importlib.import_module("freesasa")
    choice = {"algorithm": freesasa.LeeRichards, "n-slices": 100, "n-threads": 1}
    parameters = freesasa.Parameters(choice)
    flat, sizes = polymer.position.ravel().tolist(), radii.tolist()
    return lambda: freesasa.calcCoord(flat, sizes, parameters)


def as_residue(structure: Structure) -> Residue:
    """Return all atoms as one residue of the general library."""
    residue = Residue((" ", 1, " "), "XXX", "")
    for number, (xyz, element) in enumerate(
        zip(structure.position, structure.element, strict=True)
    ):
        name = f"X{number}"
        residue.add(
            Atom(name, xyz, 0.0, 1.0, " ", name, number, element=str(element).upper())
        )
    return residue


def main() -> None:
    """Print one line a file and job: seconds, seconds of the other, ratio."""
    print(f"{'file':14} {'atoms':>6} {'job':42} {'s':>7} {'other':>7} {'ratio':>6}")
    for path in files():
        structure = read_structure(path)
        assemblies = choose_assemblies(structure, "auto")
        contacts = find_contacts(structure, reach_angstrom=4.5, assemblies=assemblies)
        rows = {
            "burial at three levels / area of one": (
                lambda s=structure, a=assemblies: find_exposure(s, assemblies=a),
                library_area(structure),
            ),
            "chemistry / contacts": (
                lambda s=structure, a=assemblies, c=contacts: find_chemistry(
                    s, c, assemblies=a
                ),
                lambda s=structure, a=assemblies: find_contacts(
                    s, reach_angstrom=4.5, assemblies=a
                ),
            ),
            "secondary structure / reading the file": (
                lambda s=structure: assign_secondary_structure(s),
                lambda p=path: read_structure(p),
            ),
        }
        for job, (ours, other) in rows.items():
            one, two = best_seconds(ours, other)
            name = path.name.split(".")[0]
            size = len(structure.position)
            print(f"{name:14} {size:6} {job:42} {one:7.3f} {two:7.3f} {one / two:6.2f}")


if __name__ == "__main__":
    main()
