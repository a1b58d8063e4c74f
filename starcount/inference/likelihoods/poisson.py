"""Counts scattered by Poisson noise alone: for simulations, and for the local census."""

import math

import numpy as np
import pymc as pm
from numba import njit

NAME = "poisson"
MEANING = "Poisson noise only"
HAS_FLOOR = False


def observe(name: str, mean, floor, observed, dims: str):
    """Add counts with this likelihood to the open PyMC model."""
    return pm.Poisson(name, mu=mean, observed=observed, dims=dims)


def recognise(variable):
    """Return (mean, None) of a random variable with this likelihood, or None for any other."""
    if type(variable.owner.op).__name__ != "PoissonRV":
        return None
    (mean,) = variable.owner.op.dist_params(variable.owner)
    return mean, None


@njit(nogil=True, error_model="numpy", cache=True)
def terms(n, used, mean, dispersion):
    """Log likelihood, its derivatives and the expected information; ``n``, ``used``, ``mean`` are (field, bin).

    Returns ln L (field,), d ln L / d mean (field, bin), the information on the mean (field, bin), then d ln L / d
    ln(dispersion) (field,) and the information on ln(dispersion) (field, bin), which are zero here. Bins that are not
    used contribute nothing.
    """
    ln_likelihood, score, information = np.zeros(n.shape[0]), np.zeros(n.shape), np.zeros(n.shape)
    for f in range(n.shape[0]):
        for b in range(n.shape[1]):
            if used[f, b]:
                ln_likelihood[f] += n[f, b] * math.log(mean[f, b]) - mean[f, b] - math.lgamma(n[f, b] + 1.0)
                score[f, b] = n[f, b] / mean[f, b] - 1.0
                information[f, b] = 1.0 / mean[f, b]
    return ln_likelihood, score, information, np.zeros(n.shape[0]), np.zeros(n.shape)


def draw(rng: np.random.Generator, mean: np.ndarray, dispersion: float) -> np.ndarray:
    """Draw counts around ``mean``, any shape."""
    return rng.poisson(mean)
