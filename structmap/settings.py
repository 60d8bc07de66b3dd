"""Every choice of an analysis, in one frozen record."""

from dataclasses import dataclass
from typing import Literal

ProfilePart = Literal["auto", "whole", "shape", "level"]
Direction = Literal["both", "up", "down"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Settings:
    """Every choice of an analysis.

    Attributes
    ----------
    cutoff_angstrom : float
        Two residues touch when heavy atoms come this close.
    ca_cutoff_angstrom : float
        The same between CA atoms, for files that hold nothing else.
    assembly : str
        Which biological assemblies make contacts `complex`: ``auto`` (those the
        authors determined, else those software did), ``none``, or ids of the file
        parted by commas.
    model : int
        Number of the model to use alone; 0 is the first of a crystal and all of an
        ensemble.
    offset : int or None
        Number to add to the table's residue numbers to get the file's; None lets the
        match find it.
    named_chains_only : bool
        Chains of equal sequence that the table does not name are not copies.
    quantity : tuple of str
        Quantities that enter the grouping; empty takes all that have errors, else the
        first.
    profile_part : {'auto', 'whole', 'shape', 'level'}
        What of a profile is compared. ``auto`` is ``shape`` for a named model of
        relaxation, else ``whole``.
    model_name : str
        Name of the model that the profiles follow; blank for none.
    exclude : tuple of str
        Sites to leave out, written ``A/56A`` or ``56A``.
    columns : tuple of str
        Column names of a table without a header, ``-`` skips one.
    proton_frequency_megahertz : float
        Larmor frequency of the protons; 0 is not given.
    mas_rate_hertz : float
        Rate of magic-angle spinning; 0 is not given.
    sample : {'protonated', 'deuterated'}
        Decides below which spin-lock field points are left out.
    title : str
        What was measured, for the head of the page; blank makes one.
    data_note : str
        What kind of data this is, for the foot of the page.
    seed : int
        Seed of every random step.
    """

    cutoff_angstrom: float = 4.5
    ca_cutoff_angstrom: float = 7.5
    assembly: str = "auto"
    model: int = 0
    offset: int | None = None
    named_chains_only: bool = False
    quantity: tuple[str, ...] = ()
    profile_part: ProfilePart = "auto"
    model_name: str = ""
    exclude: tuple[str, ...] = ()
    columns: tuple[str, ...] = ()
    proton_frequency_megahertz: float = 0.0
    mas_rate_hertz: float = 0.0
    sample: Literal["protonated", "deuterated"] = "protonated"
    title: str = ""
    data_note: str = ""
    seed: int = 20260
