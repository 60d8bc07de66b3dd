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
        unit = f"the unit {self.unit!r} cannot be used" if self.unit else "no unit is given"
        return (
            f"{self.quantity}: {unit} where one like {self.wanted} is needed; "
            "write the unit in brackets after the column name, as in 'x [kHz]'"
        )
