"""NUTS (Hoffman & Gelman 2014) in the coordinates of the quadratic map.

The sampler moves z, where the posterior is nearly a standard normal: few steps a draw, and no divergences on the curved
ridge. It is handed the posterior as a plain function of z. Compiling the whole model into the sampler instead took LLVM
longer than the fit (see DEVELOPERS.md); here the kernels are compiled once, kept, and released from the interpreter's
lock, so that chains run side by side in threads.
"""

import os
import time
from collections.abc import Callable
from dataclasses import dataclass
from functools import partial

import numpy as np
import nutpie
import nutpie.compiled_pyfunc
import xarray as xr

from starcount.inference import compat
from starcount.inference.quadratic_map import QuadraticMap
from starcount.inference.target import Target

TARGET_ACCEPT = 0.88
SAMPLER = "NUTS in mapped coordinates (nutpie)"
_POLL_S = 0.2
_STEPS_A_DRAW = 7.0  # leapfrog steps of a nearly normal posterior: what the progress is reckoned by


@dataclass(frozen=True, eq=False)
class Chains:
    """Draws ``z`` (chain, draw, p) in mapped coordinates, the sampler's statistics and its name."""

    z: np.ndarray
    statistics: xr.Dataset
    sampler: str


def log_density(target: Target, q: QuadraticMap, z: np.ndarray) -> tuple[float, np.ndarray]:
    """Return ln of the posterior of z, up to a constant, and its gradient (p,); -inf beyond a fold of the map."""
    x, ln_volume = q(z)
    if not np.isfinite(ln_volume):
        return -np.inf, np.zeros(z.size)
    value, gradient = target.log_posterior(x)
    return value + ln_volume, q.pull_back(z, gradient)


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
    running = nutpie.sample(
        _as_nutpie_model(target, q),
        draws=draws,
        tune=tune,
        chains=chains,
        cores=min(chains, os.cpu_count() or 1),
        seed=seed,
        target_accept=TARGET_ACCEPT,
        progress_bar=False,
        blocking=False,
    )
    total = chains * (draws + tune)
    while not compat.is_finished(running):
        time.sleep(_POLL_S)
        progress(min(target.calls / (_STEPS_A_DRAW * total), 1.0))
    result = running.wait()
    z = compat.dataset(result, "posterior")["z"].transpose("chain", "draw", ...)
    return Chains(z.values, compat.sampler_statistics(result), SAMPLER)


def _as_nutpie_model(target: Target, q: QuadraticMap):
    """The posterior of z as nutpie takes it: every chain gets a copy of the compiled functions, which hold state."""

    def expand(seed1, seed2, chain):
        return lambda z: {"z": np.array(z)}

    return nutpie.compiled_pyfunc.from_pyfunc(
        ndim=target.size,
        make_logp_fn=lambda: partial(log_density, target.copy(), q),
        make_expand_fn=expand,
        expanded_dtypes=[np.dtype(np.float64)],
        expanded_shapes=[(target.size,)],
        expanded_names=["z"],
        make_initial_point_fn=lambda seed: np.random.default_rng(seed).standard_normal(target.size),
    )
