"""The grid of counts in magnitude and colour: slabs of colour excess, each a grid in the shift y.

Along a line both the shift and the excess grow with distance, so a field occupies a narrow ribbon of the (excess, y)
grid. The parts that were written are remembered as ``spans`` (slab, class, 2); only they are multiplied and cleared.

The weights along the excess are those of a cubic B-spline. The matrix it meets holds the spline's coefficients, not its
values (``forward.response``), which makes the spline interpolate, four weights a node, with an error some fifteen times
smaller than that of the Catmull-Rom weights: colour sequences are narrow.
"""

import numpy as np

from starcount.compilation import kernel
from starcount.forward.kernels.grid import spline_weights, take_layers


@kernel
def excess_weights(E, factor, grid_start):
    """For each node the first of its four slabs, their weights and the weights' slopes per slab, both (node, 4).

    Beyond the last slab the stars stay on it: by then the reddest bin holds either all or none of them.
    """
    e0, per_de, top = grid_start[3], grid_start[4], grid_start[5] - 3.0
    first, w, slope = np.empty(E.size, np.int64), np.empty((E.size, 4)), np.zeros((E.size, 4))
    for j in range(E.size):
        q = (factor * E[j] - e0) * per_de
        beyond = q >= top
        s = min(int(q), int(top) - 1)
        t = 1.0 if beyond else q - s
        first[j] = s - 1
        u = 1.0 - t
        w[j, 0], w[j, 3] = u * u * u / 6.0, t * t * t / 6.0
        w[j, 1] = (4.0 + t * t * (3.0 * t - 6.0)) / 6.0
        w[j, 2] = (4.0 + u * u * (3.0 * u - 6.0)) / 6.0
        if not beyond:
            slope[j, 0], slope[j, 3] = -0.5 * u * u, 0.5 * t * t
            slope[j, 1] = t * (1.5 * t - 2.0)
            slope[j, 2] = -u * (1.5 * u - 2.0)
    return first, w, slope


@kernel
def block_of(grid, slab, c, class_first, n_y):
    """The block (y, row) of a slab and class, a view of the flat grid of a field."""
    n_row, first, last = class_first[-1], class_first[c], class_first[c + 1]
    start = (slab * n_row + first) * n_y
    return grid[start : start + (last - first) * n_y].reshape(n_y, last - first)


@kernel
def block_start(slab, c, class_first, n_y):
    """Where the block of a slab and class begins in the flat grid, and in the rows of the matrix."""
    return (slab * class_first[-1] + class_first[c]) * n_y


@kernel
def scatter_in_colour(stars, layer_of, c, class_first, mu, A, E, factor, weight, grid_start, spans, grid):
    """Add the stars (node, layer) of class ``c`` to the grid of a field; widen ``spans`` (slab, class, 2) to them.

    The four rows of y that a node meets lie side by side, so that each slab takes one multiple of the same numbers.
    """
    n_y, n = int(grid_start[2]), layer_of.size
    row, w, _ = spline_weights(mu, A, factor, weight, grid_start, n_y)
    slab, v, _ = excess_weights(E, factor, grid_start)
    mine, spread = np.empty(n), np.empty(4 * n)
    for j in range(mu.size):
        if w[1, j] == 0.0:  # outside the grid
            continue
        take_layers(stars[j], layer_of, mine)
        for i in range(4):
            part, one = spread[i * n : (i + 1) * n], w[i, j]
            for k in range(n):
                part[k] = one * mine[k]
        first = int(row[j])
        for h in range(4):
            here = spans[slab[j] + h, c]
            here[0], here[1] = min(here[0], first), max(here[1], first + 4)
            start = block_start(slab[j] + h, c, class_first, n_y) + first * n
            out, one = grid[start : start + 4 * n], v[j, h]
            for k in range(4 * n):
                out[k] += one * spread[k]


@kernel
def gather_in_colour(grid, layer_of, c, class_first, mu, A, E, factor, weight, grid_start, value, by_factor):
    """Add the transpose of ``scatter_in_colour`` to ``value`` (node, layer), its derivative by ``factor`` likewise."""
    n_y, n = int(grid_start[2]), layer_of.size
    row, w, part = spline_weights(mu, A, factor, weight, grid_start, n_y)
    slab, v, slope = excess_weights(E, factor, grid_start)
    joined, bent, d = np.empty(4 * n), np.empty(4 * n), np.empty(4)
    for j in range(mu.size):
        if w[1, j] == 0.0:
            continue
        joined[:] = 0.0
        bent[:] = 0.0
        for h in range(4):
            start = block_start(slab[j] + h, c, class_first, n_y) + int(row[j]) * n
            out, one, turn = grid[start : start + 4 * n], v[j, h], slope[j, h]
            for k in range(4 * n):
                joined[k] += one * out[k]
                bent[k] += turn * out[k]
        t, steep = part[j], (w[0, j] + w[1, j] + w[2, j] + w[3, j]) * grid_start[1] * A[j]
        d[0], d[1] = steep * (2.0 * t - 1.5 * t * t - 0.5), steep * t * (4.5 * t - 5.0)
        d[2], d[3] = steep * (0.5 + t * (4.0 - 4.5 * t)), steep * t * (1.5 * t - 1.0)
        redder = grid_start[4] * E[j]
        for i in range(4):
            one, moved, turned = w[i, j], d[i], w[i, j] * redder
            for k in range(n):
                value[j, layer_of[k]] += one * joined[i * n + k]
                by_factor[j, layer_of[k]] += moved * joined[i * n + k] + turned * bent[i * n + k]


@kernel
def clear_spans(grid, size, spans, class_first, n_y):
    """Set the written parts of the first ``size`` grids to zero, and forget them."""
    for slab in range(spans.shape[0]):
        for c in range(spans.shape[1]):
            n = class_first[c + 1] - class_first[c]
            start = block_start(slab, c, class_first, n_y)
            low, high = spans[slab, c, 0], spans[slab, c, 1]
            if high > low:
                grid[:size, start + low * n : start + high * n] = 0.0
            spans[slab, c, 0], spans[slab, c, 1] = n_y, 0
