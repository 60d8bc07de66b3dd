"""Motional units from measurements on coordinates, with the crystal around them."""

from typing import TYPE_CHECKING, Any

from structmap.errors import StructmapError
from structmap.settings import Settings
from structmap.version import __version__

if TYPE_CHECKING:
    from structmap.analysis import Analysis, analyse

__all__ = ["Analysis", "Settings", "StructmapError", "__version__", "analyse"]


def __getattr__(name: str) -> Any:
    """Import the main entry when asked for, so that the command line starts fast."""
    if name in ("Analysis", "analyse"):
        import structmap.analysis as entry  # noqa: PLC0415

        return getattr(entry, name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
