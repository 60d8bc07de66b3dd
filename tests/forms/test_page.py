"""The page of several forms: pictures and tables side by side, linked, no network."""

import base64
import gzip
import json
import re
from html.parser import HTMLParser

import gemmi
import numpy as np
import pytest

from structmap.analysis import compare_analyses
from structmap.contacts import LATTICE
from structmap.forms import compare_folders
from structmap.page import forms_html
from structmap.page.forms import form_names
from structmap.page.forms_contacts import changed_contacts
from structmap.page.forms_scene import forms_payload
from structmap.structure import read_structure
from tests.check_page import find_faults
from tests.forms.test_comparing import (
    two_folders,  # noqa: F401 - a fixture
    written,
)
from tests.quotient.test_unit import UNIT_4CUP
from tests.test_page import (  # noqa: F401 - fixtures
    WITHOUT_WEBGL,
    Opened,
    browser,
    playwright,
)

PLACE_ANGSTROM = 0.02  # coordinates are carried in hundredths of Å


class Elements(HTMLParser):
    """Collects identifiers, links and the text of cells."""

    def __init__(self, text):
        super().__init__()
        self.ids, self.links, self.tags, self.words = [], [], [], []
        self.feed(text)

    def handle_starttag(self, tag, attrs):
        named = dict(attrs)
        self.tags.append(tag)
        self.ids += [named["id"]] if "id" in named else []
        self.links += [named["href"]] if "href" in named else []

    def handle_data(self, data):
        self.words.append(data)


@pytest.fixture
def found(two_folders):  # noqa: F811
    return compare_folders(two_folders)


@pytest.fixture
def page(found):
    return forms_html(found)


def turned_away(folder, text):
    """The same molecule without its crystal, turned and moved, in a folder."""
    structure = gemmi.make_structure_from_block(gemmi.cif.read_string(text)[0])
    turn = gemmi.Transform()
    angle = np.radians(70)
    turn.mat.fromlist(
        [
            [np.cos(angle), -np.sin(angle), 0],
            [np.sin(angle), np.cos(angle), 0],
            [0, 0, 1],
        ]
    )
    turn.vec.fromlist([30.0, -12.0, 7.0])
    structure[0].transform_pos_and_adp(turn)
    document = structure.make_mmcif_document()
    document[0].set_pair("_exptl.method", "'SOLUTION NMR'")
    return written(folder, document.as_string(), UNIT_4CUP, "A")


@pytest.fixture
def payload(found):
    return forms_payload(found, form_names(found), contacts=changed_contacts(found))


def test_each_unit_stands_once_with_every_form_beside_it(page):
    words = " ".join(Elements(page).words)
    row = re.search(r'<tr id="unit-U1".*?</tr>', page, flags=re.DOTALL).group()
    assert row.count("<td") == 3
    assert "held by the lattice" in row
    assert "falls apart" in row
    assert "artefact of this crystal" in row
    assert "first.cif" in words
    assert "second.cif" in words


def test_every_form_has_its_picture(page):
    found = Elements(page)
    assert found.tags.count("figure") == 2
    assert {"picture-0", "picture-1"} <= set(found.ids)
    assert found.tags.count("svg") >= 2


def test_every_link_leads_somewhere_in_the_page(page):
    found = Elements(page)
    assert found.links
    assert {link.removeprefix("#") for link in found.links} <= set(found.ids)
    assert len(set(found.ids)) == len(found.ids)


def test_the_page_keeps_the_content_policy_of_the_main_page(page, found):
    assert find_faults(page) == []
    assert forms_html(found) == page


def test_names_of_files_are_escaped(two_folders, tmp_path):  # noqa: F811
    text = (two_folders[0] / "mapped.cif").read_text("utf-8")
    hostile = written(tmp_path / "a<b>&", text, UNIT_4CUP, "A")
    page = forms_html(compare_folders([two_folders[0], hostile]))
    assert "a&lt;b&gt;&amp;.cif" in page
    assert "<b>&" not in page


def test_the_command_writes_it_beside_the_tables(two_folders, tmp_path):  # noqa: F811
    compare_analyses(two_folders, tmp_path / "out")
    written_files = sorted(path.name for path in (tmp_path / "out").iterdir())
    assert written_files == ["contacts_between_forms.csv", "forms.csv", "page.html"]


# --- what the pictures are drawn from -------------------------------------------------


def anchors(form):
    """Beads of a form by place, in Å."""
    xyz = np.reshape(form["xyz"], (-1, 3)) / 100
    start = np.cumsum([0, *form["atoms"]])
    return {
        place: xyz[start[i] + form["letters"][start[i] : start[i + 1]].index("A")]
        for i, place in enumerate(form["place"])
        if form["first"][i]
    }


def test_forms_that_were_turned_apart_are_drawn_on_one_another(two_folders, tmp_path):  # noqa: F811
    text = (two_folders[0] / "mapped.cif").read_text("utf-8")
    other = turned_away(tmp_path / "turned", text)
    away = read_structure(other / "mapped.cif").position
    here = read_structure(two_folders[0] / "mapped.cif").position
    assert np.linalg.norm(away.mean(axis=0) - here.mean(axis=0)) > 10
    found = compare_folders([two_folders[0], other])
    drawn = forms_payload(found, form_names(found), contacts=())
    first, second = (anchors(form) for form in drawn["forms"])
    assert first.keys() == second.keys()
    assert len(first) == 115
    for place, at in first.items():
        np.testing.assert_allclose(second[place], at, atol=PLACE_ANGSTROM)


def test_members_in_neighbours_stand_where_gemmi_puts_them(found, payload, repository):
    cell = gemmi.read_structure(str(repository / "examples" / "4cup.cif.gz")).cell
    unit = payload["units"][0]
    laid = unit["forms"][0]
    home = anchors(payload["forms"][0])
    triplets = found.forms[0].structure.crystal.triplets
    plain = {text.replace("-", "−").replace(",", ", "): text for text in triplets}
    printed = {text.replace("1/2", "½"): triplet for text, triplet in plain.items()}
    away = [i for i, mate in enumerate(laid["mate"]) if mate >= 0]
    assert away
    for i in away:
        mate = laid["mates"][laid["mate"][i]]
        at = home[unit["members"][i]]
        fractional = cell.fractionalize(gemmi.Position(*at)).tolist()
        moved = gemmi.Op(printed[mate["printed"]]).apply_to_xyz(fractional)
        there = cell.orthogonalize(gemmi.Fractional(*np.add(moved, mate["shift"])))
        expected = np.array(there.tolist())
        np.testing.assert_allclose(
            np.array(laid["at"][i]) / 100, expected, atol=PLACE_ANGSTROM
        )
        rows = np.reshape(mate["matrix"], (3, 4))
        np.testing.assert_allclose(
            rows[:, :3] @ at + rows[:, 3], expected, atol=PLACE_ANGSTROM
        )


def test_a_unit_apart_stays_in_its_molecule_and_misses_contacts(payload):
    here, there = payload["units"][0]["forms"]
    assert set(there["mate"]) == {-1}
    made = [{(i, j) for i, j, _ in form["joined"]} for form in (here, there)]
    assert made[0] - made[1]
    assert any(kind == LATTICE for _, _, kind in here["joined"])
    assert all(kind != LATTICE for _, _, kind in there["joined"])


def test_contacts_drawn_are_as_near_as_their_residues_can_be(found, payload):
    """Closest atoms within 5 Å put CA atoms at most two long side chains apart."""
    assert payload["contacts"]
    for row in payload["contacts"]:
        here, there = row["forms"]
        assert here["distance"] <= found.forms[0].broken_angstrom
        assert there == {"distance": None}
        assert any(ends is not None for ends in here["ends"])
        lengths = [
            np.linalg.norm(np.subtract(*ends)) / 100 for ends in here["ends"] if ends
        ]
        # Both drawings show one contact, from either side of it.
        assert max(lengths) < 20
        if row["kind"] == "lattice":
            assert here["away"]


def test_listed_contacts_are_those_of_the_table_that_change(found):
    at = found.contacts_table.columns.index("change")
    changed = [row for row in found.contacts_table.rows if row[at] != "kept"]
    listed = changed_contacts(found)
    assert len(listed) == len(changed)
    for row in listed:
        assert row.distances[0] <= found.forms[0].made_angstrom
        assert np.isnan(row.distances[1])
    inside = [sum(unit >= 0 for unit in row.units) for row in listed]
    assert inside == sorted(inside, reverse=True)


# --- in a browser ---------------------------------------------------------------------


@pytest.fixture
def path(page, tmp_path):
    target = tmp_path / "page.html"
    target.write_text(page, encoding="utf-8")
    return target


DRAWN = """f => {
  const from = document.querySelector(`#picture-${f} canvas`);
  const to = document.createElement('canvas');
  [to.width, to.height] = [400, 200];
  const pen = to.getContext('2d');
  pen.drawImage(from, 0, 0, 400, 200);
  const data = pen.getImageData(0, 0, 400, 200).data;
  let drawn = 0;
  for (let i = 0; i < data.length; i += 4) {
    const away = 765 - data[i] - data[i + 1] - data[i + 2];
    if (data[i + 3] > 0 && away > 30) drawn++;
  }
  return drawn / (400 * 200);
}"""
MOVED = """before => {
  const ring = document.querySelector('#picture-1 circle[stroke-width="1.6"]');
  return ring && ring.getAttribute('cx') !== before;
}"""


def test_pictures_are_drawn_and_follow_a_choice(browser, path):  # noqa: F811
    opened = Opened(browser, path)
    tab = opened.tab
    assert tab.evaluate("document.documentElement.dataset.gl") == "1"
    assert all(tab.evaluate(DRAWN, form) > 0.03 for form in (0, 1))
    tab.keyboard.press("1")
    tab.wait_for_selector('#picture-1 circle[stroke-width="1.6"]', state="attached")
    rings = [
        opened.count(f'#picture-{form} circle[stroke-width="1.6"]') for form in (0, 1)
    ]
    assert rings == [len(UNIT_4CUP), len(UNIT_4CUP)]
    assert opened.text("#said-0") == "held by the lattice"
    assert opened.text("#said-1") == "falls apart"
    assert opened.text("#caption").startswith("U1: artefact of this crystal.")
    assert opened.count("#units tr.chosen") == 1
    opened.context.close()


def test_pictures_turn_together(browser, path):  # noqa: F811
    opened = Opened(browser, path)
    tab = opened.tab
    tab.locator("#contacts tr[data-contact] button[data-place]").first.click()
    name = tab.locator("#contacts tr[data-contact] button[data-place]").first
    chosen = name.inner_text()
    tab.wait_for_selector('#picture-1 circle[stroke-width="1.6"]', state="attached")
    assert opened.text("#caption").startswith(f"{chosen} chosen.")
    before = [places(tab, form, chosen) for form in (0, 1)]
    assert before[0].shape == (1, 2)
    # The same molecule twice: laid on itself, but for rounding.
    np.testing.assert_allclose(before[0], before[1], atol=0.3)
    tab.focus("#picture-1")
    tab.keyboard.press("ArrowRight")
    tab.wait_for_function(MOVED, arg=str(before[1][0, 0]))  # in the next frame
    after = [places(tab, form, chosen) for form in (0, 1)]
    np.testing.assert_allclose(after[0], after[1], atol=0.3)
    assert np.abs(after[0] - before[0]).max() > 1.0
    assert opened.said == []
    assert opened.asked == [path.as_uri()]
    opened.context.close()


def places(tab, form, name):
    """Where the ring of what is chosen stands in a picture."""
    selector = f'#picture-{form} circle[stroke-width="1.6"]'
    assert name in tab.inner_html(f"#picture-{form} .over")
    found = tab.eval_on_selector_all(
        selector, "all => all.map(c => [+c.getAttribute('cx'), +c.getAttribute('cy')])"
    )
    return np.array(found)


def test_without_webgl_the_tables_stand_alone(playwright, path):  # noqa: F811
    from tests.test_page import CHROMIUM  # noqa: PLC0415

    plain = playwright.chromium.launch(
        executable_path=CHROMIUM, args=list(WITHOUT_WEBGL)
    )
    flat = Opened(plain, path)
    assert flat.tab.evaluate("document.documentElement.dataset.gl") == "0"
    assert "no WebGL" in flat.text("#side")
    assert not flat.tab.is_visible("#picture-0")
    flat.tab.keyboard.press("1")
    assert flat.text("#caption").startswith("U1: artefact")
    for width in (320, 390, 768, 1440):
        flat.tab.set_viewport_size({"width": width, "height": 900})
        wide = flat.tab.evaluate("document.documentElement.scrollWidth")
        assert wide <= width, f"{wide} px wide at {width}"
    assert flat.said == []
    plain.close()


def test_data_of_the_page_are_those_of_the_pictures(page, payload):
    block = re.search(r'id="data">(.*?)</script>', page, re.DOTALL)[1]
    data = json.loads(block)
    if "gzip" in data:
        data = json.loads(gzip.decompress(base64.b64decode(data["gzip"])))
    assert data["forms"] == payload["forms"]
    assert len(json.dumps(data)) < 200_000
