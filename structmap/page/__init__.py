"""The one-file page: everything an analysis found, linked, without any network."""

from structmap.page.assemble import page_html

__all__ = ["page_html"]
