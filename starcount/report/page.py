"""One HTML page that puts everything together: a single file that opens without a network and runs no script."""

from base64 import b64encode
from collections.abc import Sequence
from pathlib import Path

import numpy as np
from astropy.table import Table
from jinja2 import Environment, PackageLoader, StrictUndefined

from starcount.files import write_text
from starcount.report.content import PageContent
from starcount.report.counted import cautions, component_table, counted_rows, flattened
from starcount.report.figures import FIGURES, draw_figure
from starcount.report.parameters import PRIOR_DOMINATED
from starcount.report.style import WIDTH_INCH, save_figure
from starcount.report.tables import write_table

PAGE = "report.html"
WORST = 8
"""Fields and bins in the lists of the worst."""
LARGE = 1e4
"""Numbers from here on are shown without decimals."""

TEMPLATES = Environment(
    loader=PackageLoader("starcount.report", "templates"),
    autoescape=True,
    undefined=StrictUndefined,
    trim_blocks=True,
    lstrip_blocks=True,
)


def write_page(folder: Path, content: PageContent) -> Path:
    """Write the page, its figures (PDF and PNG, in ``folder``/figures) and its tables; return the page's path."""
    folder = Path(folder)
    for name, table in _tables(content).items():
        write_table(table, folder / name, {"provenance": dict(content.provenance)})
    shown = [_saved(folder, name, content, part) for name, kind in FIGURES.items() for part in kind.parts(content)]
    path = folder / PAGE
    write_text(path, render(content, shown))
    return path


def _tables(content: PageContent) -> dict[str, Table]:
    """The tables that a page shows and no step before it has written."""
    tables = {
        "components": component_table(content.prediction),
        "parameters": content.parameter_table,
        "derived": content.derived,
    }
    return {name: table for name, table in tables.items() if table is not None}


def render(content: PageContent, figures: Sequence[dict]) -> str:
    """The page as text. ``figures`` hold ``source`` (a data address), ``alt``, ``caption`` and ``width_percent``."""
    prediction = content.prediction
    return TEMPLATES.get_template("page.html").render(
        content=content,
        survey=prediction.survey,
        counted=counted_rows(prediction),
        components=shown_table(component_table(prediction)),
        parameters=shown_parameters(content),
        recovery=shown_recovery(content),
        prior_dominated_percent=round(100 * PRIOR_DOMINATED),
        derived=None if content.derived is None else shown_table(content.derived),
        figures=figures,
        worst_fields=shown_table(_worst_fields(content)),
        worst_bins=shown_table(prediction.worst_bins(WORST)),
        cautions=(*content.cautions, *cautions(prediction, bool(content.parameters))),
        provenance=flattened(content.provenance),
    )


def _worst_fields(content: PageContent) -> Table:
    columns = ["group", "field", "l", "b", "n", "expected", "ln_ratio", "pull", "tail"]
    return content.prediction.worst_fields(WORST)[columns]


def _saved(folder: Path, name: str, content: PageContent, part: str) -> dict:
    """Draw and save a figure; return what the page needs of it."""
    kind = FIGURES[name]
    # Groups are numbered in file names: a user's group name need not be a file's name.
    number = f"-{content.groups.index(part) + 1}" if part and len(content.groups) > 1 else ""
    figure = draw_figure(name, content, part)
    _, png = save_figure(figure, folder / "figures" / f"{name}{number}", content.provenance)
    picture = b64encode(png.read_bytes()).decode("ascii")
    return {
        "source": f"data:image/png;base64,{picture}",
        "alt": kind.alt.format(part=part),
        "caption": kind.caption.format(part=part),
        "width_percent": round(100 * figure.get_figwidth() / WIDTH_INCH),
    }


def shown_table(table: Table) -> dict:
    """A table's head and cells as text; numbers with four figures, units in the head."""
    head = [f"{name} [{table[name].unit}]" if getattr(table[name], "unit", None) else name for name in table.colnames]
    plain = [getattr(table[name], "value", table[name]) for name in table.colnames]
    rows = [[cell(column[i]) for column in plain] for i in range(len(table))]
    numeric = [np.asarray(column).dtype.kind in "iuf" for column in plain]
    return {"head": [words.replace("_", " ") for words in head], "rows": rows, "numeric": numeric}


def cell(value) -> str:
    """One value as text: whole numbers in full, others with four figures or more, a dash for what is missing."""
    if np.ma.is_masked(value):
        return "–"
    if isinstance(value, (bool, np.bool_)):
        return "yes" if value else "no"
    if isinstance(value, (int, np.integer)):
        return str(int(value))
    if isinstance(value, (float, np.floating)) and not np.isfinite(value):
        return "–" if np.isnan(value) else ("∞" if value > 0 else "−∞")
    if isinstance(value, (float, np.floating)):
        whole = LARGE <= abs(value) < 1e15
        return (f"{float(value):.0f}" if whole else f"{float(value):.4g}").replace("-", "−")
    return str(value)


def shown_parameters(content: PageContent) -> dict | None:
    """The table of parameters as the page words it, with intervals in one cell."""
    if content.parameter_table is None:
        return None
    head = ["parameter", "median", "68 %", "95 %", "prior median", "prior 68 %", "shrinkage", "note"]
    rows = [
        [
            _named(row),
            cell(row["median"]),
            _interval(row, ""),
            _interval(row, "", 95),
            cell(row["prior_median"]),
            _interval(row, "prior_"),
            cell(row["shrinkage"]),
            "prior-dominated" if row["prior_dominated"] else "",
        ]
        for row in content.parameter_table
    ]
    meanings = list(zip(content.parameter_table["parameter"], content.parameter_table["meaning"], strict=True))
    return {"head": head, "rows": rows, "numeric": [0 < i < 7 for i in range(8)], "meanings": meanings}


def shown_recovery(content: PageContent) -> dict | None:
    """Truth against recovery, for the parameters whose truth is known."""
    table = content.parameter_table
    if table is None or "truth" not in table.colnames:
        return None
    head = ["parameter", "truth", "median", "sd", "(median − truth) / sd"]
    names = ("truth", "median", "sd", "off_by_sd")
    known = table[~np.ma.getmaskarray(table["truth"])]
    rows = [[_named(row), *(cell(row[name]) for name in names)] for row in known]
    return {"head": head, "rows": rows, "numeric": [i > 0 for i in range(5)]}


def _named(row) -> str:
    return f"{row['parameter']} [{row['unit']}]" if row["unit"] else str(row["parameter"])


def _interval(row, prefix: str, percent: int = 68) -> str:
    return f"{cell(row[f'{prefix}lower_{percent}'])} to {cell(row[f'{prefix}upper_{percent}'])}"
