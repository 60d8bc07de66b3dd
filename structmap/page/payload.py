"""Everything the scripts of the page draw from, as one plain dictionary."""

from dataclasses import asdict
from typing import Any

import numpy as np
from numpy.typing import NDArray

from structmap import words
from structmap.page import scene
from structmap.page.curves import fitted_curves
from structmap.page.layouts import layouts_payload
from structmap.page.listing import (
    Listing,
    entry_components,
    entry_letters,
    entry_names,
    entry_notes,
    residue_names,
)
from structmap.page.markup import mark_text, mark_unit, pretty_operator
from structmap.page.processes import unit_fits
from structmap.page.view import opening_view
from structmap.result import AnalysisRecord, MotionalUnit
from structmap.values import Quantity
from structmap.version import __version__

MEMBERSHIP_THRESHOLD = 0.5
LOG_WHEN_WIDER_THAN = 8.0
QUIET_ENOUGH = 5
KILO_ABOVE_HERTZ = 2000.0


def page_payload(record: AnalysisRecord, listing: Listing) -> dict[str, Any]:
    """Return what the scripts draw from.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    listing : Listing
        Residues that the page lists.

    Returns
    -------
    dict
        Of plain lists, numbers and text, with None for a missing number.
    """
    atoms = scene.choose_atoms(record, listing)
    images = scene.find_images(record.structure, record.contacts)
    drawn = scene.image_residues(record, images, atoms)
    pictured = scene.images_payload(record, images, drawn)
    for image in pictured:
        image["printed"] = pretty_operator(image["operator"])
    layouts, beyond = layouts_payload(record, listing, images)
    return {
        "version": __version__,
        "id": (
            record.structure.entry_id or record.structure.name.split(".")[0]
        ).lower(),
        "crystal": record.structure.crystal is not None,
        "residues": _residues(record, listing, atoms),
        "entries": _entries(record, listing),
        "chains": _chains(record, listing),
        "quantity": _quantity(record),
        "columns": _other_columns(record, listing),
        "units": [
            {**_unit(record, listing, unit), "layout": layout}
            for unit, layout in zip(record.units, layouts, strict=True)
        ],
        "fits": unit_fits(record, listing),
        "profile": _profile(record, listing),
        "contacts": scene.contacts_payload(record, images),
        "images": pictured,
        "beyond": beyond,
        "copies": _copies(record, listing, atoms),
        "calls": scene.recorded_calls(record.structure, atoms),
        "view": asdict(opening_view(record, atoms, images)),
    }


def plain(values: NDArray[Any], digits: int = 4) -> list[Any]:
    """Return an array as nested lists of rounded numbers, None for NaN.

    Parameters
    ----------
    values : ndarray
        Numbers.
    digits : int, optional
        Significant digits kept.

    Returns
    -------
    list
        Of the shape of the array.
    """
    if values.ndim > 1:
        return [plain(row, digits) for row in values]
    return [
        float(f"{v:.{digits}g}") if np.isfinite(v) else None for v in values.tolist()
    ]


def _spread(listing: Listing, values: NDArray[Any]) -> list[Any]:
    """Return values of the measurements for each entry, None where unmeasured."""
    columns = plain(values)
    return [columns[row] if row >= 0 else None for row in listing.measured.tolist()]


def _residues(
    record: AnalysisRecord, listing: Listing, atoms: scene.DrawnAtoms
) -> dict[str, Any]:
    structure, n_drawn = record.structure, len(listing.first)
    of_atom = structure.residue_of_atom[atoms.atom]
    return {
        "name": residue_names(record, n_drawn),
        "first": listing.first.tolist(),
        "chain": structure.copy_of_residue[:n_drawn].tolist(),
        "anchor": atoms.anchor.tolist(),
        "atoms": np.bincount(of_atom, minlength=n_drawn).tolist(),
    }


def _entries(record: AnalysisRecord, listing: Listing) -> dict[str, Any]:
    structure, behaviour = record.structure, record.behaviour
    residue, site = listing.residue, listing.site
    units = np.append(record.unit_of_site(), -1)
    membership = np.append(record.membership_probability, np.nan)
    moves = behaviour.moves.tolist()
    return {
        "name": entry_names(record, listing),
        "residue": residue.tolist(),
        "letter": entry_letters(record, listing),
        "component": entry_components(record, listing),
        "number": structure.auth_seq_id[residue].tolist(),
        "insertion": structure.ins_code[residue].tolist(),
        "chain": structure.auth_asym_id[residue].tolist(),
        "atom": [str(record.sites.atom[s]) if s >= 0 else "" for s in site.tolist()],
        "secondary": "".join(
            s or "-" for s in structure.secondary_structure[residue].tolist()
        ),
        "unit": units[site].tolist(),
        "membership": plain(membership[site], 3),
        "value": _spread(listing, behaviour.summary),
        "error": _spread(listing, behaviour.summary_error),
        "deviation": _spread(listing, words.errors_off_baseline(record)),
        "moves": [bool(row >= 0 and moves[row]) for row in listing.measured.tolist()],
        "note": entry_notes(record, listing),
        **_surroundings(record, listing),
    }


def _surroundings(record: AnalysisRecord, listing: Listing) -> dict[str, Any]:
    """Return open share in the assembly, residues touched, nearest crystal mate."""
    exposure, residue = record.exposure, listing.residue
    return {
        "exposed": plain(exposure.relative_in_assembly[residue], 3),
        "contacts": exposure.contact_number[residue].sum(axis=1).tolist(),
        "mate": plain(exposure.mate_distance_angstrom[residue], 3),
    }


def _chains(record: AnalysisRecord, listing: Listing) -> list[dict[str, Any]]:
    names = record.structure.auth_asym_id[listing.residue].tolist()
    return [
        {"name": name, "first": names.index(name), "count": names.count(name)}
        for name in dict.fromkeys(names)
    ]


def _quantity(record: AnalysisRecord) -> dict[str, Any]:
    behaviour = record.behaviour
    short, about = _short_and_long_name(record)
    return {
        "name": short,
        "about": about,
        "unit": mark_unit(behaviour.summary_unit),
        "band": _baseline_band(record),
        "signed": _is_signed(record),
        "errorsGiven": record.measurements.errors_given,
        "threshold": MEMBERSHIP_THRESHOLD,
        "membershipKnown": bool(np.isfinite(record.membership_probability).any()),
        "secondaryKnown": bool((record.structure.secondary_structure != "").any()),
    }


def _short_and_long_name(record: AnalysisRecord) -> tuple[str, str]:
    """Return the symbol of the number that stands for a site, and what it is."""
    full = record.behaviour.summary_name
    quantity = words.grouped_quantities(record)[0]
    measurements = record.measurements
    if not measurements.is_profile:
        short = full.removesuffix(" less the baseline")
        marked = mark_text(short if short == full else f"Δ{short}")
        return marked, mark_text(full)
    what = {
        "shape": "span of the profile, from its first to its last quarter",
        "level": "level of the profile above the baseline of the molecule",
        "whole": "mean of the profile above the baseline of the molecule",
    }[measurements.part]
    return mark_text(f"Δ{quantity}"), what


def _baseline_band(record: AnalysisRecord) -> list[float] | None:
    """Return where sites lie that keep to the baseline: median and twice the spread.

    The spread is the larger of 1.4826 times the median absolute deviation of the sites
    that do not move and of their median error.
    """
    behaviour = record.behaviour
    quiet = behaviour.summary[~behaviour.moves & np.isfinite(behaviour.summary)]
    if len(quiet) < QUIET_ENOUGH:
        return None
    middle = np.median(quiet)
    error = np.median(behaviour.summary_error[~behaviour.moves])
    spread = max(
        1.4826 * float(np.median(np.abs(quiet - middle))), float(np.nan_to_num(error))
    )
    return [float(f"{middle - 2 * spread:.4g}"), float(f"{middle + 2 * spread:.4g}")]


def _is_signed(record: AnalysisRecord) -> bool:
    """Return whether values move to both sides of zero."""
    behaviour = record.behaviour
    below = behaviour.summary + 2 * behaviour.summary_error < 0
    return bool((below & behaviour.moves).any())


def _other_columns(record: AnalysisRecord, listing: Listing) -> list[dict[str, Any]]:
    """Return the quantities of one number a site, as they were measured."""
    single = [q for q in record.table.quantities if not len(q.x)]
    if record.measurements.is_profile:
        return []
    row = np.append(record.sites.row, -1)[listing.site]
    return [
        {
            "name": mark_text(q.name),
            "unit": mark_unit(q.unit),
            "value": [
                v if r >= 0 else None
                for v, r in zip(plain(q.value[row, 0]), row, strict=True)
            ],
        }
        for q in single[:4]
    ]


def _unit(
    record: AnalysisRecord, listing: Listing, unit: MotionalUnit
) -> dict[str, Any]:
    entry = {int(site): index for index, site in enumerate(listing.site) if site >= 0}
    lattice = unit.lattice
    return {
        "name": unit.name,
        "members": [entry[int(site)] for site in unit.members],
        "pieces": [
            [entry[int(s)] for s in piece] for piece in lattice.pieces_without_lattice
        ],
        "verdict": unit.verdict,
        "lattice": lattice.verdict,
        "contacts": lattice.contacts.tolist()
        if lattice.verdict.startswith("lattice")
        else [],
        "numerals": list(words.joining_numerals(record, unit)),
        "sure": list(words.unit_sure(record, unit)),
        "holds": [mark_text(line) for line in words.unit_holds(record, unit)],
        "process": [mark_text(line) for line in words.unit_process(record, unit)],
        "sentence": mark_text(words.unit_sentence(record, unit)),
    }


def _copies(
    record: AnalysisRecord, listing: Listing, atoms: scene.DrawnAtoms
) -> dict[str, Any]:
    """Return a bead for each copy of each measured entry: entry, residue, atom."""
    entry = {int(site): i for i, site in enumerate(listing.site) if site >= 0}
    sites, structure = record.sites, record.structure
    place = {int(a): i for i, a in enumerate(atoms.atom)}
    beads: dict[str, list[int]] = {"entry": [], "residue": [], "atom": []}
    measured = set(record.measurements.site.tolist())
    for site, residue in zip(
        sites.copy_site.tolist(), sites.copy_residue.tolist(), strict=True
    ):
        if site in measured and site in entry:
            beads["entry"].append(entry[site])
            beads["residue"].append(residue)
            named = _named_atom(structure, residue, str(sites.atom[site]))
            beads["atom"].append(place.get(named, int(atoms.anchor[residue])))
    return beads


def _named_atom(structure: Any, residue: int, name: str) -> int:
    if not name:
        return -1
    found = np.flatnonzero(
        (structure.residue_of_atom == residue) & (structure.atom_name == name)
    )
    return int(found[0]) if len(found) else -1


# --- profiles -------------------------------------------------------------------------


def _profile(record: AnalysisRecord, listing: Listing) -> dict[str, Any] | None:
    if not record.measurements.is_profile:
        return None
    quantity = _profile_quantity(record)
    factor, x_unit = _x_scale(quantity)
    x = quantity.x * factor
    row = record.sites.row[record.measurements.site]
    kept = record.measurements.point_kept
    reasons = record.measurements.point_reason
    return {
        "name": mark_text(quantity.name),
        "unit": mark_unit(quantity.unit),
        "x": plain(x, 6),
        "xName": mark_text(_x_name(record, quantity)),
        "xUnit": mark_unit(x_unit),
        "log": bool(
            len(x)
            and x[0] > 0
            and x[-1] / x[0] > LOG_WHEN_WIDER_THAN
            and factor_is_field(quantity)
        ),
        "kept": [bool(k) for k in kept],
        "reason": list(reasons),
        "value": _spread(listing, quantity.value[row]),
        "error": _spread(listing, quantity.error[row]),
        "above": _spread(listing, _above_baseline(record, quantity)),
        "curve": fitted_curves(record, listing, x),
    }


def _profile_quantity(record: AnalysisRecord) -> Quantity:
    grouped = words.grouped_quantities(record)
    with_x = [q for q in record.table.quantities if len(q.x)]
    return next((q for q in with_x if q.name in grouped), with_x[0])


_X_OF_MODEL = {
    "mas-r1rho": "spin-lock field ν_{1}",
    "exchange-r1rho": "spin-lock field ν_{1}",
    "cpmg": "CPMG frequency ν_{CPMG}",
    "exponential": "time",
    "binding": "total ligand",
    "melting": "temperature",
}


def _x_name(record: AnalysisRecord, quantity: Quantity) -> str:
    """Return what x is: as the table names it, else as the model has it."""
    if quantity.x_name.strip().lower() not in {"", "x"}:
        return quantity.x_name.replace("_", " ")
    return _X_OF_MODEL.get(record.settings.model, "x")


def factor_is_field(quantity: Quantity) -> bool:
    """Return whether x is a frequency, which is drawn on a logarithmic axis.

    Parameters
    ----------
    quantity : Quantity
        Measured quantity.

    Returns
    -------
    bool
        True for Hz, kHz, MHz and s⁻¹.
    """
    return quantity.x_unit.strip().lower() in {"hz", "khz", "mhz", "s-1", "1/s"}


def _x_scale(quantity: Quantity) -> tuple[float, str]:
    if (
        quantity.x_unit.strip().lower() == "hz"
        and quantity.x.max(initial=0) > KILO_ABOVE_HERTZ
    ):
        return 1e-3, "kHz"
    return 1.0, quantity.x_unit


def _above_baseline(record: AnalysisRecord, quantity: Quantity) -> NDArray[np.float64]:
    """Return every point less the molecule's baseline, points left out included.

    Where a point takes no part in the comparison the baseline there is the median over
    the sites that do not move, after each site was laid on its own compared points.
    """
    measurements, behaviour = record.measurements, record.behaviour
    raw = quantity.value[record.sites.row[measurements.site]]
    kept = measurements.point_kept
    above = np.full(raw.shape, np.nan)
    above[:, kept] = measurements.value - behaviour.background
    lead = np.nanmean(raw[:, kept] - measurements.value, axis=1, keepdims=True)
    aligned = raw[:, ~kept] - lead
    quiet = (
        ~behaviour.moves if (~behaviour.moves).any() else np.ones(len(raw), dtype=bool)
    )
    if aligned.size:
        above[:, ~kept] = aligned - np.nanmedian(aligned[quiet], axis=0)
    above[np.isnan(raw)] = np.nan
    return above
