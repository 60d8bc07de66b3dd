"""Units drawn in one piece over images: where their residues stand in the picture."""

import json

import gemmi
import numpy as np
import pytest

from structmap.analysis import analyse
from structmap.contacts import LATTICE
from structmap.page import page_html
from structmap.page.listing import list_entries
from structmap.page.payload import page_payload
from structmap.settings import make_settings
from tests.test_page import (  # noqa: F401 - fixtures
    Opened,
    browser,
    playwright,
    record,
)

PLACE_ANGSTROM = 0.01
QUICK = {"most_permutations": 19, "repeats": 2}


@pytest.fixture(scope="module")
def payload(record):  # noqa: F811
    return page_payload(record, list_entries(record))


def images_of(payload):
    return [*payload["images"], *payload["beyond"]]


def moved(payload, positions, image):
    """Positions where the page puts them."""
    if image < 0:
        return positions
    matrix = np.reshape(images_of(payload)[image]["matrix"], (3, 4))
    return positions @ matrix[:, :3].T + matrix[:, 3]


def atoms_of(structure, residue):
    own = structure.residue_of_atom == residue
    own &= (structure.element != "H") & (structure.occupancy > 0)
    return structure.position[own]


def shortest(first, second):
    return np.linalg.norm(first[:, None] - second[None], axis=2).min()


def by_operation(positions, cell, triplet, shift):
    """Positions moved by gemmi: an operation on fractional coordinates, whole cells."""
    operation = gemmi.Op(triplet)
    out = []
    for position in positions:
        fractional = cell.fractionalize(gemmi.Position(*position)).tolist()
        there = np.add(operation.apply_to_xyz(fractional), shift)
        out.append(cell.orthogonalize(gemmi.Fractional(*there)).tolist())
    return np.array(out)


def test_laid_out_members_stand_where_the_operation_of_gemmi_puts_them(
    record,  # noqa: F811
    payload,
    repository,
):
    cell = gemmi.read_structure(str(repository / "examples" / "4cup.cif.gz")).cell
    layout = payload["units"][0]["layout"]
    elsewhere = [i for i, image in enumerate(layout["images"]) if image >= 0]
    assert elsewhere
    assert len(elsewhere) < len(layout["images"])
    for i in elsewhere:
        image = payload["images"][layout["images"][i]]
        atoms = atoms_of(record.structure, layout["residues"][i])
        drawn = moved(payload, atoms, layout["images"][i])
        expected = by_operation(atoms, cell, image["operator"], image["shift"])
        np.testing.assert_allclose(drawn, expected, atol=PLACE_ANGSTROM)


def test_contacts_of_a_laid_out_unit_are_as_long_as_they_were_found(record, payload):  # noqa: F811
    layout, contacts = payload["units"][0]["layout"], record.contacts
    at = dict(zip(layout["residues"], layout["images"], strict=True))
    assert layout["joined"]
    for contact, first, second in layout["joined"]:
        ends = int(contacts.residue_1[contact]), int(contacts.residue_2[contact])
        assert (at[ends[0]], at[ends[1]]) == (first, second)
        places = [
            moved(payload, atoms_of(record.structure, residue), image)
            for residue, image in zip(ends, (first, second), strict=True)
        ]
        length = shortest(*places)
        assert length == pytest.approx(contacts.distance_angstrom[contact], abs=0.01)
        assert length <= record.settings.cutoff_angstrom


def test_a_laid_out_unit_hangs_together_and_holds_each_site_once(record, payload):  # noqa: F811
    unit, layout = record.units[0], payload["units"][0]["layout"]
    assert sorted(layout["members"]) == sorted(payload["units"][0]["members"])
    assert len(set(layout["members"])) == len(unit.members)
    places = [
        moved(payload, atoms_of(record.structure, residue), image)
        for residue, image in zip(layout["residues"], layout["images"], strict=True)
    ]
    cutoff = record.settings.cutoff_angstrom
    touching = np.array([[shortest(a, b) <= cutoff for b in places] for a in places])
    reached = np.linalg.matrix_power(touching.astype(int), len(places))
    assert (reached > 0).all()


def test_a_unit_inside_the_molecule_needs_no_layout(record, payload):  # noqa: F811
    for unit, drawn in zip(record.units, payload["units"], strict=True):
        internal = unit.lattice.verdict == "internal"
        assert (drawn["layout"] is None) == internal
    assert any(unit.lattice.verdict == "internal" for unit in record.units)


def test_layouts_take_little_of_the_page(payload):
    layouts = [unit["layout"] for unit in payload["units"]]
    text = json.dumps([layouts, payload["beyond"]], separators=(",", ":"))
    assert len(text) < 0.02 * len(json.dumps(payload))


# --- closing and going on -------------------------------------------------------------


def planted(tmp_path, data_folder, name, moving, assembly):
    """One profile for a few residues of a small structure, flat ones for the rest."""
    rng = np.random.default_rng(3)
    x = np.geomspace(1, 40, 10)
    fall = 8 * (1 - (x / 8) * np.tanh(8 / x))
    rows = ["residue,chain,x,value,error"]
    for residue in range(630, 661):
        values = 10 + (fall if residue in moving else 0) + rng.normal(0, 0.7, len(x))
        rows += [
            f"{residue},A,{at:.4f},{value:.3f},0.7"
            for at, value in zip(x, values, strict=True)
        ]
    path = tmp_path / "values.csv"
    path.write_text("\n".join(rows) + "\n", encoding="utf-8")
    settings = make_settings({**QUICK, "assembly": assembly})
    return analyse(data_folder / "archive" / name, path, settings).record


@pytest.fixture(scope="module")
def ring(tmp_path_factory, data_folder):
    """3WUP, assembly 2: a trimer on the threefold axis; 653 touches 657 of the next."""
    folder = tmp_path_factory.mktemp("ring")
    return planted(folder, data_folder, "3wup.json.gz", {637, 638, 653, 656, 657}, "2")


def test_a_ring_is_drawn_closed_and_said_to_be_one(ring):
    payload = page_payload(ring, list_entries(ring))
    unit = payload["units"][0]
    layout = unit["layout"]
    assert layout["closes"] == "closes to a ring of three"
    assert layout["closes"] in unit["holds"]
    assert layout["ring"]
    assert len(layout["again"]) == 2
    copies = [layout["images"], *layout["again"]]
    first = layout["residues"][0]
    corner = [
        moved(payload, atoms_of(ring.structure, first), images[0]).mean(axis=0)
        for images in copies
    ]
    sides = [np.linalg.norm(corner[i] - corner[i - 1]) for i in range(3)]
    # A threefold axis makes a triangle of equal sides.
    np.testing.assert_allclose(sides, sides[0], atol=PLACE_ANGSTROM)
    assert sides[0] > 1.0


def test_contacts_out_to_the_next_copy_end_on_a_residue_of_it(ring):
    payload = page_payload(ring, list_entries(ring))
    layout, contacts = payload["units"][0]["layout"], ring.contacts
    assert layout["onward"]
    copies = [layout["images"], *layout["again"]]
    standing = {
        (residue, images[i])
        for images in copies
        for i, residue in enumerate(layout["residues"])
    }
    for contact, first, second in layout["onward"]:
        ends = int(contacts.residue_1[contact]), int(contacts.residue_2[contact])
        assert (ends[0], first) in standing
        assert (ends[1], second) in standing
        places = [
            moved(payload, atoms_of(ring.structure, residue), image)
            for residue, image in zip(ends, (first, second), strict=True)
        ]
        assert shortest(*places) == pytest.approx(
            contacts.distance_angstrom[contact], abs=0.01
        )


def test_what_goes_on_without_end_is_drawn_with_its_next_copies(tmp_path, data_folder):
    """3WUP, one chain alone: this unit is joined by operators that make a net."""
    moving = {638, 644, 645, 647, 650, 655, 657, 658, 659}
    endless = planted(tmp_path, data_folder, "3wup.json.gz", moving, "1")
    payload = page_payload(endless, list_entries(endless))
    unit = payload["units"][0]
    layout, structure = unit["layout"], endless.structure
    assert unit["lattice"] == "lattice-joined"
    assert layout["closes"].startswith("goes on without end: a net along")
    assert not layout["ring"]
    assert 0 < len(layout["again"]) <= 6
    inside = np.isin(endless.contacts.residue_1, layout["residues"])
    assert (endless.contacts.kind[inside] == LATTICE).any()
    for images in layout["again"]:
        copy, own = (
            np.concatenate(
                [
                    moved(payload, atoms_of(structure, residue), image)
                    for residue, image in zip(layout["residues"], where, strict=True)
                ]
            )
            for where in (images, layout["images"])
        )
        # A copy of the same shape, elsewhere, that touches the unit.
        np.testing.assert_allclose(
            np.linalg.norm(copy - copy[:1], axis=1),
            np.linalg.norm(own - own[:1], axis=1),
            atol=PLACE_ANGSTROM,
        )
        assert np.linalg.norm(copy - own, axis=1).max() > 1.0
        assert shortest(copy, own) <= endless.settings.cutoff_angstrom


# --- in a browser ---------------------------------------------------------------------


def test_choosing_the_unit_rings_its_residues_where_they_are_laid_out(
    browser,  # noqa: F811
    record,  # noqa: F811
    payload,
    tmp_path,
):
    """Rings on the screen are the laid-out places, turned, scaled and moved alone."""
    target = tmp_path / "page.html"
    target.write_text(page_html(record), encoding="utf-8")
    opened = Opened(browser, target, address="#U1")
    ring_at = '#over circle[stroke-width="1.6"]'
    opened.tab.wait_for_selector(ring_at, state="attached")
    found = opened.tab.eval_on_selector_all(
        ring_at, "all => all.map(c => [+c.getAttribute('cx'), +c.getAttribute('cy')])"
    )
    names = opened.tab.locator("#over .mate-name").all_text_contents()
    caption = opened.text("#caption")
    opened.context.close()
    layout = payload["units"][0]["layout"]
    assert len(found) == len(layout["members"])
    assert len(names) == sum(image >= 0 for image in layout["images"])
    assert all(name.endswith("\u2032") and name in caption for name in names)
    anchors = {
        residue: record.structure.position[
            (record.structure.residue_of_atom == residue)
            & (record.structure.atom_name == "CA")
        ][:1]
        for residue in layout["residues"]
    }
    places = np.concatenate(
        [
            moved(payload, anchors[residue], image)
            for residue, image in zip(layout["residues"], layout["images"], strict=True)
        ]
    )
    x, y, z, w = payload["view"]["quaternion"]
    turn = np.array(
        [
            [1 - 2 * (y * y + z * z), 2 * (x * y - z * w), 2 * (x * z + y * w)],
            [-2 * (x * y + z * w), -1 + 2 * (x * x + z * z), -2 * (y * z - x * w)],
        ]
    )
    flat = places @ turn.T
    span = np.ptp(np.array(found), axis=0) / np.ptp(flat, axis=0)
    assert span[0] == pytest.approx(span[1], rel=0.01)
    expected = flat * span[0] + (np.min(found, axis=0) - flat.min(axis=0) * span[0])
    gap = np.linalg.norm(expected[:, None] - np.array(found)[None], axis=2)
    assert gap.min(axis=1).max() < 1.0
    assert gap.min(axis=0).max() < 1.0
