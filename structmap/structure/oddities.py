"""What is odd about the atoms and assemblies of a file, and what its B column holds."""

from collections.abc import Sequence

import gemmi
import numpy as np
from numpy.typing import NDArray

from structmap.structure.entries import AtomTable, Entry
from structmap.structure.files import ParsedFile
from structmap.structure.names import one_letter
from structmap.structure.record import POLYMER, Crystal

LARGEST_OCCUPANCY_SUM = 1.02  # files round to two figures
FEWEST_SIDE_CHAINS = 0.1
LARGEST_CONFIDENCE = 100.0
SAME_CONFIDENCE = 0.005  # files write two figures
BACKBONE = ("N", "CA", "C", "O", "OXT")
QUALITY_CATEGORY = "_ma_qa_metric"


def find_oddities(
    parsed: ParsedFile, entries: Sequence[Entry], atoms: AtomTable
) -> list[str]:
    """Return warnings about occupancies, side chains and assemblies.

    Parameters
    ----------
    parsed : ParsedFile
        The file after parsing.
    entries : sequence of Entry
        Residues of the file.
    atoms : AtomTable
        Their atoms.

    Returns
    -------
    list of str
        One sentence each.
    """
    found = (
        _crowded_places(entries, atoms),
        _missing_side_chains(entries, atoms),
        _missing_chains(parsed),
    )
    return [sentence for sentence in found if sentence]


def _crowded_places(entries: Sequence[Entry], atoms: AtomTable) -> str:
    """Name residues in which one atom has occupancies that sum to more than one."""
    name = np.unique(atoms.name, return_inverse=True)[1].reshape(-1)
    keys = np.column_stack([atoms.model, atoms.entry, name])
    places, which = np.unique(keys, axis=0, return_inverse=True)
    total = np.bincount(which.reshape(-1), weights=atoms.occupancy)
    over = np.unique(places[total > LARGEST_OCCUPANCY_SUM, 1])
    if not len(over):
        return ""
    first = _label(entries[over[0]])
    noun = f"residue {first}" if len(over) == 1 else f"{len(over)} residues ({first} …)"
    return (
        f"Occupancies of an atom sum to more than 1 in {noun}; every conformation "
        "counts as a place of the atom all the same."
    )


def _label(entry: Entry) -> str:
    number = f"{entry.auth_seq_id}{entry.ins_code}"
    return f"{entry.auth_asym_id}/{entry.auth_comp_id}\u00a0{number}"


def _missing_side_chains(entries: Sequence[Entry], atoms: AtomTable) -> str:
    """Tell a model of the backbone alone, where more than CA atoms are modelled."""
    has_more = np.zeros(len(entries), dtype=np.bool_)
    has_more[atoms.entry[~np.isin(atoms.name, (*BACKBONE, "CB"))]] = True
    has_backbone = np.zeros(len(entries), dtype=np.bool_)
    has_backbone[atoms.entry[np.isin(atoms.name, ("N", "C"))]] = True
    expected = np.array(
        [
            entry.kind == POLYMER and one_letter(entry.auth_comp_id) not in "GAX"
            for entry in entries
        ]
    )
    expected &= has_backbone
    if not expected.any() or has_more[expected].mean() >= FEWEST_SIDE_CHAINS:
        return ""
    return (
        "The model has no side chains beyond CB: contacts are those of the backbone "
        "alone, and most contacts of the molecule are missing."
    )


def _missing_chains(parsed: ParsedFile) -> str:
    """Name chains that an assembly lists and the file lacks."""
    chains = {chain.name for model in parsed.content for chain in model}
    subchains = {
        span.subchain_id()
        for model in parsed.content
        for chain in model
        for span in chain.subchains()
    }
    missing: dict[str, list[str]] = {}
    empty = []
    for assembly in parsed.content.assemblies:
        lacking = {
            name
            for generator in assembly.generators
            for own, known in (
                (generator.chains, chains),
                (generator.subchains, subchains),
            )
            for name in own
            if name not in known
        }
        if lacking:
            missing[assembly.name] = sorted(lacking)
        named = {n for g in assembly.generators for n in (*g.chains, *g.subchains)}
        if named and named == lacking:
            empty.append(assembly.name)
    if not missing:
        return ""
    told = "; ".join(f"{name}: {' '.join(own)}" for name, own in missing.items())
    rest = "the others of each make up the assembly"
    if empty:
        rest += f", and nothing is left of assembly {', '.join(empty)}"
    return f"Assemblies name chains that the file does not hold ({told}); {rest}."


def is_predicted(
    parsed: ParsedFile,
    crystal: Crystal | None,
    *,
    entries: Sequence[Entry],
    atoms: AtomTable,
) -> bool:
    """Return whether the file is a predicted model with confidences for B factors.

    Parameters
    ----------
    parsed : ParsedFile
        The file after parsing.
    crystal : Crystal or None
        Cell and operators.
    entries : sequence of Entry
        Residues of the file.
    atoms : AtomTable
        Their atoms.

    Returns
    -------
    bool
        Without a crystal and with numbers from 0 to 100 in the B column: when an mmCIF
        file holds the category of quality metrics of models, or when the file names no
        experiment and the number is one for each residue and differs between them.
    """
    own = np.array([entry.kind == POLYMER for entry in entries])[atoms.entry]
    confidence = atoms.b_iso[own]
    ranged = bool(((confidence >= 0) & (confidence <= LARGEST_CONFIDENCE)).all())
    if crystal is not None or not ranged:
        return False
    if QUALITY_CATEGORY in parsed.text and parsed.format != gemmi.CoorFormat.Pdb:
        return True
    info = parsed.content.info
    method = info["_exptl.method"].upper() if "_exptl.method" in info else ""
    if method.strip() and "THEORETICAL" not in method:
        return False
    return _one_a_residue(atoms.entry[own], confidence)


def _one_a_residue(entry: NDArray[np.int64], confidence: NDArray[np.float64]) -> bool:
    start = np.flatnonzero(np.diff(entry, prepend=-1))
    high = np.maximum.reduceat(confidence, start)
    low = np.minimum.reduceat(confidence, start)
    n_atoms = np.diff(np.append(start, len(entry)))
    within = (high - low).max() < SAME_CONFIDENCE
    return bool(within and high.max() > high.min() and np.median(n_atoms) > 1)
