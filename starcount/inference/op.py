"""The projection as operations of a PyTensor graph: expected counts and the luminosity matrix, with their pull-backs.

The operations hold no arrays: geometry enters as inputs, so that one compiled function serves every survey and nothing
large is frozen into it. They hold no state and write only to arrays they allocate, so that chains may run as threads.
``digest`` names the source of the kernels; it is part of the key under which PyTensor caches compiled code, because
that key does not know the code of a kernel: without it an edited kernel returns the old numbers.
"""

from hashlib import sha256
from pathlib import Path
from typing import Protocol

import numpy as np
import pytensor.tensor as pt
from pytensor.gradient import DisconnectedType, disconnected_type, grad_not_implemented
from pytensor.graph.basic import Apply
from pytensor.graph.op import Op
from pytensor.link.numba.dispatch.basic import numba_njit, register_funcify_default_op_cache_key

_SALT = int.from_bytes(sha256(Path(__file__).read_bytes()).digest()[:6], "big")
"""Part of the cache keys beside the kernels' digest: the code of this file."""


class Kernels(Protocol):
    """The compiled functions of the forward model: ``starcount.forward.kernels`` or what stands in for it."""

    DIGEST: str
    project: object
    project_back: object
    luminosity: object
    luminosity_back: object


class _KernelOp(Op):
    """An operation that calls one compiled function; compared, hashed and cached by the digest of the source."""

    __props__ = ("digest",)

    def __init__(self, kernels: Kernels):
        self.kernels = _Held(kernels)
        self.digest = kernels.DIGEST

    def pullback(self, inputs, outputs, cotangents):
        return [grad_not_implemented(self, i, x, "second derivatives are not coded") for i, x in enumerate(inputs)]

    L_op = pullback  # PyTensor 2 looks for this name, PyTensor 3 for ``pullback``


class _Held:
    """The functions of a kernel module without the module, which could not be copied or pickled."""

    def __init__(self, kernels: Kernels):
        self.project, self.project_back = kernels.project, kernels.project_back
        self.luminosity, self.luminosity_back = kernels.luminosity, kernels.luminosity_back
        self.DIGEST = kernels.DIGEST


class _Projection(_KernelOp):
    """The projection, forwards or backwards; with ``fixed_luminosity`` W is data and its gradient is not computed."""

    __props__ = ("digest", "fixed_luminosity")

    def __init__(self, kernels: Kernels, fixed_luminosity: bool):
        super().__init__(kernels)
        self.fixed_luminosity = fixed_luminosity


class ExpectedCounts(_Projection):
    """Expected counts (field, bin) from v (vector), W (row, bin), ln_dust (field,) and the geometry's arrays."""

    def make_node(self, v, W, ln_dust, *geometry):
        inputs = [pt.as_tensor_variable(x) for x in (v, W, ln_dust, *geometry)]
        _require_floats(self, inputs[:3], (1, 2, 1))
        return Apply(self, inputs, [pt.dmatrix()])

    def perform(self, node, inputs, outputs):
        outputs[0][0] = self.kernels.project(*inputs)

    def infer_shape(self, *args):
        shapes = args[-1]  # PyTensor 2 hands over (fgraph, node, shapes), PyTensor 3 (node, shapes)
        return [(shapes[2][0], shapes[1][1])]

    def connection_pattern(self, node):
        return [[True], [not self.fixed_luminosity], [True]] + [[False]] * (len(node.inputs) - 3)

    def pullback(self, inputs, outputs, cotangents):
        if isinstance(cotangents[0].type, DisconnectedType):
            return [disconnected_type() for _ in inputs]
        back = ExpectedCountsBack(self.kernels, self.fixed_luminosity)(*inputs[:3], cotangents[0], *inputs[3:])
        if self.fixed_luminosity:
            back[1] = disconnected_type()
        return [*back, *(disconnected_type() for _ in inputs[3:])]

    L_op = pullback


class ExpectedCountsBack(_Projection):
    """The pull-back of ``ExpectedCounts``: cotangents of v, W and ln_dust from that of the counts."""

    def make_node(self, v, W, ln_dust, cotangent, *geometry):
        inputs = [pt.as_tensor_variable(x) for x in (v, W, ln_dust, cotangent, *geometry)]
        return Apply(self, inputs, [pt.dvector(), pt.dmatrix(), pt.dvector()])

    def perform(self, node, inputs, outputs):
        v, W, ln_dust, cotangent, *geometry = inputs
        cotangent, want_W = np.ascontiguousarray(cotangent), not self.fixed_luminosity
        results = self.kernels.project_back(v, W, ln_dust, cotangent, want_W, *geometry)
        for output, result in zip(outputs, results, strict=True):
            output[0] = result

    def infer_shape(self, *args):
        return list(args[-1][:3])


class Luminosity(_KernelOp):
    """The luminosity matrix W (row, bin) of the factors (curve, knot) on the luminosity functions: linear."""

    def make_node(self, factors, *arrays):
        inputs = [pt.as_tensor_variable(x) for x in (factors, *arrays)]
        _require_floats(self, inputs[:1], (2,))
        return Apply(self, inputs, [pt.dmatrix()])

    def perform(self, node, inputs, outputs):
        outputs[0][0] = self.kernels.luminosity(np.ascontiguousarray(inputs[0]), *inputs[1:])

    def connection_pattern(self, node):
        return [[True]] + [[False]] * (len(node.inputs) - 1)

    def pullback(self, inputs, outputs, cotangents):
        if isinstance(cotangents[0].type, DisconnectedType):
            return [disconnected_type() for _ in inputs]
        back = LuminosityBack(self.kernels)(inputs[0], cotangents[0], *inputs[1:])
        return [back, *(disconnected_type() for _ in inputs[1:])]

    L_op = pullback


class LuminosityBack(_KernelOp):
    """The transpose of ``Luminosity``; of the factors themselves only the shape matters."""

    def make_node(self, factors, cotangent, *arrays):
        inputs = [pt.as_tensor_variable(x) for x in (factors, cotangent, *arrays)]
        return Apply(self, inputs, [pt.dmatrix()])

    def perform(self, node, inputs, outputs):
        factors, cotangent, *arrays = inputs
        outputs[0][0] = self.kernels.luminosity_back(np.ascontiguousarray(cotangent), factors.shape, *arrays)

    def infer_shape(self, *args):
        return [args[-1][0]]


def _require_floats(op, variables, dimensions) -> None:
    for variable, n in zip(variables, dimensions, strict=True):
        if variable.type.ndim != n or variable.type.dtype != "float64":
            raise TypeError(f"{type(op).__name__}: {variable} must be a float64 array of {n} dimension(s)")


# The arrays are made contiguous before a kernel sees them: PyTensor may hand over views, and every other memory
# layout would compile the kernel once more.


@register_funcify_default_op_cache_key(ExpectedCounts)
def _compile_expected_counts(op, node=None, **_):
    project = op.kernels.project

    @numba_njit
    def expected_counts(v, W, ln_dust, *geometry):
        return project(np.ascontiguousarray(v), np.ascontiguousarray(W), np.ascontiguousarray(ln_dust), *geometry)

    return expected_counts, _SALT


@register_funcify_default_op_cache_key(ExpectedCountsBack)
def _compile_expected_counts_back(op, node=None, **_):
    project_back, want_W = op.kernels.project_back, not op.fixed_luminosity

    @numba_njit
    def expected_counts_back(v, W, ln_dust, cotangent, *geometry):
        v, W, ln_dust = np.ascontiguousarray(v), np.ascontiguousarray(W), np.ascontiguousarray(ln_dust)
        return project_back(v, W, ln_dust, np.ascontiguousarray(cotangent), want_W, *geometry)

    return expected_counts_back, _SALT


@register_funcify_default_op_cache_key(Luminosity)
def _compile_luminosity(op, node=None, **_):
    luminosity = op.kernels.luminosity

    @numba_njit
    def luminosity_matrix(factors, *arrays):
        return luminosity(np.ascontiguousarray(factors), *arrays)

    return luminosity_matrix, _SALT


@register_funcify_default_op_cache_key(LuminosityBack)
def _compile_luminosity_back(op, node=None, **_):
    luminosity_back = op.kernels.luminosity_back

    @numba_njit
    def luminosity_matrix_back(factors, cotangent, *arrays):
        return luminosity_back(np.ascontiguousarray(cotangent), factors.shape, *arrays)

    return luminosity_matrix_back, _SALT
