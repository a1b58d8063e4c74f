"""Figures of what a fit found: joint and single distributions of the parameters, and truth against recovery."""

from collections.abc import Sequence

import numpy as np
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator
from scipy.ndimage import gaussian_filter
from scipy.stats import gaussian_kde

from starcount.report.content import PageContent, ParameterDraws
from starcount.report.parameters import parameter_table
from starcount.report.style import BLACK, BLUE, GREY, PALE, VERMILION, WIDTH_INCH, new_figure, styled

MOST_IN_CORNER = 8
GRID = 40
"""Cells along each side of a joint histogram."""


def main_parameters(parameters: Sequence[ParameterDraws]) -> tuple[ParameterDraws, ...]:
    """At most eight parameters for the corner plot: those that the counts narrowed most, in their own order.

    The scatter of the counts (``floor.GROUP``) is no property of the Galaxy and comes last.
    """
    shrinkage = parameter_table(parameters)["shrinkage"]
    of_counts = [parameter.name.startswith("floor.") for parameter in parameters]
    chosen = np.sort(np.lexsort((-shrinkage, of_counts))[:MOST_IN_CORNER])
    return tuple(parameters[i] for i in chosen)


@styled
def corner(content: PageContent, _part: str = "") -> Figure:
    """Every pair of main parameters: regions that hold 68 and 95 % of the draws; single ones on the diagonal."""
    parameters = main_parameters(content.parameters)
    number = len(parameters)
    side_inch = WIDTH_INCH if number > 3 else 0.75 * WIDTH_INCH
    figure = Figure(figsize=(side_inch, side_inch), layout="none")
    # Equal squares need fixed margins: the width of the tick labels differs from column to column.
    places = {"left": 0.1, "right": 0.985, "bottom": 0.11, "top": 0.985, "wspace": 0.06, "hspace": 0.06}
    axes = figure.subplots(number, number, squeeze=False, gridspec_kw=places)
    limits = [_limits(parameter) for parameter in parameters]
    for i in range(number):
        for j in range(number):
            if j > i:
                axes[i, j].set_axis_off()
            elif i == j:
                _draw_single(axes[i, i], parameters[i], limits[i])
            else:
                _draw_joint(axes[i, j], parameters[j], parameters[i], limits[j], limits[i])
            _dress(axes[i, j], parameters, i, j)
    figure.align_labels()
    return figure


def _limits(parameter: ParameterDraws) -> tuple[float, float]:
    low, high = np.percentile(parameter.draws, [0.2, 99.8])
    if parameter.truth is not None:
        low, high = min(low, parameter.truth), max(high, parameter.truth)
    margin = 0.06 * (high - low) or 1e-6
    return low - margin, high + margin


def _draw_single(axes, parameter: ParameterDraws, limits) -> None:
    axes.hist(parameter.draws, 30, range=limits, density=True, histtype="step", color=BLUE, linewidth=1.0)
    axes.axvspan(*np.percentile(parameter.draws, [16, 84]), color=PALE, zorder=0)
    axes.axvline(np.median(parameter.draws), color=GREY, linewidth=0.8)
    if parameter.truth is not None:
        axes.axvline(parameter.truth, color=VERMILION, linestyle=(0, (4, 1.5)))
    axes.set_xlim(limits)
    axes.set_ylim(bottom=0)


def _draw_joint(axes, across: ParameterDraws, up: ParameterDraws, x_limits, y_limits) -> None:
    counts, x, y = np.histogram2d(across.draws, up.draws, GRID, (x_limits, y_limits))
    smooth = gaussian_filter(counts, 1.2, mode="constant")
    levels = _levels(smooth, (0.95, 0.68))
    middle_x, middle_y = 0.5 * (x[1:] + x[:-1]), 0.5 * (y[1:] + y[:-1])
    axes.contourf(middle_x, middle_y, smooth.T, [*levels, np.inf], colors=["#BFD7EA", BLUE], alpha=0.85)
    axes.contour(middle_x, middle_y, smooth.T, levels, colors=BLACK, linewidths=0.5)
    if across.truth is not None and up.truth is not None:
        axes.plot(across.truth, up.truth, "s", color=VERMILION, markeredgecolor="white", markeredgewidth=0.6, ms=4.5)
    axes.set_xlim(x_limits)
    axes.set_ylim(y_limits)


def _levels(density: np.ndarray, shares: Sequence[float]) -> list[float]:
    """Heights above which the given shares of the total lie; strictly growing."""
    falling = np.sort(density.ravel())[::-1]
    held = np.cumsum(falling) / falling.sum()
    levels = [float(falling[np.searchsorted(held, share)]) for share in shares]
    return levels if levels[0] < levels[1] else [levels[1] * 0.5, levels[1]]


def _dress(axes, parameters, i: int, j: int) -> None:
    number = len(parameters)
    small = 6 if number > 5 else 7
    axes.xaxis.set_major_locator(MaxNLocator(3, prune="both"))
    axes.yaxis.set_major_locator(MaxNLocator(3, prune="both"))
    axes.tick_params(labelsize=small - 0.5, labelbottom=i == number - 1, labelleft=j == 0 and i > 0)
    axes.tick_params(top=False, right=False, length=2)
    axes.tick_params(axis="both", labelrotation=45)
    if i == j:
        axes.set_yticks([])
    if i == number - 1:
        axes.set_xlabel(_folded(parameters[j].label), fontsize=small, parse_math=False)
    if j == 0 and i > 0:
        axes.set_ylabel(_folded(parameters[i].label), fontsize=small, parse_math=False)


def _folded(label: str) -> str:
    """A label in two lines: the component above the quantity."""
    return label.replace(" ", "\n", 1)


@styled
def prior_posterior(content: PageContent, _part: str = "") -> Figure:
    """Density of every parameter before and after seeing the counts."""
    parameters = content.parameters
    columns = min(4, len(parameters))
    rows = -(-len(parameters) // columns)
    figure = new_figure(1.45 * rows + 0.35)
    axes = figure.subplots(rows, columns, squeeze=False).ravel()
    for panel, parameter in zip(axes, parameters, strict=False):
        _draw_prior_posterior(panel, parameter)
    for panel in axes[len(parameters) :]:
        panel.set_axis_off()
    handles, labels = axes[0].get_legend_handles_labels()
    figure.legend(handles, labels, loc="outside upper center", ncols=3)
    return figure


def _draw_prior_posterior(axes, parameter: ParameterDraws) -> None:
    low, high = _limits(parameter)
    prior_low, prior_high = np.percentile(parameter.prior_draws, [0.5, 99.5])
    low, high = min(low, prior_low), max(high, prior_high)
    grid = np.linspace(low, high, 400)
    after, before = gaussian_kde(parameter.draws)(grid), gaussian_kde(parameter.prior_draws)(grid)
    axes.fill_between(grid, after, color=BLUE, alpha=0.35, linewidth=0)
    axes.plot(grid, after, color=BLUE, label="after the counts")
    axes.plot(grid, before, color=BLACK, linestyle=(0, (4, 2)), label="prior")
    if parameter.truth is not None:
        axes.axvline(parameter.truth, color=VERMILION, linestyle=(0, (1, 1)), linewidth=1.4, label="truth")
    axes.set(xlim=(low, high), yticks=[])
    axes.set_ylim(0, 1.08 * max(after.max(), before.max()))
    axes.xaxis.set_major_locator(MaxNLocator(3))
    axes.set_xlabel(parameter.label, parse_math=False, fontsize=7)


@styled
def recovery(content: PageContent, _part: str = "") -> Figure:
    """(value - truth) / sd of every parameter whose truth is known, with the 68 and 95 % intervals."""
    known = [parameter for parameter in content.parameters if parameter.truth is not None]
    figure = new_figure(0.24 * len(known) + 0.8, 0.7 * WIDTH_INCH)
    axes = figure.add_subplot()
    axes.axvspan(-2, 2, color="#F0F0F0", zorder=0)
    axes.axvspan(-1, 1, color=PALE, zorder=0)
    axes.axvline(0, color=VERMILION, linestyle=(0, (4, 1.5)))
    for i, parameter in enumerate(known):
        scaled = (parameter.draws - parameter.truth) / parameter.draws.std()
        lower_95, lower_68, median, upper_68, upper_95 = np.percentile(scaled, [2.5, 16, 50, 84, 97.5])
        axes.plot([lower_95, upper_95], [i, i], color=BLUE, linewidth=1.0)
        axes.plot([lower_68, upper_68], [i, i], color=BLUE, linewidth=3.2, solid_capstyle="butt")
        axes.plot(median, i, "o", color="white", markeredgecolor=BLACK, ms=4.5, zorder=4)
    axes.set_yticks(range(len(known)), [parameter.label for parameter in known], parse_math=False)
    axes.tick_params(axis="y", right=False)
    axes.set(ylim=(len(known) - 0.4, -0.6), xlabel="(value − truth) / standard deviation of the draws")
    return figure
