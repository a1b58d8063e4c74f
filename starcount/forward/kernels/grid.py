"""Moving stars from the nodes of a sight line onto the regular grid in the shift y, and back.

The grid of a field is flat: for each slab of colour excess and each class of temperature one block (y, layer); counts
without colour have one slab. The weights along y are those of the Catmull-Rom spline (Catmull & Rom 1974):
cubic, interpolating, with a continuous slope, so that the derivative by the extinction is exact and smooth. Stars
outside the grid are in no bin. For the slabs see ``kernels.slabs``.
"""

import numpy as np

from starcount.compilation import kernel


@kernel
def spline_weights(mu, A, factor, weight, grid_start, n_y):
    """For each node the first of the four rows of the grid it meets, their weights (4, node), and where it lies (0..1).

    Nodes outside the grid get the weight zero. Rows are whole numbers in floating point, which vector code can floor.
    """
    n, y0, per_dy, top = mu.size, grid_start[0], grid_start[1], float(n_y - 3)
    row, w, part = np.empty(n), np.empty((4, n)), np.empty(n)
    w0, w1, w2, w3 = w[0], w[1], w[2], w[3]
    for j in range(n):
        p = (mu[j] + factor * A[j] - y0) * per_dy
        inside = weight if (p >= 1.0) & (p < top + 1.0) else 0.0
        p = min(max(p, 1.0), top)
        i = np.floor(p)
        t = p - i
        row[j] = i - 1.0
        part[j] = t
        w0[j] = inside * t * (t - 0.5 - 0.5 * t * t)
        w1[j] = inside * (1.0 + t * t * (1.5 * t - 2.5))
        w2[j] = inside * t * (0.5 + t * (2.0 - 1.5 * t))
        w3[j] = inside * 0.5 * t * t * (t - 1.0)
    return row, w, part


@kernel
def scatter(stars, mu, A, factor, weight, grid_start, grid):
    """Add the stars (node, layer) to a block of the grid (y, layer)."""
    row, w, _ = spline_weights(mu, A, factor, weight, grid_start, grid.shape[0])
    w0, w1, w2, w3 = w[0], w[1], w[2], w[3]
    for j in range(mu.size):
        i, here = int(row[j]), stars[j]
        rows = grid[i : i + 4]
        a, b, c, d = w0[j], w1[j], w2[j], w3[j]
        for k in range(here.size):
            s = here[k]
            rows[0, k] += a * s
            rows[1, k] += b * s
            rows[2, k] += c * s
            rows[3, k] += d * s


@kernel
def gather(grid, mu, A, factor, weight, grid_start, value, by_factor):
    """Add the transpose of ``scatter`` to ``value`` (node, layer), its derivative by ``factor`` to ``by_factor``."""
    row, w, part = spline_weights(mu, A, factor, weight, grid_start, grid.shape[0])
    for j in range(mu.size):
        i = int(row[j])
        rows, here, bent, t = grid[i : i + 4], value[j], by_factor[j], part[j]
        a, b, c, d = w[0, j], w[1, j], w[2, j], w[3, j]
        inside = a + b + c + d  # the weights sum to the node's own, or to zero outside the grid
        steep = inside * grid_start[1] * A[j]
        da, db = steep * (2.0 * t - 1.5 * t * t - 0.5), steep * t * (4.5 * t - 5.0)
        dc, dd = steep * (0.5 + t * (4.0 - 4.5 * t)), steep * t * (1.5 * t - 1.0)
        for k in range(here.size):
            g0, g1, g2, g3 = rows[0, k], rows[1, k], rows[2, k], rows[3, k]
            here[k] += a * g0 + b * g1 + c * g2 + d * g3
            bent[k] += da * g0 + db * g1 + dc * g2 + dd * g3
