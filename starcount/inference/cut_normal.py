"""Quantiles of a normal distribution cut at two ends, as numbers and as an operation of a PyTensor graph.

PyTensor's own inverse error function is called through a pointer, and code with such a pointer cannot be kept on disk:
every fit would compile for half a minute. Newton's method on ln of the normal integral needs none.
"""

import math
from hashlib import sha256
from pathlib import Path

import numpy as np
import pytensor.tensor as pt
from numba import njit
from pytensor.graph.basic import Apply
from pytensor.graph.op import Op
from pytensor.link.numba.dispatch.basic import numba_njit, register_funcify_default_op_cache_key

_SALT = int.from_bytes(sha256(Path(__file__).read_bytes()).digest()[:6], "big")
_DEEPEST = -36.0  # the normal integral underflows beyond


@njit(nogil=True, error_model="numpy", cache=True)
def _integral(x):
    return 0.5 * math.erfc(-x / math.sqrt(2.0))


@njit(nogil=True, error_model="numpy", cache=True)
def _inverse(p):
    """x < 0 at which the normal integral is ``p`` <= 1/2. ln of the integral is concave, so Newton's steps converge."""
    x = -math.sqrt(max(-2.0 * math.log(2.0 * p), 0.0))  # left of the root: the integral is below exp(-x^2 / 2) / 2
    for _ in range(60):
        q = _integral(x)
        density = math.exp(-0.5 * x * x) / math.sqrt(2.0 * math.pi)
        step = (math.log(p) - math.log(q)) * q / density
        x += step
        if abs(step) < 1e-14 * (1.0 - x):
            break
    return x


@njit(nogil=True, error_model="numpy", cache=True)
def cut_quantile(u, low, high):
    """The point of the standard normal cut to ``low`` ... ``high`` with the same cumulative probability as ``u``.

    Each half is computed from its own tail, where the probabilities keep their digits.
    """
    u = min(max(u, _DEEPEST), -_DEEPEST)
    inside = _integral(high) - _integral(low) if low < 0.0 else _integral(-low) - _integral(-high)
    lower, upper = _integral(low) + inside * _integral(u), _integral(-high) + inside * _integral(-u)
    return _inverse(lower) if lower < 0.5 else -_inverse(upper)


class CutQuantile(Op):
    """``cut_quantile`` of a scalar between two numbers."""

    __props__ = ("low", "high")

    def __init__(self, low: float, high: float):
        self.low, self.high = low, high

    def make_node(self, u):
        return Apply(self, [pt.as_tensor_variable(u)], [pt.dscalar()])

    def perform(self, node, inputs, outputs):
        outputs[0][0] = np.asarray(cut_quantile(float(inputs[0]), self.low, self.high))

    def infer_shape(self, *args):
        return [()]

    def pullback(self, inputs, outputs, cotangents):
        inside = _integral(self.high) - _integral(self.low)
        return [cotangents[0] * inside * pt.exp(0.5 * (outputs[0] ** 2 - inputs[0] ** 2))]

    L_op = pullback  # PyTensor 2 looks for this name, PyTensor 3 for ``pullback``


@register_funcify_default_op_cache_key(CutQuantile)
def _compile(op, node=None, **_):
    low, high = op.low, op.high

    @numba_njit
    def quantile(u):
        return np.asarray(cut_quantile(u.item(), low, high))

    return quantile, _SALT
