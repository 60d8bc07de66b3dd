"""Names, numbers and lists in prose."""

from collections.abc import Iterable

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from structmap.one_process import site_names
from structmap.result import AnalysisRecord
from structmap.structure import LIGAND_PART, POLYMER, one_letter

# Below it a chance cannot be told from 0 and the deviation itself is shown.
SMALLEST_CHANCE = 1e-300
NUMBERS = (
    *("no", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine"),
    *("ten", "eleven", "twelve"),
)


def number_in_words(number: int) -> str:
    """Return a number up to twelve as a word, a larger one in figures.

    Parameters
    ----------
    number : int
        From 0.

    Returns
    -------
    str
        ``three`` for 3, ``18 800`` for 18800, with thin no-break spaces.
    """
    if number < len(NUMBERS):
        return NUMBERS[number]
    return f"{number:,}".replace(",", "\u202f") if number > 9999 else str(number)


def site_name(record: AnalysisRecord, site: int) -> str:
    """Return the short name of a site for prose, ``D56A``.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    site : int
        Index of a site.

    Returns
    -------
    str
        One letter, number and insertion code; the chain in front when sites of several
        chains were measured, the atom behind when one is named. An atom of a ligand has
        the component in place of the letter, ``HEM401 FE``.
    """
    structure, residue = record.structure, int(record.sites.residue[site])
    if residue < 0:
        return str(record.sites.name[site])
    of_ligand = structure.kind_of_residue[residue] == LIGAND_PART
    component = str(structure.auth_comp_id[residue])
    text = component if of_ligand else one_letter(component)
    text += f"{structure.auth_seq_id[residue]}{structure.ins_code[residue]}"
    if len(measured_chains(record)) > 1:
        text = f"{structure.auth_asym_id[residue]}\u00a0{text}"
    atom = record.sites.atom[site]
    named = atom and (of_ligand or _atoms_differ(record))
    return f"{text}\u00a0{atom}" if named else text


def _atoms_differ(record: AnalysisRecord) -> bool:
    residues = record.sites.residue[record.sites.residue >= 0]
    return len(np.unique(residues)) < len(residues)


def fitted_site_names(record: AnalysisRecord, names: tuple[str, ...]) -> str:
    """Return the short names of sites that a fit names as the table does.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    names : tuple of str
        Sites of a `OneProcess`.

    Returns
    -------
    str
        ``T1928 L1931`` for ``("73", "76")``.
    """
    in_table = site_names(record.table)
    site = {in_table[row]: index for index, row in enumerate(record.sites.row.tolist())}
    return " ".join(site_name(record, site[n]) if n in site else n for n in names)


def measured_chains(record: AnalysisRecord) -> tuple[str, ...]:
    """Return the chains that hold the first copies of measured sites.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    tuple of str
        Author names, in the order of the coordinates.
    """
    residues = record.sites.residue[record.sites.residue >= 0]
    names = record.structure.auth_asym_id[np.sort(residues)].tolist()
    return tuple(dict.fromkeys(names))


def listing(parts: Iterable[str], last: str = "and") -> str:
    """Return parts in one phrase, ``a, b and c``.

    Parameters
    ----------
    parts : iterable of str
        The parts.
    last : str, default "and"
        Stands before the last part.

    Returns
    -------
    str
        Blank for no part.
    """
    parts = list(parts)
    if len(parts) < 2:
        return "".join(parts)
    return f"{', '.join(parts[:-1])} {last} {parts[-1]}"


def residues_in_view(record: AnalysisRecord) -> int:
    """Count the polymer residues of the chains that were measured.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    int
        Copies by NCS count once.
    """
    structure = record.structure
    in_view = np.isin(structure.auth_asym_id, measured_chains(record))
    in_view &= structure.kind_of_residue == POLYMER
    in_view &= structure.original_residue == np.arange(len(in_view))
    return int(in_view.sum())


def measured_residues(record: AnalysisRecord) -> int:
    """Count the residues of the polymer whose values are compared.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    int
        Equivalent chains count once.
    """
    sites = np.unique(record.sites.residue[record.measurements.site])
    kind = record.structure.kind_of_residue[sites[sites >= 0]]
    return int(np.count_nonzero(kind == POLYMER))


def measured_in_ligands(record: AnalysisRecord) -> int:
    """Count the parts of ligands whose values are compared.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    int
        Atoms, and ligands that were measured as a whole.
    """
    sites = record.sites.residue[record.measurements.site]
    kind = record.structure.kind_of_residue[sites[sites >= 0]]
    return int(np.count_nonzero(kind == LIGAND_PART))


def errors_off_baseline(record: AnalysisRecord) -> NDArray[np.float64]:
    """Return how many errors each compared site lies off the baseline.

    For one value that is its deviation. For several columns it is the number of
    standard deviations of a normal variable that has the same chance, so that sites at
    rest lie around 0 whatever the number of points.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    ndarray of float, shape (n,)
        For each compared site.
    """
    behaviour = record.behaviour
    if behaviour.background.shape[1] == 1:
        return behaviour.deviation
    chance = np.maximum(behaviour.p_deviation, SMALLEST_CHANCE)
    out: NDArray[np.float64] = np.where(
        behaviour.p_deviation > SMALLEST_CHANCE, -ndtri(chance), behaviour.deviation
    )
    return out
