"""The luminosity matrix of a group: its whole, its pieces for a fit, and its parts by class of stars."""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from starcount.forward import kernels
from starcount.forward.knots import KNOTS_MAG


@dataclass(frozen=True, eq=False)
class Rows:
    """The rows of the grid at one shift and excess: a layer's stars of one class of temperature.

    ``layer`` and ``temperature`` (row,) are indices; rows are ordered by temperature, and ``class_first``
    (temperature + 1,) is where each begins.
    """

    layer: np.ndarray
    temperature: np.ndarray
    class_first: np.ndarray

    def take(self, table: np.ndarray) -> np.ndarray:
        """Return the rows (row, cell, colour cell) of a table (layer, temperature, cell, colour cell)."""
        return table[self.layer, self.temperature]

    def flat(self, blocks: np.ndarray, ranges: np.ndarray | None = None) -> np.ndarray:
        """Return matrices (y, row, ...) of one slab in the order of the flat grid: (temperature, y, row of it).

        ``ranges`` (temperature, 2) are the shifts to be kept; all without.
        """
        n_y, found = len(blocks), []
        for c, (a, b) in enumerate(zip(self.class_first[:-1], self.class_first[1:], strict=True)):
            low, high = (0, n_y) if ranges is None else ranges[c]
            found.append(blocks[low:high, a:b].reshape(-1, *blocks.shape[2:]))
        return np.concatenate(found)


def occupied_rows(table: np.ndarray) -> Rows:
    """Return the rows of a table (layer, temperature, cell, colour cell) that hold stars."""
    temperature, layer = np.nonzero(table.any(axis=(2, 3)).T)
    first = np.searchsorted(temperature, np.arange(table.shape[1] + 1))
    return Rows(layer, temperature, first)


@dataclass(frozen=True, eq=False)
class LuminosityMatrix:
    """W (row, bin), row by row of the flat grid (slab, temperature, y, row of the temperature).

    ``table_of(knot)`` returns the stars weighted by the hat function of a knot (None: all, unweighted);
    ``matrix_of(table, slab)`` a slab's matrix (row, bin). ``layer`` (row,) is the layer of each row of W.
    """

    n_slab: int
    layer: np.ndarray
    table_of: Callable[[int | None], np.ndarray]
    matrix_of: Callable[[np.ndarray, int], np.ndarray]

    @cached_property
    def whole(self) -> np.ndarray:
        """With the luminosity functions as they are."""
        return self.of(self.table_of(None))

    def of(self, table: np.ndarray) -> np.ndarray:
        """Return W of a table of stars."""
        return np.concatenate([self.matrix_of(table, slab) for slab in range(self.n_slab)])

    @cached_property
    def pieces(self) -> tuple[np.ndarray, np.ndarray]:
        """``first`` (row, bin) and ``pieces`` (row, bin, piece), as ``kernels.luminosity`` takes them."""
        tables = [self.table_of(knot) for knot in range(KNOTS_MAG.size)]
        slabs = ([self.matrix_of(table, slab) for table in tables] for slab in range(self.n_slab))
        found = [_side_by_side(np.stack(knots, axis=-1)) for knots in slabs]
        n_piece = max(pieces.shape[2] for _, pieces in found)
        widened = [_widened(first, pieces, n_piece) for first, pieces in found]
        return np.concatenate([first for first, _ in widened]), np.concatenate([pieces for _, pieces in widened])

    def with_factors(self, factors: np.ndarray, owner: np.ndarray) -> np.ndarray:
        """Return W with the factors (curve, knot) on the luminosity functions; ``owner`` (layer,) their curves."""
        return kernels.luminosity(np.ascontiguousarray(factors, float), owner[self.layer], *self.pieces)


def _side_by_side(knots: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """The first knot that matters (row, bin) of (row, bin, knot), and it with those after it (row, bin, piece)."""
    matters = knots != 0.0
    any_of = matters.any(axis=2)
    first = np.where(any_of, matters.argmax(axis=2), 0)
    last = np.where(any_of, knots.shape[2] - 1 - matters[..., ::-1].argmax(axis=2), 0)
    return _taken(knots, first, int((last - first).max(initial=0)) + 1)


def _taken(knots: np.ndarray, first: np.ndarray, n_piece: int) -> tuple[np.ndarray, np.ndarray]:
    first = np.minimum(first, knots.shape[2] - n_piece)
    return first, np.take_along_axis(knots, first[..., None] + np.arange(n_piece), axis=2)


def _widened(first: np.ndarray, pieces: np.ndarray, n_piece: int) -> tuple[np.ndarray, np.ndarray]:
    """The same with ``n_piece`` pieces."""
    knots = np.zeros((*first.shape, KNOTS_MAG.size))
    np.put_along_axis(knots, first[..., None] + np.arange(pieces.shape[2]), pieces, axis=2)
    return _taken(knots, first, n_piece)
