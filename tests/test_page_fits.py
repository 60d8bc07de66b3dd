"""The fit of one shared value on the page: its data, its words, what is drawn."""

import itertools
import re
import tomllib
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import nnls
from scipy.stats import t as student

from structmap import words
from structmap.analysis import analyse
from structmap.one_process import OneProcess, fit_group
from structmap.one_process.kinetics import exponential_model
from structmap.page import page_html
from structmap.page.listing import list_entries
from structmap.page.payload import page_payload
from structmap.page.processes import misfit_curve
from structmap.result import AnalysisRecord
from structmap.settings import make_settings
from structmap.tables.sites import sites_table
from tests.check_page import CHROMIUM_ARGUMENTS, READY_MILLISECONDS

MICRO = 1e-6


@pytest.fixture(scope="module")
def record(repository) -> AnalysisRecord:
    """The built-in example: U1 and U2 share one correlation time, U3 does not."""
    folder = repository / "examples"
    settings = make_settings(
        tomllib.loads((folder / "settings.toml").read_text("utf-8"))
    )
    return analyse(
        folder / "4cup.cif.gz", folder / "invented_values.csv", settings
    ).record


@pytest.fixture(scope="module")
def odd(record) -> AnalysisRecord:
    """U1 open above, U2 open on both sides, U3 shared without its last site."""
    first, second, third = record.processes
    nan = float("nan")
    kept = third.fit.profiles.take([0, 1, 2, 3])
    fit = fit_group(
        kept.x, kept.value, kept.error, third.fit.model, name=tuple(kept.name)
    )
    return replace(
        record,
        processes=(
            opened(first, high=nan),
            opened(second, low=nan, high=nan),
            replace(
                third,
                verdict="shared by a subset",
                apart=(third.fit.profiles.name[4],),
                kept_fit=fit,
                value=fit.shared,
                low=fit.low,
                high=fit.high,
            ),
        ),
    )


def opened(process: OneProcess, **ends: float) -> OneProcess:
    fit = replace(process.fit, **ends)
    reason = "window: the data leave the interval open"
    return replace(process, fit=fit, verdict="undetermined", reason=reason, **ends)


def fits_of(record: AnalysisRecord) -> list[dict]:
    return page_payload(record, list_entries(record))["fits"]


def misfit_by_least_squares(fit, tau: float) -> float:
    """Chi-square of all sites at one value, none of baseline and amplitude below 0."""
    profiles, total = fit.profiles, 0.0
    for value, error in zip(profiles.value, profiles.error, strict=True):
        shape = fit.model.function(profiles.x, tau)
        design = np.stack([np.ones_like(shape), shape], axis=1) / error[:, None]
        total += float(nnls(design, value / error)[1] ** 2)
    return total


# --- data -----------------------------------------------------------------------------


def test_the_curve_is_the_misfit_of_plain_least_squares(record):
    """Far from the lowest a baseline comes to 0 between nodes, a kink to the spline."""
    for process, drawn in zip(record.processes, fits_of(record), strict=True):
        picked = slice(0, None, 10)
        for tau, chi2 in zip(drawn["x"][picked], drawn["y"][picked], strict=True):
            expected = misfit_by_least_squares(process.fit, tau * MICRO)
            near = expected < 2 * drawn["limit"] - drawn["lowest"]
            assert chi2 == pytest.approx(expected, rel=3e-3 if near else 2e-2)


def test_the_line_is_crossed_at_the_ends_of_the_interval(record):
    """The limit by Student's t: its square is F with one degree of freedom above."""
    for process, drawn in zip(record.processes, fits_of(record), strict=True):
        fit = process.fit
        rise = student.ppf(0.975, fit.freedom_shared) ** 2 / fit.freedom_shared
        assert drawn["limit"] == pytest.approx(fit.chi2_shared * (1 + rise), rel=1e-4)
        for end, known in ((drawn["low"], process.low), (drawn["high"], process.high)):
            assert end == pytest.approx(known / MICRO, rel=1e-4)
            crossed = misfit_by_least_squares(fit, end * MICRO)
            assert crossed == pytest.approx(drawn["limit"], rel=1e-3)
            assert np.interp(end, drawn["x"], drawn["y"]) == pytest.approx(
                drawn["limit"], rel=5e-3
            )
        assert min(drawn["y"]) >= drawn["lowest"] * (1 - 1e-4)
        assert drawn["x"][int(np.argmin(drawn["y"]))] == pytest.approx(
            drawn["best"], rel=0.02
        )
        assert drawn["open"] == [False, False]
        assert drawn["each"] <= drawn["lowest"]


def test_values_alone_belong_to_their_residues(record):
    data = page_payload(record, list_entries(record))
    names = data["entries"]["name"]
    for unit, drawn in zip(record.units, data["fits"], strict=True):
        fit = record.process_of(unit).fit
        assert (drawn["unit"], drawn["parameter"]) == ("µs", "τ")
        known = [round(float(v) / MICRO, 2) for v in fit.free]
        assert drawn["free"] == pytest.approx(known, rel=1e-3)
        said = [names[e] for e in drawn["members"]]
        assert said == words.fitted_site_names(record, fit.profiles.name).split(" ")


def test_bands_are_95_percent_of_the_curve_and_none_where_one_value_is_rejected(record):
    curve = page_payload(record, list_entries(record))["profile"]["curve"]
    first, _, third = fits_of(record)
    fit = record.processes[0].fit
    for place, e in enumerate(first["members"]):
        width = student.ppf(0.975, fit.freedom_shared) * fit.curve_error[place]
        assert curve["band"][e][0] == pytest.approx(width[0], rel=1e-3)
        assert curve["band"][e][-1] == pytest.approx(width[-1], rel=1e-3)
        assert len(curve["band"][e]) == len(curve["x"]) == len(curve["y"][e])
    assert [curve["band"][e] for e in third["members"]] == [None] * 5
    assert all(curve["y"][e] for e in third["members"])
    fitted = {e for f in fits_of(record) for e in f["members"]}
    outside = set(range(len(curve["y"]))) - fitted
    assert all(curve["band"][e] is None for e in outside)


def test_open_ends_stay_open(odd):
    above, both, _ = fits_of(odd)
    assert (above["open"], above["high"]) == ([False, True], None)
    assert above["low"] == pytest.approx(odd.processes[0].low / MICRO, rel=1e-4)
    assert (both["open"], both["low"], both["high"]) == ([True, True], None, None)


def test_a_curve_that_stays_below_its_limit_is_shown_to_the_end_of_the_range():
    x = np.linspace(0.1, 1, 12)
    model = exponential_model()
    rng = np.random.default_rng(5)
    values = 1 + 0.3 * np.exp(-60 * x) + 0.05 * rng.normal(size=(3, 12))
    fit = fit_group(x, values, np.full((3, 12), 0.05), model)
    assert np.isnan(fit.high)
    at, misfit = misfit_curve(fit)
    assert at[-1] == pytest.approx(fit.grid[-1])
    assert misfit[-1] < fit.interval_limit


def test_a_site_set_apart_has_no_shared_curve_and_is_named(odd):
    data = page_payload(odd, list_entries(odd))
    drawn, curve = data["fits"][2], data["profile"]["curve"]
    last = drawn["members"][-1]
    assert curve["y"][last] is None
    assert curve["band"][last] is None
    assert curve["alone"][last] is not None
    fit = odd.processes[2].kept_fit
    assert drawn["best"] == pytest.approx(fit.best / MICRO, rel=1e-4)
    assert drawn["lowest"] == pytest.approx(fit.chi2_shared, rel=1e-4)
    name = data["entries"]["name"][last]
    assert drawn["caption"][0].startswith(f"One τ for the four without {name} fits")
    assert data["units"][2]["process"][0] == f"one value is enough without {name}"


def test_a_unit_without_a_fit_leaves_the_others_drawn(record):
    first, *rest = record.processes
    bare = replace(record, processes=(replace(first, fit=None), *rest))
    data = page_payload(bare, list_entries(bare))
    assert data["fits"][0] is None
    assert data["fits"][1]["lowest"] > 0
    curve = data["profile"]["curve"]
    assert curve["scaled"][0]["members"] == []
    assert all(curve["y"][e] for e in data["fits"][1]["members"])
    none = replace(record, processes=())
    assert fits_of(none) == [None] * 3


def test_words_say_what_is_drawn(record, odd):
    shared, _, distinct = fits_of(record)
    low, high = shared["low"], shared["high"]
    assert shared["caption"][0] == "One τ for all eight fits best at 18.5\u00a0µs."
    reach = f"From {low:.3g}\u00a0µs to {high:.3g}\u00a0µs it fits within the errors"
    assert shared["caption"][1].startswith(reach)
    assert shared["caption"][2].startswith("A value for each fits no better than")
    assert f"{shared['lowest']:.1f} with 79 degrees" in shared["figures"]
    assert f"dashed line at {shared['limit']:.1f}" in shared["figures"]
    assert distinct["caption"][0].startswith("A value for each fits better than chance")
    assert "dashed line" not in distinct["figures"]
    above, both, _ = fits_of(odd)
    assert above["caption"][1].startswith(f"From {low:.3g}\u00a0µs on it fits")
    assert both["caption"][1].startswith("Any value searched fits")
    said = words.unit_process(odd, odd.units[0])
    assert said[:2] == ("these data cannot tell", f"tau above {low:.3g} µs")


def test_surroundings_of_a_residue_are_those_of_the_table(record):
    listing = list_entries(record)
    entries = page_payload(record, listing)["entries"]
    table = sites_table(record)
    place = {site: e for e, site in enumerate(listing.site.tolist()) if site >= 0}
    keys = {
        "relative_exposure": "exposed",
        "contact_number": "contacts",
        "mate_distance_angstrom": "mate",
    }
    helices = 0
    for site, row in enumerate(table.rows):
        cells = dict(zip(table.columns, row, strict=True))
        for column, key in keys.items():
            assert entries[key][place[site]] == pytest.approx(cells[column], rel=5e-3)
        code = cells["secondary_structure"] or "-"
        assert entries["secondary"][place[site]] == code
        helices += code == "H"
    assert helices > 40


# --- drawn ----------------------------------------------------------------------------


@pytest.fixture(scope="module")
def browser(chromium) -> Iterator[object]:
    from playwright.sync_api import sync_playwright  # noqa: PLC0415

    with sync_playwright() as playwright:
        started = playwright.chromium.launch(
            executable_path=chromium, args=CHROMIUM_ARGUMENTS
        )
        yield started
        started.close()


@pytest.fixture(scope="module")
def folder(record, odd, tmp_path_factory) -> Path:
    target = tmp_path_factory.mktemp("fits")
    (target / "page.html").write_text(page_html(record), encoding="utf-8")
    (target / "odd.html").write_text(page_html(odd), encoding="utf-8")
    return target


@pytest.fixture
def tab(browser) -> Iterator[object]:
    opened_tab = browser.new_page(viewport={"width": 1440, "height": 1000})
    opened_tab.faults = []
    opened_tab.on("pageerror", lambda error: opened_tab.faults.append(str(error)))
    yield opened_tab
    assert opened_tab.faults == []
    opened_tab.close()


def show(tab, file: Path, choice: str = "") -> None:
    tab.goto(f"{file.as_uri()}#{choice}")
    ready = "html[data-ready='1']"
    tab.wait_for_selector(ready, timeout=READY_MILLISECONDS, state="attached")


def count(tab, selector: str) -> int:
    return tab.locator(selector).count()


def ends(tab, selector: str) -> tuple[float, float]:
    """Left and right end of a level line."""
    found = re.match(r"M([\d.]+) [\d.]+H([\d.]+)", tab.get_attribute(selector, "d"))
    return float(found[1]), float(found[2])


def points(tab, selector: str) -> np.ndarray:
    text = tab.get_attribute(selector, "d")
    return np.array(re.findall(r"(-?[\d.]+) (-?[\d.]+)", text), dtype=float)


def test_interval_ends_where_the_drawn_curve_crosses_the_dashed_line(tab, folder):
    show(tab, folder / "page.html", "U1")
    assert count(tab, ".misfit") == 1
    curve = points(tab, ".misfit .curve")
    level = points(tab, ".misfit .limit")[0, 1]
    below = curve[curve[:, 1] >= level, 0]  # y runs down the page
    low, high = ends(tab, ".misfit .interval")
    assert below.min() - 4 < low <= below.min() + 0.1
    assert below.max() - 0.1 <= high < below.max() + 4
    assert count(tab, ".misfit .open-end") == 0
    assert count(tab, ".misfit .alone") == 8
    assert "fits best at 18.5\u00a0µs" in tab.text_content(".misfit figcaption")
    label = tab.get_attribute(".misfit svg", "aria-label")
    assert "degrees of freedom" in label
    assert count(tab, "#panels .curve-band") == 8


def test_open_ends_are_drawn_as_arrows_to_the_edge(tab, folder):
    show(tab, folder / "odd.html", "U1")
    assert count(tab, ".misfit .open-end") == 1
    _, high = ends(tab, ".misfit .interval")
    _, edge = ends(tab, ".misfit .limit")
    assert high == edge
    tab.keyboard.press("2")
    assert count(tab, ".misfit .open-end") == 2
    assert count(tab, "#unit-rows .open-end") == 3
    first = "#unit-rows tr:nth-child(1) .drawn-interval"
    label = tab.get_attribute(first, "aria-label")
    assert re.search(r"from 16\.9 µs, open above", label)


def test_a_rejected_value_has_neither_line_nor_band(tab, folder):
    show(tab, folder / "page.html", "U3")
    assert count(tab, ".misfit .curve") == 1
    assert count(tab, ".misfit .limit, .misfit .interval, .curve-band") == 0
    assert "better than chance allows" in tab.text_content(".misfit figcaption")
    tab.keyboard.press("Escape")
    assert count(tab, ".misfit") == 0


def test_one_site_has_its_band_and_its_surroundings_in_words(tab, folder, record):
    entries = page_payload(record, list_entries(record))["entries"]
    e = fits_of(record)[0]["members"][1]
    show(tab, folder / "page.html")
    tab.locator(f'#site-rows button[data-entry="{e}"]').click()
    assert count(tab, "#panels .panel:first-child .curve-band") == 1
    caption = tab.text_content("#caption")
    said = re.search(
        r"([\d.]+)\u00a0% of its surface open, ([\d.]+)\u00a0Å to", caption
    )
    assert float(said[1]) == pytest.approx(100 * entries["exposed"][e], abs=0.51)
    assert float(said[2]) == pytest.approx(entries["mate"][e], abs=0.051)
    heads = "|".join(tab.locator("#site-head th").all_text_contents())
    assert (
        "helix, strand|surface open (%)|residues touched|crystal mate (Å)"
        in heads.replace("\u00a0", " ")
    )
    row = tab.locator(f'#site-rows tr[data-entry="{e}"] td').all_text_contents()
    assert str(entries["contacts"][e]) in row


def test_intervals_of_the_units_stand_on_one_axis(tab, folder, record):
    show(tab, folder / "page.html")
    cells = "#unit-rows tr:nth-child({}) .drawn-interval"
    first, second = (ends(tab, f"{cells.format(u)} .interval") for u in (1, 2))
    drawn = fits_of(record)
    pixels = [*second, *first]
    at = np.log([drawn[1]["low"], drawn[1]["high"], drawn[0]["low"], drawn[0]["high"]])
    slope, shift = np.polyfit(at, pixels, 1)
    np.testing.assert_allclose(slope * at + shift, pixels, atol=0.1)
    label = tab.get_attribute(cells.format(1), "aria-label")
    said = "τ: one value 18.5 µs; 95 % interval from 16.9 µs, to 20.4 µs"
    assert label.startswith(said)
    assert count(tab, f"{cells.format(3)} .interval") == 0
    assert count(tab, f"{cells.format(3)} path[stroke-width='1.3']") == 5
    assert "τ (µs)" in tab.text_content("#process-head")


@pytest.mark.parametrize("width", [320, 390, 768, 1024, 1440])
def test_no_part_runs_out_of_the_window(tab, folder, width):
    tab.set_viewport_size({"width": width, "height": 900})
    show(tab, folder / "page.html", "U2")
    assert tab.evaluate("document.documentElement.scrollWidth") <= width
    assert tab.evaluate(OUTSIDE_FIGURE) == []
    boxes = tab.evaluate(BOXES)
    for first, second in itertools.combinations(boxes, 2):
        # A panel's box reaches down to the ticks of its row.
        assert overlap(first, second, "x") <= 1 or overlap(first, second, "y") <= 42


def overlap(first: dict, second: dict, axis: str) -> float:
    size = {"x": "width", "y": "height"}[axis]
    end = min(one[axis] + one[size] for one in (first, second))
    return end - max(first[axis], second[axis])


OUTSIDE_FIGURE = """() => {
  const box = document.querySelector('.misfit').getBoundingClientRect();
  const parts = document.querySelectorAll('.misfit text, .misfit figcaption span');
  return [...parts].filter((part) => {
    const b = part.getBoundingClientRect();
    return b.right > box.right + 1 || b.bottom > box.bottom + 1 || b.left < box.left;
  }).map((part) => part.textContent);
}"""
BOXES = """() => [...document.querySelectorAll('#panels .panel, .misfit')]
  .map((part) => part.getBoundingClientRect().toJSON())"""
BEYOND_SHEET = """() => [...document.querySelectorAll('body *')]
  .filter((part) => part.getBoundingClientRect().width)
  .filter((part) => part.getBoundingClientRect().right > 704)
  .map((part) => part.tagName)"""


def test_print_keeps_plot_and_tables_within_the_sheet(tab, folder):
    show(tab, folder / "page.html", "U1")
    tab.evaluate("dispatchEvent(new Event('beforeprint'))")
    assert count(tab, ".misfit .curve") == 1
    assert tab.evaluate(BEYOND_SHEET) == []
    assert tab.evaluate(OUTSIDE_FIGURE) == []
