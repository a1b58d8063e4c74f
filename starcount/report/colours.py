"""Figures in magnitude and colour: colour-magnitude diagrams with what is left over, and colours by magnitude."""

from collections.abc import Sequence

import numpy as np
from matplotlib.colors import CenteredNorm, LogNorm
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from starcount.report.bands import Band, colour_bands
from starcount.report.content import PageContent
from starcount.report.counts import component_lines, plain
from starcount.report.style import AMOUNTS, BLACK, DIVERGING, GREY, PALE, new_figure, styled

ROW_INCH = 2.0
TITLE = {"loc": "left", "fontsize": 7.5, "parse_math": False}
MOST_SLICES = 4
"""Magnitude slices of the colour distributions."""

FEWEST_STARS = 25
"""Cells with fewer stars, counted and expected, show no ratio: its logarithm says nothing."""

NOTABLE_PULL = 3.0
"""Cells that are further off, in standard deviations of the prediction, are marked."""

SHADES = LogNorm(1e-3, 1.0)
"""Density of a cell relative to the densest of its band: bands differ by more than any scale of shades shows."""
SHADES_LABEL = "stars per deg² and mag², as a share of the densest expected cell"

ALONE_MAG = 0.5
"""Drawn width of an open bin that has no closed one beside it."""


def drawn_edges(edges_mag: np.ndarray) -> np.ndarray:
    """The edges as they are drawn (c + 1,): an open bin gets the width of the closed one beside it."""
    finite = edges_mag[np.isfinite(edges_mag)]
    if finite.size == 0:
        return np.array([-ALONE_MAG, ALONE_MAG])
    first, last = np.diff(finite)[[0, -1]] if finite.size > 1 else (ALONE_MAG, ALONE_MAG)
    blue = [finite[0] - first] if np.isneginf(edges_mag[0]) else []
    red = [finite[-1] + last] if np.isposinf(edges_mag[-1]) else []
    return np.concatenate([blue, finite, red])


def _open_bins(edges_mag: np.ndarray) -> list[tuple[int, str]]:
    """The open bins with the marker that points out of the figure."""
    return [(0, "<")] * bool(np.isneginf(edges_mag[0])) + [(-1, ">")] * bool(np.isposinf(edges_mag[-1]))


@styled
def colour_magnitude(content: PageContent, group: str) -> Figure:
    """Colour-magnitude diagram per latitude band: counted, expected and ln(n / expected); or expected alone."""
    prediction = content.prediction.groups[group]
    bands = colour_bands(prediction)
    if not any(band.compared for band in bands):
        return _expected_alone(bands, prediction.group)
    figure = new_figure(ROW_INCH * len(bands) + 0.9)
    axes = figure.subplots(len(bands), 3, sharex=True, sharey=True, squeeze=False)
    ratios = CenteredNorm(0, halfrange=_ratio_range(bands))
    for row, band in zip(axes, bands, strict=True):
        stars = _draw_amounts(row[0], band, band.n)
        _draw_amounts(row[1], band, band.expected)
        left = _draw_ratios(row[2], band, ratios)
        _dress(row, band, prediction.group)
        row[1].set_title(_densest(band), **TITLE)
    for panel, name in zip(axes[0], ("counted", "expected", "ln(counted / expected)"), strict=True):
        panel.set_title(f"{name}\n{panel.get_title(loc='left')}", **TITLE)
    for panel in axes[-1]:
        panel.set_xlabel(f"{_colour_name(prediction.group)} [mag]", parse_math=False)
    looks = {"location": "bottom", "aspect": 30, "shrink": 0.9, "pad": 0.02}
    figure.colorbar(stars, ax=axes[:, :2], extend="both", label=SHADES_LABEL, **looks)
    figure.colorbar(left, ax=axes[:, 2], extend="both", label="ln(n / expected)", **{**looks, "aspect": 15})
    return figure


def _expected_alone(bands: Sequence[Band], group) -> Figure:
    # There are four wide bands at most, which fill these panels.
    rows, columns = (2, 2) if len(bands) == 4 else (1, len(bands))
    figure = new_figure((ROW_INCH + 0.3) * rows + 0.8)
    axes = figure.subplots(rows, columns, sharex=True, sharey=True, squeeze=False)
    for panel, band in zip(axes.flat, bands, strict=True):
        stars = _draw_amounts(panel, band, band.expected)
        _dress([panel], band, group)
        panel.set_title(f"{band.label}\n{_densest(band)}", **TITLE)
        panel.set_xlabel(f"{_colour_name(group)} [mag]", parse_math=False)
        panel.label_outer()
    looks = {"location": "bottom", "aspect": 40, "shrink": 0.6, "pad": 0.02}
    figure.colorbar(stars, ax=axes, extend="min", label=SHADES_LABEL, **looks)
    return figure


def _colour_name(group) -> str:
    return " − ".join(group.colour)


def _cell_deg2_mag2(band: Band) -> np.ndarray:
    """Divide by this to get stars per square degree and square magnitude, (magnitude, colour)."""
    widths = np.diff(band.edges_mag)[:, None] * np.diff(drawn_edges(band.edges_colour_mag))
    return band.area_or_nan_deg2 * widths


def _ratio_range(bands: Sequence[Band]) -> float:
    """Half the range of the colours: nearly all well-measured cells inside, never so narrow that noise is a pattern."""
    ratio = np.concatenate([np.abs(band.total.ln_ratio)[band.n >= FEWEST_STARS] for band in bands if band.compared])
    ratio = ratio[np.isfinite(ratio)]
    return float(np.clip(np.percentile(ratio, 95), 0.1, 1.5)) if ratio.size else 0.1


def _mesh(axes, band: Band, values: np.ndarray, **looks):
    """Draw values (magnitude, colour) as cells; cells that are no number stay grey."""
    axes.set_facecolor(PALE)
    return axes.pcolormesh(drawn_edges(band.edges_colour_mag), band.edges_mag, np.ma.masked_invalid(values), **looks)


def _densest(band: Band) -> str:
    two_figures = float(f"{_highest(band):.2g}")
    return f"densest: {two_figures:,.10g} / (deg² mag²)".replace(",", " ")


def _highest(band: Band) -> float:
    dense = band.expected / _cell_deg2_mag2(band)
    return float(np.max(dense, initial=0.0, where=np.isfinite(dense))) or 1.0


def _draw_amounts(axes, band: Band, stars: np.ndarray):
    dense = stars / _cell_deg2_mag2(band) / _highest(band)
    _mesh(axes, band, np.where(np.isfinite(dense), 0.0, np.nan), cmap="Greys", vmin=0, vmax=1)
    return _mesh(axes, band, np.where(dense > 0, dense, np.nan), norm=SHADES, cmap=AMOUNTS)


def _draw_ratios(axes, band: Band, norm: CenteredNorm):
    total, far = band.total, 10 * norm.halfrange
    enough = (band.area_deg2 > 0) & (np.maximum(total.n, total.expected) >= FEWEST_STARS)
    # A cell in which either is zero has no logarithm but lies off the scale all the same.
    ratio = np.where(np.isfinite(total.ln_ratio), total.ln_ratio, np.where(total.n > total.expected, far, -far))
    colours, m_mag = (0.5 * (e[1:] + e[:-1]) for e in (drawn_edges(band.edges_colour_mag), band.edges_mag))
    m, c = np.nonzero(enough & (np.abs(total.pull) > NOTABLE_PULL))
    axes.plot(colours[c], m_mag[m], "o", color=BLACK, markeredgecolor="white", markeredgewidth=0.3, markersize=2)
    return _mesh(axes, band, np.where(enough, ratio, np.nan), norm=norm, cmap=DIVERGING)


def _dress(row, band: Band, group) -> None:
    edges = drawn_edges(band.edges_colour_mag)
    for panel in row:
        panel.set(xlim=edges[[0, -1]], ylim=band.edges_mag[[-1, 0]])
        panel.xaxis.set_major_locator(MaxNLocator(6))
        _mark_open(panel, band.edges_colour_mag)
    row[0].set_ylabel(f"{group.band} [mag]", parse_math=False)
    row[0].set_title(band.label, **TITLE)


def _mark_open(axes, edges_mag: np.ndarray) -> None:
    """Part open bins off by a line, and point out of the figure at the edge of the panel."""
    edges = drawn_edges(edges_mag)
    middle = 0.5 * (edges[1:] + edges[:-1])
    for place, marker in _open_bins(edges_mag):
        axes.axvline(edges[1 if place == 0 else -2], color=GREY, linewidth=0.6, linestyle=(0, (2, 1)), zorder=2)
        axes.plot(
            middle[place], 1.0, marker, color=BLACK, markersize=3.5, transform=axes.get_xaxis_transform(),
            clip_on=False, zorder=5,
        )  # fmt: skip


@styled
def colour_distributions(content: PageContent, group: str) -> Figure:
    """Stars per colour in slices of magnitude and bands of latitude, with the model's parts."""
    prediction = content.prediction.groups[group]
    bands = colour_bands(prediction)
    slices = magnitude_slices(prediction.group.edges_mag.size - 1)
    figure = new_figure(1.6 * len(bands) + 0.8)
    axes = figure.subplots(len(bands), len(slices), sharex=True, squeeze=False)
    for row, band in zip(axes, bands, strict=True):
        for panel, (first, last) in zip(row, slices, strict=True):
            _draw_distribution(panel, band.rows(first, last).summed(-2))
        row[0].set_ylabel(f"{band.label}\nstars / (deg² mag)", parse_math=False, fontsize=7)
    for panel, (first, last) in zip(axes[0], slices, strict=True):
        low, high = prediction.group.edges_mag[[first, last]]
        panel.set_title(f"{prediction.group.band} {low:g} to {high:g}", **TITLE)
    for panel in axes[-1]:
        panel.set_xlabel(f"{_colour_name(prediction.group)} [mag]", parse_math=False)
    handles = {
        label: handle for panel in axes.flat for handle, label in zip(*panel.get_legend_handles_labels(), strict=True)
    }
    figure.legend(handles.values(), handles.keys(), loc="outside upper center", ncols=min(6, len(handles)))
    figure.align_ylabels()
    return figure


def magnitude_slices(n_bin: int) -> list[tuple[int, int]]:
    """Slices of neighbouring magnitude bins, as first and one past last; a few, as equal as can be."""
    parts = np.array_split(np.arange(n_bin), min(MOST_SLICES, n_bin))
    return [(int(part[0]), int(part[-1]) + 1) for part in parts]


def _draw_distribution(axes, band: Band) -> None:
    edges = drawn_edges(band.edges_colour_mag)
    unit = band.area_or_nan_deg2 * np.diff(edges)
    for (name, counts), (colour, dashes) in zip(band.parts.items(), component_lines(len(band.parts)), strict=True):
        axes.stairs(counts / unit, edges, color=colour, linestyle=dashes, label=plain(name), baseline=None, zorder=3)
    model = band.expected / unit
    axes.stairs(model, edges, color=BLACK, linewidth=1.6, label="model", baseline=None)
    if band.draws is not None:
        low, high = np.percentile(band.draws, [2.5, 97.5], axis=0) / unit
        axes.stairs(high, edges, baseline=low, fill=True, color=PALE, label="model, 95 %", zorder=0)
    top = model
    if band.compared:
        _draw_points(axes, band, edges, unit)
        top = np.fmax(top, (band.n + np.sqrt(band.n)) / unit)
    highest = np.nanmax(top, initial=0.0)
    axes.set(xlim=edges[[0, -1]], ylim=(0, 1.1 * highest if highest > 0 else 1))
    axes.xaxis.set_major_locator(MaxNLocator(5))
    axes.yaxis.set_major_locator(MaxNLocator(4))
    axes.tick_params(labelsize=6.5)
    _mark_open(axes, band.edges_colour_mag)


def _draw_points(axes, band: Band, edges: np.ndarray, unit: np.ndarray) -> None:
    middle, seen = 0.5 * (edges[1:] + edges[:-1]), np.isfinite(unit)
    axes.errorbar(
        middle[seen], (band.n / unit)[seen], (np.sqrt(band.n) / unit)[seen], fmt="o", color=BLACK, label="counted",
        zorder=5, elinewidth=0.8, markerfacecolor="white", markeredgewidth=0.8, markersize=2.6,
    )  # fmt: skip
