"""The grid of counts in magnitude and colour: slabs of colour excess, each a grid in the shift y.

Along a line both the shift and the excess grow with distance, so a field occupies a narrow ribbon of the (excess, y)
grid. The parts that were written are remembered as ``spans`` (slab, class, 2); only they are multiplied and cleared.

The weights along the excess are those of a cubic B-spline. The matrix it meets holds the spline's coefficients, not its
values (``forward.response``), which makes the spline interpolate, four weights a node, with an error eight to thirteen
times smaller than that of the Catmull-Rom weights: colour sequences are narrow.
"""

import numpy as np

from starcount.compilation import kernel
from starcount.forward.kernels.grid import spline_weights


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
def block_start(slab, c, shape):
    """Where the block of a slab and class begins in a flat grid of ``shape`` (slab, class, y, layer)."""
    return (slab * shape[1] + c) * shape[2] * shape[3]


@kernel
def block_of(grid, c, shape):
    """The block (y, layer) of a class of the first slab, a view of the flat grid of a field."""
    start = block_start(0, c, shape)
    return grid[start : start + shape[2] * shape[3]].reshape(shape[2], shape[3])


@kernel
def scatter_in_colour(stars, c, shape, mu, A, E, factor, weight, grid_start, spans, grid):
    """Add the stars (node, layer) of class ``c`` to the grid of a field; widen ``spans`` (slab, class, 2) to them.

    The four rows of y that a node meets lie side by side, so that each slab takes one multiple of the same numbers.
    """
    n = shape[3]
    row, w, _ = spline_weights(mu, A, factor, weight, grid_start, shape[2])
    slab, v, _ = excess_weights(E, factor, grid_start)
    spread = np.empty(4 * n)
    for j in range(mu.size):
        if w[1, j] == 0.0:  # outside the grid
            continue
        mine = stars[j]
        for i in range(4):
            part, one = spread[i * n : (i + 1) * n], w[i, j]
            for k in range(n):
                part[k] = one * mine[k]
        first = int(row[j])
        for h in range(4):
            here = spans[slab[j] + h, c]
            here[0], here[1] = min(here[0], first), max(here[1], first + 4)
            start = block_start(slab[j] + h, c, shape) + first * n
            out, one = grid[start : start + 4 * n], v[j, h]
            for k in range(4 * n):
                out[k] += one * spread[k]


@kernel
def gather_in_colour(grid, c, shape, mu, A, E, factor, weight, grid_start, value, by_factor):
    """Add the transpose of ``scatter_in_colour`` to ``value`` (node, layer), its derivative by ``factor`` likewise."""
    n = shape[3]
    row, w, part = spline_weights(mu, A, factor, weight, grid_start, shape[2])
    slab, v, slope = excess_weights(E, factor, grid_start)
    joined, bent, d = np.empty(4 * n), np.empty(4 * n), np.empty(4)
    for j in range(mu.size):
        if w[1, j] == 0.0:
            continue
        joined[:] = 0.0
        bent[:] = 0.0
        for h in range(4):
            start = block_start(slab[j] + h, c, shape) + int(row[j]) * n
            out, one, turn = grid[start : start + 4 * n], v[j, h], slope[j, h]
            for k in range(4 * n):
                joined[k] += one * out[k]
                bent[k] += turn * out[k]
        t, steep = part[j], (w[0, j] + w[1, j] + w[2, j] + w[3, j]) * grid_start[1] * A[j]
        d[0], d[1] = steep * (2.0 * t - 1.5 * t * t - 0.5), steep * t * (4.5 * t - 5.0)
        d[2], d[3] = steep * (0.5 + t * (4.0 - 4.5 * t)), steep * t * (1.5 * t - 1.0)
        redder, here, moves = grid_start[4] * E[j], value[j], by_factor[j]
        for i in range(4):
            one, moved, turned = w[i, j], d[i], w[i, j] * redder
            for k in range(n):
                here[k] += one * joined[i * n + k]
                moves[k] += moved * joined[i * n + k] + turned * bent[i * n + k]


@kernel
def clear_spans(grid, size, spans, shape):
    """Set the written parts of the first ``size`` grids to zero, and forget them."""
    for slab in range(shape[0]):
        for c in range(shape[1]):
            start, low, high = block_start(slab, c, shape), spans[slab, c, 0], spans[slab, c, 1]
            if high > low:
                grid[:size, start + low * shape[3] : start + high * shape[3]] = 0.0
            spans[slab, c, 0], spans[slab, c, 1] = shape[2], 0
