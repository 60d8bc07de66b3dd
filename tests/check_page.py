"""Look at a folder of results as its receiver would: is the page whole and alone?

Run as ``python -m tests.check_page FOLDER``; ends with status 1 and a line a fault.
"""

import base64
import gzip
import hashlib
import html
import io
import json
import os
import re
import shutil
import sys
from collections.abc import Iterator
from html.parser import HTMLParser
from pathlib import Path

FILES = (
    *("page.html", "sites.csv", "motional_units.csv", "contacts.csv"),
    *("mapped.cif", "run.json"),
)

TEMPLATES = Path(__file__).resolve().parent.parent / "html_templates"
CHROMIUM_NAMES = ("chromium", "chromium-browser", "google-chrome")
CHROMIUM_ARGUMENTS = [
    *("--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run"),
    *("--disable-background-networking", "--disable-component-update"),
    *("--disable-sync", "--use-angle=swiftshader", "--enable-unsafe-swiftshader"),
]
READY_MILLISECONDS = 60_000
SHARE_DRAWN = 0.03


class Outline(HTMLParser):
    """The elements of a page, and the text of its scripts and styles."""

    def __init__(self) -> None:
        super().__init__()
        self.elements: list[tuple[str, dict[str, str]]] = []
        self.texts: list[tuple[str, dict[str, str], str]] = []
        self._open: tuple[str, dict[str, str]] | None = None

    def handle_starttag(self, tag, attrs):
        element = (tag, {name: value or "" for name, value in attrs})
        self.elements.append(element)
        if tag in ("script", "style"):
            self._open = element
            self.texts.append((*element, ""))

    def handle_endtag(self, tag):
        if self._open and tag == self._open[0]:
            self._open = None

    def handle_data(self, data):
        if self._open:
            tag, attributes, text = self.texts[-1]
            self.texts[-1] = (tag, attributes, text + data)


def find_faults(page: str) -> list[str]:
    """Return what is wrong with the text of a page, without opening it."""
    outline = Outline()
    outline.feed(page)
    outline.close()
    return [
        *_addresses(outline),
        *_policy_faults(outline),
        *_missing_parts(page, outline),
    ]


def _addresses(outline: Outline) -> Iterator[str]:
    """Everything that a browser would fetch; links that a reader may press are none."""
    for tag, attributes in outline.elements:
        for name in ("src", "srcset", "href", "action", "poster", "data", "background"):
            value = attributes.get(name, "")
            if tag in ("a", "use") and name == "href":
                continue
            if value and not value.startswith(("data:", "blob:", "#")):
                yield f"<{tag} {name}> fetches {value[:60]}"
    for tag, _, text in outline.texts:
        if tag == "style" and re.search(r"@import|url\(\s*['\"]?(?!data:|#)", text):
            yield "a style fetches something"


def _policy_faults(outline: Outline) -> Iterator[str]:
    policies = [
        attributes.get("content", "")
        for tag, attributes in outline.elements
        if tag == "meta" and attributes.get("http-equiv") == "Content-Security-Policy"
    ]
    if len(policies) != 1:
        yield f"{len(policies)} content policies where one is due"
        return
    rules = dict(
        [*rule.split(maxsplit=1), ""][:2]
        for rule in policies[0].split(";")
        if rule.strip()
    )
    if rules.get("default-src") != "'none'":
        yield "the content policy does not begin from nothing (default-src 'none')"
    for name, sources in rules.items():
        allowed = r"'none'|'sha256-[\w+/=]+'|data:|blob:"
        if not all(re.fullmatch(allowed, source) for source in sources.split()):
            yield f"the content policy allows {name} {sources[:80]}"
    for tag, attributes, text in outline.texts:
        if attributes.get("type", "").endswith("json"):
            continue
        digest = base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()
        if f"'sha256-{digest}'" not in rules.get(f"{tag}-src", ""):
            yield f"a {tag} of {len(text)} characters is not in the content policy"
    if any("style" in attributes for _, attributes in outline.elements):
        yield "an element has a style of its own, which the content policy forbids"
    for _, attributes in outline.elements:
        yield from (
            f"inline handler {name}" for name in attributes if name.startswith("on")
        )


def _missing_parts(page: str, outline: Outline) -> Iterator[str]:
    library = (TEMPLATES / "built" / "3Dmol-min.js").read_text(encoding="utf-8")
    licence = (TEMPLATES / "built" / "3Dmol-LICENSE.txt").read_text(encoding="utf-8")
    if not any(
        library.strip() in text for tag, _, text in outline.texts if tag == "script"
    ):
        yield "the 3D library is not in the page"
    if _plain(licence) not in _plain(html.unescape(page)):
        yield "the licence of the 3D library is not in the page"
    if not any(a.get("type", "").endswith("json") for _, a, _ in outline.texts):
        yield "the data are not in the page"
    if not page.lower().startswith("<!doctype html>"):
        yield "the page does not begin with its document type"
    if "lang" not in dict(outline.elements).get("html", {}):
        yield "the page does not say its language"


def _plain(text: str) -> str:
    return " ".join(text.split())


def find_chromium() -> str | None:
    """Return the path of a Chromium on the PATH."""
    return next(filter(None, map(shutil.which, CHROMIUM_NAMES)), None)


def find_faults_in_browser(path: Path, chromium: str) -> list[str]:
    """Open a page without a network and return what goes wrong."""
    from playwright.sync_api import Error, sync_playwright  # noqa: PLC0415

    faults: list[str] = []
    address = path.resolve().as_uri()
    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(
            executable_path=chromium, args=CHROMIUM_ARGUMENTS
        )
        page = browser.new_page(viewport={"width": 1440, "height": 1000})
        page.context.set_offline(True)
        page.on(
            "request", lambda request: faults.extend(_request(request.url, address))
        )
        page.on("pageerror", lambda error: faults.append(f"script error: {error}"))
        page.on("console", lambda said: faults.extend(_console(said)))
        try:
            page.goto(address)
            page.wait_for_selector("html[data-ready='1']", timeout=READY_MILLISECONDS)
            faults.extend(_picture_faults(page))
            fits = data_of(path.read_text(encoding="utf-8")).get("fits", [])
            faults.extend(_fit_faults(page, fits))
        except Error as error:
            faults.append(f"the page never got ready: {str(error).splitlines()[0]}")
        finally:
            browser.close()
    return faults


def _request(url: str, address: str) -> list[str]:
    alone = url.startswith(("data:", "blob:")) or url.removeprefix(address)[:1] in (
        "",
        "#",
    )
    return [] if alone else [f"the page asks for {url[:80]}"]


def _console(said) -> list[str]:
    return [f"console: {said.text[:200]}"] if said.type == "error" else []


def _picture_faults(page) -> Iterator[str]:
    if page.evaluate("document.documentElement.dataset.gl") == "0":
        yield "the picture is flat: this browser gave no WebGL"
        return
    share = share_drawn(page.locator("canvas").first.screenshot())
    if share <= SHARE_DRAWN:
        yield f"only {share:.3f} of the picture is drawn"


def data_of(page: str) -> dict:
    """Return the block of data of a page, unpacked."""
    block = re.search(
        r'<script type="application/json" id="data">(.*?)</script>', page, re.DOTALL
    )
    data = json.loads(block[1]) if block else {}
    if "gzip" in data:
        data = json.loads(gzip.decompress(base64.b64decode(data["gzip"])))
    return data


def _fit_faults(page, fits: list[dict | None]) -> Iterator[str]:
    """Each unit with a fit has its interval, and its plot when it is chosen."""
    for unit, fit in enumerate(fits):
        if fit is None:
            continue
        row = page.locator(f'#unit-rows tr[data-unit="{unit}"]')
        if row.locator(".drawn-interval[aria-label]").count() != 1:
            yield f"unit {unit + 1}: the interval of its shared value is not drawn"
        if row.locator("button.unit").count() == 1:
            row.locator("button.unit").click()
        if page.locator(".misfit .curve[d^='M']").count() != 1:
            yield f"unit {unit + 1}: chi-square against its shared value is not drawn"
        page.keyboard.press("Escape")


def share_drawn(png: bytes) -> float:
    """Return the share of pixels that differ from the commonest colour."""
    import numpy as np  # noqa: PLC0415
    from PIL import Image  # noqa: PLC0415

    pixels = np.asarray(Image.open(io.BytesIO(png)).convert("RGB"), dtype=np.int64)
    code = pixels @ np.array([65536, 256, 1])
    return float(1 - np.bincount(code.ravel()).max() / code.size)


def main(folder: Path) -> int:
    """Print what is wrong with a folder of results; 0 when nothing is."""
    faults = [
        f"{name} is missing or empty"
        for name in FILES
        if not (folder / name).is_file() or (folder / name).stat().st_size == 0
    ]
    page, chromium = folder / "page.html", find_chromium()
    if page.is_file():
        faults.extend(find_faults(page.read_text(encoding="utf-8")))
        if chromium:
            faults.extend(find_faults_in_browser(page, chromium))
        elif os.environ.get("STRUCTMAP_REQUIRE_BROWSER") == "1":
            faults.append("no Chromium to open the page in")
    for fault in faults:
        print(f"{folder.name}: {fault}", file=sys.stderr)
    if not faults:
        opened = "opened" if chromium else "not opened (no Chromium)"
        print(f"{folder.name}: page of {page.stat().st_size} bytes is whole, {opened}")
    return 1 if faults else 0


if __name__ == "__main__":
    sys.exit(main(Path(sys.argv[1])))
