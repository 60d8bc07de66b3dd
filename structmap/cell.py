"""Whether the crystal of the sample is the crystal of the coordinate file."""

import itertools
from dataclasses import dataclass

import gemmi
import numpy as np
from numpy.typing import NDArray

from structmap.errors import SettingError
from structmap.structure import Crystal

Cell = tuple[float, float, float, float, float, float]

# Cells of one crystal form differ by a percent or two between temperatures and
# humidities (common practice, no source).
LENGTH_TOLERANCE = 0.03
ANGLE_TOLERANCE_DEGREES = 2.0
SAME_LATTICE, RELATED_SETTING = "same lattice", "related setting"
DIFFERENT_CRYSTAL = "different crystal"


@dataclass(frozen=True, slots=True, kw_only=True)
class CellComparison:
    """The crystal of the sample against that of the file.

    Attributes
    ----------
    verdict : str
        ``same lattice``, ``related setting`` (the same crystal written with other axes)
        or ``different crystal``.
    sentence : str
        The verdict with its figures.
    length_difference : float
        Largest relative difference of the axes of the reduced cells; NaN when no cell
        of the sample was given.
    angle_difference_degrees : float
        Largest difference of their angles.
    volume_ratio : float
        Primitive cell of the sample over that of the file.
    """

    verdict: str
    sentence: str
    length_difference: float
    angle_difference_degrees: float
    volume_ratio: float


def parse_cell(text: str) -> Cell:
    """Return the unit cell that a text states.

    Parameters
    ----------
    text : str
        Six numbers, a b c in Å and alpha beta gamma in degrees, parted by spaces or
        commas; three lengths alone mean right angles.

    Returns
    -------
    tuple of float
        Three lengths and three angles.

    Raises
    ------
    SettingError
        If these are no six numbers, or no cell has them.
    """
    remedy = "give a b c alpha beta gamma, as in '34.8 39.2 48.3 90 90 90'"
    try:
        numbers = [float(part) for part in text.replace(",", " ").split()]
    except ValueError:
        numbers = []
    if len(numbers) == 3:
        numbers += [90.0] * 3
    if len(numbers) != 6:
        raise SettingError("sample", "sample_cell", f"is {text!r}", remedy)
    a, b, c, alpha, beta, gamma = numbers
    cell = a, b, c, alpha, beta, gamma
    fits = min(numbers[:3]) > 0 and min(numbers[3:]) > 0 and max(numbers[3:]) < 180
    if not fits or not gemmi.UnitCell(*cell).volume > 0:
        problem = f"is {text!r}, which no crystal can have"
        raise SettingError("sample", "sample_cell", problem, remedy)
    return cell


def compare_cells(
    crystal: Crystal,
    *,
    cell: Cell | None = None,
    space_group: str = "",
    length_tolerance: float = LENGTH_TOLERANCE,
    angle_tolerance_degrees: float = ANGLE_TOLERANCE_DEGREES,
) -> CellComparison:
    """Compare the crystal of the sample with that of the file.

    Parameters
    ----------
    crystal : Crystal
        Of the file.
    cell : tuple of float, optional
        Cell of the sample.
    space_group : str, optional
        Space group of the sample in any usual notation; blank when not known, then the
        file's is taken for the kind of its lattice.
    length_tolerance : float, default 0.03
        Largest relative difference of axes that is the same crystal.
    angle_tolerance_degrees : float, default 2
        Largest difference of angles.

    Returns
    -------
    CellComparison
        The verdict and its reasons in one sentence.

    Raises
    ------
    SettingError
        If the space group is not known.
    ValueError
        If neither cell nor space group is given.

    Notes
    -----
    Both cells are made primitive and reduced after Niggli [1]_. A reduced cell jumps
    between equally short bases when the cell changes a little; so every basis of the
    sample's lattice with coefficients -1, 0 or 1 of its reduced one is tried.

    References
    ----------
    .. [1] Grosse-Kunstleve, Sauter and Adams, Acta Cryst. A60, 1 (2004; cited from
       memory).
    """
    if cell is None and not space_group:
        raise ValueError("give the cell or the space group of the sample")
    own = _find_group(crystal.space_group, crystal.cell)
    theirs = _sample_group(space_group, cell or crystal.cell) if space_group else own
    if cell is None:
        return _compare_groups(own, theirs)
    length, angle = _lattice_difference(crystal.cell, own, cell, theirs)
    ratio = _primitive_volume(cell, theirs) / _primitive_volume(crystal.cell, own)
    same_lattice = length <= length_tolerance and angle <= angle_tolerance_degrees
    direct = _difference(_metric(crystal.cell), _metric(cell)[None])
    as_written = (
        direct[0][0] <= length_tolerance and direct[1][0] <= angle_tolerance_degrees
    )
    if not same_lattice:
        verdict, reason = DIFFERENT_CRYSTAL, _lattice_reason(length, angle, ratio)
    elif _number(own) != _number(theirs):
        verdict = DIFFERENT_CRYSTAL
        reason = "the lattice is the same, but molecules are related in another way"
    elif as_written and _symbol(own) == _symbol(theirs):
        verdict, reason = SAME_LATTICE, _within(length, angle)
    else:
        verdict = RELATED_SETTING
        reason = f"the same lattice written with other axes, {_within(length, angle)}"
    return CellComparison(
        verdict=verdict,
        sentence=_sentence(
            verdict,
            f"cell {_cell_text(cell)}{', ' + _symbol(theirs) if space_group else ''}",
            f"cell {_cell_text(crystal.cell)}, {crystal.space_group}",
            reason,
        ),
        length_difference=length,
        angle_difference_degrees=angle,
        volume_ratio=ratio,
    )


def _find_group(name: str, cell: Cell) -> gemmi.SpaceGroup | None:
    return gemmi.find_spacegroup_by_name(name, alpha=cell[3], gamma=cell[5])


def _sample_group(name: str, cell: Cell) -> gemmi.SpaceGroup:
    found = _find_group(name, cell)
    if found is None:
        remedy = "write it as in the International Tables, such as 'P 21 21 21'"
        raise SettingError("sample", "sample_space_group", f"is {name!r}", remedy)
    return found


def _number(group: gemmi.SpaceGroup | None) -> int:
    return int(group.number) if group else 0


def _symbol(group: gemmi.SpaceGroup | None) -> str:
    return str(group.xhm()) if group else ""


def _compare_groups(
    own: gemmi.SpaceGroup | None, theirs: gemmi.SpaceGroup | None
) -> CellComparison:
    reason = "the space groups are the same; the cell was not given"
    verdict = SAME_LATTICE
    if _number(own) != _number(theirs):
        verdict, reason = DIFFERENT_CRYSTAL, "the space groups differ"
    elif _symbol(own) != _symbol(theirs):
        verdict, reason = RELATED_SETTING, "one space group in two settings"
    return CellComparison(
        verdict=verdict,
        sentence=_sentence(verdict, _symbol(theirs), _symbol(own), reason),
        length_difference=np.nan,
        angle_difference_degrees=np.nan,
        volume_ratio=np.nan,
    )


def _sentence(verdict: str, sample: str, file: str, reason: str) -> str:
    head = {
        SAME_LATTICE: "The sample's crystal is that of the file",
        RELATED_SETTING: "The sample's crystal is that of the file in another setting",
        DIFFERENT_CRYSTAL: (
            "The sample is a different crystal: lattice contacts of the file need not "
            "exist in it"
        ),
    }[verdict]
    return f"{head} (sample: {sample}; file: {file}; {reason})."


def _cell_text(cell: Cell) -> str:
    return " ".join(f"{number:g}" for number in cell)


def _within(length: float, angle: float) -> str:
    return f"axes within {100 * length:.1f} %, angles within {angle:.1f}°"


def _lattice_reason(length: float, angle: float, ratio: float) -> str:
    multiple = max(ratio, 1 / ratio)
    if round(multiple) > 1 and abs(multiple - round(multiple)) < 0.1:
        return f"its primitive cell has {ratio:.2g} times the volume of the file's"
    return f"axes differ by {100 * length:.1f} %, angles by {angle:.1f}°"


# --- reduced cells --------------------------------------------------------------------


def _primitive_volume(cell: Cell, group: gemmi.SpaceGroup | None) -> float:
    return float(np.sqrt(np.linalg.det(_reduced_metric(cell, group))))


def _reduced_metric(cell: Cell, group: gemmi.SpaceGroup | None) -> NDArray[np.float64]:
    """Return the scalar products of the axes of the Niggli-reduced primitive cell."""
    vector = gemmi.GruberVector(gemmi.UnitCell(*cell), group)
    vector.niggli_reduce()
    reduced = vector.get_cell().parameters
    return _metric(reduced)


def _metric(cell: Cell) -> NDArray[np.float64]:
    axes = np.array(gemmi.UnitCell(*cell).orth.mat.tolist())
    return np.asarray(axes.T @ axes)


def _lattice_difference(
    cell: Cell,
    group: gemmi.SpaceGroup | None,
    other_cell: Cell,
    other_group: gemmi.SpaceGroup | None,
) -> tuple[float, float]:
    """Return the differences of axes and angles in the basis where they are least."""
    target = _reduced_metric(cell, group)
    bases = _unimodular()
    source = _reduced_metric(other_cell, other_group)
    tried = np.einsum("nji,jk,nkl->nil", bases, source, bases)
    length, angle = _difference(target, tried)
    best = np.argmin(length / LENGTH_TOLERANCE + angle / ANGLE_TOLERANCE_DEGREES)
    return float(length[best]), float(angle[best])


def _unimodular() -> NDArray[np.int64]:
    """Return all changes of basis with coefficients -1, 0 and 1, shape (n, 3, 3)."""
    rows = np.array(list(itertools.product((-1, 0, 1), repeat=9)))
    matrices = rows.reshape(-1, 3, 3)
    changes = np.abs(np.abs(np.linalg.det(matrices)) - 1) < 0.5
    return np.asarray(matrices[changes])


def _difference(
    target: NDArray[np.float64], tried: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the largest relative difference of axes and that of angles in degrees."""
    own, own_angle = _axes_and_angles(target[None])
    other, other_angle = _axes_and_angles(tried)
    length = np.abs(np.log(other / own)).max(axis=1)
    return np.expm1(length), np.abs(other_angle - own_angle).max(axis=1)


def _axes_and_angles(
    metric: NDArray[np.float64],
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    axes = np.sqrt(np.diagonal(metric, axis1=1, axis2=2))
    first, second = [1, 0, 0], [2, 2, 1]
    cosine = metric[:, first, second] / (axes[:, first] * axes[:, second])
    return axes, np.degrees(np.arccos(np.clip(cosine, -1, 1)))
