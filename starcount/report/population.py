"""A population on one page: its function by class, its colour-magnitude diagram, and the tables behind them."""

from dataclasses import dataclass

import numpy as np
from astropy import units as u
from astropy.table import QTable
from matplotlib.colors import LogNorm
from matplotlib.figure import Figure

from starcount.report.style import LINES, PALE, new_figure, styled

STEP_MAG = 0.1
"""Width of the bins of the figure in magnitude."""

DECADES = 5.0
"""Range of the axis of the function and of the shades, in powers of ten below the highest value."""

TABLE_STEPS_MAG = (0.1, 0.05)
"""Bins of the colour-magnitude table, in magnitude and in colour."""

HELD = 0.9
"""The outline of a class holds this part of its stars."""


@dataclass(frozen=True, eq=False)
class PopulationTable:
    """Stars (class, cell, colour cell) of a population in a band; without a ``colour`` one colour cell holds all.

    ``per`` says per what they are: "system with 4.5 < M_V < 8.5", or "pc3". Edges in mag, (cell + 1,).
    """

    name: str
    band: str
    colour: tuple[str, str] | None
    per: str
    classes: tuple[str, ...]
    M_edges_mag: np.ndarray
    C_edges_mag: np.ndarray
    stars: np.ndarray

    @property
    def held(self) -> list[int]:
        """The classes that hold stars."""
        return np.flatnonzero(self.stars.any(axis=(1, 2))).tolist()

    def in_magnitude(self, step_mag: float) -> tuple[np.ndarray, np.ndarray]:
        """Return edges (bin + 1,) and stars (class, bin) in bins of magnitude, without empty ends."""
        edges, stars = _coarser(self.M_edges_mag, self.stars.sum(axis=2), 1, step_mag)
        return _without_empty_ends(edges, stars, 1)

    def in_colour(self, M_step_mag: float, C_step_mag: float) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Return edges in magnitude and colour, and stars (class, bin, colour bin), without empty ends."""
        M_edges, stars = _coarser(self.M_edges_mag, self.stars, 1, M_step_mag)
        C_edges, stars = _coarser(self.C_edges_mag, stars, 2, C_step_mag)
        M_edges, stars = _without_empty_ends(M_edges, stars, 1)
        C_edges, stars = _without_empty_ends(C_edges, stars, 2)
        return M_edges, C_edges, stars


def _coarser(edges: np.ndarray, stars: np.ndarray, axis: int, step_mag: float) -> tuple[np.ndarray, np.ndarray]:
    """Add up cells to bins whose edges are multiples of the step; the end bins may be narrower."""
    first = np.unique(
        np.concatenate([[0], np.flatnonzero(np.abs(edges / step_mag - np.round(edges / step_mag)) < 1e-6)])
    )
    first = first[first < edges.size - 1]
    return np.append(edges[first], edges[-1]), np.add.reduceat(stars, first, axis=axis)


def _without_empty_ends(edges: np.ndarray, stars: np.ndarray, axis: int) -> tuple[np.ndarray, np.ndarray]:
    others = tuple(k for k in range(stars.ndim) if k != axis)
    filled = np.flatnonzero(stars.any(axis=others))
    kept = slice(filled[0], filled[-1] + 1) if filled.size else slice(0, 1)
    return edges[kept.start : kept.stop + 1], stars[
        tuple(kept if k == axis else slice(None) for k in range(stars.ndim))
    ]


def function_columns(table: PopulationTable) -> QTable:
    """The function: stars of each class and of all in the cells of magnitude, per magnitude."""
    edges, stars = table.in_magnitude(0.05)
    unit = 1 / u.mag / (u.pc**3 if table.per == "pc3" else 1)
    columns = {"M_lo": edges[:-1] * u.mag, "M_hi": edges[1:] * u.mag}
    columns |= {table.classes[c]: stars[c] / np.diff(edges) * unit for c in table.held}
    columns["all"] = stars.sum(axis=0) / np.diff(edges) * unit
    return QTable(columns, meta={"band": table.band, "per": table.per})


def colour_columns(table: PopulationTable) -> QTable:
    """The colour-magnitude table, as a population file of kind "colour table" takes it: rows that tile each class."""
    M_edges, C_edges, stars = table.in_colour(*TABLE_STEPS_MAG)
    rows = []
    for c in table.held:
        magnitudes = np.flatnonzero(stars[c].any(axis=1))
        for m in range(magnitudes[0], magnitudes[-1] + 1):
            colours = np.flatnonzero(stars[c, m]) if stars[c, m].any() else np.array([0])
            for k in range(colours[0], colours[-1] + 1):
                limits = (M_edges[m], M_edges[m + 1], C_edges[k], C_edges[k + 1])
                rows.append((table.classes[c], *np.round(limits, 2), stars[c, m, k]))
    names, *numbers = zip(*rows, strict=True)
    columns = {"class": list(names)}
    columns |= {name: np.array(x) * u.mag for name, x in zip(("M_lo", "M_hi", "c_lo", "c_hi"), numbers, strict=False)}
    columns["n"] = np.array(numbers[-1])
    return QTable(columns, meta={"band": table.band, "colour": list(table.colour), "per": table.per})


@styled
def population_figure(table: PopulationTable) -> Figure:
    """The function by class and, where there is a colour, the density of stars in colour and magnitude."""
    figure = new_figure(3.3)
    panels = figure.subplots(1, 2 if table.colour else 1, squeeze=False)[0]
    _draw_function(panels[0], table)
    if table.colour:
        _draw_diagram(figure, panels[1], table)
    handles, labels = panels[0].get_legend_handles_labels()
    figure.legend(handles, labels, loc="outside upper center", ncols=len(labels), columnspacing=1.3, handlelength=2.6)
    panels[0].set_title(f"{table.name} in {table.band}", loc="left", parse_math=False)
    return figure


def _looks(table: PopulationTable) -> list[tuple[int, str, object]]:
    """Class, colour and dashes of every class, the same in all figures, whichever classes there are."""
    return [(c, *LINES[c]) for c in table.held]


def _per(table: PopulationTable, unit: str) -> str:
    return f"stars / ({unit} pc³)" if table.per == "pc3" else f"stars / {unit}, per system with 4.5 < $M_V$ < 8.5"


def _draw_function(axes, table: PopulationTable) -> None:
    edges, stars = table.in_magnitude(STEP_MAG)
    density = np.where(stars > 0, stars, np.nan) / np.diff(edges)  # no line where there is nothing
    total = np.nansum(density, axis=0)
    axes.stairs(np.where(total > 0, total, np.nan), edges, color=PALE, linewidth=3.0, label="all", baseline=None)
    for c, colour, dashes in _looks(table):
        axes.stairs(density[c], edges, color=colour, linestyle=dashes, label=table.classes[c], baseline=None)
    top = total.max()
    axes.set(yscale="log", ylim=(top / 10**DECADES, 3 * top), xlim=edges[[0, -1]], ylabel=_per(table, "mag"))
    axes.set_xlabel(f"absolute magnitude in {table.band} [mag]", parse_math=False)


def _draw_diagram(figure: Figure, axes, table: PopulationTable) -> None:
    M_edges, C_edges, stars = table.in_colour(STEP_MAG, 0.05)
    density = stars.sum(axis=0) / np.diff(M_edges)[:, None] / np.diff(C_edges)
    top = density.max()
    shown = np.ma.masked_less(density, top / 10**DECADES)
    # Grey, so that the colours of the classes stand out.
    mesh = axes.pcolormesh(C_edges, M_edges, shown, norm=LogNorm(top / 10**DECADES, top), cmap="Greys", rasterized=True)
    for c, colour, dashes in _looks(table):
        _outline(axes, M_edges, C_edges, stars[c], colour, dashes)
    rows, columns = (np.flatnonzero((~np.ma.getmaskarray(shown)).any(axis=k)) for k in (1, 0))
    axes.set(xlim=C_edges[[columns[0], columns[-1] + 1]], ylim=M_edges[[rows[-1] + 1, rows[0]]])
    axes.set_xlabel(f"{' − '.join(table.colour)} [mag], lines around {HELD:.0%} of each class", parse_math=False)
    axes.set_ylabel(f"absolute magnitude in {table.band} [mag]", parse_math=False)
    figure.colorbar(mesh, ax=axes, extend="min", label=_per(table, "mag²"), aspect=30, pad=0.02)


def _outline(axes, M_edges, C_edges, stars: np.ndarray, colour: str, dashes) -> None:
    """Draw the contour of equal density around the part ``HELD`` of the stars, on a white ground."""
    falling = np.sort(stars.ravel())[::-1]
    level = falling[np.searchsorted(np.cumsum(falling), HELD * falling.sum())]
    middles = [0.5 * (edges[1:] + edges[:-1]) for edges in (C_edges, M_edges)]
    if 0 < level < stars.max():
        axes.contour(*middles, stars, levels=[level], colors=["white"], linewidths=2.2)
        axes.contour(*middles, stars, levels=[level], colors=[colour], linestyles=[dashes], linewidths=1.0)
