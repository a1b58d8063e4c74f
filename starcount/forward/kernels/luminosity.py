"""The luminosity matrix as a sum over pieces: one for each knot of a smooth factor on the luminosity functions.

The factor is linear between knots of absolute magnitude, so the matrix is linear in its values at the knots. Most of
the matrix is zero, and a bin of magnitude meets few knots: what is not zero is kept in blocks, each a row's bins of
one magnitude bin, with the pieces of the knots that matter side by side.
"""

import numpy as np

from starcount.compilation import kernel


@kernel
def luminosity(factors, n_bin, owner, row, bin, first, pieces):
    """Return W (row, bin) for ``factors`` (curve, knot).

    ``n_bin`` (1,) is the number of bins, ``owner`` (row,) the curve of each row; a block lies in ``row`` (block,) from
    ``bin`` (block,) on; ``first`` (block,) is the first knot that matters, ``pieces`` (block, piece, bin of the block)
    the matrix per unit of the factor at that knot and those after it.
    """
    n_block, n_piece, width = pieces.shape
    W = np.zeros((owner.size, n_bin[0]))
    for i in range(n_block):
        out, mine = W[row[i], bin[i] : bin[i] + width], factors[owner[row[i]]]
        for k in range(n_piece):
            one, f = pieces[i, k], mine[first[i] + k]
            for b in range(width):
                out[b] += f * one[b]
    return W


@kernel
def luminosity_back(g_W, shape, n_bin, owner, row, bin, first, pieces):
    """Return the transpose of ``luminosity``: the cotangent of the factors (curve, knot) from that of W."""
    n_block, n_piece, width = pieces.shape
    g = np.zeros(shape)
    for i in range(n_block):
        wanted, mine = g_W[row[i], bin[i] : bin[i] + width], g[owner[row[i]]]
        for k in range(n_piece):
            one, total = pieces[i, k], 0.0
            for b in range(width):
                total += wanted[b] * one[b]
            mine[first[i] + k] += total
    return g
