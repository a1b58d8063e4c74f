"""A quadratic change of variables that straightens the posterior's curved ridge.

With J the Jacobian whose J^T J is the expected information plus the prior's, m the mode, L L^T = (J^T J)^-1 and Q = J L,

    S_abc = Q_a . [J(m + L_c) - J(m - L_c)] L_b / 2, made symmetric in b and c,
    x(z)  = m + L (z - S(z, z) / 2),      |dx/dz| = |L| det(1 - S z).

S is the parameter-effects curvature of Bates & Watts (1980): the part of a model's curvature that other parameters would
not have. In z the posterior is close to a standard normal. The map is exact as a change of variables whatever S is; a
poor S costs speed, not truth.
"""

from collections.abc import Callable
from dataclasses import dataclass
from hashlib import sha256
from pathlib import Path

import numpy as np
import pytensor.tensor as pt
from numba import njit
from pytensor.gradient import DisconnectedType, disconnected_type, grad_not_implemented
from pytensor.graph.basic import Apply
from pytensor.graph.op import Op
from pytensor.link.numba.dispatch.basic import numba_njit, register_funcify_default_op_cache_key
from scipy import linalg

FOLDED_MOST = 0.005
"""The curvature is softened until no more of a standard normal's draws than this lie beyond a fold of the map."""

_SALT = int.from_bytes(sha256(Path(__file__).read_bytes()).digest()[:6], "big")
_SOFTER = 0.8
_STEPS = 30
_PROBES = 400


@dataclass(frozen=True, eq=False)
class QuadraticMap:
    """The map's mode ``m`` (p,), scale ``L`` (p, p), curvature ``S`` (p, p, p), and by how much S was softened."""

    m: np.ndarray
    L: np.ndarray
    S: np.ndarray
    softened: float

    def __call__(self, z: np.ndarray) -> tuple[np.ndarray, float]:
        """Return x (p,) and ln |dx/dz|, which is -inf where the map has folded over."""
        out = forward(z, self.m, self.L, self.S)
        return out[:-1], float(out[-1])


def build(m: np.ndarray, jacobian: Callable[[np.ndarray], np.ndarray], seed: int) -> QuadraticMap:
    """Build the map at the mode ``m``; ``jacobian(x)`` is J (row, p). Costs 2 p + 1 Jacobians."""
    J = jacobian(m)
    L = linalg.cholesky(linalg.inv(J.T @ J), lower=True)
    Q = J @ L
    S = np.empty((m.size,) * 3)
    for c, step in enumerate(L.T):
        S[:, :, c] = 0.5 * Q.T @ ((jacobian(m + step) - jacobian(m - step)) @ L)
    S = 0.5 * (S + S.transpose(0, 2, 1))
    factor = _softening(S, np.random.default_rng(seed))
    return QuadraticMap(m, L, factor * S, factor)


def _softening(S: np.ndarray, rng: np.random.Generator) -> float:
    z = rng.standard_normal((_PROBES, S.shape[0]))
    reach = np.array([_fold_reach(S, one) for one in z])
    factor = 1.0
    for _ in range(_STEPS):
        if np.mean(factor * reach >= 1.0) <= FOLDED_MOST:
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


@njit(nogil=True, error_model="numpy", cache=True)
def _contiguous(z, m, L, S):
    return np.ascontiguousarray(z), np.ascontiguousarray(m), np.ascontiguousarray(L), np.ascontiguousarray(S)


@njit(nogil=True, error_model="numpy", cache=True)
def forward(z, m, L, S):
    """Return x(z) and, as the last element, ln |dx/dz| (-inf beyond a fold): (p + 1,)."""
    n = z.size
    Sz = (S.reshape(n * n, n) @ z).reshape(n, n)
    sign, ln_det = np.linalg.slogdet(np.eye(n) - Sz)
    out = np.empty(n + 1)
    out[:n] = m + L @ (z - 0.5 * (Sz @ z))
    out[n] = ln_det if sign > 0 else -np.inf
    for a in range(n):
        out[n] += np.log(L[a, a])
    return out


@njit(nogil=True, error_model="numpy", cache=True)
def back(z, m, L, S, cotangent):
    """The pull-back of ``forward``: the cotangent of z (p,) from that of its result (p + 1,)."""
    n = z.size
    flat = S.reshape(n * n, n)
    A = np.eye(n) - (flat @ z).reshape(n, n)
    gz = A.T @ (L.T @ cotangent[:n])
    sign, _ = np.linalg.slogdet(A)
    if sign > 0:
        gz -= cotangent[n] * (np.ascontiguousarray(np.linalg.inv(A).T).reshape(n * n) @ flat)
    return gz


class MapOp(Op):
    """``forward`` in a PyTensor graph: z, m, L, S -> x and ln |dx/dz| in one vector."""

    __props__ = ()

    def make_node(self, z, m, L, S):
        return Apply(self, [pt.as_tensor_variable(x) for x in (z, m, L, S)], [pt.dvector()])

    def perform(self, node, inputs, outputs):
        outputs[0][0] = forward(*inputs)

    def infer_shape(self, *args):
        return [(args[-1][0][0] + 1,)]

    def connection_pattern(self, node):
        return [[True], [False], [False], [False]]

    def pullback(self, inputs, outputs, cotangents):
        if isinstance(cotangents[0].type, DisconnectedType):
            return [disconnected_type() for _ in inputs]
        return [MapBackOp()(*inputs, cotangents[0]), *(disconnected_type() for _ in inputs[1:])]

    L_op = pullback


class MapBackOp(Op):
    """``back`` in a PyTensor graph."""

    __props__ = ()

    def make_node(self, *inputs):
        return Apply(self, [pt.as_tensor_variable(x) for x in inputs], [pt.dvector()])

    def perform(self, node, inputs, outputs):
        *fixed, cotangent = inputs
        outputs[0][0] = back(*fixed, np.ascontiguousarray(cotangent))

    def infer_shape(self, *args):
        return [args[-1][0]]

    def pullback(self, inputs, outputs, cotangents):
        return [grad_not_implemented(self, i, x, "second derivatives are not coded") for i, x in enumerate(inputs)]

    L_op = pullback


@register_funcify_default_op_cache_key(MapOp)
def _compile_map(op, node=None, **_):
    @numba_njit
    def quadratic_map(z, m, L, S):
        return forward(*_contiguous(z, m, L, S))

    return quadratic_map, _SALT


@register_funcify_default_op_cache_key(MapBackOp)
def _compile_map_back(op, node=None, **_):
    @numba_njit
    def quadratic_map_back(z, m, L, S, cotangent):
        return back(*_contiguous(z, m, L, S), np.ascontiguousarray(cotangent))

    return quadratic_map_back, _SALT
