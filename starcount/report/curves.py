"""Figure of the fitted corrections of the luminosity functions."""

import numpy as np
from matplotlib.figure import Figure

from starcount.report.content import CurveDraws, PageContent
from starcount.report.style import BLACK, BLUE, GREY, new_figure, styled


@styled
def luminosity_curves(content: PageContent, _part: str = "") -> Figure:
    """ln of the factor on the luminosity functions against absolute magnitude, with 68 and 95 % of draws and prior."""
    figure = new_figure(2.5)
    axes = figure.subplots(1, len(content.curves), sharey=True, squeeze=False)[0]
    for panel, curve in zip(axes, content.curves, strict=True):
        _draw_curve(panel, curve)
    axes[0].set_ylabel("ln(factor)")
    figure.legend(*axes[0].get_legend_handles_labels(), loc="outside upper center", ncols=4)
    return figure


def _draw_curve(axes, curve: CurveDraws) -> None:
    low_95, low_68, median, high_68, high_95 = np.percentile(curve.draws, [2.5, 16, 50, 84, 97.5], axis=0)
    axes.axhline(0, color=GREY, linewidth=0.7)
    axes.fill_between(curve.knots_mag, low_95, high_95, color=BLUE, alpha=0.2, linewidth=0, label="95 %")
    axes.fill_between(curve.knots_mag, low_68, high_68, color=BLUE, alpha=0.35, linewidth=0, label="68 %")
    axes.plot(curve.knots_mag, median, "o-", color=BLUE, label="median")
    for edge, label in zip(np.percentile(curve.prior_draws, [2.5, 97.5], axis=0), ("prior, 95 %", None), strict=True):
        axes.plot(curve.knots_mag, edge, color=BLACK, linestyle=(0, (4, 2)), label=label)
    axes.set_xticks(curve.knots_mag[::2])
    axes.set_xlabel("absolute visual magnitude [mag]")
    axes.set_title(f"{curve.name}: {', '.join(curve.components)}", loc="left", parse_math=False)
