"""The projection: expected counts of many fields from the flat vector of a Galaxy's numbers.

Fields go in blocks: density, scatter and matrix product of a block stay in cache. Kernels are serial, release the GIL,
allocate their own work space and hold no state, so they may be called from any thread. The trailing ``arrays`` are
``Projection.arrays``, described there. Counts in magnitude only have one slab of colour excess, and are multiplied
whole.
"""

import numpy as np

from starcount.compilation import kernel
from starcount.forward.kernels.density import layer_numbers, line_stars
from starcount.forward.kernels.grid import scatter
from starcount.forward.kernels.products import multiply_spans
from starcount.forward.kernels.slabs import block_of, clear_spans, scatter_in_colour
from starcount.vector_math import exp

BLOCK = 32  # fields; 16 to 64 measured alike, more leaves the second-level cache
BLOCK_IN_COLOUR = 96  # the matrix is too large for any cache: more fields meet it each time it is read


@kernel
def fill_grid(f, v, theta, ln_scale, factor, arrays, space, spans, grid):
    """Add the stars of field ``f``, the sum over its sight lines, to its flat grid, which is zero outside ``spans``."""
    first_line, first_node = arrays[10], arrays[11]
    mu, A, node_weight, shape, grid_start, E = arrays[14], arrays[15], arrays[16], arrays[17], arrays[18], arrays[20]
    for s in range(first_line[f], first_line[f + 1]):
        a, b = first_node[s], first_node[s + 1]
        found = line_stars(s, v, theta, ln_scale, factor, arrays, space)
        for c in range(shape[1]):
            for e in range(node_weight.size):
                if shape[0] > 1:
                    scatter_in_colour(
                        found, c, shape, mu[a:b], A[c, e, a:b], E[c, e, a:b], factor, node_weight[e], grid_start, spans,
                        grid,
                    )  # fmt: skip
                else:
                    block = block_of(grid, c, shape)
                    scatter(found, mu[a:b], A[c, e, a:b], factor, node_weight[e], grid_start, block)


@kernel
def work_space(arrays):
    """Coordinates (5, node), stars (node, layer) and reach (layer, 2) for the longest sight line."""
    first_node, n_layer = arrays[11], arrays[0].shape[0]
    longest = np.max(first_node[1:] - first_node[:-1])
    return np.empty((5, longest)), np.empty((longest, n_layer)), np.empty((n_layer, 2), np.int64)


@kernel
def empty_grid(n_field, arrays):
    """Flat grids of zeros (field, row), and spans (slab, class, 2) that hold nothing."""
    shape = arrays[17]
    spans = np.zeros((shape[0], shape[1], 2), np.int64)
    spans[:, :, 0] = shape[2]
    return np.zeros((n_field, shape[0] * shape[1] * shape[2] * shape[3])), spans


@kernel
def stars_on_grid(v, ln_dust, *arrays):
    """Return the stars (field, row) before the luminosity matrix, all at once: for checks, not for speed."""
    n_field = arrays[10].size - 1
    theta, ln_scale = layer_numbers(v, arrays)
    space = work_space(arrays)
    grid, spans = empty_grid(n_field, arrays)
    for f in range(n_field):
        fill_grid(f, v, theta, ln_scale, exp(ln_dust[f]), arrays, space, spans, grid[f])
    return grid


@kernel
def project(v, W, ln_dust, *arrays):
    """Return expected counts (field, bin).

    ``v`` is ``Galaxy.vector``, ``W`` the luminosity matrix (row, bin), ``ln_dust`` (field,) the logarithm of the factor
    on each field's extinction.
    """
    n_field, shape = arrays[10].size - 1, arrays[17]
    theta, ln_scale = layer_numbers(v, arrays)
    space = work_space(arrays)
    block = BLOCK if shape[0] == 1 else BLOCK_IN_COLOUR
    grid, spans = empty_grid(min(block, n_field), arrays)
    counts = np.zeros((n_field, W.shape[1]))
    for start in range(0, n_field, block):
        size = min(block, n_field - start)
        if shape[0] == 1:
            grid[:] = 0.0
        for i in range(size):
            f = start + i
            fill_grid(f, v, theta, ln_scale, exp(ln_dust[f]), arrays, space, spans, grid[i])
        if shape[0] == 1:
            np.dot(grid[:size], W, counts[start : start + size])
        else:
            multiply_spans(grid, size, W, spans, arrays[21], shape, counts[start : start + size])
            clear_spans(grid, size, spans, shape)
    return counts
