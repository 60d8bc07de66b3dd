"""What can be wrong with a table of values."""

from pathlib import Path

from structmap.errors import StructmapError


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
