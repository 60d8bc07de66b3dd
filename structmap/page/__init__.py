"""The one-file pages: everything that was found, linked, without any network."""

from structmap.page.assemble import page_html
from structmap.page.forms import forms_html

__all__ = ["forms_html", "page_html"]
