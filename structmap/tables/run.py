"""``run.json``: what was run on what."""

import json
from collections.abc import Iterable
from dataclasses import asdict
from importlib.metadata import PackageNotFoundError, version

import numpy as np

from structmap.contacts import KINDS
from structmap.plain_table import plain
from structmap.result import AnalysisRecord
from structmap.tables.packing import packing_content
from structmap.version import __version__
from structmap.words import care_sentences, low_quantities


def run_text(record: AnalysisRecord, notes: Iterable[str] = ()) -> str:
    """Return what was run on what, as JSON.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.
    notes : iterable of str
        What else to keep.

    Returns
    -------
    str
        Version, settings, seed, SHA-256 of the inputs, library versions, counts,
        warnings. No time of day and no path.
    """
    structure, table = record.structure, record.table
    settings = asdict(record.settings)
    inputs = {
        structure.name: structure.sha256,
        **dict(zip(table.names, table.sha256, strict=True)),
    }
    content = {
        "structmap": __version__,
        "seed": settings.pop("seed"),
        "settings": settings,
        "inputs_sha256": inputs,
        "libraries": library_versions(),
        "counts": _counts(record),
        "low_means_moving": list(low_quantities(record)),
        "error_scale": round(record.behaviour.error_scale, 6),
        "baseline": {
            "degree_of_trend": record.behaviour.degree,
            "share_of_variance": round(record.behaviour.trend_share, 6),
        },
        "packing": packing_content(record),
        "numbering": [asdict(chain) for chain in record.sites.chains],
        "residue_names_that_differ": list(record.sites.mismatches),
        "rows_without_residue": list(record.sites.unmatched),
        "warnings": [
            plain(text) for text in (record.reason, *care_sentences(record)) if text
        ],
        "choices": _choices(record),
        "second_opinion": _second_opinion(record),
        "notes": [
            plain(text)
            for text in (
                *structure.warnings,
                *table.notes,
                *record.sites.notes,
                *record.measurements.notes,
                *record.process_notes,
                *notes,
            )
        ],
    }
    return json.dumps(content, indent=2, ensure_ascii=False) + "\n"


def _choices(record: AnalysisRecord) -> list[dict[str, str | int | float]]:
    """Return what choices made otherwise would have found."""
    return [
        asdict(one)
        | {"choice": plain(one.choice), "agreement": round(one.agreement, 6)}
        for one in record.beside.choices
    ]


def _second_opinion(record: AnalysisRecord) -> dict[str, int | float | None] | None:
    opinion = record.beside.second_opinion
    if opinion is None:
        return None
    return {
        name: round(value, 6) if np.isfinite(value) else None
        for name, value in asdict(opinion).items()
    }


def _counts(record: AnalysisRecord) -> dict[str, int]:
    kinds = {
        f"{kind}_contacts": int((record.contacts.kind == k).sum())
        for k, kind in enumerate(KINDS)
    }
    return {
        "rows": len(record.table.auth_seq_id),
        "sites": int((record.sites.residue >= 0).sum()),
        "compared": len(record.measurements.site),
        "moving": int(record.behaviour.moves.sum()),
        "motional_units": len(record.units),
        "points_left_out": sum(bool(r) for r in record.measurements.point_reason),
        **kinds,
    }


def library_versions() -> dict[str, str]:
    """Return the versions of the libraries that the result rests on.

    Returns
    -------
    dict of str to str
        Name and version, ``absent`` for one that is not installed.
    """
    out = {}
    for name in ("gemmi", "numpy", "scipy", "py3Dmol"):
        try:
            out[name] = version(name)
        except PackageNotFoundError:
            out[name] = "absent"
    return out
