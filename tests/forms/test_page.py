"""The page of several forms: side by side, linked, without any network."""

import re
from html.parser import HTMLParser

import pytest

from structmap.analysis import compare_analyses
from structmap.forms import compare_folders
from structmap.page import forms_html
from tests.forms.test_comparing import (
    two_folders,  # noqa: F401 - a fixture
    written,
)
from tests.quotient.test_unit import UNIT_4CUP


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
def page(two_folders):  # noqa: F811
    return forms_html(compare_folders(two_folders))


def test_each_unit_stands_once_with_every_form_beside_it(page):
    words = " ".join(Elements(page).words)
    row = re.search(r'<tr id="U1">.*?</tr>', page, flags=re.DOTALL).group()
    assert row.count("<td") == 3
    assert "held by the lattice" in row
    assert "falls apart" in row
    assert "artefact of this crystal" in row
    assert "first.cif" in words
    assert "second.cif" in words


def test_every_link_leads_somewhere_in_the_page(page):
    found = Elements(page)
    assert found.links
    assert {link.removeprefix("#") for link in found.links} <= set(found.ids)
    assert len(set(found.ids)) == len(found.ids)


def test_the_page_asks_the_network_for_nothing(page):
    assert "script" not in Elements(page).tags
    assert "default-src 'none'" in page
    assert not re.search(r"(src|href)=\"?(https?:)?//", page)


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
