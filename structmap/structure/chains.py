"""Chains with their full sequences, assemblies, secondary structure."""

from collections.abc import Sequence

import gemmi
import numpy as np
from numpy.typing import NDArray

from structmap.structure.entries import Entry
from structmap.structure.files import ParsedFile
from structmap.structure.record import POLYMER, Assembly, ChainCopy

WATER_WEIGHT_DALTON = 18.015
USUAL_WEIGHT_DALTON = {"peptide": 110.0, "nucleic": 310.0, "other": 150.0}
POLYMER_TYPES = {
    gemmi.PolymerType.PeptideL: "peptide",
    gemmi.PolymerType.PeptideD: "peptide",
    gemmi.PolymerType.Dna: "nucleic",
    gemmi.PolymerType.Rna: "nucleic",
    gemmi.PolymerType.DnaRnaHybrid: "nucleic",
    gemmi.PolymerType.Pna: "nucleic",
}


def make_chain_copies(
    parsed: ParsedFile, entries: Sequence[Entry], ncs: Sequence[NDArray[np.float64]]
) -> tuple[ChainCopy, ...]:
    """Return the polymer chains and their NCS copies.

    Parameters
    ----------
    parsed : ParsedFile
        The file after parsing.
    entries : sequence of Entry
        Residues of the file, without NCS copies.
    ncs : sequence of ndarray, shape (4, 4)
        The identity first, then the operators that make further copies.

    Returns
    -------
    tuple of ChainCopy
        All chains of the file, then all again for each further operator.
    """
    observed: dict[tuple[str, str], list[str]] = {}
    for entry in entries:
        if entry.kind == POLYMER:
            observed.setdefault(entry.chain, []).append(entry.auth_comp_id)
    types = {chain: _polymer_type(parsed, chain) for chain in observed}
    sequences = {
        chain: _full_sequence(parsed, chain) or tuple(names)
        for chain, names in observed.items()
    }
    return tuple(
        ChainCopy(
            auth_asym_id=chain[0],
            label_asym_id=chain[1],
            ncs=number,
            ncs_matrix=matrix,
            polymer_type=types[chain],
            sequence=sequences[chain],
        )
        for number, matrix in enumerate(ncs)
        for chain in observed
    )


def _entity_of_subchain(parsed: ParsedFile, subchain: str) -> gemmi.Entity | None:
    for entity in parsed.content.entities:
        if subchain in entity.subchains:
            return entity
    return None


def _full_sequence(parsed: ParsedFile, chain: tuple[str, str]) -> tuple[str, ...]:
    entity = _entity_of_subchain(parsed, chain[1])
    if entity is None:
        return ()
    return tuple(gemmi.Entity.first_mon(item) for item in entity.full_sequence)


def _polymer_type(parsed: ParsedFile, chain: tuple[str, str]) -> str:
    entity = _entity_of_subchain(parsed, chain[1])
    if entity is not None and entity.polymer_type in POLYMER_TYPES:
        return POLYMER_TYPES[entity.polymer_type]
    for model in parsed.content:
        span = model.find_chain(chain[0])
        if span is not None:
            found = span.get_subchain(chain[1]).check_polymer_type()
            return POLYMER_TYPES.get(found, "other")
    return "other"


def polymer_weight_dalton(
    entries: Sequence[Entry], chains: Sequence[ChainCopy]
) -> float:
    """Return the weight of the modelled polymer residues of one asymmetric unit.

    Parameters
    ----------
    entries : sequence of Entry
        Without NCS copies.
    chains : sequence of ChainCopy
        With NCS copies; each copy weighs as much as its original.

    Returns
    -------
    float
        In Da; residues that are not tabulated count with the usual weight of theirs.
    """
    type_of_chain = {(c.auth_asym_id, c.label_asym_id): c.polymer_type for c in chains}
    total = 0.0
    for entry in entries:
        if entry.kind != POLYMER:
            continue
        tabulated = gemmi.find_tabulated_residue(entry.auth_comp_id).weight
        usual = USUAL_WEIGHT_DALTON[type_of_chain[entry.chain]]
        total += tabulated - WATER_WEIGHT_DALTON if tabulated else usual
    return total * len(chains) / max(1, len(type_of_chain))


def read_assemblies(parsed: ParsedFile) -> tuple[Assembly, ...]:
    """Return the biological assemblies that a file lists.

    Parameters
    ----------
    parsed : ParsedFile
        The file after parsing.

    Returns
    -------
    tuple of Assembly
        Author chain names throughout: PDB files list chains, mmCIF files subchains.
    """
    author_names = {
        span.subchain_id(): chain.name
        for chain in parsed.content[0]
        for span in chain.subchains()
        if span and span[0].entity_type == gemmi.EntityType.Polymer
    }
    return tuple(_assembly(item, author_names) for item in parsed.content.assemblies)


def _assembly(item: gemmi.Assembly, author_names: dict[str, str]) -> Assembly:
    matrices: list[NDArray[np.float64]] = []
    chains: list[list[str]] = []
    for generator in item.generators:
        names = list(generator.chains)
        names += [
            author_names[sub] for sub in generator.subchains if sub in author_names
        ]
        for operator in generator.operators:
            matrix = matrix_of(operator.transform)
            same = [
                k for k, known in enumerate(matrices) if np.array_equal(known, matrix)
            ]
            if not same:
                matrices.append(matrix)
                chains.append([])
            chains[same[0] if same else -1].extend(names)
    return Assembly(
        name=item.name,
        by_author=item.author_determined,
        by_software=item.software_determined,
        oligomer=item.oligomeric_details.lower(),
        chains=tuple(tuple(dict.fromkeys(names)) for names in chains),
        matrices=np.array(matrices).reshape(-1, 4, 4),
    )


def matrix_of(transform: gemmi.Transform) -> NDArray[np.float64]:
    """Return a gemmi transform as a matrix.

    Parameters
    ----------
    transform : gemmi.Transform
        Rotation and translation.

    Returns
    -------
    ndarray of float, shape (4, 4)
        Cartesian transform with the translation in the last column.
    """
    matrix = np.eye(4)
    matrix[:3, :3] = transform.mat.tolist()
    matrix[:3, 3] = transform.vec.tolist()
    return matrix


def secondary_structure(
    parsed: ParsedFile, entries: Sequence[Entry]
) -> NDArray[np.str_]:
    """Return helices and strands as the file records them.

    Parameters
    ----------
    parsed : ParsedFile
        The file after parsing.
    entries : sequence of Entry
        Residues of the file, without NCS copies.

    Returns
    -------
    ndarray of str, shape (n_entries,)
        ``H``, ``E`` or blank.
    """
    place = {
        (entry.auth_asym_id, entry.auth_seq_id, entry.ins_code): index
        for index, entry in enumerate(entries)
        if entry.kind == POLYMER
    }
    out = np.full(len(entries), "", dtype="<U1")
    strands = [strand for sheet in parsed.content.sheets for strand in sheet.strands]
    for letter, ranges in (("E", strands), ("H", list(parsed.content.helices))):
        for item in ranges:
            first, last = (place.get(_address(end)) for end in (item.start, item.end))
            if first is not None and last is not None:
                out[first : last + 1] = letter
    return out


def _address(end: gemmi.AtomAddress) -> tuple[str, int, str]:
    number = end.res_id.seqid.num
    return (
        end.chain_name,
        0 if number is None else number,
        end.res_id.seqid.icode.strip(),
    )
