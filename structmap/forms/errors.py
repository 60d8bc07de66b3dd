"""What can be wrong when several forms are compared."""

from structmap.errors import StructmapError


class DifferentProteinError(StructmapError):
    """A form holds no chain like those that were measured."""

    def __init__(self, coordinates: str, reference: str, identity: float) -> None:
        super().__init__(coordinates, reference, identity)
        self.coordinates, self.reference = coordinates, reference
        self.identity = identity

    def __str__(self) -> str:
        return (
            f"{self.coordinates}: no chain has the sequence of the measured chains of "
            f"{self.reference} (the best agrees in {100 * self.identity:.0f} % of it); "
            "compare analyses of the same protein"
        )
