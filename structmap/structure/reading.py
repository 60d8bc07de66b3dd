"""Reading a coordinate file into arrays."""

from collections.abc import Sequence
from pathlib import Path

import gemmi
import numpy as np
from numpy.typing import NDArray

from structmap.errors import NoPolymerError
from structmap.structure.chains import (
    make_chain_copies,
    matrix_of,
    polymer_weight_dalton,
    read_assemblies,
    secondary_structure,
)
from structmap.structure.entries import AtomTable, Entry, collect_entries
from structmap.structure.expansion import atom_columns, make_layout, residue_columns
from structmap.structure.files import ParsedFile, find_model, parse_file
from structmap.structure.oddities import find_oddities, is_predicted
from structmap.structure.record import POLYMER, ChainCopy, Crystal, Structure
from structmap.structure.symmetry import (
    MOST_OPERATORS,
    NO_GROUP_REASON,
    check_cell_against_group,
    find_crystal,
    is_too_small,
    stated_operators,
)

CA_ONLY_ATOMS_PER_RESIDUE = 1.5
# Å^3/Da. Dry protein fills 1.23 (0.74 cm^3/g); Matthews, J. Mol. Biol. 33, 491 (1968)
# found 1.6 to 3.5 in crystals of proteins, and peptides pack more tightly.
USUAL_VOLUME_PER_DALTON = (1.2, 6.0)
PREDICTED_REASON = "the coordinates are a predicted model"
CROWDED_REASON = "the unit cell is too small for the molecule"


def read_structure(path: Path | str, *, model: int = 0) -> Structure:
    """Read a coordinate file.

    Parameters
    ----------
    path : Path or str
        File in mmCIF, PDB or mmJSON, gzipped or not; the content decides, not the name.
    model : int
        Number of the model to use alone; 0 is the first of a crystal and all of an
        ensemble.

    Returns
    -------
    Structure
        All alternate conformations, no hydrogens, no atoms of zero occupancy; copies
        that strict NCS operators of the file make are residues of their own. Without a
        crystal the assemblies of the file, if it lists any, make these copies instead.
        A crystal whose cell is too small for the molecule, or whose operators are no
        group, is left out with a warning.

    Raises
    ------
    FileProblemError
        If the file is missing, unreadable, empty, damaged or binary.
    CoordinateFormatError
        If its text cannot be parsed.
    NoPolymerError
        If it holds no atoms or no polymer residues.
    NonsenseCellError
        If no crystal can have its cell.
    UnknownSymmetryError
        If it has a cell but neither a known space group nor listed operators.
    UnknownModelError
        If it has no such model.
    RepeatedResidueError
        If a residue number comes back elsewhere in its chain.
    UnplacedAtomError
        If an atom has no position.
    """
    parsed = parse_file(Path(path))
    crystal, reason = find_crystal(parsed)
    was_crystal = crystal is not None or reason == NO_GROUP_REASON
    models = _choose_models(parsed, model, only_first=was_crystal)
    parsed.content.assign_label_seq_id()
    entries, atoms = collect_entries(parsed, models)
    if not any(entry.kind == POLYMER for entry in entries):
        raise NoPolymerError(parsed.path, "polymer residues")
    warnings = _left_out(parsed, crystal, reason, len(atoms.entry))
    if crystal is not None and warnings:
        crystal, reason = None, CROWDED_REASON
    in_assembly = crystal is None and len(parsed.content.assemblies) > 0
    ncs = [np.eye(4)] if in_assembly else _ncs_matrices(parsed.content)
    chains = make_chain_copies(parsed, entries, ncs)
    warnings += _warnings(parsed, crystal, entries, chains)
    warnings += find_oddities(parsed, entries, atoms)
    if was_crystal and not model and len(parsed.content) > 1:
        count = len(parsed.content)
        warnings.append(
            f"The file holds {count} models of a crystal; the first is used."
        )
    return _assemble(parsed, (crystal, reason), (entries, atoms), chains, warnings)


def _choose_models(
    parsed: ParsedFile, model: int, *, only_first: bool
) -> list[gemmi.Model]:
    if model:
        return [find_model(parsed, model)]
    filled = [item for item in parsed.content if item.count_atom_sites()]
    return filled[:1] if only_first else filled


def _ncs_matrices(content: gemmi.Structure) -> list[NDArray[np.float64]]:
    matrices = [np.eye(4)]
    for operator in content.ncs:
        matrix = matrix_of(operator.tr)
        if not operator.given and not np.allclose(matrix, np.eye(4), atol=1e-6):
            matrices.append(matrix)
    return matrices


def _left_out(
    parsed: ParsedFile, crystal: Crystal | None, reason: str, n_atoms: int
) -> list[str]:
    """Say that the crystal is left out where the file's own cannot be."""
    if reason == NO_GROUP_REASON:
        what = (
            f"The {len(stated_operators(parsed))} operators listed in the file are no "
            f"group: together they generate more than {MOST_OPERATORS}"
        )
    elif crystal is not None and is_too_small(
        parsed, crystal, n_atoms * len(_ncs_matrices(parsed.content))
    ):
        cell = " ".join(f"{number:g}" for number in crystal.cell)
        what = (
            f"The unit cell {cell} with {len(crystal.triplets)} operators is too small "
            "for the molecule, which would overlap with its own images"
        )
    else:
        return []
    return [
        f"{what}. The crystal is left out: contacts are those of the molecule and its "
        "assemblies alone, and what the crystal does cannot be told."
    ]


def _warnings(
    parsed: ParsedFile,
    crystal: Crystal | None,
    entries: Sequence[Entry],
    chains: Sequence[ChainCopy],
) -> list[str]:
    if crystal is None:
        return []
    warnings = check_cell_against_group(parsed, crystal)
    weight = polymer_weight_dalton(entries, chains)
    volume = parsed.content.cell.volume / len(crystal.triplets)
    low, high = USUAL_VOLUME_PER_DALTON
    if not low <= volume / weight <= high:
        warnings.append(
            f"The cell has {volume / weight:.2f} Å³ for each Da of polymer, where "
            f"{low:g} to {high:g} is usual: the coordinates may be a fragment, or the "
            "cell or space group wrong."
        )
    return warnings


def _assemble(
    parsed: ParsedFile,
    crystal: tuple[Crystal | None, str],
    content: tuple[Sequence[Entry], AtomTable],
    chains: tuple[ChainCopy, ...],
    warnings: Sequence[str],
) -> Structure:
    entries, atoms = content
    info = parsed.content.info
    predicted = is_predicted(parsed, crystal[0], entries=entries, atoms=atoms)
    ncs = list({chain.ncs: chain.ncs_matrix for chain in chains}.values())
    layout = make_layout(entries, len(ncs))
    return Structure(
        name=parsed.path.name,
        sha256=parsed.sha256,
        entry_id=_stated(info, "_entry.id"),
        title=_stated(info, "_struct.title"),
        method=_stated(info, "_exptl.method"),
        resolution_angstrom=parsed.content.resolution or np.nan,
        crystal=crystal[0],
        no_crystal_reason=PREDICTED_REASON if predicted else crystal[1],
        chain_copies=chains,
        assemblies=read_assemblies(parsed),
        n_models=int(atoms.model.max()) + 1,
        ca_only=_is_ca_only(entries, atoms),
        is_predicted=predicted,
        warnings=tuple(warnings),
        secondary_structure=secondary_structure(parsed, entries)[layout.entry],
        has_secondary_structure=bool(
            len(parsed.content.helices) + len(parsed.content.sheets)
        ),
        **residue_columns(entries, layout),
        **atom_columns(atoms, layout, ncs),
    )


def _is_ca_only(entries: Sequence[Entry], atoms: AtomTable) -> bool:
    polymer = np.array([entry.kind == POLYMER for entry in entries])
    first = atoms.model == atoms.model.min()
    n_atoms = np.count_nonzero(polymer[atoms.entry] & first)
    return bool(n_atoms < CA_ONLY_ATOMS_PER_RESIDUE * np.count_nonzero(polymer))


def _stated(info: gemmi.InfoMap, tag: str) -> str:
    return str(info[tag]).strip() if tag in info else ""
