"""Poisson counts whose expectation itself scatters by a fraction, the floor: variance = mean + floor^2 mean^2.

The dispersion (1 / alpha in PyMC's naming) is the floor squared. Each bin scatters for itself.
"""

import math

import numpy as np
import pymc as pm
from numba import njit

NAME = "negative-binomial"
MEANING = "Poisson noise and a fractional error floor, fitted for each group"
HAS_FLOOR = True


def observe(name: str, mean, floor, observed, dims: str):
    """Add counts with this likelihood to the open PyMC model."""
    return pm.NegativeBinomial(name, mu=mean, alpha=floor**-2.0, observed=observed, dims=dims)


def recognise(variable):
    """Return (mean, dispersion) of a random variable with this likelihood, or None for any other."""
    if type(variable.owner.op).__name__ != "NegBinomialRV":
        return None
    size, p = variable.owner.op.dist_params(variable.owner)
    return size * (1.0 - p) / p, 1.0 / size


@njit(nogil=True, error_model="numpy", cache=True)
def _digamma(x):
    """The derivative of ln Gamma for x > 0: recurrence to x > 10, then Stirling's series (error < 1e-14)."""
    shift = 0.0
    while x < 10.0:
        shift -= 1.0 / x
        x += 1.0
    q = 1.0 / (x * x)
    series = q * (1 / 12 - q * (1 / 120 - q * (1 / 252 - q * (1 / 240 - q * (1 / 132 - q * (691 / 32760))))))
    return shift + math.log(x) - 0.5 / x - series


@njit(nogil=True, error_model="numpy", cache=True)
def terms(n, used, mean, dispersion):
    """Log likelihood, its derivatives and the expected information; ``n``, ``used``, ``mean`` are (field, bin).

    Returns ln L (field,), d ln L / d mean (field, bin), the information on the mean (field, bin), then d ln L / d
    ln(dispersion) (field,) and the information on ln(dispersion) (field, bin). The last is that of a normal
    distribution of the same mean and variance, good where the mean is above a few; it shapes steps and proposals, never
    the posterior. Mean and dispersion are orthogonal. Bins that are not used contribute nothing.
    """
    ln_likelihood, score, information = np.zeros(n.shape[0]), np.zeros(n.shape), np.zeros(n.shape)
    dispersion_score, dispersion_information = np.zeros(n.shape[0]), np.zeros(n.shape)
    r = 1.0 / dispersion
    for f in range(n.shape[0]):
        for b in range(n.shape[1]):
            if used[f, b]:
                k, m = n[f, b], mean[f, b]
                spread = math.log1p(m * dispersion)
                ln_likelihood[f] += math.lgamma(k + r) - math.lgamma(r) - math.lgamma(k + 1.0) - r * spread
                ln_likelihood[f] += k * (math.log(m * dispersion) - spread)
                score[f, b] = k / m - (k + r) / (m + r)
                information[f, b] = 1.0 / (m + dispersion * m * m)
                dispersion_score[f] -= r * (_digamma(k + r) - _digamma(r) - spread + (m - k) / (m + r))
                dispersion_information[f, b] = 0.5 * (m / (m + r)) ** 2
    return ln_likelihood, score, information, dispersion_score, dispersion_information


def draw(rng: np.random.Generator, mean: np.ndarray, dispersion: float) -> np.ndarray:
    """Draw counts around ``mean``, any shape."""
    return rng.poisson(rng.gamma(1.0 / dispersion, mean * dispersion))
