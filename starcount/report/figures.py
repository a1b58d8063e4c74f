"""The figures of a page. To add one: write a function (content, part) -> Figure, and a row of FIGURES."""

from collections.abc import Callable
from dataclasses import dataclass

from matplotlib.figure import Figure

from starcount.report import colours, counts, curves, posteriors, sky
from starcount.report.content import PageContent
from starcount.report.style import VERMILION, style

FAILED = "FAILED CHECKS: the draws of this fit do not represent its answer"
INVENTED = "invented data"


@dataclass(frozen=True)
class FigureKind:
    """How a figure is drawn, of which parts of the content there is one, and the words that go with it.

    ``parts`` returns the names of groups, or ("",) where one figure shows everything, or () where there is
    nothing to show. ``caption`` and ``alt`` may hold {part}.
    """

    draw: Callable[[PageContent, str], Figure]
    parts: Callable[[PageContent], tuple[str, ...]]
    caption: str
    alt: str


def _of_fits(content: PageContent) -> tuple[str, ...]:
    return ("",) if content.parameters else ()


def _of_known_truth(content: PageContent) -> tuple[str, ...]:
    return ("",) if any(parameter.truth is not None for parameter in content.parameters) else ()


FIGURES = {
    "counts": FigureKind(
        counts.counts_by_latitude,
        lambda content: content.groups,
        caption="Group {part}: stars per square degree and magnitude, the fields of a latitude band added up. Steps: "
        "the model and its components. Points: counts with Poisson errors. Below: ln(counted / expected); triangles "
        "point to bins off the scale; the grey band holds 95 % of the draws of the model, where it was fitted.",
        alt="Counts per magnitude bin by latitude band, with model components and residuals, group {part}",
    ),
    "worst-fields": FigureKind(
        counts.counts_of_worst_fields,
        lambda content: content.counted_groups,
        caption="Group {part}: the same for the single fields whose totals are least probable, worst first.",
        alt="Counts per magnitude bin of the fields that fit worst, group {part}",
    ),
    "colour-magnitude": FigureKind(
        colours.colour_magnitude,
        lambda content: content.coloured_groups,
        caption="Group {part}: colour-magnitude diagrams, the fields of a latitude band added up. Shades: stars per "
        "square degree and square magnitude, relative to the densest expected cell of the band; white: no star. Where "
        "there are counts: counted, expected, and ln(counted / expected) in cells with 25 stars or more, counted or "
        "expected; dots mark cells more than 3 standard deviations of the prediction off, noise included; grey: not "
        "used, or too few stars for a ratio. Bins that are open to one side lie behind a broken line, with an arrow; "
        "they are drawn as wide as the bin beside them, and divided by that width.",
        alt="Colour-magnitude diagrams by latitude band, counted, expected and their ratio, group {part}",
    ),
    "colours": FigureKind(
        colours.colour_distributions,
        lambda content: content.coloured_groups,
        caption="Group {part}: stars per square degree and magnitude of colour, in slices of magnitude (columns) and "
        "bands of latitude (rows), fields added up. Steps: the model and its components. Points: counts with Poisson "
        "errors. The grey band holds 95 % of the draws of the model, where it was fitted. Open bins as in the "
        "colour-magnitude diagram; bins that no field uses are in no sum.",
        alt="Distribution of colours by magnitude and latitude, with model components, group {part}",
    ),
    "sky": FigureKind(
        sky.sky_residuals,
        lambda content: content.counted_groups,
        caption="Group {part}: ln(counted / expected) of every field, all bins added up, in Galactic coordinates "
        "(Mollweide, centre l = 0, l growing to the left). The mark's shape gives the significance: |pull| in standard "
        "deviations of the prediction, noise included. Arrows at the colour bar: fields beyond its ends.",
        alt="Sky map of the residuals of group {part}",
    ),
    "trends": FigureKind(
        sky.residual_trends,
        lambda content: content.counted_groups,
        caption="Group {part}: ln(counted / expected) against magnitude in latitude bands, north and south apart (bins "
        "with 10 stars or more, shifted sideways for legibility), and of single fields against latitude. Bars: one "
        "standard deviation of the prediction, noise included.",
        alt="Residuals against magnitude, north and south, and against latitude, group {part}",
    ),
    "corner": FigureKind(
        posteriors.corner,
        _of_fits,
        caption="Pairs of the parameters that the counts narrowed most, at most eight. Regions hold 68 and 95 % of the "
        "draws; on the diagonal grey marks the central 68 %, the grey line the median. Squares and broken lines: the "
        "truth, where known.",
        alt="Corner plot of the main parameters",
    ),
    "priors": FigureKind(
        posteriors.prior_posterior,
        _of_fits,
        caption="Every fitted parameter before (broken) and after (filled) seeing the counts. Curves that lie on each "
        "other mean that the counts say nothing about the parameter. Dotted: the truth, where known.",
        alt="Density of each parameter under its prior and after the fit",
    ),
    "curves": FigureKind(
        curves.luminosity_curves,
        lambda content: ("",) if content.curves else (),
        caption="ln of the factor that the fit puts on the luminosity functions, against M_V. Filled: "
        "68 and 95 % of the draws; broken lines: 95 % of the prior. A curve far from zero says that a table or the "
        "densities are wrong.",
        alt="Fitted corrections of the luminosity functions against absolute visual magnitude",
    ),
    "recovery": FigureKind(
        posteriors.recovery,
        _of_known_truth,
        caption="Truth against recovery: how far the draws of each parameter lie from the stated truth, in their own "
        "standard deviations. Thick bars 68 %, thin bars 95 %; the shaded bands are one and two standard deviations.",
        alt="Fitted parameters relative to the truth, in standard deviations",
    ),
}


def draw_figure(name: str, content: PageContent, part: str = "") -> Figure:
    """Draw a figure of the table, marked where its data are invented or its fit failed."""
    figure = FIGURES[name].draw(content, part)
    words = [FAILED] * content.failed + [INVENTED] * content.prediction.survey.invented
    if words:
        # A figure with fixed margins keeps no room below for these words; the corner plot's upper right is empty.
        place = {} if figure.get_layout_engine() else {"y": 0.98, "va": "top"}
        with style():
            figure.supxlabel("; ".join(words), fontsize=7, color=VERMILION, x=0.985, ha="right", **place)
    return figure
