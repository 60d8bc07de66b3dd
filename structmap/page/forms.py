"""The page of several forms of one protein, side by side and linked."""

import re
from html import escape
from string import Template

import numpy as np

from structmap.contacts import KINDS
from structmap.forms import Comparison, FormPair, UnitInForm
from structmap.page.assemble import content_policy, data_block, join_scripts
from structmap.page.forms_contacts import ChangedContact, changed_contacts
from structmap.page.forms_scene import PICTURES, forms_payload, place_names
from structmap.page.markup import mark_svg, pretty_operator, space_group_html
from structmap.page.templates import read_template
from structmap.version import __version__
from structmap.words import number_in_words

SCRIPTS = (
    *("state.js", "drawing.js", "geometry.js", "placing.js"),
    *("forms_picture.js", "forms_writing.js", "forms.js"),
)
CONTACTS_SHOWN = 200
LEAST_RMS_ANGSTROM = 0.1
HELD_BY = {
    "chain": "held by its chain",
    "complex": "held by its assembly",
    "lattice": "held by the lattice",
    "apart": "falls apart",
    "not modelled": "not modelled",
}


def forms_html(found: Comparison) -> str:
    """Return a page with the forms side by side and the units of one in all of them.

    Parameters
    ----------
    found : Comparison
        Several forms of one protein.

    Returns
    -------
    str
        One HTML text that asks the network for nothing; names of files stand in it
        escaped.

    Raises
    ------
    MissingTemplateError
        If a file that the page is made from is not there.
    """
    library = read_template("built/3Dmol-min.js")
    styles = read_template("page.css") + read_template("forms.css")
    scripts = join_scripts(SCRIPTS)
    names = form_names(found)
    contacts = changed_contacts(found)
    payload = forms_payload(found, names, contacts=contacts[:CONTACTS_SHOWN])
    payload["core"] = _core_sentence(found)
    for unit, in_forms in zip(payload["units"], found.units_in_forms, strict=True):
        unit["said"] = [_said(own) for own in in_forms]
    parts = {
        "policy": content_policy(styles, (library, scripts)),
        "styles": styles,
        "library": library,
        "scripts": scripts,
        "data": data_block(payload),
        "title": f"{number_in_words(len(names)).capitalize()} forms of one protein",
        "result": _result(found),
        "care": _care(names),
        "facts": _facts(found, names),
        "pictures": _pictures(found, names),
        "units": _units_table(found, names),
        "changes": _changes_table(found, names, contacts[:CONTACTS_SHOWN]),
        "more": _more(len(contacts)),
        "forms": _forms_table(found, names),
        **_foot(library),
    }
    return Template(read_template("forms.html")).substitute(parts)


def form_names(found: Comparison) -> list[str]:
    """Return the names of the forms.

    Parameters
    ----------
    found : Comparison
        Several forms of one protein.

    Returns
    -------
    list of str
        Each another one, that of the measured form first.
    """
    return [found.forms[0].name, *(pair.name for pair in found.pairs)]


# --- words ----------------------------------------------------------------------------


def _result(found: Comparison) -> str:
    if not found.units:
        return "The form that was measured holds no unit to follow."
    return " ".join(
        f"{_unit_button(unit.name, index)}: {escape(verdict)}."
        for index, (unit, verdict) in enumerate(
            zip(found.units, found.verdicts, strict=True)
        )
    )


def _unit_button(name: str, index: int) -> str:
    return (
        f'<button type="button" class="unit" data-unit="{index}" aria-pressed="false">'
        f"{mark_svg(index)}{escape(name)}</button>"
    )


def _care(names: list[str]) -> str:
    return (
        f"Values were measured on {escape(names[0])}; the other forms tell whether its "
        "units would hold together there, not whether they move there."
    )


def _core_sentence(found: Comparison) -> str:
    """Return by what the forms are laid on one another."""
    cores = [pair.bodies[0] if pair.bodies else None for pair in found.pairs]
    known = [core for core in cores if core is not None]
    if not known:
        return "No part of them is rigid, so the forms stand as their files have them."
    sizes = sorted({len(core.members) for core in known})
    size = f"{sizes[0]} to {sizes[-1]}" if len(sizes) > 1 else str(sizes[0])
    rms = max(core.rms_angstrom for core in known)
    fit = f"up to {rms:.1f}" if rms >= LEAST_RMS_ANGSTROM else "below 0.1"
    text = (
        f"Each form is laid on {found.forms[0].name} by a rigid core of {size} "
        f"residues (rms {fit}\u00a0Å)."
    )
    left = len(cores) - len(known)
    if left:
        text += f" {number_in_words(left).capitalize()} without such a core "
        text += "stands as its file has it." if left == 1 else "stand as in the file."
    if len(found.forms) > PICTURES:
        text += f" The first {number_in_words(PICTURES)} are drawn."
    return text


def _said(own: UnitInForm) -> list[str]:
    """Return what holds a unit in a form: a phrase, then particulars."""
    lines = [HELD_BY[own.level]]
    if own.level == "lattice":
        lines += [f"across {triplet}" for triplet in _triplets(own)]
    if own.n_modelled < own.n_members:
        lines.append(f"{own.n_modelled} of {own.n_members} residues modelled")
    return lines


def _triplets(own: UnitInForm) -> list[str]:
    """Return operators without whole cells, which depend on where one starts."""
    bare = [text.split(" [", maxsplit=1)[0] for text in own.lattice_operators]
    return [pretty_operator(text) for text in dict.fromkeys(bare)]


def _facts(found: Comparison, names: list[str]) -> str:
    lines = [f"<span>{escape(name)}</span>" for name in names[:4]]
    if len(names) > len(lines):
        lines.append(f"<span>and {number_in_words(len(names) - 4)} more</span>")
    return (
        f"<dt>Measured</dt><dd>{lines[0]}</dd>"
        f"<dt>Held against</dt><dd>{''.join(lines[1:])}</dd>"
        f"<dt>Residues</dt><dd><span>{_both(found)}</span></dd>"
    )


def _both(found: Comparison) -> str:
    counts = sorted({pair.n_modelled for pair in found.pairs})
    text = f"{counts[0]} to {counts[-1]}" if len(counts) > 1 else str(counts[0])
    return f"{text} modelled in both"


def _pictures(found: Comparison, names: list[str]) -> str:
    out = []
    for index, (name, form) in enumerate(zip(names, found.forms, strict=True)):
        if index == PICTURES:
            break
        crystal = form.structure.crystal
        about = space_group_html(crystal.space_group) if crystal else "no crystal"
        about += ", measured" if not index else ""
        out.append(
            f'<figure><figcaption><b id="name-{index}">{escape(name)}</b>'
            f'<span>{about}</span><span class="now" id="said-{index}"></span>'
            f'</figcaption><div class="picture" id="picture-{index}" role="group" '
            f'tabindex="0" aria-label="Picture of {escape(name)}. Arrow keys turn all '
            'forms, plus and minus zoom, 0 shows the whole view." '
            'aria-describedby="caption"><div class="canvas" aria-hidden="true"></div>'
            '<svg class="over" aria-hidden="true"></svg></div></figure>'
        )
    return "".join(out)


def _foot(library: str) -> dict[str, str]:
    found = re.search(r"3dmol v([0-9.]+)", library[:400])
    name = f"3Dmol.js {found.group(1)}" if found else "3Dmol.js"
    return {
        "versions": escape(
            f"structmap {__version__} · {name} (BSD-3-Clause) · page under MIT. No "
            "network is used."
        ),
        "licence": escape(read_template("built/3Dmol-LICENSE.txt")),
        "colophon": (
            "A contact that is made in one form alone may be the cause or the outcome "
            "of how that crystal packs; the judgement stays with the reader."
        ),
    }


# --- tables ---------------------------------------------------------------------------


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
        rows.append(
            f'<tr id="unit-{escape(unit.name)}" data-unit="{index}"><th scope="row">'
            f"{_unit_button(unit.name, index)}</th>{cells}"
            f"<td><b>{escape(found.verdicts[index])}</b></td></tr>"
        )
    body = "".join(rows) or '<tr><th scope="row">none</th></tr>'
    return (
        f'<table><thead><tr><th scope="col">unit</th>{head}'
        f'<th scope="col">over all forms</th></tr></thead>'
        f"<tbody>{body}</tbody></table>"
    )


def _unit_cell(own: UnitInForm) -> str:
    lines = [f"{own.n_modelled} of {own.n_members} residues modelled"]
    if own.level == "lattice":
        lines += [f"across {triplet}" for triplet in _triplets(own)]
    if own.level_without_assemblies != own.level:
        without = HELD_BY[own.level_without_assemblies]
        lines.append(f"without assemblies: {without}")
    inner = "".join(f"<span>{escape(line)}</span>" for line in lines)
    return f"<b>{HELD_BY[own.level]}</b>{inner}"


def _changes_table(
    found: Comparison, names: list[str], contacts: tuple[ChangedContact, ...]
) -> str:
    """Return contacts that open or close, those of units first."""
    places = place_names(found)
    rows = []
    for index, row in enumerate(contacts):
        ends = [
            f'<button type="button" class="name" data-place="{place}" '
            f'aria-pressed="false">{escape(places[place])}</button>'
            for place in (row.place_1, row.place_2)
        ]
        inside = dict.fromkeys(unit for unit in row.units if unit >= 0)
        units = " ".join(_unit_button(found.units[u].name, u) for u in inside)
        distances = "".join(_distance_cell(value) for value in row.distances)
        rows.append(
            f'<tr data-contact="{index}"><th scope="row">{ends[0]}</th>'
            f"<td>{ends[1]}</td><td>{KINDS[row.kind]}</td>{distances}"
            f"<td>{units}</td></tr>"
        )
    heads = ("residue", "with", "kind", *map(escape, names), "unit")
    return _table(heads, rows)


def _distance_cell(value: float | None) -> str:
    if value is None:
        return '<td class="broken">not modelled</td>'
    if np.isnan(value):
        return '<td class="broken">broken</td>'
    return f"<td>{value:.1f}</td>"


def _more(n_contacts: int) -> str:
    more = n_contacts - CONTACTS_SHOWN
    if more <= 0:
        return ""
    return (
        f'<p class="about">The first {CONTACTS_SHOWN} are listed and drawn; {more} '
        "more stand in contacts_between_forms.csv.</p>"
    )


def _forms_table(found: Comparison, names: list[str]) -> str:
    rows = []
    for index, (name, form) in enumerate(zip(names, found.forms, strict=True)):
        crystal = form.structure.crystal
        group = crystal.space_group if crystal else form.structure.no_crystal_reason
        assemblies = ", ".join(item.name for item in form.assemblies) or "none"
        told = _pair_cells(found.pairs[index - 1]) if index else _own_cells()
        printed = space_group_html(group) if crystal else escape(group)
        cells = (printed, escape(assemblies), *told)
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


def _table(heads: tuple[str, ...], rows: list[str]) -> str:
    head = "".join(f'<th scope="col">{name}</th>' for name in heads)
    body = "".join(rows) or '<tr><th scope="row">none</th></tr>'
    return f"<table><thead><tr>{head}</tr></thead><tbody>{body}</tbody></table>"
