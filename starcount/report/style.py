"""The look of all figures: sizes, type and colours; one place."""

import json
import warnings
from collections.abc import Mapping
from contextlib import AbstractContextManager
from functools import wraps
from io import BytesIO
from pathlib import Path

import matplotlib as mpl
from matplotlib.figure import Figure

from starcount.files import write_bytes

BLACK, ORANGE, SKY, GREEN, YELLOW, BLUE, VERMILION, PURPLE = (
    "#000000", "#E69F00", "#56B4E9", "#009E73", "#F0E442", "#0072B2", "#D55E00", "#CC79A7",
)  # fmt: skip
"""Colours that stay apart for colour-blind readers: Okabe & Ito 2008, Color Universal Design."""

GREY, PALE = "#6E6E6E", "#D9D9D9"

LINES = (
    (BLUE, "-"), (VERMILION, (0, (5, 1.5))), (GREEN, (0, (5, 1.5, 1, 1.5))), (PURPLE, (0, (1, 1))),
    (ORANGE, (0, (3, 1))), (SKY, (0, (7, 1.5, 1, 1.5, 1, 1.5))), (GREY, (0, (2, 2))), (BLACK, (0, (1, 3))),
)  # fmt: skip
"""Colour and dashes of the components, in their order; no two share either."""

MARKS = ((BLUE, "o"), (VERMILION, "s"), (GREEN, "^"), (PURPLE, "D"), (ORANGE, "v"), (SKY, "P"), (BLACK, "X"))
"""Colour and marker of classes of points; no two share either."""

DIVERGING = "RdBu_r"
"""The map of signed residuals: ColorBrewer's red-white-blue, safe for colour-blind readers; zero is white."""

AMOUNTS = "YlGnBu"
"""The map of amounts, darker for more: ColorBrewer's yellow-green-blue, safe for colour-blind readers."""

WIDTH_INCH = 175 / 25.4
"""A journal's full page width."""

RC = {
    "font.family": "DejaVu Sans", "font.size": 8, "axes.labelsize": 8, "axes.titlesize": 8, "legend.fontsize": 7,
    "xtick.labelsize": 7, "ytick.labelsize": 7, "xtick.direction": "in", "ytick.direction": "in",
    "xtick.top": True, "ytick.right": True, "axes.linewidth": 0.6, "lines.linewidth": 1.1, "lines.markersize": 3.2,
    "legend.frameon": False, "figure.dpi": 100, "savefig.dpi": 300, "savefig.facecolor": "white",
    "pdf.fonttype": 42, "ps.fonttype": 42, "axes.unicode_minus": True,
}  # fmt: skip
"""Type 42 keeps the text of a PDF editable."""


def style() -> AbstractContextManager:
    """The settings, for the length of a ``with`` block; the user's own are left alone."""
    return mpl.rc_context(RC)


def styled(draw):
    """Make a figure function draw in our style."""

    @wraps(draw)
    def in_style(*args, **kwargs) -> Figure:
        with style():
            return draw(*args, **kwargs)

    return in_style


def new_figure(height_inch: float, width_inch: float = WIDTH_INCH) -> Figure:
    """An empty figure that belongs to no window."""
    return Figure(figsize=(width_inch, height_inch), layout="constrained")


def save_figure(figure: Figure, path: Path, metadata: Mapping) -> tuple[Path, Path]:
    """Write ``path``.pdf and ``path``.png (300 dpi) with the provenance inside; return the two paths.

    The PDF carries it as JSON under Keywords, the PNG under ``provenance``. No times of writing: the same
    figure gives the same bytes.
    """
    words = json.dumps(dict(metadata), sort_keys=True, default=str)
    inside = {
        "pdf": {"Creator": "starcount", "Keywords": words, "CreationDate": None},
        "png": {"Software": "starcount", "provenance": words},
    }
    with style(), warnings.catch_warnings():
        # A user's field names may be in a script that the font lacks; a box stands for such a letter.
        warnings.filterwarnings("ignore", message="Glyph .* missing from font")
        # Lay it out once, not once for each format: that is most of the time a figure takes.
        figure.draw_without_rendering()
        figure.set_layout_engine("none")
        drawn = {suffix: _drawn(figure, suffix, notes) for suffix, notes in inside.items()}
    paths = {suffix: path.with_name(f"{path.name}.{suffix}") for suffix in drawn}
    for suffix, data in drawn.items():
        write_bytes(paths[suffix], data)
    return paths["pdf"], paths["png"]


def _drawn(figure: Figure, suffix: str, notes: Mapping) -> bytes:
    stream = BytesIO()
    figure.savefig(stream, format=suffix, metadata=notes)
    return stream.getvalue()
