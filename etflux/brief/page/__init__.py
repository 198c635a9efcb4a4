"""The page: one file that opens from disk in any browser, with the numbers of a run and what draws them."""

from etflux.brief.page.render import page_text, write_page

__all__ = ["page_text", "write_page"]
