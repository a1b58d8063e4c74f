"""NUTS (Hoffman & Gelman 2014) in the coordinates of the quadratic map.

A second PyMC model has the flat variable z and the original posterior with its variables replaced by the map's, plus
ln |dx/dz|. There the posterior is nearly a standard normal: few steps a draw, and no divergences on the curved ridge.
"""

import os
import time
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pymc as pm
import pytensor
import xarray as xr
from pytensor.graph.replace import graph_replace

from starcount.inference import compat
from starcount.inference.quadratic_map import MapOp, QuadraticMap
from starcount.inference.target import Target

TARGET_ACCEPT = 0.85
_POLL_S = 0.5


@dataclass(frozen=True, eq=False)
class Chains:
    """Draws ``z`` (chain, draw, p) in mapped coordinates, the sampler's statistics and its name."""

    z: np.ndarray
    statistics: xr.Dataset
    sampler: str


def mapped_model(target: Target, q: QuadraticMap) -> pm.Model:
    """Return the PyMC model of z: the target's posterior in the map's coordinates."""
    names = ("mode", "scale", "curvature")
    m, L, S = (pytensor.shared(a, name=f"map.{n}") for n, a in zip(names, (q.m, q.L, q.S), strict=True))
    original = target.model.logp()
    with pm.Model() as mapped:
        z = pm.Flat("z", shape=target.size)
        x = MapOp()(z, m, L, S)
        pm.Potential("posterior", graph_replace([original], _pieces(target, x))[0] + x[-1])
    return mapped


def _pieces(target: Target, x) -> dict:
    """The value variables of the original model as parts of the joined vector."""
    pieces, first = {}, 0
    for variable, shape in zip(target.model.value_vars, target.shapes, strict=True):
        size = int(np.prod(shape))
        pieces[variable] = x[first : first + size].reshape(shape) if shape else x[first]
        first += size
    return pieces


def sample(
    target: Target,
    q: QuadraticMap,
    *,
    draws: int,
    tune: int,
    chains: int,
    seed: int,
    progress: Callable[[float], None],
) -> Chains:
    """Draw from the posterior; ``progress`` is told the share that is done, between 0 and 1."""
    model = mapped_model(target, q)
    settings = {"draws": draws, "tune": tune, "chains": chains, "seed": seed, "progress": progress}
    if compat.has_nutpie():
        return _with_nutpie(model, **settings)
    return _with_pymc(model, **settings)


def _with_nutpie(model, *, draws, tune, chains, seed, progress) -> Chains:
    import nutpie

    compiled = nutpie.compile_pymc_model(model, backend="numba")
    running = nutpie.sample(
        compiled,
        draws=draws,
        tune=tune,
        chains=chains,
        cores=min(chains, os.cpu_count() or 1),
        seed=seed,
        target_accept=TARGET_ACCEPT,
        progress_bar=False,
        blocking=False,
    )
    while not compat.is_finished(running):
        time.sleep(_POLL_S)
        progress(_share(running.inspect(), chains * (draws + tune)))
    result = running.wait()
    return _chains(result, "NUTS in mapped coordinates (nutpie)")


def _share(so_far, total: int) -> float:
    tree = so_far if isinstance(so_far, xr.DataTree) else so_far.to_datatree()
    groups = [tree[name]["z"] for name in ("warmup_posterior", "posterior") if name in tree.children]
    return float(sum(np.isfinite(z.values[..., 0]).sum() for z in groups)) / total


def _with_pymc(model, *, draws, tune, chains, seed, progress) -> Chains:
    total, done = chains * (draws + tune), 0

    def count(trace, draw):
        nonlocal done
        done += 1
        if done % 100 == 0:
            progress(done / total)

    # One process: PyMC's workers are forks, which compiled code with threads does not survive.
    result = pm.sample(
        draws,
        tune=tune,
        chains=chains,
        cores=1,
        model=model,
        random_seed=seed,
        nuts_sampler="pymc",
        target_accept=TARGET_ACCEPT,
        compile_kwargs={"mode": compat.MODE},
        callback=count,
        compute_convergence_checks=False,
        progressbar=False,
        quiet=True,
    )
    return _chains(result, "NUTS in mapped coordinates (PyMC)")


def _chains(result, sampler: str) -> Chains:
    z = compat.dataset(result, "posterior")["z"]
    return Chains(z.transpose("chain", "draw", ...).values, compat.sampler_statistics(result), sampler)
