"""Names of residues as people write them."""

import gemmi

from structmap.structure.parting import part_atom
from structmap.structure.record import Structure


def one_letter(comp_id: str) -> str:
    """Return the one-letter code of a chemical component.

    Parameters
    ----------
    comp_id : str
        Name in the Chemical Component Dictionary (``ALA``, ``MSE``, ``DG``).

    Returns
    -------
    str
        Upper case; a modified residue has the letter of its parent (``MSE`` gives
        ``M``), a D amino acid that of its mirror image; ``X`` for anything that is not
        a tabulated amino acid or nucleotide.

    Notes
    -----
    The table of components is that of the gemmi library.
    """
    letter = gemmi.find_tabulated_residue(comp_id.strip().upper()).one_letter_code
    return letter.strip().upper() or "X"


def residue_label(structure: Structure, residue_index: int) -> str:
    """Return the name of a residue: chain, number and insertion code.

    Parameters
    ----------
    structure : Structure
        Coordinates as read.
    residue_index : int
        Index into the residues of the structure.

    Returns
    -------
    str
        ``A/56A``, for an atom of a ligand ``A/401/FE``; a copy made by an NCS operator
        has the name of its original.
    """
    chain = structure.auth_asym_id[residue_index]
    number = structure.auth_seq_id[residue_index]
    text = f"{chain}/{number}{structure.ins_code[residue_index]}"
    atom = part_atom(structure, residue_index)
    return f"{text}/{atom}" if atom else text
