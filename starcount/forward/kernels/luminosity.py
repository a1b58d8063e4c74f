"""The luminosity matrix: stars per reference star that a layer at shift y puts into each bin, and its transpose.

Luminosity functions enter as stars per narrow cell of absolute magnitude and are summed exactly: a bin takes the
difference of the cumulative function at its edges, never a value at its centre.
"""

import numpy as np

from starcount.compilation import kernel


@kernel
def place_in_cells(m, cells, n_cell):
    """Where a magnitude falls in the cells: index of the cell and how much of it lies brighter."""
    p = (m - cells[0]) * cells[1]
    if p <= 0.0:
        return 0, 0.0
    if p >= n_cell:
        return n_cell - 1, 1.0
    i = int(p)
    return i, p - i


@kernel
def luminosity(lf, y, cells, m_low, m_high, bin_class, response):
    """Return W (y x layer, bin) of a luminosity function ``lf`` (layer, class, cell).

    ``y`` (y,) are the shifts; ``cells`` the first edge of the cells and cells per mag; ``m_low``, ``m_high`` and
    ``bin_class`` (true bin,) what a true bin takes, class -1 for all; ``response`` (true bin, bin) the observation.
    """
    n_layer, n_class, n_cell = lf.shape
    below = np.zeros((n_class + 1, n_cell + 1, n_layer))  # the last row: all classes
    for c in range(n_class):
        for i in range(n_cell):
            for k in range(n_layer):
                below[c, i + 1, k] = below[c, i, k] + lf[k, c, i]
                below[n_class, i + 1, k] += below[c, i + 1, k]
    stars = np.empty((y.size, n_layer, m_low.size))
    for row in range(y.size):
        out = stars[row]
        for t in range(m_low.size):
            run = below[bin_class[t]] if bin_class[t] >= 0 else below[n_class]
            i, u = place_in_cells(m_low[t] - y[row], cells, n_cell)
            j, w = place_in_cells(m_high[t] - y[row], cells, n_cell)
            a, b, c, d = run[i], run[i + 1], run[j], run[j + 1]
            for k in range(n_layer):
                out[k, t] = c[k] + w * (d[k] - c[k]) - a[k] - u * (b[k] - a[k])
    return np.dot(stars.reshape(y.size * n_layer, m_low.size), response)


@kernel
def luminosity_back(g_W, shape, y, cells, m_low, m_high, bin_class, response):
    """Return the transpose of ``luminosity``: like ``lf`` (layer, class, cell), from a cotangent of W."""
    n_layer, n_class, n_cell = shape
    g_stars = np.dot(g_W, np.ascontiguousarray(response.T)).reshape(y.size, n_layer, m_low.size)
    g_below = np.zeros((n_class + 1, n_cell + 1, n_layer))
    for row in range(y.size):
        here = g_stars[row]
        for t in range(m_low.size):
            run = g_below[bin_class[t]] if bin_class[t] >= 0 else g_below[n_class]
            i, u = place_in_cells(m_low[t] - y[row], cells, n_cell)
            j, w = place_in_cells(m_high[t] - y[row], cells, n_cell)
            a, b, c, d = run[i], run[i + 1], run[j], run[j + 1]
            for k in range(n_layer):
                g = here[k, t]
                c[k] += (1.0 - w) * g
                d[k] += w * g
                a[k] -= (1.0 - u) * g
                b[k] -= u * g
    g_lf = np.empty((n_layer, n_class, n_cell))
    for k in range(n_layer):
        for c in range(n_class):
            total = 0.0
            for i in range(n_cell - 1, -1, -1):
                total += g_below[c, i + 1, k] + g_below[n_class, i + 1, k]
                g_lf[k, c, i] = total
    return g_lf
