"""The knots of smooth factors on luminosity functions, in absolute visual magnitude whatever the band of the counts."""

import numpy as np

KNOTS_MAG = np.arange(-2.0, 16.1, 2.0)
"""A factor is linear between these M_V and constant beyond them."""
KNOTS_MAG.setflags(write=False)


def hat(M_V_mag: np.ndarray) -> np.ndarray:
    """Return the weight of each knot (..., knot) at absolute magnitudes (...): linear, summing to 1."""
    return np.stack([np.interp(M_V_mag, KNOTS_MAG, row) for row in np.eye(KNOTS_MAG.size)], axis=-1)
