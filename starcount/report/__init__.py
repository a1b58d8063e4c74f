"""Figures, tables and the page that puts them together. A new figure: one function and a row in FIGURES.

Names are imported when first used: tables are written without loading the plotting library.
"""

from importlib import import_module

_HOME = {
    "FIGURES": "figures",
    "PAGE": "page",
    "CurveDraws": "content",
    "PageContent": "content",
    "ParameterDraws": "content",
    "Verdict": "content",
    "derived_table": "parameters",
    "draw_figure": "figures",
    "page_content": "gather",
    "parameter_table": "parameters",
    "render": "page",
    "save_figure": "style",
    "write_page": "page",
    "write_table": "tables",
    "write_tables": "tables",
}

__all__ = list(_HOME)


def __getattr__(name: str):
    if name not in _HOME:
        raise AttributeError(f"module 'starcount.report' has no attribute {name!r}")
    return getattr(import_module(f"starcount.report.{_HOME[name]}"), name)
