"""What can be wrong between the numbering of values and of coordinates."""

from structmap.errors import StructmapError


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
