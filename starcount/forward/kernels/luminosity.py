"""The luminosity matrix as a sum over pieces: one for each knot of a smooth factor on the luminosity functions.

The factor is linear between knots of absolute magnitude, so the matrix is linear in its values at the knots. A bin
meets few knots; their pieces are stored side by side with the index of the first.
"""

import numpy as np

from starcount.compilation import kernel


@kernel
def luminosity(factors, owner, first, pieces):
    """Return W (row, bin) for ``factors`` (curve, knot).

    ``owner`` (row,) is the curve of each row; ``first`` (row, bin) the first knot that matters; ``pieces``
    (row, bin, piece) the matrix per unit of the factor at that knot and those after it.
    """
    n_row, n_bin, n_piece = pieces.shape
    W = np.empty((n_row, n_bin))
    for i in range(n_row):
        mine = factors[owner[i]]
        for b in range(n_bin):
            total, start = 0.0, first[i, b]
            for k in range(n_piece):
                total += mine[start + k] * pieces[i, b, k]
            W[i, b] = total
    return W


@kernel
def luminosity_back(g_W, shape, owner, first, pieces):
    """Return the transpose of ``luminosity``: the cotangent of the factors (curve, knot) from that of W."""
    n_row, n_bin, n_piece = pieces.shape
    g = np.zeros(shape)
    for i in range(n_row):
        mine = g[owner[i]]
        for b in range(n_bin):
            start, one = first[i, b], g_W[i, b]
            for k in range(n_piece):
                mine[start + k] += one * pieces[i, b, k]
    return g
