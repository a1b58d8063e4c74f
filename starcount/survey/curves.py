"""How well the stars of a group were seen: completeness, photometric error, error of the colour, as tables."""

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True, eq=False)
class Completeness:
    """The probability that a star of true magnitude ``m_mag`` (node,), and colour ``c_mag`` if given, is counted.

    ``share`` (node,), or (node, colour node) with ``c_mag`` (colour node,). Linear between the nodes, constant beyond
    the last colours. Saturation is the same curve falling at its bright end.
    """

    m_mag: np.ndarray
    share: np.ndarray
    c_mag: np.ndarray | None = None

    def at(self, m_mag, c_mag) -> np.ndarray:
        """The probability (k, colour) at true magnitudes (k,) and true colours (colour,)."""
        return on_grid(self.m_mag, self.c_mag, self.share, m_mag, c_mag)

    def in_cells(self, m_mag, colour_edges_mag) -> np.ndarray:
        """Means (k, cell) over colour cells, between edges (cell + 1,), at true magnitudes (k,); needs ``c_mag``."""
        rows = along(self.m_mag, self.share, m_mag)
        return np.array([mean_between(self.c_mag, row, colour_edges_mag) for row in rows])


@dataclass(frozen=True, eq=False)
class PhotometricError:
    """Catalogued minus true magnitude, by true magnitude ``m_mag``: mean and standard deviation, all (node,).

    Linear between the nodes and constant beyond them.
    """

    m_mag: np.ndarray
    offset_mag: np.ndarray
    scatter_mag: np.ndarray

    def at(self, m_mag) -> tuple[np.ndarray, np.ndarray]:
        """Offset and scatter (mag) at true magnitudes."""
        return np.interp(m_mag, self.m_mag, self.offset_mag), np.interp(m_mag, self.m_mag, self.scatter_mag)


@dataclass(frozen=True, eq=False)
class ColourError:
    """Catalogued minus true colour, by true magnitude ``m_mag`` (node,) and, if given, true colour ``c_mag``.

    Mean and standard deviation (node,), or (node, colour node) with ``c_mag`` (colour node,). Linear between the
    nodes and constant beyond them. Independent of the error of the magnitude.
    """

    m_mag: np.ndarray
    offset_mag: np.ndarray
    scatter_mag: np.ndarray
    c_mag: np.ndarray | None = None

    def at(self, m_mag, c_mag) -> tuple[np.ndarray, np.ndarray]:
        """Offset and scatter (k, colour) in mag, at true magnitudes (k,) and true colours (colour,)."""
        place = (m_mag, c_mag)
        offset_mag = on_grid(self.m_mag, self.c_mag, self.offset_mag, *place)
        return offset_mag, on_grid(self.m_mag, self.c_mag, self.scatter_mag, *place)


def on_grid(x: np.ndarray, c: np.ndarray | None, table: np.ndarray, at, at_c) -> np.ndarray:
    """A table over x (node,), or x and c (node, colour node), at points (k,) and colours (colour,); (k, colour)."""
    rows = along(x, table, at)
    return np.repeat(rows[:, None], len(at_c), axis=1) if c is None else along(c, rows.T, at_c).T


def along(x: np.ndarray, y: np.ndarray, at) -> np.ndarray:
    """Straight lines through (x (node,), y (node, ...)) at points (k,), constant beyond; (k, ...)."""
    at = np.asarray(at, float)
    lower = np.clip(np.searchsorted(x, at, side="right") - 1, 0, x.size - 2)
    weight = np.clip((at - x[lower]) / (x[lower + 1] - x[lower]), 0.0, 1.0)
    weight = weight.reshape(weight.shape + (1,) * (y.ndim - 1))
    return y[lower] * (1.0 - weight) + y[lower + 1] * weight


def mean_between(x: np.ndarray, y: np.ndarray, edges) -> np.ndarray:
    """Means, between neighbouring edges, of the straight lines through (x, y), constant beyond them."""
    knots = np.union1d(x, edges)
    heights = np.interp(knots, x, y)
    total = np.concatenate([[0.0], np.cumsum(np.diff(knots) * (heights[1:] + heights[:-1]) / 2.0)])
    return np.diff(np.interp(edges, knots, total)) / np.diff(edges)
