"""Figures, tables and the page that puts them together. A new figure: one function and a row in FIGURES."""

from starcount.report.content import CurveDraws, PageContent, ParameterDraws, Verdict
from starcount.report.figures import FIGURES, draw_figure
from starcount.report.gather import page_content
from starcount.report.page import PAGE, render, write_page
from starcount.report.parameters import derived_table, parameter_table
from starcount.report.style import save_figure
from starcount.report.tables import write_table, write_tables

__all__ = [
    "FIGURES",
    "PAGE",
    "CurveDraws",
    "PageContent",
    "ParameterDraws",
    "Verdict",
    "derived_table",
    "draw_figure",
    "page_content",
    "parameter_table",
    "render",
    "save_figure",
    "write_page",
    "write_table",
    "write_tables",
]
