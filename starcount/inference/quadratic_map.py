"""A quadratic change of variables that straightens the posterior's curved ridge.

With J the Jacobian whose J^T J is the expected information plus the prior's, m the mode, L L^T = (J^T J)^-1, Q = J L,

    S_abc = Q_a . [J(m + L_c) - J(m - L_c)] L_b / 2, made symmetric in b and c,
    x(z)  = m + L (z - S(z, z) / 2),      |dx/dz| = |L| det(1 - S z).

S is the parameter-effects curvature of Bates & Watts (1980): the part of a model's curvature that other parameters
would not have. In z the posterior is close to a standard normal. The map is exact as a change of variables whatever S
is; a poor S costs speed, not truth.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy import linalg

NEAR_FOLD_MOST = 0.001
"""The curvature is softened until no more of a standard normal's draws than this come near a fold of the map."""

NEAR_FOLD = 0.7
"""How far along the way to a fold is near: trajectories reach beyond the draws, and end where they meet a fold."""

_SOFTER = 0.8
_STEPS = 30
_PROBES = 2000


@dataclass(frozen=True, eq=False)
class QuadraticMap:
    """The map's mode ``m`` (p,), scale ``L`` (p, p), curvature ``S`` (p, p, p), and by how much S was softened."""

    m: np.ndarray
    L: np.ndarray
    S: np.ndarray
    softened: float

    def __call__(self, z: np.ndarray) -> tuple[np.ndarray, float]:
        """Return x (p,) and ln |dx/dz|, which is -inf where the map has folded over."""
        Sz = self.S @ z
        sign, ln_det = np.linalg.slogdet(np.eye(z.size) - Sz)
        x = self.m + self.L @ (z - 0.5 * (Sz @ z))
        return x, float(ln_det + np.log(np.diag(self.L)).sum()) if sign > 0 else -np.inf

    def pull_back(self, z: np.ndarray, by_x: np.ndarray) -> np.ndarray:
        """Return the gradient by z (p,) of f(x(z)) + ln |dx/dz|, from that of f by x."""
        A = np.eye(z.size) - self.S @ z
        inverse = np.linalg.inv(A)
        return A.T @ (self.L.T @ by_x) - np.einsum("ba,abc->c", inverse, self.S)


def build(m: np.ndarray, jacobians: Callable[[list[np.ndarray]], list[np.ndarray]], seed: int) -> QuadraticMap:
    """Build the map at the mode ``m``; ``jacobians`` returns J (row, p) at each of some points. Costs 2 p + 1."""
    (J,) = jacobians([m])
    L = linalg.cholesky(linalg.inv(J.T @ J), lower=True)
    Q = J @ L
    S = np.empty((m.size,) * 3)
    found = jacobians([m + sign * step for step in L.T for sign in (1.0, -1.0)])
    for c, (ahead, behind) in enumerate(zip(found[::2], found[1::2], strict=True)):
        S[:, :, c] = 0.5 * Q.T @ ((ahead - behind) @ L)
    S = 0.5 * (S + S.transpose(0, 2, 1))
    factor = _softening(S, np.random.default_rng(seed))
    return QuadraticMap(m, L, factor * S, factor)


def _softening(S: np.ndarray, rng: np.random.Generator) -> float:
    z = rng.standard_normal((_PROBES, S.shape[0]))
    reach = np.array([_fold_reach(S, one) for one in z])
    factor = 1.0
    for _ in range(_STEPS):
        if np.mean(factor * reach >= NEAR_FOLD) <= NEAR_FOLD_MOST:
            return factor
        factor *= _SOFTER
    return 0.0


def _fold_reach(S: np.ndarray, z: np.ndarray) -> float:
    """The largest real eigenvalue of S z: the ray from 0 to z meets no fold when this is below 1."""
    values = linalg.eigvals(S @ z)
    real = values.real[np.abs(values.imag) < 1e-12 * (1.0 + np.abs(values.real))]
    return float(real.max(initial=0.0))


def folded(q: QuadraticMap, z: np.ndarray) -> np.ndarray:
    """Whether a fold lies between the mode and each draw ``z`` (draw, p), seen along the straight line."""
    return np.array([_fold_reach(q.S, one) >= 1.0 for one in z])
