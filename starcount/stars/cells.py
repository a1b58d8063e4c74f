"""The cells of absolute magnitude and colour that every luminosity function is spread over."""

import numpy as np
from scipy.interpolate import PchipInterpolator

from starcount.constants import EVOLVED_CLASSES, REFERENCE_WINDOW_MV_MAG, STAR_CLASSES

CLASSES = STAR_CLASSES
"""What a star is: on the main sequence; leaving it, up the giant branch, burning helium in its core; a white dwarf."""

EVOLVED = tuple(CLASSES.index(name) for name in EVOLVED_CLASSES)
"""The classes that "evolved" stands for, as indices of ``CLASSES``."""

M_EDGES_MAG = np.round(np.linspace(-8.0, 22.0, 601), 2)
"""Edges of the cells of absolute magnitude, (cell + 1,)."""
M_EDGES_MAG.setflags(write=False)

M_MIDDLE_MAG = (M_EDGES_MAG[1:] + M_EDGES_MAG[:-1]) / 2
"""Middles of the cells of absolute magnitude, (cell,)."""
M_MIDDLE_MAG.setflags(write=False)

C_EDGES_MAG = np.round(np.linspace(-1.5, 7.0, 171), 2)
"""Edges of the cells of intrinsic colour, (colour cell + 1,): the end cells also hold everything beyond."""
C_EDGES_MAG.setflags(write=False)

CELL_MAG = 0.05
"""Width of a cell of magnitude and of one of colour."""


def members(word: str) -> tuple[int, ...]:
    """Return the indices of the classes that a word of ``CLASS_WORDS`` stands for."""
    return EVOLVED if word == "evolved" else (CLASSES.index(word),)


def to_cells(edges_mag: np.ndarray, totals: np.ndarray) -> np.ndarray:
    """Spread the totals (row,) between ``edges_mag`` (row + 1,) over the cells; return (cell,).

    The cumulative is interpolated by monotone cubics (Fritsch & Carlson 1980), so no cell is negative and every row
    whose edges are cell edges keeps its total.
    """
    cumulative = np.concatenate([[0.0], np.cumsum(totals)])
    if len(totals) == 1:
        at_edges = np.interp(M_EDGES_MAG, edges_mag, cumulative)
    else:
        inside = np.clip(M_EDGES_MAG, edges_mag[0], edges_mag[-1])
        at_edges = PchipInterpolator(edges_mag, cumulative)(inside)
    return np.maximum(np.diff(at_edges), 0.0)  # rounding only: the cumulative never falls


def cell_range(M_lo_mag: float, M_hi_mag: float) -> slice:
    """Return the cells between two cell edges."""
    first, last = np.round((np.array([M_lo_mag, M_hi_mag]) - M_EDGES_MAG[0]) / CELL_MAG).astype(int)
    return slice(first, last)


def window(lf_V: np.ndarray) -> float:
    """Return the stars with 4.5 < M_V < 8.5 in a V-band luminosity function (class, cell), without white dwarfs."""
    cells = cell_range(*REFERENCE_WINDOW_MV_MAG)
    return float(lf_V[: CLASSES.index("white dwarf"), cells].sum())
