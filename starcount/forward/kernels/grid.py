"""Moving stars from the nodes of a sight line onto the regular grid in y, and back.

The weights are those of the Catmull-Rom spline (Catmull & Rom 1974): cubic, interpolating, with a continuous slope, so
that the derivative by the extinction is exact and smooth. Stars outside the grid are brighter or fainter than every bin.
"""

from starcount.compilation import kernel


@kernel
def scatter(stars, mu, A, factor, weight, grid_start, first, last, grid):
    """Add the stars (layer, node) of layers first..last to the grid (y, layer)."""
    y0, per_dy, top = grid_start[0], grid_start[1], grid.shape[0] - 3
    for j in range(mu.size):
        p = (mu[j] + factor * A[j] - y0) * per_dy
        if p < 1.0 or p >= top + 1.0:
            continue
        i = int(p)
        t = p - i
        t2, t3 = t * t, t * t * t
        w0, w1 = weight * (t2 - 0.5 * (t3 + t)), weight * (1.5 * t3 - 2.5 * t2 + 1.0)
        w2, w3 = weight * (2.0 * t2 - 1.5 * t3 + 0.5 * t), weight * 0.5 * (t3 - t2)
        g0, g1, g2, g3 = grid[i - 1], grid[i], grid[i + 1], grid[i + 2]
        for k in range(first, last):
            s = stars[k, j]
            g0[k] += w0 * s
            g1[k] += w1 * s
            g2[k] += w2 * s
            g3[k] += w3 * s


@kernel
def gather(grid, mu, A, factor, weight, grid_start, first, last, value, by_factor):
    """Add the transpose of ``scatter`` to ``value`` (layer, node), and its derivative by ``factor`` to ``by_factor``."""
    y0, per_dy, top = grid_start[0], grid_start[1], grid.shape[0] - 3
    for j in range(mu.size):
        p = (mu[j] + factor * A[j] - y0) * per_dy
        if p < 1.0 or p >= top + 1.0:
            continue
        i = int(p)
        t = p - i
        t2, t3 = t * t, t * t * t
        w0, w1 = weight * (t2 - 0.5 * (t3 + t)), weight * (1.5 * t3 - 2.5 * t2 + 1.0)
        w2, w3 = weight * (2.0 * t2 - 1.5 * t3 + 0.5 * t), weight * 0.5 * (t3 - t2)
        steep = weight * per_dy * A[j]
        d0, d1 = steep * (2.0 * t - 1.5 * t2 - 0.5), steep * (4.5 * t2 - 5.0 * t)
        d2, d3 = steep * (4.0 * t - 4.5 * t2 + 0.5), steep * (1.5 * t2 - t)
        g0, g1, g2, g3 = grid[i - 1], grid[i], grid[i + 1], grid[i + 2]
        for k in range(first, last):
            value[k, j] += w0 * g0[k] + w1 * g1[k] + w2 * g2[k] + w3 * g3[k]
            by_factor[k, j] += d0 * g0[k] + d1 * g1[k] + d2 * g2[k] + d3 * g3[k]
