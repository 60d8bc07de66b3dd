"""Everything a user can mend, one class a fault.

The tree::

    StructmapError
      FileProblemError        a file that cannot be read or written
      ...                     one class for each other fault, beside its module

Each error prints as one line that names the file, the row or the residue, what is
wrong and what to do. The command line prints that line and ends with status 1; a
mistake of a caller in Python is a plain `ValueError` instead.
"""

from pathlib import Path


class StructmapError(Exception):
    """Anything wrong with the input that its owner can mend."""


class FileProblemError(StructmapError):
    """A file that cannot be read or written."""

    def __init__(self, path: Path | str, problem: str, remedy: str) -> None:
        super().__init__(path, problem, remedy)
        self.path, self.problem, self.remedy = path, problem, remedy

    def __str__(self) -> str:
        return f"{self.path}: {self.problem}; {self.remedy}"


class MissingExtraError(StructmapError):
    """A reader or a figure needs a package that is not installed."""

    def __init__(self, purpose: str, package: str, extra: str) -> None:
        super().__init__(purpose, package, extra)
        self.purpose, self.package, self.extra = purpose, package, extra

    def __str__(self) -> str:
        return (
            f"{self.purpose} needs the package {self.package}, which is not installed; "
            f"install it with: pip install 'structmap[{self.extra}]'"
        )


class UnknownUnitError(StructmapError):
    """A quantity has no unit of measurement, an unknown one, or one of another kind."""

    def __init__(self, quantity: str, unit: str, wanted: str) -> None:
        super().__init__(quantity, unit, wanted)
        self.quantity, self.unit, self.wanted = quantity, unit, wanted

    def __str__(self) -> str:
        unit = (
            f"the unit {self.unit!r} cannot be used"
            if self.unit
            else "no unit is given"
        )
        return (
            f"{self.quantity}: {unit} where one like {self.wanted} is needed; "
            "write the unit in brackets after the column name, as in 'x [kHz]'"
        )


class SettingError(StructmapError):
    """A setting that is unknown or has a value it cannot have."""

    def __init__(self, source: str, name: str, problem: str, remedy: str) -> None:
        super().__init__(source, name, problem, remedy)
        self.source, self.name, self.problem, self.remedy = (
            source,
            name,
            problem,
            remedy,
        )

    def __str__(self) -> str:
        return f"{self.source}: setting {self.name} {self.problem}; {self.remedy}"


class CoordinateFormatError(StructmapError):
    """A coordinate file whose text cannot be read."""

    def __init__(self, path: Path | str, detail: str) -> None:
        super().__init__(path, detail)
        self.path, self.detail = path, detail

    def __str__(self) -> str:
        return (
            f"{self.path}: not readable as mmCIF, PDB or mmJSON ({self.detail}); "
            "download the entry again as mmCIF, or mend that line"
        )


class NoPolymerError(StructmapError):
    """A coordinate file without the residues that measurements could belong to."""

    def __init__(self, path: Path | str, missing: str) -> None:
        super().__init__(path, missing)
        self.path, self.missing = path, missing

    def __str__(self) -> str:
        return (
            f"{self.path}: the file holds no {self.missing}; "
            "give a coordinate file of a protein or nucleic acid"
        )


class NonsenseCellError(StructmapError):
    """A unit cell that no crystal can have."""

    def __init__(self, path: Path | str, cell: str, problem: str) -> None:
        super().__init__(path, cell, problem)
        self.path, self.cell, self.problem = path, cell, problem

    def __str__(self) -> str:
        return (
            f"{self.path}: the unit cell {self.cell} {self.problem}; correct CRYST1 "
            "(PDB) or _cell (mmCIF), or remove it if the molecule is not in a crystal"
        )


class UnknownSymmetryError(StructmapError):
    """A crystal whose symmetry operators are not known."""

    def __init__(self, path: Path | str, space_group: str) -> None:
        super().__init__(path, space_group)
        self.path, self.space_group = path, space_group

    def __str__(self) -> str:
        name = (
            f"the space group {self.space_group!r} is not known"
            if self.space_group
            else ("there is a unit cell but no space group")
        )
        return (
            f"{self.path}: {name}, and no operators are listed; state the space "
            "group in "
            "CRYST1 (PDB) or _symmetry (mmCIF; P 1 if there is no symmetry), or remove "
            "the cell if the molecule is not in a crystal"
        )


class UnknownModelError(StructmapError):
    """A model number that the coordinate file lacks."""

    def __init__(self, path: Path | str, model: int, first: int, last: int) -> None:
        super().__init__(path, model, first, last)
        self.path, self.model, self.first, self.last = path, model, first, last

    def __str__(self) -> str:
        return (
            f"{self.path}: there is no model {self.model} (models {self.first} to "
            f"{self.last}); choose one of these, or 0 for the usual choice"
        )


class RepeatedResidueError(StructmapError):
    """Two residues of one chain with the same number and insertion code."""

    def __init__(self, path: Path | str, residue: str) -> None:
        super().__init__(path, residue)
        self.path, self.residue = path, residue

    def __str__(self) -> str:
        return (
            f"{self.path}: residue {self.residue} stands in two places of its chain; "
            "give the two chains different names, or the residues different numbers"
        )


class UnplacedAtomError(StructmapError):
    """An atom whose coordinates are missing or mere fillers."""

    def __init__(self, path: Path | str, atom: str) -> None:
        super().__init__(path, atom)
        self.path, self.atom = path, atom

    def __str__(self) -> str:
        return (
            f"{self.path}: the position of atom {self.atom} is missing or not a number "
            "below 9000 Å; remove such atoms"
        )


class UnknownAssemblyError(StructmapError):
    """A biological assembly that the coordinate file does not list."""

    def __init__(self, structure: str, assembly: str, known: str) -> None:
        super().__init__(structure, assembly, known)
        self.structure, self.assembly, self.known = structure, assembly, known

    def __str__(self) -> str:
        listed = f"it lists {self.known}" if self.known else "it lists none"
        return (
            f"{self.structure}: there is no assembly {self.assembly!r} ({listed}); "
            "choose from these, 'auto' or 'none'"
        )


class CrowdedCellError(StructmapError):
    """A cell so small for the molecule that its images cannot be counted."""

    def __init__(self, structure: str, n_images: int) -> None:
        super().__init__(structure, n_images)
        self.structure, self.n_images = structure, n_images

    def __str__(self) -> str:
        return (
            f"{self.structure}: {self.n_images} images of the molecule overlap with "
            "it; "
            "correct the unit cell or the coordinates that lie far away"
        )


class UnknownQuantityError(StructmapError):
    """A quantity asked for is not in the table."""

    def __init__(self, values: str, name: str, known: tuple[str, ...]) -> None:
        super().__init__(values, name, known)
        self.values, self.name, self.known = values, name, known

    def __str__(self) -> str:
        return (
            f"{self.values}: there is no quantity {self.name}; "
            f"name one of these with --quantity: {', '.join(self.known)}"
        )


class MissingTemplateError(StructmapError):
    """A file that the page is made from is not there."""

    def __init__(self, path: Path) -> None:
        super().__init__(path)
        self.path = path

    def __str__(self) -> str:
        return (
            f"{self.path}: this file of the page is missing; in a checkout fetch it "
            "with "
            "'pip install -e .' (needs npm or the network), else install structmap "
            "again"
        )


class UnknownProcessModelError(StructmapError):
    """A model of one process has a name that the catalogue lacks."""

    def __init__(self, name: str, known: tuple[str, ...]) -> None:
        super().__init__(name, known)
        self.name, self.known = name, known

    def __str__(self) -> str:
        return f"model {self.name!r} is not known; take one of {', '.join(self.known)}"


class MissingConditionError(StructmapError):
    """A model needs a condition of the experiment that was not given."""

    def __init__(self, model: str, what: str, setting: str) -> None:
        super().__init__(model, what, setting)
        self.model, self.what, self.setting = model, what, setting

    def __str__(self) -> str:
        option = "--" + self.setting.replace("_", "-")
        return (
            f"model {self.model}: {self.what} is missing; set {self.setting} in the "
            f"settings or give {option}"
        )


class UnusableProfileError(StructmapError):
    """Values that no profile of a model can be made of."""

    def __init__(self, where: str, problem: str, remedy: str) -> None:
        super().__init__(where, problem, remedy)
        self.where, self.problem, self.remedy = where, problem, remedy

    def __str__(self) -> str:
        return f"{self.where}: {self.problem}; {self.remedy}"
