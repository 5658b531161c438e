"""The page: one self-contained HTML file with the whole plan, for reading, printing and passing on."""

from passplan.report.page.build import PAGE, render_page, write_page

__all__ = ["PAGE", "render_page", "write_page"]
