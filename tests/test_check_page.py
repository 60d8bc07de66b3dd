"""The check of a page must find each fault that it is there for."""

import base64
import hashlib
import html
import io

import numpy as np
import pytest
from PIL import Image

from tests.check_page import TEMPLATES, find_faults, find_faults_in_browser, share_drawn

STYLE = "body { margin: 0 }"


@pytest.fixture(scope="module")
def whole() -> str:
    """A small page that has everything."""
    built = TEMPLATES / "built"
    if not built.is_dir():
        pytest.skip("the 3D library is not built here; pip install -e . makes it")
    library = (built / "3Dmol-min.js").read_text(encoding="utf-8")
    licence = (built / "3Dmol-LICENSE.txt").read_text(encoding="utf-8")
    policy = (
        f"default-src 'none'; script-src '{digest(library)}'; "
        f"style-src '{digest(STYLE)}'; img-src data: blob:"
    )
    return (
        f'<!doctype html><html lang="en"><head><meta charset="utf-8">'
        f'<meta http-equiv="Content-Security-Policy" content="{policy}">'
        f"<style>{STYLE}</style></head><body><pre>{html.escape(licence)}</pre>"
        f'<a href="#f">down</a><script type="application/json">{{}}</script>'
        f"<script>{library}</script></body></html>"
    )


def digest(text: str) -> str:
    return "sha256-" + base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()


def test_a_whole_page_has_no_fault(whole):
    assert find_faults(whole) == []


@pytest.mark.parametrize(
    ("old", "new", "fault"),
    [
        ("<body>", '<body><script src="a.js"></script>', "<script src> fetches a.js"),
        ("<body>", '<body><img src="//a.b/c.png">', "<img src> fetches //a.b/c.png"),
        ("<head>", '<head><link href="a.css">', "<link href> fetches a.css"),
        ("margin: 0", "background: url(a.png)", "a style fetches something"),
        (
            "margin: 0",
            "margin: 1",
            "a style of 18 characters is not in the content policy",
        ),
        ("<body>", "<body><script>1</script>", "a script of 1 characters"),
        ("<body>", '<body onload="1">', "inline handler onload"),
        ("<body>", '<body style="margin:1px">', "a style of its own"),
        ("default-src 'none'", "default-src *", "allows default-src *"),
        ("default-src 'none'; ", "", "does not begin from nothing"),
        ("script-src ", "script-src 'unsafe-eval' ", "allows script-src 'unsafe-eval'"),
        ("Content-Security-Policy", "x", "0 content policies where one is due"),
        ("3dmol", "3 d m o l", "the 3D library is not in the page"),
        ("University of Pittsburgh", "", "the licence of the 3D library is not"),
        ("application/json", "text/plain", "the data are not in the page"),
        ("<!doctype html>", "", "does not begin with its document type"),
        (' lang="en"', "", "does not say its language"),
    ],
)
def test_finds_what_is_broken(whole, old, new, fault):
    assert old in whole
    found = find_faults(whole.replace(old, new))
    assert any(fault in one for one in found), found


def test_share_drawn_counts_pixels_that_are_not_ground():
    picture = np.full((10, 10, 3), 255, dtype=np.uint8)
    picture[:2, :5] = (0, 114, 178)
    file = io.BytesIO()
    Image.fromarray(picture).save(file, format="PNG")
    assert share_drawn(file.getvalue()) == pytest.approx(0.1)


def test_a_page_that_never_gets_ready_is_found_in_the_browser(
    tmp_path, chromium, monkeypatch
):
    monkeypatch.setattr("tests.check_page.READY_MILLISECONDS", 1500)
    page = tmp_path / "page.html"
    page.write_text(
        "<img src='http://localhost:9/a.png'><script>throw Error('x')</script>"
    )
    found = "\n".join(find_faults_in_browser(page, chromium))
    assert "never got ready" in found
    assert "script error: x" in found
    assert "asks for http://localhost:9/a.png" in found


def test_a_fit_that_is_not_drawn_is_found_in_the_browser(tmp_path, chromium):
    page = tmp_path / "page.html"
    page.write_text(
        '<html data-ready="1" data-gl="0"><table id="unit-rows"><tr data-unit="1">'
        '<td><button class="unit">U2</button></table><script type="application/json" '
        'id="data">{"fits": [null, {"lowest": 1}]}</script></html>'
    )
    found = "\n".join(find_faults_in_browser(page, chromium))
    assert "unit 2: the interval of its shared value is not drawn" in found
    assert "unit 2: chi-square against its shared value is not drawn" in found
    assert "unit 1" not in found
