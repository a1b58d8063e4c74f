"""The projection: expected counts of many fields from the flat vector of a Galaxy's numbers.

Fields go in blocks: density, scatter and matrix product of a block stay in cache. Kernels are serial, release the GIL,
allocate their own work space and hold no state, so they may be called from any thread. The trailing ``arrays`` are
``Projection.arrays``, described there.
"""

import numpy as np

from starcount.compilation import kernel
from starcount.forward.kernels.density import layer_numbers, line_stars
from starcount.forward.kernels.grid import scatter
from starcount.vector_math import exp

BLOCK = 32  # fields; 16 to 64 measured alike, more leaves the second-level cache


@kernel
def fill_grid(f, v, theta, ln_scale, factor, arrays, space, grid):
    """Put the stars of field ``f`` on the grid (y, layer): the sum over its sight lines."""
    first_line, first_node = arrays[10], arrays[11]
    mu, A, node_weight, class_first, grid_start = arrays[14], arrays[15], arrays[16], arrays[17], arrays[18]
    grid[:] = 0.0
    for s in range(first_line[f], first_line[f + 1]):
        a, b = first_node[s], first_node[s + 1]
        found = line_stars(s, v, theta, ln_scale, factor, arrays, space)
        for c in range(class_first.size - 1):
            first, last = class_first[c], class_first[c + 1]
            for e in range(node_weight.size):
                scatter(found, mu[a:b], A[c, e, a:b], factor, node_weight[e], grid_start, first, last, grid)


@kernel
def work_space(arrays):
    """Coordinates (5, node), stars (node, layer) and reach (layer, 2) for the longest sight line."""
    first_node, n_layer = arrays[11], arrays[0].shape[0]
    longest = np.max(first_node[1:] - first_node[:-1])
    return np.empty((5, longest)), np.empty((longest, n_layer)), np.empty((n_layer, 2), np.int64)


@kernel
def stars_on_grid(v, ln_dust, *arrays):
    """Return the stars (field, y x layer) before the luminosity matrix, all at once: for checks, not for speed."""
    n_field, n_y, n_layer = arrays[10].size - 1, int(arrays[18][2]), arrays[0].shape[0]
    theta, ln_scale = layer_numbers(v, arrays)
    space = work_space(arrays)
    grid = np.empty((n_field, n_y, n_layer))
    for f in range(n_field):
        fill_grid(f, v, theta, ln_scale, exp(ln_dust[f]), arrays, space, grid[f])
    return grid.reshape(n_field, n_y * n_layer)


@kernel
def project(v, W, ln_dust, *arrays):
    """Return expected counts (field, bin).

    ``v`` is ``Galaxy.vector``, ``W`` the luminosity matrix (y x layer, bin), ``ln_dust`` (field,) the logarithm of the
    factor on each field's extinction.
    """
    n_field, n_y, n_layer = arrays[10].size - 1, int(arrays[18][2]), arrays[0].shape[0]
    theta, ln_scale = layer_numbers(v, arrays)
    space = work_space(arrays)
    grid = np.empty((BLOCK, n_y, n_layer))
    counts = np.empty((n_field, W.shape[1]))
    for start in range(0, n_field, BLOCK):
        size = min(BLOCK, n_field - start)
        for i in range(size):
            f = start + i
            fill_grid(f, v, theta, ln_scale, exp(ln_dust[f]), arrays, space, grid[i])
        np.dot(grid[:size].reshape(size, n_y * n_layer), W, counts[start : start + size])
    return counts
