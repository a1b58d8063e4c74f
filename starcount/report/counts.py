"""Figures of counts per magnitude bin, with the components and what is left over."""

from collections.abc import Sequence

import numpy as np
from matplotlib.figure import Figure
from matplotlib.ticker import LogLocator, NullFormatter

from starcount.report.bands import Band, add_up, latitude_bands
from starcount.report.content import SUPERSCRIPTS, PageContent
from starcount.report.style import BLACK, GREY, LINES, PALE, new_figure, styled

COLUMNS = 3
PANEL_HEIGHT_INCH = 2.75
LONGEST_NAME = 28
"""Letters of a field's name that fit above a panel."""


@styled
def counts_by_latitude(content: PageContent, group: str) -> Figure:
    """Counts per magnitude bin with the model's parts and ln(n / expected), fields of a latitude band added up."""
    prediction = content.prediction.groups[group]
    return _panels(tuple(latitude_bands(prediction).values()), prediction.group.band)


@styled
def counts_of_worst_fields(content: PageContent, group: str) -> Figure:
    """The same for the single fields that fit worst."""
    prediction = content.prediction.groups[group]
    table = content.prediction.worst_fields(len(content.prediction.fields))
    names = table["field"][table["group"] == group][:COLUMNS]
    fields = prediction.group.fields
    bands = [add_up(prediction, fields.name == name, _field_label(fields, name)) for name in names]
    return _panels(bands, prediction.group.band)


def _field_label(fields, name: str) -> str:
    where = int(np.flatnonzero(fields.name == name)[0])
    short = name if len(name) <= LONGEST_NAME else name[: LONGEST_NAME - 1] + "…"
    place = f"l {fields.l_deg[where]:.1f}°, b {fields.b_deg[where]:.1f}°".replace("-", "−")
    return f"{short}\n{place}"


def _panels(bands: Sequence[Band], band_name: str) -> Figure:
    columns = 2 if len(bands) == 4 else min(COLUMNS, len(bands))
    rows = -(-len(bands) // columns)
    figure = new_figure(rows * PANEL_HEIGHT_INCH + 0.5)
    ratios = [3, 1.3] * rows if bands[0].compared else [3] * rows
    grid = figure.add_gridspec(len(ratios), columns, height_ratios=ratios)
    step = len(ratios) // rows
    limit = _residual_limit(bands)
    for i, band in enumerate(bands):
        row, column = divmod(i, columns)
        upper = figure.add_subplot(grid[step * row, column])
        _draw_counts(upper, band)
        lowest = upper
        if step == 2:
            lowest = figure.add_subplot(grid[step * row + 1, column], sharex=upper)
            upper.tick_params(labelbottom=False)
            _draw_residuals(lowest, band, limit)
        lowest.set_xlabel(f"{band_name} [mag]", parse_math=False)
        if column == 0:
            upper.set_ylabel("stars / (deg² mag)")
            if step == 2:
                lowest.set_ylabel("ln(n / exp.)")
    handles, labels = figure.axes[0].get_legend_handles_labels()
    figure.legend(handles, labels, loc="outside upper center", ncols=min(6, len(labels)))
    figure.align_ylabels()
    return figure


def _draw_counts(axes, band: Band) -> None:
    unit, edges = band.per_deg2_mag, band.edges_mag
    for (name, counts), (colour, dashes) in zip(band.parts.items(), component_lines(len(band.parts)), strict=True):
        axes.stairs(counts / unit, edges, color=colour, linestyle=dashes, label=plain(name), baseline=None, zorder=3)
    axes.stairs(band.total.expected / unit, edges, color=BLACK, linewidth=1.8, label="model", baseline=None)
    if band.draws is not None:
        low, high = np.percentile(band.draws, [2.5, 97.5], axis=0) / unit
        axes.stairs(high, edges, baseline=low, fill=True, color=PALE, label="model, 95 %", zorder=0)
    top = band.total.expected / unit
    if band.compared:
        n = band.total.n
        seen = n > 0
        middle = 0.5 * (edges[1:] + edges[:-1])
        axes.errorbar(
            middle[seen], (n / unit)[seen], (np.sqrt(n) / unit)[seen], fmt="o", color=BLACK, label="counted", zorder=5,
            elinewidth=0.8, markerfacecolor="white", markeredgewidth=0.9,
        )  # fmt: skip
        top = np.fmax(top, n / unit)
    axes.set_yscale("log")
    # Plain letters and few minor ticks: laying them out takes most of the time of such a figure.
    axes.yaxis.set_major_formatter(lambda y, _: f"10{str(round(np.log10(y))).translate(SUPERSCRIPTS)}")
    axes.yaxis.set_minor_locator(LogLocator(subs=(2, 5)))
    axes.yaxis.set_minor_formatter(NullFormatter())
    _limit_log(axes, top)
    axes.set_title(band.label, loc="left", parse_math=False, fontsize=7.5)


def component_lines(number: int) -> list[tuple]:
    """Colour and dashes of so many components, in their order."""
    return [LINES[i % len(LINES)] for i in range(number)]


def plain(name: str) -> str:
    """A name from a user's file as plain letters: matplotlib reads formulas between dollars."""
    return name.replace("_", " ").replace("$", "")


def _limit_log(axes, top: np.ndarray) -> None:
    """Show what matters: from a thousandth of the faintest total to above the largest."""
    top = top[np.isfinite(top) & (top > 0)]
    if top.size:
        axes.set_ylim(max(top.min() / 30, top.max() / 1e6), top.max() * 3)


def _residual_limit(bands: Sequence[Band]) -> float:
    """One half-height for all residual panels: the well-measured bins fit in, wild ones get arrows."""
    good = [np.abs(b.total.ln_ratio)[b.total.n > 10] for b in bands if b.compared]
    values = np.concatenate(good) if good else np.zeros(0)
    values = values[np.isfinite(values)]
    return float(np.clip(1.3 * np.percentile(values, 97) if values.size else 0.0, 0.1, 1.5))


def _draw_residuals(axes, band: Band, limit: float) -> None:
    middle = 0.5 * (band.edges_mag[1:] + band.edges_mag[:-1])
    n, ratio = band.total.n, band.total.ln_ratio
    axes.axhline(0, color=GREY, linewidth=0.7)
    if band.draws is not None:
        good = band.total.expected > 0
        share = np.log(np.percentile(band.draws[:, good], [2.5, 97.5], axis=0) / band.total.expected[good])
        low, high = np.full((2, n.size), np.nan)
        low[good], high[good] = share
        axes.stairs(high, band.edges_mag, baseline=low, fill=True, color=PALE, zorder=0)
    inside = np.abs(ratio) <= limit
    axes.errorbar(
        middle[inside], ratio[inside], 1 / np.sqrt(n[inside]), fmt="o", color=BLACK, elinewidth=0.8,
        markerfacecolor="white", markeredgewidth=0.9,
    )  # fmt: skip
    beyond = (~inside & np.isfinite(ratio)) | ((n == 0) & (band.total.expected > 1))
    few = n < band.total.expected
    for chosen, marker, y in ((beyond & few, "v", -0.9), (beyond & ~few, "^", 0.9)):
        axes.plot(middle[chosen], np.full(chosen.sum(), y * limit), marker, color=BLACK)
    axes.set_ylim(-limit, limit)
