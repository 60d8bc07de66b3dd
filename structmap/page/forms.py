"""The page of several forms of one protein, side by side."""

from html import escape

import numpy as np

from structmap.forms import Comparison
from structmap.forms.comparing import FormPair
from structmap.forms.units import UnitInForm
from structmap.page.markup import pretty_operator
from structmap.page.templates import policy_source, read_template
from structmap.version import __version__
from structmap.words import number_in_words

CHANGES_SHOWN = 200
COLOURS = 6
HELD_BY = {
    "chain": "held by its chain",
    "complex": "held by its assembly",
    "lattice": "held by the lattice",
    "apart": "falls apart",
    "not modelled": "not modelled",
}
STYLES = (
    ".forms { overflow-x: auto; } .forms td span { display: block; } "
    ".forms td.here { background: var(--wash); } "
    ".forms a, .result a { color: inherit; }"
)


def forms_html(found: Comparison) -> str:
    """Return a page with the units of one form in all of them, side by side.

    Parameters
    ----------
    found : Comparison
        Several forms of one protein.

    Returns
    -------
    str
        One HTML text without scripts; names of files stand in it escaped.

    Raises
    ------
    MissingTemplateError
        If the style sheet is not there.
    """
    styles = read_template("page.css") + STYLES
    names = _names(found)
    title = f"{number_in_words(len(names)).capitalize()} forms of one protein"
    policy = f"default-src 'none'; style-src {policy_source(styles)}; base-uri 'none'"
    sections = (
        _section("a", "Units in each form", _units_table(found, names)),
        _section("b", "The forms", _forms_table(found, names)),
        _section("c", "Contacts that open and close", _changes_table(found, names)),
    )
    return (
        '<!DOCTYPE html>\n<html lang="en" data-theme="light">\n<head>\n'
        '<meta charset="utf-8">\n'
        f'<meta http-equiv="Content-Security-Policy" content="{policy}">\n'
        '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
        f"<title>{title}</title>\n<style>{styles}</style>\n</head>\n<body>\n"
        f'<div class="sheet">\n<header><div class="said"><h1>{title}</h1>'
        f'<p class="result">{_result(found)}</p>'
        f'<p class="care">{_care(names)}</p></div></header>\n<main>\n'
        + "\n".join(sections)
        + f"\n</main>\n<footer><div><p>structmap {__version__} · page under MIT. No "
        "network is used.</p></div></footer>\n</div>\n</body>\n</html>\n"
    )


def _names(found: Comparison) -> list[str]:
    """Return the names of the forms, each another one, the measured one first."""
    return [found.forms[0].name, *(pair.name for pair in found.pairs)]


def _section(letter: str, title: str, table: str) -> str:
    return (
        f'<section class="sites forms" aria-labelledby="head-{letter}">'
        f'<div class="head"><h2 id="head-{letter}"><i>{letter}</i>{title}</h2></div>'
        f"{table}</section>"
    )


def _result(found: Comparison) -> str:
    if not found.units:
        return "The form that was measured holds no unit to follow."
    return " ".join(
        f'<a href="#{escape(unit.name)}">{escape(unit.name)}</a>: {escape(verdict)}.'
        for unit, verdict in zip(found.units, found.verdicts, strict=True)
    )


def _care(names: list[str]) -> str:
    return (
        f"Values were measured on {escape(names[0])}; the other forms tell whether its "
        "units would hold together there, not whether they move there."
    )


def _units_table(found: Comparison, names: list[str]) -> str:
    head = "".join(
        f'<th scope="col"><a href="#form-{i}">{escape(name)}</a></th>'
        for i, name in enumerate(names)
    )
    rows = []
    for index, (unit, forms) in enumerate(
        zip(found.units, found.units_in_forms, strict=True)
    ):
        cells = "".join(
            f"<td{' class=here' if i == 0 else ''}>{_unit_cell(own)}</td>"
            for i, own in enumerate(forms)
        )
        mark = (
            '<svg class="mark" viewBox="0 0 10 10" aria-hidden="true">'
            f'<circle class="u{index % COLOURS}" cx="5" cy="5" r="4"/></svg>'
        )
        rows.append(
            f'<tr id="{escape(unit.name)}"><th scope="row">{mark}{escape(unit.name)}'
            f"</th>{cells}<td><b>{escape(found.verdicts[index])}</b></td></tr>"
        )
    return (
        f'<table><thead><tr><th scope="col">unit</th>{head}'
        f'<th scope="col">over all forms</th></tr></thead>'
        f"<tbody>{''.join(rows)}</tbody></table>"
    )


def _unit_cell(own: UnitInForm) -> str:
    lines = [f"{own.n_modelled} of {own.n_members} residues modelled"]
    if own.level == "lattice":
        lines += [pretty_operator(text) for text in own.lattice_operators]
    if own.level_without_assemblies != own.level:
        without = HELD_BY[own.level_without_assemblies]
        lines.append(f"without assemblies: {without}")
    inner = "".join(f"<span>{escape(line)}</span>" for line in lines)
    return f"<b>{HELD_BY[own.level]}</b>{inner}"


def _forms_table(found: Comparison, names: list[str]) -> str:
    rows = []
    for index, (name, form) in enumerate(zip(names, found.forms, strict=True)):
        crystal = form.structure.crystal
        group = crystal.space_group if crystal else form.structure.no_crystal_reason
        assemblies = ", ".join(item.name for item in form.assemblies) or "none"
        told = _pair_cells(found.pairs[index - 1]) if index else _own_cells()
        cells = (escape(group), escape(assemblies), *told)
        rows.append(
            f'<tr id="form-{index}"><th scope="row">{escape(name)}</th>'
            + "".join(f"<td>{cell}</td>" for cell in cells)
            + "</tr>"
        )
    heads = (
        *("form", "space group", "assemblies", "residues of both", "that differ"),
        *("rigid core, rms", "rms of all on it", "other rigid parts"),
        *("contacts kept", "opened", "closed"),
    )
    return _table(heads, rows)


def _own_cells() -> tuple[str, ...]:
    return ("measured", *("",) * 7)


def _pair_cells(pair: FormPair) -> tuple[str, ...]:
    core = "none found"
    if pair.bodies:
        core = (
            f"{len(pair.bodies[0].members)} residues, "
            f"{pair.bodies[0].rms_angstrom:.2f}\u00a0Å"
        )
    others = ", ".join(str(len(body.members)) for body in pair.bodies[1:])
    count = [change.change for change in pair.changes]
    return (
        *(str(pair.n_modelled), str(pair.n_mutations), core, _angstrom(pair)),
        others or "none",
        *(str(count.count(word)) for word in ("kept", "opened", "closed")),
    )


def _angstrom(pair: FormPair) -> str:
    return "" if np.isnan(pair.rms_angstrom) else f"{pair.rms_angstrom:.2f}\u00a0Å"


def _changes_table(found: Comparison, names: list[str]) -> str:
    """Return contacts that open or close, those of units first."""
    columns = found.contacts_table.columns
    at = {name: columns.index(name) for name in columns}
    changed = [row for row in found.contacts_table.rows if row[at["change"]] != "kept"]
    units = (at["motional_unit_1"], at["motional_unit_2"])
    changed.sort(key=lambda row: -sum(row[unit] is not None for unit in units))
    rows = []
    for row in changed[:CHANGES_SHOWN]:
        index = names.index(str(row[at["coordinates_2"]]))
        other = f'<a href="#form-{index}">{escape(names[index])}</a>'
        inside = dict.fromkeys(str(row[u]) for u in units if row[u] is not None)
        linked = " ".join(f'<a href="#{escape(u)}">{escape(u)}</a>' for u in inside)
        distances = [_number(row[at[f"distance_angstrom_{end}"]]) for end in (1, 2)]
        cells = (
            escape(str(row[at["site_2"]])),
            *(escape(str(row[at[name]])) for name in ("kind", "change")),
            *(other, *distances, linked),
        )
        rows.append(
            f'<tr><th scope="row">{escape(str(row[at["site_1"]]))}</th>'
            + "".join(f"<td>{cell}</td>" for cell in cells)
            + "</tr>"
        )
    more = len(changed) - len(rows)
    foot = (
        f'<p class="about">{more} more stand in contacts_between_forms.csv.</p>'
        if more > 0
        else ""
    )
    heads = (
        *("residue", "with", "kind", "in the other form", "form"),
        *("Å where measured", "Å there", "unit"),
    )
    return _table(heads, rows) + foot


def _number(value: object) -> str:
    known = isinstance(value, float) and np.isfinite(value)
    return f"{value:.1f}" if known else "broken"


def _table(heads: tuple[str, ...], rows: list[str]) -> str:
    head = "".join(f'<th scope="col">{name}</th>' for name in heads)
    body = "".join(rows) or '<tr><th scope="row">none</th></tr>'
    return f"<table><thead><tr>{head}</tr></thead><tbody>{body}</tbody></table>"
