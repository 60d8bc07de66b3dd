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


def _listed(columns: tuple[str, ...]) -> str:
    """Return the first column names, each in quotes."""
    return ", ".join(map(repr, columns[:8])) + ", ..." * (len(columns) > 8)


class NoSiteColumnError(StructmapError):
    """A table does not say which residue a row belongs to."""

    def __init__(self, path: Path | str, columns: tuple[str, ...]) -> None:
        super().__init__(path, columns)
        self.path, self.columns = path, columns

    def __str__(self) -> str:
        found = _listed(self.columns)
        return (
            f"{self.path}: no column gives the residue number (found: {found}); "
            "call it auth_seq_id, residue, resid or res, or name the columns in order "
            "with --columns if the table has no header"
        )


class NoQuantityError(StructmapError):
    """A table holds residue numbers and no measured value."""

    def __init__(self, path: Path | str, columns: tuple[str, ...]) -> None:
        super().__init__(path, columns)
        self.path, self.columns = path, columns

    def __str__(self) -> str:
        return (
            f"{self.path}: no column holds a measured value (found: "
            f"{_listed(self.columns)}); add one, such as R1 with R1_error"
        )


class UnclearColumnsError(StructmapError):
    """Columns of a table can be taken in more than one way."""

    def __init__(
        self, path: Path | str, columns: tuple[str, ...], problem: str, remedy: str
    ) -> None:
        super().__init__(path, columns, problem, remedy)
        self.path, self.columns = path, columns
        self.problem, self.remedy = problem, remedy

    def __str__(self) -> str:
        noun = "column" if len(self.columns) == 1 else "columns"
        named = _listed(self.columns)
        return f"{self.path}: {noun} {named} {self.problem}; {self.remedy}"


class UnreadableCellError(StructmapError):
    """A cell does not hold what its column needs."""

    def __init__(
        self, path: Path | str, row: int, column: str, text: str, wanted: str
    ) -> None:
        super().__init__(path, row, column, text, wanted)
        self.path, self.row, self.column = path, row, column
        self.text, self.wanted = text, wanted

    def __str__(self) -> str:
        text = self.text if len(self.text) <= 40 else self.text[:37] + "..."
        return f"{self.path}, row {self.row}: {self.column} is {text!r}; {self.wanted}"


class RaggedRowError(StructmapError):
    """A row has fewer or more cells than the header."""

    def __init__(self, path: Path | str, row: int, found: int, expected: int) -> None:
        super().__init__(path, row, found, expected)
        self.path, self.row = path, row
        self.found, self.expected = found, expected

    def __str__(self) -> str:
        remedy = (
            "write NA where a value is missing, or fetch the file again if it is cut "
            "short"
            if self.found < self.expected
            else "remove the surplus cells or name their columns"
        )
        cells = f"{self.found} cell" + "s" * (self.found != 1)
        row = f"{self.path}, row {self.row}"
        return f"{row}: {cells} where {self.expected} are due; {remedy}"


class RepeatedRowError(StructmapError):
    """Two rows give a value for the same site (and the same point of its profile)."""

    def __init__(self, path: Path | str, rows: tuple[int, int], site: str) -> None:
        super().__init__(path, rows, site)
        self.path, self.rows, self.site = path, rows, site

    def __str__(self) -> str:
        return (
            f"{self.path}, rows {self.rows[0]} and {self.rows[1]}: both give "
            f"{self.site}; keep one of them, or tell them apart by chain, insertion "
            "code or atom"
        )


class UnknownChainError(StructmapError):
    """The table names a chain that the coordinates lack."""

    def __init__(
        self, values: str, row: int, chain: str, coordinates: str, present: str
    ) -> None:
        super().__init__(values, row, chain, coordinates, present)
        self.values, self.row, self.chain = values, row, chain
        self.coordinates, self.present = coordinates, present

    def __str__(self) -> str:
        return (
            f"{self.values}, row {self.row}: chain {self.chain!r} is not a polymer "
            f"chain of {self.coordinates} (it has {self.present}); correct the chain "
            "column, or lay the rows on the chains by a table given with --mapping"
        )


class NoMatchError(StructmapError):
    """No measured residue could be found in the coordinates."""

    def __init__(
        self, values: str, coordinates: str, measured: str, present: str
    ) -> None:
        super().__init__(values, coordinates, measured, present)
        self.values, self.coordinates = values, coordinates
        self.measured, self.present = measured, present

    def __str__(self) -> str:
        return (
            f"{self.values}: none of its residues ({self.measured}) is in "
            f"{self.coordinates} ({self.present}); state the difference of the numbers "
            "with --offset, or give a table with --mapping"
        )


class UnclearMatchError(StructmapError):
    """Two ways to lay the table on the coordinates are equally good."""

    def __init__(
        self, values: str, coordinates: str, answers: str, remedy: str
    ) -> None:
        super().__init__(values, coordinates, answers, remedy)
        self.values, self.coordinates = values, coordinates
        self.answers, self.remedy = answers, remedy

    def __str__(self) -> str:
        return (
            f"{self.values}: it fits {self.coordinates} equally well with "
            f"{self.answers}; {self.remedy}"
        )


class DisagreeingNamesError(StructmapError):
    """More than a tenth of the named rows disagree with the coordinates."""

    def __init__(
        self, values: str, coordinates: str, n_named: int, examples: tuple[str, ...]
    ) -> None:
        super().__init__(values, coordinates, n_named, examples)
        self.values, self.coordinates = values, coordinates
        self.n_named, self.examples = n_named, examples

    def __str__(self) -> str:
        shown = "; ".join(self.examples[:3]) + (
            "; ..." if len(self.examples) > 3 else ""
        )
        return (
            f"{self.values}: {len(self.examples)} of {self.n_named} named residues "
            f"differ from {self.coordinates} where it fits best ({shown}); check "
            "that the two "
            "belong together, or state the numbering with --offset or --mapping"
        )


class DisagreeingResidueError(StructmapError):
    """A mapping given by the user names a residue the coordinate file lacks."""

    def __init__(
        self, mapping: str, row: int, site: str, coordinates: str, nearest: str
    ) -> None:
        super().__init__(mapping, row, site, coordinates, nearest)
        self.mapping, self.row, self.site = mapping, row, site
        self.coordinates, self.nearest = coordinates, nearest

    def __str__(self) -> str:
        return (
            f"{self.mapping}, row {self.row}: residue {self.site} is not in "
            f"{self.coordinates} (nearest there: {self.nearest}); correct auth_seq_id "
            "or pdbx_PDB_ins_code in that row, or remove the row"
        )


class RepeatedSiteError(StructmapError):
    """Two rows of the table fall on one residue of the coordinates."""

    def __init__(self, values: str, rows: tuple[int, int], site: str) -> None:
        super().__init__(values, rows, site)
        self.values, self.rows, self.site = values, rows, site

    def __str__(self) -> str:
        return (
            f"{self.values}, rows {self.rows[0]} and {self.rows[1]}: both fall on "
            f"{self.site} of the coordinates; keep one of them, or tell them apart by "
            "chain, insertion code or atom"
        )


class UnknownSiteError(StructmapError):
    """A site that is to be left out is not among the measured ones."""

    def __init__(self, site: str, nearest: str) -> None:
        super().__init__(site, nearest)
        self.site, self.nearest = site, nearest

    def __str__(self) -> str:
        return (
            f"--exclude {self.site}: no measured site has that name (nearest: "
            f"{self.nearest}); write it as in the site column of sites.csv"
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
