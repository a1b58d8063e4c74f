"""Products of the written parts of the grid in colour with the luminosity matrix, and their transposes.

The matrix holds, for each slab and class, the rows of a range of shifts: those that any field can reach. ``kept``
(slab, class, 3) is the first of its rows, and the range.
"""

import numpy as np

from starcount.compilation import kernel
from starcount.forward.kernels.slabs import block_start


@kernel
def meeting(slab, c, spans, kept, shape):
    """Where a written part of the grid begins, the row of the matrix there, and how many rows meet."""
    n = shape[3]
    low, high = max(spans[slab, c, 0], kept[slab, c, 1]), min(spans[slab, c, 1], kept[slab, c, 2])
    in_grid = block_start(slab, c, shape) + low * n
    return in_grid, kept[slab, c, 0] + (low - kept[slab, c, 1]) * n, max(high - low, 0) * n


@kernel
def multiply_spans(grid, size, W, spans, kept, shape, counts):
    """Add grid (field, row) times W (row, bin) to ``counts`` (field, bin), over the written parts."""
    for slab in range(spans.shape[0]):
        for c in range(spans.shape[1]):
            i, j, n = meeting(slab, c, spans, kept, shape)
            if n > 0:
                counts += np.dot(np.ascontiguousarray(grid[:size, i : i + n]), W[j : j + n])


@kernel
def multiply_spans_back(wanted, W, spans, kept, shape, back):
    """Write the cotangent of the grid (field, row), over the written parts, from that of the counts (field, bin)."""
    for slab in range(spans.shape[0]):
        for c in range(spans.shape[1]):
            i, j, n = meeting(slab, c, spans, kept, shape)
            if n > 0:
                back[: wanted.shape[0], i : i + n] = np.dot(wanted, W[j : j + n].T)


@kernel
def matrix_from_spans(grid, size, wanted, spans, kept, shape, begin, g_W):
    """Add the cotangent of W, over the written parts, of one block of fields; write it if it is the first."""
    for slab in range(spans.shape[0]):
        for c in range(spans.shape[1]):
            i, j, n = meeting(slab, c, spans, kept, shape)
            if n > 0:
                stars = np.ascontiguousarray(grid[:size, i : i + n]).T
                if begin:
                    np.dot(stars, wanted, g_W[j : j + n])
                else:
                    g_W[j : j + n] += np.dot(stars, wanted)
