"""Text of the page: subscripts, unit buttons, the tables that stand without scripts."""

import re
from html import escape

import numpy as np

from structmap import words
from structmap.page.listing import Listing, entry_names, entry_notes
from structmap.result import AnalysisRecord, MotionalUnit

SHAPES = ("circle", "square", "triangle", "diamond", "circle", "square")
_SUBSCRIPTS = (
    (
        re.compile(r"(?<![\w-])(Δ?)R_?1[ _]?(?:rho|ρ)(?!\w|\.\w)", re.IGNORECASE),
        r"\1R_{1ρ}",
    ),
    (re.compile(r"(?<![\w-])(Δ?)R_?([12])(?!\w|\.\w)"), r"\1R_{\2}"),
    (re.compile(r"\btau\b"), "τ"),
    (re.compile(r"\bk_?ex\b"), "k_{ex}"),
    (re.compile(r"\bK_?[dD]\b"), "K_{d}"),
    (re.compile(r"\bR_?ex\b"), "R_{ex}"),
)
_SUPERSCRIPTS = str.maketrans("-+0123456789", "⁻⁺⁰¹²³⁴⁵⁶⁷⁸⁹")
_POWER = re.compile(r"(?<=[A-Za-z])\^?([-+]?[0-9]+)(?![0-9A-Za-z.])")
_UNIT_NAME = re.compile(r"\bU[0-9]+\b")


def mark_text(text: str) -> str:
    """Return text with the subscripts of the trade marked, ``R_{1ρ}`` for ``R1rho``.

    Parameters
    ----------
    text : str
        Plain text.

    Returns
    -------
    str
        The page turns ``_{…}`` into a subscript.
    """
    for pattern, replacement in _SUBSCRIPTS:
        text = pattern.sub(replacement, text)
    return text


def mark_unit(unit: str) -> str:
    """Return a unit of measurement with real superscripts, ``s⁻¹`` for ``s-1``.

    Parameters
    ----------
    unit : str
        As in the table.

    Returns
    -------
    str
        ``1/s`` becomes ``s⁻¹`` as well.
    """
    if unit == "1/s":
        return "s⁻¹"
    return _POWER.sub(lambda found: found.group(1).translate(_SUPERSCRIPTS), unit)


def rich_html(text: str) -> str:
    """Return escaped HTML with subscripts.

    Parameters
    ----------
    text : str
        Plain text.

    Returns
    -------
    str
        Safe to put between tags.
    """
    marked = re.sub(r"_\{([^}]*)\}", r"<sub>\1</sub>", escape(mark_text(text)))
    return re.sub(r"\b(s|Hz|M|m|K)-([12])\b", _power_html, marked)


def _power_html(found: re.Match[str]) -> str:
    return found.group(1) + f"-{found.group(2)}".translate(_SUPERSCRIPTS)


def space_group_html(text: str) -> str:
    """Return a line with the screw axes of a space group as subscripts.

    Parameters
    ----------
    text : str
        ``P 21 21 21, six crystal contacts``.

    Returns
    -------
    str
        HTML in which ``21`` after the lattice letter is ``2`` with a subscript.
    """
    found = re.match(r"^([PABCFIRH](?: -?[0-9][0-9]?(?:/[a-z])?| [a-z])+)(?=,|$)", text)
    if not found:
        return rich_html(text)
    parts = re.sub(
        r" (-?[2346])([1-5])(?![0-9])", r" \1<sub>\2</sub>", escape(found.group(1))
    )
    letter, rest = parts[0], parts[1:].replace(" ", "")
    return f"{letter}\u00a0{rest}{rich_html(text[found.end() :])}"


def with_unit_buttons(text: str, record: AnalysisRecord) -> str:
    """Return a sentence as HTML in which unit names are buttons.

    Parameters
    ----------
    text : str
        Plain text with unit names.
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    str
        HTML.
    """
    place = {unit.name: index for index, unit in enumerate(record.units)}

    def button(found: re.Match[str]) -> str:
        name = found.group()
        return unit_button(name, place[name]) if name in place else name

    return _UNIT_NAME.sub(button, rich_html(text))


def unit_button(name: str, index: int) -> str:
    """Return the button of a unit: its mark and its name.

    Parameters
    ----------
    name : str
        Name of the unit.
    index : int
        From 0.

    Returns
    -------
    str
        HTML.
    """
    return (
        f'<button type="button" class="unit" data-unit="{index}" aria-pressed="false">'
        f"{mark_svg(index)}{escape(name)}</button>"
    )


def mark_svg(index: int) -> str:
    """Return the mark of a unit: its colour and shape, hollow from the seventh on.

    Parameters
    ----------
    index : int
        From 0.

    Returns
    -------
    str
        An SVG element.
    """
    colour, shape = index % 6, SHAPES[index % 6]
    drawn = {
        "circle": '<circle cx="6" cy="6" r="5"/>',
        "square": '<path d="M1.4 1.4H10.6V10.6H1.4Z"/>',
        "triangle": '<path d="M6 .8L11.4 10.8H.6Z"/>',
        "diamond": '<path d="M6 .2L11.8 6L6 11.8L.2 6Z"/>',
    }[shape]
    hollow = " hollow" if index >= len(SHAPES) else ""
    return (
        f'<svg class="mark u{colour}{hollow}" viewBox="0 0 12 12" aria-hidden="true">'
        f"{drawn}</svg>"
    )


def units_rows(record: AnalysisRecord, listing: Listing) -> str:
    """Return the body of the table of units.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    listing : Listing
        Residues that the page lists.

    Returns
    -------
    str
        Table rows; one row that says so when there is no unit.
    """
    if not record.units:
        return (
            '<tr class="none"><th scope="row" colspan="5">No motional unit. Residues '
            "that move stand in c and f.</th></tr>"
        )
    return "".join(
        _unit_row(record, listing, i, unit) for i, unit in enumerate(record.units)
    )


def _unit_row(
    record: AnalysisRecord, listing: Listing, index: int, unit: MotionalUnit
) -> str:
    sure, holds = words.unit_sure(record, unit), words.unit_holds(record, unit)
    process = words.unit_process(record, unit)
    return (
        f'<tr data-unit="{index}"><th scope="row">{unit_button(unit.name, index)}</th>'
        f'<td class="members">{_members(record, listing, unit)}</td>'
        f'<td class="sure">{_lines(sure)}</td><td class="holds">{_lines(holds)}</td>'
        f'<td class="process" data-unit="{index}">{_lines(process)}</td></tr>'
    )


def _lines(lines: tuple[str, ...]) -> str:
    quiet = ' class="quiet"' if lines == ("not tested",) else ""
    first = f"<b{quiet}>{rich_html(lines[0])}</b>"
    return first + "".join(f"<span>{_operator_html(line)}</span>" for line in lines[1:])


def _operator_html(line: str) -> str:
    if re.fullmatch(r"[-+xyz0-9/,]+", line) and any(axis in line for axis in "xyz"):
        return f'<span class="operator">{escape(pretty_operator(line))}</span>'
    return rich_html(line)


_FRACTIONS = {
    "1/2": "½",
    "1/3": "⅓",
    "2/3": "⅔",
    "1/4": "¼",
    "3/4": "¾",
    "1/6": "⅙",
    "5/6": "⅚",
}


def pretty_operator(triplet: str) -> str:
    """Return a triplet of the International Tables as it is printed.

    Parameters
    ----------
    triplet : str
        ``-x+1/2,-y,z+1/2``.

    Returns
    -------
    str
        ``−x+½, −y, z+½``.
    """
    for plain, printed in _FRACTIONS.items():
        triplet = triplet.replace(plain, printed)
    return triplet.replace("-", "−").replace(",", ", ")


def _members(record: AnalysisRecord, listing: Listing, unit: MotionalUnit) -> str:
    """Return the members as buttons; pieces that only the crystal joins are parted."""
    entry = {int(site): index for index, site in enumerate(listing.site) if site >= 0}
    pieces = unit.lattice.pieces_without_lattice or (tuple(unit.members.tolist()),)
    numerals = words.joining_numerals(record, unit)
    bridge = f' <span class="bridge">┄\u00a0{" ".join(numerals)}\u00a0┄</span> '
    buttons = [
        " ".join(
            f'<button type="button" class="name" data-entry="{entry[int(site)]}" '
            'aria-pressed="false">'
            f"{escape(words.site_name(record, int(site)))}</button>"
            for site in sorted(piece)
        )
        for piece in pieces
    ]
    return bridge.join(buttons)


def sites_rows(record: AnalysisRecord, listing: Listing) -> str:
    """Return the body of the table of sites for a browser without scripts.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    listing : Listing
        Residues that the page lists.

    Returns
    -------
    str
        Rows with name, value, error, errors above baseline, unit, helix or strand,
        open share of the surface, residues touched, distance to a mate and note.
    """
    behaviour, units = record.behaviour, record.unit_of_site()
    names, notes = entry_names(record, listing), entry_notes(record, listing)
    off, rows = words.errors_off_baseline(record), []
    for index, (site, row) in enumerate(
        zip(listing.site.tolist(), listing.measured.tolist(), strict=True)
    ):
        cells = ["", "", "", ""]
        if row >= 0:
            cells[0] = _number(behaviour.summary[row])
            cells[1] = _number(behaviour.summary_error[row])
            cells[2] = f"{off[row]:.1f}".replace("-", "−")
            cells[3] = record.units[units[site]].name if units[site] >= 0 else ""
        cells += _surroundings(record, int(listing.residue[index]))
        inner = "".join(f"<td>{cell}</td>" for cell in cells)
        rows.append(
            f'<tr><th scope="row">{escape(names[index])}</th>{inner}'
            f"<td>{escape(notes[index])}</td></tr>"
        )
    return "".join(rows)


def _surroundings(record: AnalysisRecord, residue: int) -> list[str]:
    exposure = record.exposure
    code = str(record.structure.secondary_structure[residue])
    return [
        {"H": "helix", "E": "strand"}.get(code, ""),
        _number(100 * float(exposure.relative_in_assembly[residue])),
        str(int(exposure.contact_number[residue].sum())),
        _number(float(exposure.mate_distance_angstrom[residue])),
    ]


def _number(value: float) -> str:
    return "" if np.isnan(value) else f"{value:.3g}".replace("-", "−")
