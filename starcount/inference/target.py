"""A PyMC model as plain functions of one vector: what the mode, the map and the draws are made of.

Works for any PyMC model whose counts have one of our likelihoods. Everything else in it (priors, potentials, further
observed variables) enters through its logarithm and the derivatives of that.
"""

import os
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from copy import copy
from dataclasses import dataclass
from queue import SimpleQueue
from types import ModuleType

import numpy as np
import pymc as pm
import pytensor
import pytensor.tensor as pt
from pytensor.graph.replace import graph_replace
from scipy import linalg

from starcount.errors import InputError
from starcount.inference import compat, likelihoods
from starcount.inference.kernel_calls import kernel_calls

STEP = 1e-5
"""The step of differences, in standard deviations of the prior: slopes are right to about 1e-5, far finer than a map or
a scoring step needs."""

_FLATTEST = 1e-6
"""The least curvature a prior is given, so that a flat or double-peaked one still leaves a finite step."""


@dataclass(frozen=True)
class Counts:
    """The name of an observed variable and its likelihood."""

    name: str
    likelihood: ModuleType


class Target:
    """The posterior of a PyMC model in its unconstrained variables, joined in one vector ``x`` (p,)."""

    def __init__(self, model: pm.Model):
        self.model = model
        point = model.initial_point()
        self.shapes = tuple(np.shape(point[v.name]) for v in model.value_vars)
        self.x0 = np.concatenate([np.ravel(point[v.name]) for v in model.value_vars]).astype(float)
        found = [(rv, likelihoods.recognise(rv)) for rv in model.observed_RVs]
        ours = [(rv, terms) for rv, terms in found if terms is not None]
        if not ours:
            raise InputError("the PyMC model holds no counts with one of the likelihoods of this package")
        self.counts = tuple(Counts(rv.name, terms[0]) for rv, terms in ours)
        self.observed = tuple(np.asarray(model.rvs_to_values[rv].eval(), float) for rv, _ in ours)
        self.calls = 0
        self._compile(point, ours, [rv for rv, terms in found if terms is None])

    def _compile(self, point, ours, others) -> None:
        model = self.model
        named = [v for v in model.unobserved_RVs if v.name in model.named_vars]
        self.names = tuple(v.name for v in named)
        rest = model.logp(vars=[*model.free_RVs, *model.potentials, *others])
        self._rest = self._function(point, [rest], gradient_of=rest)
        self._named = self._function(point, model.replace_rvs_by_values(named))
        spreads = [pt.as_tensor_variable(0.0 if d is None else d) for _, (_, _, d) in ours]
        outputs = model.replace_rvs_by_values([*(mean for _, (_, mean, _) in ours), *spreads])
        self.calls_of_kernels = kernel_calls(outputs, model.value_vars)
        counts = [call.counts.type() for call in self.calls_of_kernels]
        cut = graph_replace(
            outputs, {call.counts: one for call, one in zip(self.calls_of_kernels, counts, strict=True)}
        )
        inputs = [one for call in self.calls_of_kernels for one in call.inputs]
        moving = [one for call in self.calls_of_kernels for one in call.moving]
        self._inputs = self._function(point, inputs)
        self._means_of = self._function(point, cut, counts)
        pulls = [*(one.type() for one in cut[: len(ours)]), *(pt.dscalar() for _ in spreads)]
        pulled = _contracted(pulls, cut)
        self._pull = self._function(point, [], [*counts, *pulls], gradient_of=pulled, also_by=counts)
        back = [one.type() for one in moving]
        self._back = self._function(point, [], back, gradient_of=_contracted(back, moving))

    def _function(self, point, outputs, more_inputs=(), gradient_of=None, also_by=()):
        """Compile ``outputs``, and the gradient of ``gradient_of`` by x and by further variables, as functions of x."""
        wanted = [*outputs, *([] if gradient_of is None else [gradient_of])]
        joined, x = pm.pytensorf.join_nonshared_inputs(point, wanted, self.model.value_vars)
        found = joined[: len(outputs)]
        if gradient_of is not None:
            found += pytensor.grad(joined[-1], [x, *also_by], disconnected_inputs="ignore")
        return pytensor.function([x, *more_inputs], found, mode=compat.MODE, on_unused_input="ignore")

    def copy(self) -> "Target":
        """Return the target with functions of its own: a compiled function holds state, so threads must not share one.

        Calls are counted in the original.
        """
        twin = copy(self)
        for name in ("_inputs", "_means_of", "_pull", "_back", "_rest", "_named"):
            setattr(twin, name, getattr(self, name).copy())
        twin._count = self._count
        return twin

    def over(self, function: Callable, points) -> list:
        """Return ``function(target, point)`` for each point, on as many threads as there are cores.

        Kernels release the interpreter's lock, so threads share the work; each has a copy of the target.
        """
        n_thread = min(len(points), os.cpu_count() or 1)
        free = SimpleQueue()
        for _ in range(n_thread):
            free.put(self.copy())

        def run(point):
            mine = free.get()
            try:
                return function(mine, point)
            finally:
                free.put(mine)

        with ThreadPoolExecutor(n_thread) as threads:
            return list(threads.map(run, points))

    def jacobians(self, points) -> list[np.ndarray]:
        """Return ``jacobian`` at many points, side by side."""
        return self.over(Target.jacobian, points)

    def _count(self) -> None:
        self.calls += 1

    @property
    def size(self) -> int:
        """How many numbers are fitted."""
        return self.x0.size

    def log_posterior(self, x: np.ndarray) -> tuple[float, np.ndarray]:
        """Return ln of the posterior, up to a constant, and its gradient (p,)."""
        self._count()
        value, gradient = self._rest(x)
        done, (means, spreads) = self._forward(x)
        terms = [_terms(*one) for one in zip(self.counts, self.observed, means, spreads, strict=True)]
        by_spread = [one[3] / spread if spread > 0 else 0.0 for one, spread in zip(terms, spreads, strict=True)]
        by_mean = [one[1] for one in terms]
        direct, *by_counts = self._pull(x, *(one.counts for one in done), *by_mean, *by_spread)
        moved = [g for one, by_count in zip(done, by_counts, strict=True) for g in one.pull_back(by_count)]
        (through_kernels,) = self._back(x, *moved)
        return float(value) + sum(one[0] for one in terms), gradient + direct + through_kernels

    def means(self, x: np.ndarray) -> tuple[list[np.ndarray], list[float]]:
        """Return the expected counts of each observed variable, used bins in a row, and its dispersion."""
        return self._forward(x)[1]

    def _forward(self, x: np.ndarray):
        """The kernels' results, and what ``means`` returns."""
        inputs = iter(self._inputs(x))
        done = [call(*(next(inputs) for _ in call.inputs)) for call in self.calls_of_kernels]
        found, n = self._means_of(x, *(one.counts for one in done)), len(self.counts)
        return done, (found[:n], [float(np.ravel(d)[0]) for d in found[n:]])

    def named(self, x: np.ndarray) -> dict[str, np.ndarray]:
        """Return every named variable of the model in its own units."""
        return dict(zip(self.names, self._named(x), strict=True))

    def jacobian(self, x: np.ndarray) -> np.ndarray:
        """Return J (row, p): its J^T J is the expected information of the counts plus the curvature of the rest."""
        rows = [*self._count_rows(x), self._rest_root(x)]
        return np.concatenate(rows)

    def _count_rows(self, x: np.ndarray):
        means, spreads = self.means(x)
        steps = [self._difference(x, i, means, spreads) for i in range(x.size)]
        for c, (counts, n) in enumerate(zip(self.counts, self.observed, strict=True)):
            slopes = np.stack([mean[c] for mean, _ in steps], axis=1)
            _, _, information, _, on_spread = _terms(counts, n, means[c], spreads[c])
            yield np.sqrt(information)[:, None] * slopes
            if spreads[c] > 0:
                slope = np.array([spread[c] for _, spread in steps]) / spreads[c]
                yield np.sqrt(on_spread.sum()) * slope[None, :]

    def _difference(self, x: np.ndarray, i: int, means, spreads) -> tuple[list[np.ndarray], list[float]]:
        step = np.zeros(x.size)
        step[i] = STEP
        high, high_spread = self.means(x + step)
        by_mean = [(a - b) / STEP for a, b in zip(high, means, strict=True)]
        return by_mean, [(a - b) / STEP for a, b in zip(high_spread, spreads, strict=True)]

    def _rest_root(self, x: np.ndarray) -> np.ndarray:
        """The symmetric square root of the curvature of everything but the counts: (p, p)."""
        steps = STEP * np.eye(x.size)
        hessian = np.array([self._rest(x - h)[1] - self._rest(x + h)[1] for h in steps]) / (2 * STEP)
        values, vectors = linalg.eigh(0.5 * (hessian + hessian.T))
        return (vectors * np.sqrt(np.maximum(values, _FLATTEST))) @ vectors.T


def _terms(counts: Counts, n: np.ndarray, mean: np.ndarray, dispersion: float):
    """The compiled terms of one observed variable, all of whose bins are used."""
    found = counts.likelihood.terms(n[None, :], np.ones((1, n.size), bool), mean[None, :], dispersion)
    return [one[0] for one in found]


def _contracted(cotangents, variables):
    """The sum of the products of variables with their cotangents: its gradient is their pull-back."""
    pairs = zip(cotangents, variables, strict=True)
    return sum((pt.sum(cotangent * one) for cotangent, one in pairs), pt.constant(0.0))
