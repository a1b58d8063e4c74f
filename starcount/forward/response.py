"""From tables of stars by absolute magnitude and colour to the luminosity matrix.

A star of a cell of absolute magnitude, shifted by a step of the grid in y, falls into a cell of true magnitude: both
are 0.05 mag wide and meet at their edges, because the grid starts where they do. A matrix then says which part of a
true cell is counted in which bin: completeness, photometric error and the bins' own edges. The same holds for colour
cells and the slabs of colour excess, which are as far apart as the cells are wide.
"""

from dataclasses import dataclass

import numpy as np
from scipy.linalg import solveh_banded

from starcount import stars
from starcount.stars import CELL_MAG
from starcount.survey import Group

Y_STEP_MAG = 0.1
_STEPS = round(Y_STEP_MAG / CELL_MAG)
_MARGIN = 12
"""Slabs beyond the ends over which the spline's coefficients are found: an end is forgotten as 0.27^n."""


@dataclass(frozen=True, eq=False)
class Response:
    """What a group's bins take of its stars, at each shift y and each slab of colour excess.

    ``first_cell`` is the first true cell, counted from that of the brightest absolute magnitude at the first y, of
    which stars are counted; ``by_magnitude`` (true cell, node, magnitude bin); ``by_colour`` (slab, node, colour cell,
    colour bin) coefficients of a cubic B-spline along the slabs. The response in colour is linear in true magnitude
    between the nodes. ``gain`` (y, cell) or None: how many objects a system of a dwarf counts as beyond one.
    """

    y_mag: np.ndarray
    excess_mag: np.ndarray
    first_cell: int
    by_magnitude: np.ndarray
    by_colour: np.ndarray
    gain: np.ndarray | None = None

    @property
    def n_bin(self) -> int:
        return self.by_magnitude.shape[2] * self.by_colour.shape[3]

    def slab(self, table: np.ndarray, slab: int, ranges: np.ndarray | None = None) -> np.ndarray:
        """Return the matrix (row, bin) of one slab for a table of stars (layer, temperature, cell, colour cell).

        With a gain the table is a pair (2, ...): all stars, and the dwarfs that may count as more than one. Rows are
        ordered by temperature, shift and layer; ``ranges`` (temperature, 2) are the shifts to be kept, all without.
        """
        if self.gain is None:
            return self._rows(table, slab, ranges, None)
        every, dwarfs = table
        return self._rows(every, slab, ranges, None) + self._rows(dwarfs, slab, ranges, self.gain)

    def _rows(self, table: np.ndarray, slab: int, ranges: np.ndarray | None, gain: np.ndarray | None) -> np.ndarray:
        whole = (0, self.y_mag.size)
        found = [
            self._shifts(table[:, x], slab, *(whole if ranges is None else ranges[x]), gain)
            for x in range(table.shape[1])
        ]
        return np.concatenate([shifts.reshape(-1, self.n_bin) for shifts in found])

    def _shifts(self, table: np.ndarray, slab: int, first: int, end: int, gain: np.ndarray | None) -> np.ndarray:
        """The matrix (y, layer, bin) of some shifts for a table (layer, cell, colour cell)."""
        found = np.zeros((end - first, len(table), self.n_bin))
        occupied = np.flatnonzero(table.any(axis=(0, 2)))
        if not occupied.size:
            return found
        c_lo, c_hi = occupied[0], occupied[-1] + 1
        n_true, n_node, n_m = self.by_magnitude.shape
        # (cell, node, layer, colour bin), so that a range of cells is one block of memory
        folded = np.tensordot(table[:, c_lo:c_hi], self.by_colour[slab], axes=(2, 1)).transpose(1, 2, 0, 3)
        folded = np.ascontiguousarray(folded)
        for i in range(first, end):
            shift = self.first_cell - _STEPS * i
            lo, hi = max(c_lo, shift), min(c_hi, shift + n_true)
            if hi <= lo:
                continue
            taken = self.by_magnitude[lo - shift : hi - shift]
            if gain is not None:
                taken = taken * gain[i, lo:hi, None, None]
            counted = taken.reshape(-1, n_m).T @ folded[lo - c_lo : hi - c_lo].reshape((hi - lo) * n_node, -1)
            found[i - first] = counted.reshape(n_m, len(table), -1).transpose(1, 0, 2).reshape(len(table), -1)
        return found


def make_response(group: Group, y_mag: np.ndarray, excess_mag: np.ndarray | None, gain=None) -> Response:
    """Return the response of a group on a grid of shifts and, in colour, of colour excesses (None: not in colour).

    Raises ``InputError`` where a table of the observation model does not reach over the bins.
    """
    observation, edges = group.observation, group.edges_mag
    bright, faint = observation.reach(edges)
    zero = y_mag[0] + stars.M_EDGES_MAG[0]
    first = int(np.floor((bright - zero) / CELL_MAG + 1e-6))
    last = int(np.ceil((faint - zero) / CELL_MAG - 1e-6))
    true_edges = zero + CELL_MAG * np.arange(first, last + 1)
    landed = observation.magnitude_response(true_edges, edges)
    if excess_mag is None:
        return Response(y_mag, np.zeros(1), first, landed[:, None, :], np.ones((1, 1, 1, 1)), gain)
    nodes = observation.colour_nodes_mag(bright, faint)
    between = _between(0.5 * (true_edges[1:] + true_edges[:-1]), nodes)
    by_colour = _spline_coefficients(
        excess_mag, lambda e: observation.colour_response(nodes, stars.C_EDGES_MAG + e, group.edges_colour_mag)
    )
    return Response(y_mag, excess_mag, first, between[:, :, None] * landed[:, None, :], by_colour, gain)


def _between(m_mag: np.ndarray, nodes_mag: np.ndarray) -> np.ndarray:
    """Weights (m, node) of the linear interpolation between nodes."""
    return np.stack([np.interp(m_mag, nodes_mag, row) for row in np.eye(nodes_mag.size)], axis=-1)


def _spline_coefficients(excess_mag: np.ndarray, response) -> np.ndarray:
    """Coefficients (slab, ...) of the cubic B-spline through the responses at regular excesses (Unser 1999)."""
    step = excess_mag[1] - excess_mag[0]
    around = excess_mag[0] + step * np.arange(-_MARGIN, excess_mag.size + _MARGIN)
    values = np.stack([response(e) for e in around])
    bands = np.stack([np.full(around.size, 1 / 6), np.full(around.size, 2 / 3)])
    bands[1, [0, -1]] += 1 / 6  # level beyond the ends, so that a constant response is constant to rounding
    solved = solveh_banded(bands, values.reshape(around.size, -1)).reshape(values.shape)
    return np.ascontiguousarray(solved[_MARGIN:-_MARGIN])


def excess_grid(
    largest_mag: float, edges_colour_mag: np.ndarray, bluest_mag: float, reach_mag: float = 0.0
) -> np.ndarray:
    """Return the colour excesses (slab,) of the grid, up to ``largest_mag`` or to where no star meets an edge any more.

    ``bluest_mag`` is the bluest colour of a star, ``reach_mag`` how far from its colour it may be catalogued. They
    start so that the first finite edge of the bins meets edges of the colour cells.
    """
    finite = edges_colour_mag[np.isfinite(edges_colour_mag)]
    offset = 0.0 if not finite.size else (finite[0] - stars.C_EDGES_MAG[0]) % CELL_MAG
    last = largest_mag if not finite.size else min(largest_mag, finite[-1] - bluest_mag + reach_mag)
    first = offset - 3.0 * CELL_MAG
    n = int(np.ceil((max(last, 0.0) - first) / CELL_MAG)) + 4
    return first + CELL_MAG * np.arange(n)
