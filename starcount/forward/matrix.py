"""The luminosity matrix of a group: its whole, its pieces for a fit, and its parts by class of stars."""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from starcount.forward import kernels
from starcount.forward.knots import KNOTS_MAG


@dataclass(frozen=True, eq=False)
class LuminosityMatrix:
    """W (row, bin), row by row of the flat grid (slab, temperature, y, layer).

    ``table_of(knot)`` returns the stars weighted by the hat function of a knot (None: all, unweighted);
    ``matrix_of(table, slab)`` a slab's matrix (row, bin). ``layer`` (row,) is the layer of each row of W, ``width`` the
    number of bins of one magnitude bin.
    """

    n_slab: int
    layer: np.ndarray
    width: int
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
    def pieces(self) -> tuple[np.ndarray, ...]:
        """The number of bins (1,), then ``row``, ``bin``, ``first`` and ``pieces`` as in ``kernels.luminosity``."""
        tables = [self.table_of(knot) for knot in range(KNOTS_MAG.size)]
        found, n_row, n_bin = [], 0, 0
        for slab in range(self.n_slab):
            knots = np.stack([self.matrix_of(table, slab) for table in tables], axis=1)
            found.append(_blocks(knots, self.width, n_row))
            n_row, n_bin = n_row + len(knots), knots.shape[2]
        n_piece = max(pieces.shape[1] for *_, pieces in found)
        row, bin, first, pieces = (
            np.concatenate(column) for column in zip(*(_widened(*one, n_piece) for one in found), strict=True)
        )
        return np.array([n_bin]), row, bin, first, np.ascontiguousarray(pieces)

    def with_factors(self, factors: np.ndarray, owner: np.ndarray) -> np.ndarray:
        """Return W with the factors (curve, knot) on the luminosity functions; ``owner`` (layer,) their curves."""
        return kernels.luminosity(np.ascontiguousarray(factors, float), *self.arrays(owner))

    def arrays(self, owner: np.ndarray) -> tuple[np.ndarray, ...]:
        """Return what ``kernels.luminosity`` takes after the factors; ``owner`` (layer,) is the curve of each layer."""
        n_bin, *blocks = self.pieces
        return n_bin, owner[self.layer], *blocks


Blocks = tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]
"""Row, bin and first knot (block,), and pieces (block, piece, bin of the block)."""


def _blocks(knots: np.ndarray, width: int, first_row: int) -> Blocks:
    """The blocks of ``width`` bins of a slab's matrices (row, knot, bin) that are not zero; rows from ``first_row``."""
    n_row, n_knot, n_bin = knots.shape
    blocks = knots.reshape(n_row, n_knot, n_bin // width, width).transpose(0, 2, 1, 3)
    matters = blocks.any(axis=3)  # (row, magnitude bin, knot)
    row, m_bin = np.nonzero(matters.any(axis=2))
    matters, blocks = matters[row, m_bin], blocks[row, m_bin]
    first, last = matters.argmax(axis=1), n_knot - 1 - matters[:, ::-1].argmax(axis=1)
    first, pieces = _taken(blocks, first, int((last - first).max(initial=0)) + 1)
    return row + first_row, m_bin * width, first, pieces


def _taken(blocks: np.ndarray, first: np.ndarray, n_piece: int) -> tuple[np.ndarray, np.ndarray]:
    first = np.minimum(first, blocks.shape[1] - n_piece)
    at = first[:, None] + np.arange(n_piece)
    return first, np.take_along_axis(blocks, at[:, :, None], axis=1)


def _widened(row, bin, first, pieces, n_piece: int) -> Blocks:
    """The same blocks with ``n_piece`` pieces."""
    blocks = np.zeros((row.size, KNOTS_MAG.size, pieces.shape[2]))
    at = first[:, None] + np.arange(pieces.shape[1])
    np.put_along_axis(blocks, at[:, :, None], pieces, axis=1)
    return row, bin, *_taken(blocks, first, n_piece)
