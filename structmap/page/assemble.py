"""The page as one text: templates, data and scripts joined under a strict policy."""

import base64
import gzip
import json
import re
from dataclasses import fields
from html import escape
from string import Template

from structmap import words
from structmap.page import markup
from structmap.page.listing import Listing, list_entries
from structmap.page.payload import page_payload
from structmap.page.templates import policy_source, read_template
from structmap.result import AnalysisRecord
from structmap.settings import Settings
from structmap.tables import library_versions
from structmap.version import __version__

SCRIPTS = (
    "state.js",
    "drawing.js",
    "geometry.js",
    "picture.js",
    "laid_out.js",
    "placing.js",
    "writing.js",
    "profiles.js",
    "misfit.js",
    "caption.js",
    "chain.js",
    "units.js",
    "touching.js",
    "sites.js",
    "start.js",
)
COMPRESS_ABOVE_BYTES = 150_000
CARE_SHOWN = 3


def page_html(record: AnalysisRecord) -> str:
    """Return the page of an analysis: one HTML text that opens from disk.

    Nothing in it asks the network for anything, and its content policy forbids that.
    Texts of the input files stand in it escaped.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    str
        The same for the same record.

    Raises
    ------
    MissingTemplateError
        If a file that the page is made from is not there.
    """
    listing = list_entries(record)
    library = read_template("built/3Dmol-min.js")
    styles, scripts = read_template("page.css"), join_scripts(SCRIPTS)
    parts = {
        "policy": content_policy(styles, (library, scripts)),
        "styles": styles,
        "library": library,
        "scripts": scripts,
        "data": data_block(page_payload(record, listing)),
        **_texts(record, listing),
        **_foot(record),
    }
    return Template(read_template("page.html")).substitute(parts)


def join_scripts(names: tuple[str, ...]) -> str:
    """Return scripts as one that keeps its names to itself.

    Parameters
    ----------
    names : tuple of str
        Templates, in the order in which they run.

    Returns
    -------
    str
        A strict function that is called at once.
    """
    body = "\n".join(read_template(name) for name in names)
    return f'"use strict";\n(() => {{\n{body}\n}})();\n'


def content_policy(styles: str, scripts: tuple[str, ...]) -> str:
    """Return a content policy that allows these texts alone and no request.

    Parameters
    ----------
    styles : str
        The text of the style element.
    scripts : tuple of str
        The texts of the script elements.

    Returns
    -------
    str
        For the attribute of a meta element.
    """
    sources = " ".join(policy_source(script) for script in scripts)
    return (
        f"default-src 'none'; script-src {sources}; style-src {policy_source(styles)}; "
        "img-src data: blob:; base-uri 'none'; form-action 'none'"
    )


def data_block(payload: dict[str, object]) -> str:
    """Return data as text that may stand in a script element.

    Parameters
    ----------
    payload : dict
        Plain lists, numbers and text.

    Returns
    -------
    str
        JSON, packed where it is long.
    """
    text = json.dumps(
        payload, ensure_ascii=False, separators=(",", ":"), allow_nan=False
    )
    if len(text.encode("utf-8")) > COMPRESS_ABOVE_BYTES:
        packed = gzip.compress(text.encode("utf-8"), compresslevel=6, mtime=0)
        return json.dumps({"gzip": base64.b64encode(packed).decode()})
    # In a script element only "<" can end it, and JSON lets it be written as an escape.
    for character in "<>&\u2028\u2029":
        text = text.replace(character, f"\\u{ord(character):04x}")
    return text


# --- words of the page ----------------------------------------------------------------


def _texts(record: AnalysisRecord, listing: Listing) -> dict[str, str]:
    title = words.title(record)
    plain_title = re.sub(r"_\{([^}]*)\}", r"\1", markup.mark_text(title))
    result = " ".join(
        markup.with_unit_buttons(s, record) for s in words.result_sentences(record)
    )
    return {
        "page_title": escape(plain_title),
        "title": markup.rich_html(title),
        "result": result,
        "care": _care(record),
        "facts": _facts(record),
        "unit_rows": markup.units_rows(record, listing),
        "site_rows": markup.sites_rows(record, listing),
        "rests_on": _rests_on(record),
        "settings": _settings(record.settings),
    }


def _care(record: AnalysisRecord) -> str:
    sentences = words.care_sentences(record)
    shown = " ".join(markup.rich_html(s) for s in sentences[:CARE_SHOWN])
    more = len(sentences) - CARE_SHOWN
    if more > 0:
        shown += f' <a href="#rests">And {words.number_in_words(more)} more below.</a>'
    return f"<b>Read with care.</b> {shown}" if sentences else ""


def _facts(record: AnalysisRecord) -> str:
    rows = []
    for label, lines in words.facts(record):
        inner = "".join(
            f"<span>{markup.space_group_html(line)}</span>" for line in lines
        )
        rows.append(f"<dt>{escape(label)}</dt><dd>{inner}</dd>")
    return "".join(rows)


def _rests_on(record: AnalysisRecord) -> str:
    paragraphs = [*words.rests_on(record), *words.care_sentences(record)[CARE_SHOWN:]]
    if record.sites.unmatched:
        listed = "; ".join(record.sites.unmatched[:12])
        paragraphs.append(f"Rows without a residue in the coordinates: {listed}.")
    return "".join(f"<p>{markup.rich_html(p)}</p>" for p in paragraphs)


def _settings(settings: Settings) -> str:
    """Return the settings that differ from their defaults, and the main ones always."""
    always = {"cutoff_angstrom", "assembly", "profile_part"}
    rows = []
    for field in fields(Settings):
        value = getattr(settings, field.name)
        if field.name in {"title", "data_note"}:
            continue
        if field.name in always or value != field.default:
            rows.append(
                f"<dt>{escape(_setting_label(field.name))}</dt>"
                f"<dd>{escape(_setting_text(field.name, value))}</dd>"
            )
    return "".join(rows)


_UNITS_IN_NAMES = {"_angstrom": "Å", "_megahertz": "MHz", "_hertz": "Hz"}


def _setting_label(name: str) -> str:
    for ending in _UNITS_IN_NAMES:
        name = name.removesuffix(ending)
    return name.replace("_", " ")


def _setting_text(name: str, value: object) -> str:
    unit = next((u for end, u in _UNITS_IN_NAMES.items() if name.endswith(end)), "")
    if isinstance(value, tuple):
        text = ", ".join(str(item) for item in value)
    elif isinstance(value, bool):
        text = "yes" if value else "no"
    else:
        text = _figure(value) if isinstance(value, int | float) else str(value)
    return f"{text}\u00a0{unit}" if unit else text


def _figure(value: float) -> str:
    text = f"{value:,.0f}" if abs(value) > 9999 else f"{value:g}"
    return text.replace(",", "\u202f").replace("-", "−")


def _foot(record: AnalysisRecord) -> dict[str, str]:
    library = read_template("built/3Dmol-min.js")
    found = re.search(r"3dmol v([0-9.]+)", library[:400])
    versions = " · ".join(f"{n} {v}" for n, v in library_versions().items())
    name = f"3Dmol.js {found.group(1)}" if found else "3Dmol.js"
    pairs = [
        (record.structure.name, record.structure.sha256),
        *zip(record.table.names, record.table.sha256, strict=True),
    ]
    return {
        "versions": escape(
            f"structmap {__version__} · {versions} · {name} (BSD-3-Clause) · "
            "page under MIT. No network is used."
        ),
        "licence": escape(read_template("built/3Dmol-LICENSE.txt")),
        "hashes": "".join(
            f"<span>{escape(n)}<br>sha256 <code>{escape(h)}</code></span>"
            for n, h in pairs
        ),
        "colophon": markup.rich_html(words.colophon(record)),
    }
