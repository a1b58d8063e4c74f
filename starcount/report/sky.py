"""Figures of what is left over, across the sky and against magnitude."""

import numpy as np
from matplotlib.colors import CenteredNorm
from matplotlib.figure import Figure

from starcount.report.bands import LATITUDES_DEG, Band, band_label, latitude_bands
from starcount.report.content import PageContent
from starcount.report.style import BLACK, DIVERGING, GREY, MARKS, PALE, WIDTH_INCH, new_figure, styled

SIGNIFICANCE = (("|pull| < 2", 0, 2, "o"), ("2 to 4", 2, 4, "s"), ("over 4", 4, np.inf, "D"))
"""Classes of significance and the shape of their marks."""

FEWEST_STARS = 10
"""Bins with fewer are not drawn against magnitude: their logarithm says nothing."""


def _cells(table, name: str) -> np.ndarray:
    """A column as plain floats, masked cells not a number."""
    return np.ma.filled(np.ma.asarray(table[name]).astype(float), np.nan)


@styled
def sky_residuals(content: PageContent, group: str) -> Figure:
    """ln(n / expected) of every field on a Mollweide map of the Galaxy, l growing to the left."""
    table = content.prediction.fields
    table = table[table["group"] == group]
    ratio, pull = _cells(table, "ln_ratio"), np.abs(_cells(table, "pull"))
    x = -np.radians((table["l"].value + 180) % 360 - 180)
    y = np.radians(table["b"].value)
    figure = new_figure(0.62 * WIDTH_INCH)
    axes = figure.add_subplot(projection="mollweide")
    axes.grid(color=PALE, linewidth=0.5)
    _longitude_labels(axes)
    size = float(np.clip(9000 / max(len(table), 1), 8, 90))
    norm = CenteredNorm(0, halfrange=_colour_range(ratio))
    known = np.isfinite(ratio)
    for label, low, high, marker in SIGNIFICANCE:
        chosen = known & (pull >= low) & (pull < high)
        axes.scatter(
            x[chosen], y[chosen], size, ratio[chosen], marker=marker, norm=norm, cmap=DIVERGING, edgecolors=BLACK,
            linewidths=0.4 + 0.25 * (low > 0), zorder=3, clip_on=False, label=f"{label} ({chosen.sum()})",
        )  # fmt: skip
    if (~known).any():
        axes.scatter(
            x[~known], y[~known], size, "none", marker="X", edgecolors=GREY, label=f"no count ({(~known).sum()})"
        )
    beyond = "both" if (np.abs(ratio[known]) > norm.halfrange).any() else "neither"
    bar = figure.colorbar(
        axes.collections[0], ax=axes, orientation="horizontal", shrink=0.6, aspect=35, pad=0.03, extend=beyond
    )
    bar.set_label("ln(n / expected)")
    legend = figure.legend(loc="outside upper center", ncols=4)
    for handle in legend.legend_handles:
        handle.set_array(None)
        handle.set(facecolor="white", edgecolor=BLACK, sizes=[28])
    return figure


def _longitude_labels(axes) -> None:
    """Label l along the equator: 0 in the middle, growing to the left."""
    axes.set_longitude_grid_ends(90)
    at_deg = np.arange(-120, 121, 60)
    axes.set_xticks(np.radians(at_deg), [""] * at_deg.size)
    # Above the marks, on a veil that lets them shine through: tick labels would lie below them.
    veil = {"facecolor": "white", "edgecolor": "none", "alpha": 0.6, "pad": 0.5}
    for x_deg in at_deg:
        axes.text(
            np.radians(x_deg), 0, f"l = {-x_deg % 360}°", ha="center", va="center", fontsize=6.5, bbox=veil, zorder=4
        )
    b_deg = np.arange(-60, 61, 30)
    axes.set_yticks(np.radians(b_deg), [f"{d}°".replace("-", "−") for d in b_deg], color=GREY)


def _colour_range(ratio: np.ndarray) -> float:
    """Half the range of the colours: nearly all fields inside, and never so narrow that noise looks like a pattern."""
    known = np.abs(ratio[np.isfinite(ratio)])
    return max(0.05, float(np.percentile(known, 98))) if known.size else 0.05


@styled
def residual_trends(content: PageContent, group: str) -> Figure:
    """ln(n / expected) against magnitude, north and south apart, and of each field against latitude."""
    figure = new_figure(5.2)
    grid = figure.add_gridspec(2, 2, height_ratios=[1, 0.9])
    prediction = content.prediction.groups[group]
    north = figure.add_subplot(grid[0, 0])
    south = figure.add_subplot(grid[0, 1], sharex=north, sharey=north)
    for axes, name, hemisphere in ((north, "north, b > 0", 1), (south, "south, b < 0", -1)):
        _draw_bands(axes, latitude_bands(prediction, hemisphere))
        axes.set_xlabel(f"{prediction.group.band} [mag]", parse_math=False)
        axes.set_title(name, loc="left")
    north.set_ylabel("ln(n / expected)")
    _symmetric(north)
    handles = dict(zip(*reversed(_handles(north, south)), strict=True))
    labels = sorted(handles, key=[band_label(place) for place in range(len(LATITUDES_DEG) - 1)].index)
    figure.legend([handles[label] for label in labels], labels, loc="outside upper center", ncols=6)
    _draw_against_latitude(figure.add_subplot(grid[1, :]), content, group)
    return figure


def _handles(*panels) -> tuple[list, list]:
    """Handles and labels of all panels."""
    pairs = [panel.get_legend_handles_labels() for panel in panels]
    return [h for handles, _ in pairs for h in handles], [label for _, labels in pairs for label in labels]


def _draw_bands(axes, bands: dict[int, Band]) -> None:
    axes.axhline(0, color=GREY, linewidth=0.7)
    for place, band in bands.items():
        colour, marker = MARKS[place]
        edges, total = band.edges_mag, band.total
        seen = (total.n >= FEWEST_STARS) & np.isfinite(total.ln_ratio)
        # Side by side within the bin, so that the error bars of the bands do not hide one another.
        at = edges[:-1] + np.diff(edges) * (0.25 + 0.5 * (place + 0.5) / (len(LATITUDES_DEG) - 1))
        axes.errorbar(
            at[seen], total.ln_ratio[seen], total.sd[seen] / total.expected[seen], fmt=marker + "-", color=colour,
            label=band_label(place), linewidth=0.7, elinewidth=0.7,
        )  # fmt: skip


def _symmetric(axes) -> None:
    limit = min(1.5, max(0.05, float(np.abs(axes.get_ylim()).max())))
    axes.set_ylim(-limit, limit)


def _draw_against_latitude(axes, content: PageContent, group: str) -> None:
    table = content.prediction.fields
    table = table[(table["group"] == group) & ~np.ma.getmaskarray(np.ma.asarray(table["ln_ratio"]))]
    ratio, error = _cells(table, "ln_ratio"), _cells(table, "sd") / _cells(table, "expected")
    b_deg, l_deg = table["b"].value, table["l"].value
    axes.axhline(0, color=GREY, linewidth=0.7)
    inner = (l_deg < 90) | (l_deg > 270)
    for chosen, (colour, marker), name in ((inner, MARKS[0], "|l| < 90°"), (~inner, MARKS[1], "|l| > 90°")):
        axes.errorbar(
            b_deg[chosen], ratio[chosen], error[chosen], fmt=marker, color=colour, label=name, elinewidth=0.6,
            markerfacecolor="white" if marker == "s" else colour,
        )  # fmt: skip
    axes.set(xlabel="b [deg]", ylabel="ln(n / expected)", xlim=(-92, 92), xticks=range(-90, 91, 30))
    axes.set_title("single fields, all bins", loc="left")
    axes.legend(loc="lower right", bbox_to_anchor=(1, 1), ncols=2, borderaxespad=0.2)
    _symmetric(axes)
