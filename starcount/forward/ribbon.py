"""Which part of the (colour excess, y) grid a group's fields can reach: only there the luminosity matrix is made."""

import numpy as np

from starcount.forward.projection import Grid, Lines

_SUPPORT = 2.0  # slabs on either side that a node's spline weights reach
_SPARE = 2  # shifts beyond the four that a node's weights reach along y


def shift_ranges(lines: Lines, grid: Grid, dust_range: float) -> np.ndarray:
    """Return the first shift, and the end of the shifts, on each slab for each temperature: (slab, temperature, 2).

    ``dust_range`` is the factor by which the extinction of a field may be raised or lowered.
    """
    found = np.zeros((grid.excess_mag.size, len(lines.A_mag), 2), int)
    for c, (A, E) in enumerate(zip(lines.A_mag, lines.E_mag, strict=True)):
        mu, A, E = np.broadcast_to(lines.mu_mag, A.shape).ravel(), A.ravel(), E.ravel()
        order = np.argsort(E)
        per_excess = A[order[-1]] / E[order[-1]] if E[order[-1]] > 0.0 else 0.0
        found[:, c] = _of_temperature(mu[order], E[order], per_excess, grid, dust_range)
    return found


def _of_temperature(mu, E, per_excess: float, grid: Grid, dust_range: float) -> np.ndarray:
    """The ranges (slab, 2) of one temperature; moduli and rising excesses (node,), and the shift per excess."""
    step, y_step, n_y = grid.excess_mag[1] - grid.excess_mag[0], grid.y_mag[1] - grid.y_mag[0], grid.y_mag.size
    most, found = dust_range * E[-1], np.zeros((grid.excess_mag.size, 2), int)
    for s, excess in enumerate(grid.excess_mag):
        low, high = max(excess - _SUPPORT * step, 0.0), excess + _SUPPORT * step
        if s >= grid.excess_mag.size - 4:
            high = np.inf  # what is redder stays on the last slabs
        i, j = np.searchsorted(E, low / dust_range, "left"), np.searchsorted(E, high * dust_range, "right")
        if j > i:
            y_low, y_high = mu[i:j].min() + per_excess * low, mu[i:j].max() + per_excess * min(high, most)
            first, last = (int(np.floor((y - grid.y_mag[0]) / y_step)) for y in (y_low, y_high))
            found[s] = np.clip([first - 1 - _SPARE, last + 3 + _SPARE], 0, n_y)
    return found
