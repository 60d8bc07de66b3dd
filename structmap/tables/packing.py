"""The part of ``run.json`` on how molecules pack and what holds each unit."""

import math
from typing import Any

from structmap.holding import Hold, NetworkEvidence
from structmap.result import AnalysisRecord, MotionalUnit
from structmap.tables.columns import residue_text


def packing_content(record: AnalysisRecord) -> dict[str, Any]:
    """Return how molecules pack, in plain numbers and words.

    Parameters
    ----------
    record : AnalysisRecord
        What the analysis found.

    Returns
    -------
    dict
        Of plain lists, numbers and text, with None for a missing number.
    """
    packing = record.packing
    sample = packing.sample
    return {
        "assemblies": [
            {
                "id": item.name,
                "by_author": item.by_author,
                "by_software": item.by_software,
                "oligomer": item.oligomer,
                "chains": sum(len(names) for names in item.chains),
            }
            for item in packing.assemblies
        ],
        "assembly_closes_to": packing.extent.closes,
        "crystal_contacts": [
            {
                "numeral": neighbour.numeral,
                "operator": neighbour.text,
                "residue_contacts": neighbour.n_contacts,
                "atom_pairs": neighbour.n_atom_pairs,
                "buried_area_square_angstrom": _rounded(neighbour.area, 1),
            }
            for neighbour in packing.neighbours
        ],
        "crystal_of_the_sample": None
        if sample is None
        else {"verdict": sample.verdict, "sentence": sample.sentence},
        "holds": [_hold(record, unit, record.hold_of(unit)) for unit in record.units],
        "elastic_network": None
        if packing.network is None
        else _network(record, packing.network),
    }


def _hold(record: AnalysisRecord, unit: MotionalUnit, hold: Hold) -> dict[str, Any]:
    link = hold.weakest
    joining = unit.lattice.joining_distance_angstrom
    return {
        "unit": hold.unit,
        "verdict": unit.lattice.verdict,
        "verdict_at_cutoff_angstrom": {f"{c:g}": word for c, word in hold.verdict_at},
        "is_marginal": hold.is_marginal,
        "joining_distance_angstrom": {
            kind: _rounded(reach, 2)
            for kind, reach in zip(
                ("chain", "complex", "lattice"), joining, strict=True
            )
        },
        "closes_to": hold.closes,
        "images_in_a_ring": hold.order if hold.closes == "ring" else None,
        "periods": hold.periods.tolist(),
        "residues_that_stay_together": {
            "all_contacts": len(unit.members),
            "without_lattice": hold.largest_without_lattice,
            "lattice_alone": hold.largest_by_lattice_alone,
        },
        "buried_area_across_lattice_square_angstrom": _rounded(hold.buried_area, 1),
        "weakest_link": {
            "residue_contacts": link.n_residue_contacts if link else 0,
            "atom_pairs": link.n_atom_contacts if link else 0,
            "kinds": dict(hold.link_kinds),
            "operators": list(hold.link_images),
        },
        "poorly_ordered_side_chains_that_decide": [
            residue_text(record.structure, residue) for residue in hold.loose_residues
        ],
    }


def _network(record: AnalysisRecord, network: NetworkEvidence) -> dict[str, Any]:
    followed = network.followed
    return {
        "evidence": "of a model; it sets no verdict",
        "correlation_with_b_factors": {
            name: {"linear": _rounded(a.pearson, 3), "rank": _rounded(a.rank, 3)}
            for name, a in network.agreement.items()
        },
        "deviations_follow": followed.follows,
        "difference_of_rank_correlation": [
            _rounded(number, 3)
            for number in (followed.difference, followed.low, followed.high)
        ],
        "damping_by_packing": {
            str(name): _rounded(share, 3)
            for name, share in zip(
                record.sites.name.tolist(), network.site_damping.tolist(), strict=True
            )
        },
        "moves_together": {
            unit.name: {
                "correlation": _rounded(found.correlation, 3),
                "random_mean": _rounded(found.random_mean, 3),
                "p": _rounded(found.p_value, 4),
            }
            for unit, found in zip(record.units, network.together, strict=True)
            if found is not None
        },
    }


def _rounded(number: float, digits: int) -> float | None:
    return round(number, digits) if math.isfinite(number) else None
