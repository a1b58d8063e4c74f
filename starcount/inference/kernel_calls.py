"""The places where a model's graph calls the compiled kernels, so that they can be run outside the graph.

A kernel takes some twenty arrays. Compiled into one function with the rest of a model's graph, LLVM spends minutes on
passing them; run from Python between two small compiled functions, the same kernel costs nothing more, and releases the
interpreter's lock, so that chains run side by side. The graph stays whole and ordinary for everybody else.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from starcount.inference.compat import ancestors
from starcount.inference.op import ExpectedCounts, Luminosity


@dataclass(frozen=True, eq=False)
class Done:
    """A call that was made: its expected counts (field, bin), and all that its pull-back needs."""

    call: "KernelCall"
    v: np.ndarray
    W: np.ndarray
    ln_dust: np.ndarray
    shape: tuple[int, ...]
    counts: np.ndarray

    def pull_back(self, cotangent: np.ndarray) -> list[np.ndarray]:
        """Return the cotangents of ``call.moving``, from that of the counts."""
        call, kernels = self.call, self.call.kernels
        want_W = call.moves[1]
        by_v, by_W, by_dust = kernels.project_back(
            self.v, self.W, self.ln_dust, np.ascontiguousarray(cotangent), want_W, *call.geometry
        )
        if want_W and call.pieces is not None:
            by_W = kernels.luminosity_back(by_W, self.shape, *call.pieces)
        return [g for g, moves in zip((by_v, by_W, by_dust), call.moves, strict=True) if moves]


@dataclass(frozen=True, eq=False)
class KernelCall:
    """One call of the projection in a graph.

    ``inputs`` are its variables v, factors on the luminosity functions (or the matrix, where that is data) and
    ln_dust; ``moves`` says which of them depend on the fitted numbers, ``moving`` are those; ``counts`` is the variable
    of its result; ``pieces`` the arrays that turn the factors into a matrix.
    """

    kernels: object
    inputs: tuple
    moves: tuple[bool, bool, bool]
    counts: object
    geometry: tuple[np.ndarray, ...]
    pieces: tuple[np.ndarray, ...] | None

    @property
    def moving(self) -> list:
        return [one for one, moves in zip(self.inputs, self.moves, strict=True) if moves]

    def __call__(self, v: np.ndarray, factors_or_W: np.ndarray, ln_dust: np.ndarray) -> Done:
        v, factors_or_W, ln_dust = (np.ascontiguousarray(one) for one in (v, factors_or_W, ln_dust))
        W = factors_or_W if self.pieces is None else self.kernels.luminosity(factors_or_W, *self.pieces)
        return Done(self, v, W, ln_dust, factors_or_W.shape, self.kernels.project(v, W, ln_dust, *self.geometry))


def kernel_calls(outputs: Sequence, value_vars: Sequence) -> list[KernelCall]:
    """Return the calls of the projection that ``outputs`` depend on."""
    nodes = {one.owner: None for one in ancestors(outputs) if one.owner and isinstance(one.owner.op, ExpectedCounts)}
    return [_kernel_call(node, set(value_vars)) for node in nodes]


def _kernel_call(node, value_vars: set) -> KernelCall:
    v, W, ln_dust, *geometry = node.inputs
    pieces = None
    if W.owner is not None and isinstance(W.owner.op, Luminosity):
        W, *arrays = W.owner.inputs
        pieces = tuple(one.get_value(borrow=True) for one in arrays)
    inputs = (v, W, ln_dust)
    moves = tuple(not value_vars.isdisjoint(ancestors([one])) for one in inputs)
    kept = tuple(one.get_value(borrow=True) for one in geometry)
    return KernelCall(node.op.kernels, inputs, moves, node.outputs[0], kept, pieces)
