"""The mode of the posterior by damped Fisher scoring, from several starts.

Each step solves (J^T J + damping diag(J^T J)) step = gradient (Levenberg 1944, Marquardt 1963). One start in sixteen of
a two-disc problem ends where thin and thick disc have exchanged roles, so the best of several is taken and the others
are reported.
"""

from dataclasses import dataclass

import numpy as np
from scipy import linalg

from starcount.errors import FailedChecks
from starcount.inference.target import Target

STARTS = 4
TOLERANCE = 1e-6
"""A step is the last one when it promises less than this in ln(posterior)."""

_MOST_STEPS = 60
_SPREAD = 0.7
"""Starts after the first are drawn this wide around the initial point: inside the priors, apart from one another."""


@dataclass(frozen=True, eq=False)
class Mode:
    """Where the posterior is highest, ``x`` (p,), its logarithm there, the steps taken and what every start reached.

    ``ends`` (start, p) and ``end_values`` (start,) hold the other starts too, best first; failed starts are left out.
    """

    x: np.ndarray
    value: float
    steps: int
    ends: np.ndarray
    end_values: np.ndarray


def find_mode(target: Target, seed: int, starts: int = STARTS) -> Mode:
    """Climb from the initial point and from draws around it, and return the best end."""
    rng = np.random.default_rng(seed)
    points = [target.x0, *(target.x0 + _SPREAD * rng.standard_normal((starts - 1, target.size)))]
    ends = [end for end in target.over(_climb, points) if end is not None]
    if not ends:
        raise FailedChecks(f"no mode found: none of {starts} starts converged in {_MOST_STEPS} steps")
    ends.sort(key=lambda end: -end[1])
    x, value, steps = ends[0]
    return Mode(x, value, steps, np.array([end[0] for end in ends]), np.array([end[1] for end in ends]))


def _climb(target: Target, x: np.ndarray) -> tuple[np.ndarray, float, int] | None:
    value, gradient = target.log_posterior(x)
    damping = 1e-3
    if not np.isfinite(value):
        return None
    for step_number in range(1, _MOST_STEPS + 1):
        J = target.jacobian(x)
        information = J.T @ J
        step = _solve(information, damping, gradient)
        while True:
            promised = 0.5 * float(gradient @ step)
            if promised < TOLERANCE:
                return x, value, step_number
            new_value, new_gradient = target.log_posterior(x + step)
            if np.isfinite(new_value) and new_value > value:
                break
            damping = 10 * damping
            step = _solve(information, damping, gradient)
        x, value, gradient, damping = x + step, new_value, new_gradient, 0.1 * damping
    return None


def _solve(information: np.ndarray, damping: float, gradient: np.ndarray) -> np.ndarray:
    damped = information + damping * np.diag(np.diag(information))
    return linalg.solve(damped, gradient, assume_a="pos")
