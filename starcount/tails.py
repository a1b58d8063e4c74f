"""How improbable a count is: tails of the Poisson and the negative binomial law."""

import numpy as np
from scipy import special

POISSON_EXCESS = 1e-9
"""A variance that exceeds the mean by less than this share is taken as Poisson's."""


def tail_probability(n: np.ndarray, mean: np.ndarray, variance: np.ndarray) -> np.ndarray:
    """Two-sided probability of ``n`` or farther out, half of n's own probability counted on either side.

    The law is Poisson's where the variance is the mean, else the negative binomial of that mean and variance
    (a Poisson count whose expectation is known up to a gamma distribution). Shapes as ``n``.
    """
    n, mean, variance = np.broadcast_arrays(*(np.asarray(x, float) for x in (n, mean, variance)))
    excess = variance - mean
    wide = (mean > 0) & (excess > POISSON_EXCESS * mean)
    lower, upper = (np.array(side) for side in _poisson_sides(n, mean))  # arrays, where n is one number
    if wide.any():
        size = mean[wide] ** 2 / excess[wide]
        lower[wide], upper[wide] = _negative_binomial_sides(n[wide], size, mean[wide] / variance[wide])
    return np.minimum(1.0, 2 * np.minimum(lower, upper))


def _poisson_sides(n: np.ndarray, mean: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """The probabilities below and above n, half of its own in either (scipy.stats would take longer to import)."""
    half = 0.5 * np.exp(special.xlogy(n, mean) - special.gammaln(n + 1) - mean)
    below = np.where(n > 0, special.pdtr(n - 1, mean), 0.0 * n)
    return below + half, special.pdtrc(n, mean) + half


def _negative_binomial_sides(n: np.ndarray, size: np.ndarray, p: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    ways = special.gammaln(n + size) - special.gammaln(n + 1) - special.gammaln(size)
    half = 0.5 * np.exp(ways + size * np.log(p) + special.xlog1py(n, -p))
    below = np.where(n > 0, special.betainc(size, np.maximum(n, 1.0), p), 0.0 * n)
    return below + half, special.betainc(n + 1, size, 1 - p) + half
