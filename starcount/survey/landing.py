"""Where stars land: uniform stars of a cell, moved and blurred by a Gaussian, in bins.

One kernel serves magnitudes and colours. All in one file: numba recompiles a cached function when its own file
changes, not when a helper elsewhere does.
"""

import math

import numpy as np

from starcount.compilation import kernel

_FAR = 6.0
"""Beyond this many scatters a bin gets nothing (1e-9)."""
NARROWEST_MAG = 1e-4
"""Cells that the offset squeezes to less are taken as this wide: far below any scatter, far above rounding."""
_SHARP_MAG = 1e-7


@kernel
def land(first, last, scatter, edges, landed):
    """Fill landed (cell, bin): the share of a cell's stars in each bin.

    Stars of a cell are uniform from ``first`` to ``last`` (cell,) and then blurred by ``scatter`` (cell,); edges
    (bin + 1,) may begin with -inf and end with inf. A cell's shares add up to what falls between the first and the
    last edge.
    """
    for i in range(first.size):
        a, b, s = first[i], last[i], scatter[i]
        bright, faint = a - _FAR * s, b + _FAR * s
        j = max(np.searchsorted(edges, bright) - 1, 0)
        landed[i, :j] = 0.0
        below = 0.0
        if edges[j] > bright:
            below = _below(edges[j], a, b, s, faint)
        while j < edges.size - 1:
            above = _below(edges[j + 1], a, b, s, faint)
            # Far from a cell both are equal but for rounding, which must not leave less than no stars.
            landed[i, j] = max(above - below, 0.0)
            below = above
            j += 1
            if edges[j] >= faint:
                landed[i, j:] = 0.0
                break


@kernel
def _below(edge, a, b, s, faint):
    """The share of uniform stars from a to b, blurred by s, that lie below an edge."""
    if edge >= faint:
        return 1.0
    if s < _SHARP_MAG:
        return min(max((edge - a) / (b - a), 0.0), 1.0)
    return s * (_area((edge - a) / s) - _area((edge - b) / s)) / (b - a)


@kernel
def _area(x):
    """Integral of the normal distribution function from minus infinity to x: x Phi(x) + phi(x)."""
    return 0.5 * x * math.erfc(-x * math.sqrt(0.5)) + math.exp(-0.5 * x * x) / math.sqrt(2.0 * math.pi)
