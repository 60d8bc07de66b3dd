"""The page: what stands in its text, and what a browser makes of it."""

import base64
import gzip
import hashlib
import json
import os
import re
import shutil
import tomllib
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from structmap.analysis import analyse
from structmap.errors import MissingTemplateError
from structmap.page import assemble, page_html, templates
from structmap.page.listing import list_entries
from structmap.page.markup import (
    mark_text,
    mark_unit,
    pretty_operator,
    space_group_html,
)
from structmap.page.payload import page_payload
from structmap.page.scene import (
    anchor_positions,
    choose_atoms,
    find_images,
    recorded_calls,
)
from structmap.page.view import opening_view
from structmap.result import AnalysisRecord
from structmap.settings import Settings, make_settings

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")
SOFTWARE_WEBGL = (
    "--no-sandbox",
    "--use-angle=swiftshader",
    "--enable-unsafe-swiftshader",
    "--ignore-gpu-blocklist",
)
WITHOUT_WEBGL = ("--no-sandbox", "--disable-gpu", "--disable-3d-apis")
WAIT_MILLISECONDS = 60_000
HOSTILE = "</script><script>window.broken=1</script><img src=x onerror=window.broken=2>"


@pytest.fixture(scope="module")
def record(repository) -> AnalysisRecord:
    """The built-in example: three units, one of them joined by the crystal."""
    folder = repository / "examples"
    settings = make_settings(
        tomllib.loads((folder / "settings.toml").read_text("utf-8"))
    )
    return analyse(
        folder / "4cup.cif.gz", folder / "invented_values.csv", settings
    ).record


@pytest.fixture(scope="module")
def page(record) -> str:
    return page_html(record)


def block(page: str, attributes: str) -> str:
    return re.search(rf"<script{attributes}>(.*?)</script>", page, re.DOTALL)[1]


def data_of(page: str) -> dict:
    data = json.loads(block(page, ' type="application/json" id="data"'))
    if "gzip" in data:
        data = json.loads(gzip.decompress(base64.b64decode(data["gzip"])))
    return data


# --- the text -------------------------------------------------------------------------


def test_same_record_gives_same_bytes(record, page):
    assert page_html(record) == page


def test_policy_allows_nothing_but_the_sums_of_its_own_scripts_and_styles(page):
    policy = re.search(r'Content-Security-Policy" content="([^"]*)"', page)[1]
    assert policy.startswith("default-src 'none'")
    assert "unsafe" not in policy
    assert "http" not in policy
    bodies = re.findall(r"<script>(.*?)</script>", page, re.DOTALL)
    bodies += re.findall(r"<style>(.*?)</style>", page, re.DOTALL)
    assert len(bodies) == 3
    for body in bodies:
        digest = base64.b64encode(hashlib.sha256(body.encode()).digest()).decode()
        assert f"'sha256-{digest}'" in policy


def test_names_no_address_to_load_from(page):
    outside_library = page.replace(block(page, ""), "")
    assert not re.search(r"""(?:src|href)\s*=\s*["']?(?:https?:)?//""", outside_library)


def test_hostile_text_of_the_files_stays_text(record):
    structure = replace(
        record.structure,
        name=HOSTILE,
        title=HOSTILE,
        entry_id=HOSTILE,
        auth_comp_id=np.where(
            record.structure.auth_comp_id == "ALA",
            HOSTILE,
            record.structure.auth_comp_id,
        ),
        atom_name=np.where(
            record.structure.atom_name == "CB", HOSTILE, record.structure.atom_name
        ),
    )
    table = replace(record.table, names=(HOSTILE,))
    settings = replace(record.settings, title=HOSTILE, data_note=HOSTILE)
    hostile = replace(record, structure=structure, table=table, settings=settings)
    page = page_html(hostile)
    assert "<img src=x" not in page
    assert page.count("<script") == 3
    assert data_of(page)["id"] == HOSTILE.lower()


def test_small_data_stand_plain_with_every_angle_bracket_escaped():
    text = assemble.data_block({"name": HOSTILE})
    assert "<" not in text
    assert json.loads(text) == {"name": HOSTILE}


def test_large_data_are_packed_and_come_back_whole():
    payload = {"values": list(range(60_000))}
    packed = json.loads(assemble.data_block(payload))["gzip"]
    assert json.loads(gzip.decompress(base64.b64decode(packed))) == payload


def test_size_stays_small_beside_the_library(page):
    library = len(block(page, "").encode())
    assert len(page.encode()) < library + 600_000


def test_tables_stand_in_the_text_without_scripts(record, page):
    rows = re.search(r'<tbody id="site-rows">(.*?)</tbody>', page, re.DOTALL)[1]
    assert rows.count("<tr>") == len(list_entries(record).residue)
    units = re.search(r'<tbody id="unit-rows">(.*?)</tbody>', page, re.DOTALL)[1]
    assert units.count("<tr") == len(record.units)


def test_licence_of_the_library_is_in_the_page(page):
    assert "Redistributions in binary form must reproduce" in page


def test_missing_library_says_how_to_get_it(record, monkeypatch, tmp_path):
    monkeypatch.setattr(templates, "template_folder", lambda: tmp_path)
    with pytest.raises(
        MissingTemplateError, match=r"3Dmol-min\.js.*missing.*pip install"
    ):
        page_html(record)


# --- words and numbers ----------------------------------------------------------------


@pytest.mark.parametrize(
    ("plain", "marked"),
    [
        ("R1rho", "R_{1ρ}"),
        ("span of R1rho.", "span of R_{1ρ}."),
        ("R2 and kex", "R_{2} and k_{ex}"),
        ("cro_r1rho.csv", "cro_r1rho.csv"),
        ("R28", "R28"),
        ("mas-r1rho", "mas-r1rho"),
    ],
)
def test_subscripts_of_the_trade_but_not_of_file_or_residue_names(plain, marked):
    assert mark_text(plain) == marked


def test_units_of_measurement_get_real_superscripts():
    assert [mark_unit(u) for u in ("s-1", "1/s", "kHz", "rad2 s-2")] == [
        "s⁻¹",
        "s⁻¹",
        "kHz",
        "rad² s⁻²",
    ]


def test_operators_and_space_groups_are_printed_as_crystallographers_do():
    assert pretty_operator("-x+1/2,-y,z+1/2") == "−x+½, −y, z+½"
    assert space_group_html("P 21 21 21, one") == (
        "P\u00a02<sub>1</sub>2<sub>1</sub>2<sub>1</sub>, one"
    )
    assert space_group_html("C 2 2 21") == "C\u00a0222<sub>1</sub>"


# --- the data -------------------------------------------------------------------------


def test_images_keep_the_distances_of_the_contacts(record):
    """The image of the second atom stands where the contact says it does."""
    images = find_images(record.structure, record.contacts)
    contacts, position = record.contacts, record.structure.position
    across = np.flatnonzero(images.of_contact >= 0)
    assert len(across) > 50
    for contact in across:
        matrix = images.matrices[images.of_contact[contact]]
        moved = matrix[:3, :3] @ position[contacts.atom_2[contact]] + matrix[:3, 3]
        found = np.linalg.norm(moved - position[contacts.atom_1[contact]])
        assert found == pytest.approx(contacts.distance_angstrom[contact], abs=0.02)


def test_each_image_has_its_inverse_and_both_share_a_numeral(record):
    images = find_images(record.structure, record.contacts)
    data = page_payload(record, list_entries(record))
    for index, inverse in enumerate(images.inverse):
        product = images.matrices[index] @ images.matrices[inverse]
        assert product == pytest.approx(np.eye(4), abs=1e-6)
        assert data["images"][index]["numeral"] == data["images"][inverse]["numeral"]


def test_unmeasured_residues_are_listed_without_a_value(record):
    entries = page_payload(record, list_entries(record))["entries"]
    measured = [value is not None for value in entries["value"]]
    assert sum(measured) == len(record.measurements.site)
    assert all(
        unit < 0 and not moves
        for unit, moves, known in zip(
            entries["unit"], entries["moves"], measured, strict=True
        )
        if not known
    )


def test_copies_of_a_chain_lead_back_to_the_listed_one(data_folder, tmp_path):
    """HIV protease (1HVR): both chains carry the same sequence, one is measured."""
    values = tmp_path / "values.csv"
    rows = [f"A,{n},{1 + n % 3},0.1" for n in range(1, 100)]
    values.write_text("auth_asym_id,auth_seq_id,R2,R2_error\n" + "\n".join(rows))
    record = analyse(data_folder / "archive" / "1hvr.pdb.gz", values, Settings()).record
    listing = list_entries(record)
    assert set(record.structure.auth_asym_id[listing.residue]) == {"A"}
    chains = record.structure.auth_asym_id[: len(listing.first)]
    numbers = record.structure.auth_seq_id
    second = np.flatnonzero(chains == "B")
    assert len(second) == 99
    assert (numbers[listing.first[second]] == numbers[second]).all()
    assert (record.structure.auth_asym_id[listing.first[second]] == "A").all()


def test_recorded_calls_hold_no_text_of_the_coordinate_file(record):
    calls = recorded_calls(record.structure, choose_atoms(record, list_entries(record)))
    assert [call[0] for call in calls] == ["addModel", "setProjection"]
    lines = calls[0][1].split("\n")
    assert {line[17:20] for line in lines} == {"RES"}
    first = record.structure.position[0]
    found = [float(lines[0][30 + 8 * k : 38 + 8 * k]) for k in range(3)]
    assert found == pytest.approx(first, abs=0.001)


def test_fitted_curves_run_through_the_points_that_were_fitted(record):
    """Judged in the errors of the table; no point of the example is an outlier."""
    data = page_payload(record, list_entries(record))
    profile, curve = data["profile"], data["profile"]["curve"]
    kept = np.array(profile["kept"])
    x = np.array(profile["x"])[kept]
    shared = [s for s in curve["scaled"] if s["verdict"] == "shared"]
    assert shared
    for e in (e for group in shared for e in group["members"]):
        value = np.array(profile["value"][e], dtype=float)[kept]
        error = np.array(profile["error"][e], dtype=float)[kept]
        drawn = np.interp(x, curve["x"], curve["y"][e])
        assert np.nanmax(np.abs(value - drawn) / error) < 5


def test_opening_view_frames_the_molecule_from_the_side_of_the_contact(record):
    listing = list_entries(record)
    atoms = choose_atoms(record, listing)
    images = find_images(record.structure, record.contacts)
    view = opening_view(record, atoms, images)
    assert view == opening_view(record, atoms, images)
    x, y, z, w = view.quaternion
    turn = np.array(
        [
            [1 - 2 * (y * y + z * z), 2 * (x * y - z * w), 2 * (x * z + y * w)],
            [2 * (x * y + z * w), 1 - 2 * (x * x + z * z), 2 * (y * z - x * w)],
        ]
    )
    seen = (anchor_positions(record.structure, atoms) - view.centre) @ turn.T
    assert np.abs(seen[:, 0]).max() <= view.half_width - 2.9
    assert np.abs(seen[:, 1]).max() <= view.half_height - 2.9
    contacts = record.units[0].lattice.contacts
    main = np.bincount(images.of_contact[contacts]).argmax()
    ends = [
        images.matrices[i][:3, :3] @ seen_from + images.matrices[i][:3, 3]
        for i in (main, images.inverse[main])
        for seen_from in [anchor_positions(record.structure, atoms).mean(axis=0)]
    ]
    across = turn @ (ends[1] - ends[0])
    assert abs(across[0]) == pytest.approx(np.linalg.norm(ends[1] - ends[0]), rel=1e-3)


# --- in a browser ---------------------------------------------------------------------


@pytest.fixture(scope="module")
def playwright() -> Iterator[object]:
    reason = "" if CHROMIUM else "there is no chromium on this machine"
    try:
        from playwright.sync_api import sync_playwright  # noqa: PLC0415
    except ImportError:
        reason = "playwright is not installed"
    if reason and os.environ.get("STRUCTMAP_REQUIRE_BROWSER") == "1":
        pytest.fail(f"STRUCTMAP_REQUIRE_BROWSER is set, but {reason}")
    if reason:
        pytest.skip(reason)
    with sync_playwright() as started:
        yield started


class Opened:
    """A page in a browser, with what it said and asked for."""

    def __init__(self, browser, path: Path, *, address: str = "", **how) -> None:
        self.context = browser.new_context(
            **{"viewport": {"width": 1440, "height": 1000}, **how}
        )
        self.tab = self.context.new_page()
        self.tab.set_default_timeout(WAIT_MILLISECONDS)
        self.said: list[str] = []
        self.asked: list[str] = []
        self.tab.on("console", lambda message: self.said.append(message.text))
        self.tab.on("pageerror", lambda error: self.said.append(str(error)))
        self.tab.on("request", lambda request: self.asked.append(request.url))
        self.tab.goto(path.as_uri() + address)
        self.tab.wait_for_selector('html[data-ready="1"]')

    def text(self, selector: str) -> str:
        return self.tab.inner_text(selector)

    def count(self, selector: str) -> int:
        return self.tab.locator(selector).count()


@pytest.fixture(scope="module")
def browser(playwright) -> Iterator[object]:
    started = playwright.chromium.launch(
        executable_path=CHROMIUM, args=list(SOFTWARE_WEBGL)
    )
    yield started
    started.close()


@pytest.fixture(scope="module")
def path(page, tmp_path_factory) -> Path:
    target = tmp_path_factory.mktemp("page") / "page.html"
    target.write_text(page, encoding="utf-8")
    return target


@pytest.fixture(scope="module")
def opened(browser, path) -> Iterator[Opened]:
    found = Opened(browser, path)
    yield found
    found.context.close()


SHARE_DRAWN = """() => {
  const from = document.querySelector('#canvas canvas');
  const to = document.createElement('canvas');
  to.width = 400; to.height = 200;
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


def test_opens_from_disk_with_one_request_and_no_complaint(opened, path):
    assert opened.asked == [path.as_uri()]
    assert opened.said == []
    assert opened.tab.evaluate("document.documentElement.dataset.gl") == "1"


def test_molecule_is_drawn(opened):
    assert opened.tab.evaluate(SHARE_DRAWN) > 0.03


def test_choosing_a_unit_is_followed_by_every_part(opened, record):
    unit = record.units[0]
    opened.tab.keyboard.press("Escape")
    opened.tab.keyboard.press("1")
    assert opened.text("#caption").startswith("U1 chosen.")
    assert opened.tab.evaluate("location.hash") == "#U1"
    assert opened.count('#chain [aria-selected="true"]') == len(unit.members)
    assert opened.count("#panels .panel") == len(unit.members)
    assert opened.count("#unit-rows tr.chosen") == 1
    assert opened.count("#site-rows tr.chosen") == len(unit.members)
    assert opened.count('#result .unit[aria-pressed="true"]') == 1
    # The picture is drawn in the browser's next frame, so this one is waited for.
    ring = '#over circle[stroke-width="1.6"]'
    opened.tab.wait_for_selector(ring, state="attached")
    assert opened.count(ring) >= len(unit.members)
    opened.tab.keyboard.press("Escape")
    assert opened.tab.evaluate("location.hash") == ""
    assert opened.count('#chain [aria-selected="true"]') == 0


def test_choosing_a_site_anywhere_shows_its_value_and_neighbours(opened, record):
    entries = page_payload(record, list_entries(record))["entries"]
    e = next(i for i, unit in enumerate(entries["unit"]) if unit == 0)
    opened.tab.keyboard.press("Escape")
    opened.tab.locator(f'#site-rows button[data-entry="{e}"]').click()
    caption = opened.text("#caption")
    assert caption.startswith(f"{entries['name'][e]} chosen.")
    assert "across contact I" in caption
    assert f"{entries['value'][e]:.1f}" in caption
    assert opened.count(f"#column-{e}[aria-selected=true]") == 1
    opened.tab.locator(f"#column-{e}").click(modifiers=["ControlOrMeta"])
    assert opened.count('#chain [aria-selected="true"]') == 0


def test_unmeasured_site_is_said_to_be_unmeasured(opened, record):
    entries = page_payload(record, list_entries(record))["entries"]
    e = entries["value"].index(None)
    opened.tab.keyboard.press("Escape")
    opened.tab.locator(f"#column-{e}").click()
    assert opened.text("#panels").startswith(f"Not measured: {entries['name'][e]}")
    assert "nothing follows about its motion" in opened.text("#panels")
    opened.tab.keyboard.press("Escape")


def test_range_is_chosen_with_keys_along_the_chain(opened):
    opened.tab.keyboard.press("Escape")
    opened.tab.focus("#chain")
    opened.tab.keyboard.press("Home")
    opened.tab.keyboard.press("Enter")
    for _ in range(4):
        opened.tab.keyboard.press("Shift+ArrowRight")
    assert opened.count('#chain [aria-selected="true"]') == 5
    assert opened.text("#caption").startswith("5 residues chosen")
    opened.tab.keyboard.press("Escape")


def test_search_and_sorting_keep_empty_values_last(opened, record):
    opened.tab.fill("#find", "U1")
    assert opened.count("#site-rows tr") == len(record.units[0].members)
    opened.tab.fill("#find", "xyz")
    assert "No residue fits “xyz”" in opened.text("#site-rows")
    opened.tab.fill("#find", "")
    opened.tab.click('#site-head [data-key="value"]')
    texts = opened.tab.locator("#site-rows tr td:nth-child(2)").all_inner_texts()
    shown = [float(text.replace("−", "-")) for text in texts if text != "–"]
    assert shown == sorted(shown, reverse=True)
    assert set(texts[len(shown) :]) == {"–"}
    assert (
        opened.tab.get_attribute('th:has([data-key="value"])', "aria-sort")
        == "descending"
    )


def test_link_opens_with_its_choice(browser, path):
    again = Opened(browser, path, address="#U2")
    assert again.text("#caption").startswith("U2 chosen.")
    again.context.close()


def test_dark_theme_follows_the_system(browser, path):
    dark = Opened(browser, path, color_scheme="dark")
    ground = dark.tab.evaluate("getComputedStyle(document.body).backgroundColor")
    assert ground == "rgb(16, 19, 23)"
    dark.context.close()


def test_flat_picture_and_everything_else_without_webgl(playwright, path):
    plain = playwright.chromium.launch(
        executable_path=CHROMIUM, args=list(WITHOUT_WEBGL)
    )
    flat = Opened(plain, path)
    assert flat.tab.evaluate("document.documentElement.dataset.gl") == "0"
    assert "offers no WebGL" in flat.text("#legend")
    assert flat.count("#over .flat circle") > 50
    flat.tab.keyboard.press("1")
    assert flat.text("#caption").startswith("U1 chosen.")
    for width in (320, 390, 768, 1024, 1440, 1920):
        flat.tab.set_viewport_size({"width": width, "height": 900})
        flat.tab.wait_for_timeout(300)
        wide = flat.tab.evaluate("document.documentElement.scrollWidth")
        assert wide <= width, f"{wide} px wide at {width}"
    assert flat.said == []
    plain.close()


def test_hostile_names_do_nothing_in_a_browser(browser, record, tmp_path):
    structure = replace(record.structure, name=HOSTILE, title=HOSTILE, entry_id=HOSTILE)
    settings = replace(record.settings, title=HOSTILE)
    target = tmp_path / "hostile.html"
    text = page_html(replace(record, structure=structure, settings=settings))
    target.write_text(text, encoding="utf-8")
    found = Opened(browser, target)
    assert found.tab.evaluate("window.broken") is None
    assert found.text("h1") == HOSTILE
    found.context.close()


def test_print_takes_the_light_page_and_gives_the_screen_back(opened):
    opened.tab.evaluate("dispatchEvent(new Event('beforeprint'))")
    assert opened.tab.evaluate("document.body.className") == "printing"
    assert opened.tab.evaluate("document.body.clientWidth") == 703
    opened.tab.evaluate("dispatchEvent(new Event('afterprint'))")
    assert opened.tab.evaluate("document.body.className") == ""
