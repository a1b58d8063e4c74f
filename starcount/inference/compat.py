"""Every difference between PyMC 5.28 with ArviZ 0.23 (Python 3.11) and PyMC 6 with ArviZ 1 (later Pythons).

Of ArviZ only ``rhat`` and ``ess`` are called, and only with a Dataset: there both generations agree. Modes, samplers
and intervals are always named, because the defaults of the two generations differ.
"""

from importlib.metadata import PackageNotFoundError, version

import xarray as xr

try:
    from pytensor.graph.traversal import ancestors
except ImportError:  # PyTensor 2
    from pytensor.graph.basic import ancestors

MODE = "NUMBA"
"""How every function is compiled; PyMC 5 would take its C back end, which needs a compiler."""

_STATISTICS = {"depth": "tree_depth", "maxdepth_reached": "reached_max_treedepth", "logp": "lp"}
_KEPT = ("diverging", "tree_depth", "n_steps", "step_size", "energy", "lp", "reached_max_treedepth")
_PACKAGES = ("starcount", "numpy", "scipy", "numba", "pytensor", "pymc", "arviz", "nutpie", "xarray")


def dataset(result, group: str) -> xr.Dataset:
    """Return a group of a sampler's result: an InferenceData (PyMC 5) or a DataTree (PyMC 6)."""
    tree = result if isinstance(result, xr.DataTree) else result.to_datatree()
    return tree[group].to_dataset()


def sampler_statistics(result) -> xr.Dataset:
    """Return the statistics of a sampler under common names; nutpie and PyMC's own differ in three of them."""
    statistics = dataset(result, "sample_stats")
    names = {old: new for old, new in _STATISTICS.items() if old in statistics and new not in statistics}
    statistics = statistics.rename(names)
    kept = statistics[[name for name in _KEPT if name in statistics]]
    return kept.drop_vars([name for name in kept.coords if name not in ("chain", "draw")])


def is_finished(running) -> bool:
    """Whether a nutpie sampler in the background is done; while busy, some versions raise instead of saying no."""
    try:
        return running.is_finished
    except TimeoutError:
        return False


def versions() -> dict[str, str]:
    """Return the version of every library that took part in a fit."""
    return {name: found for name in _PACKAGES if (found := _version(name)) is not None}


def _version(package: str) -> str | None:
    try:
        return version(package)
    except PackageNotFoundError:
        return None


__all__ = ["MODE", "ancestors", "dataset", "is_finished", "sampler_statistics", "versions"]
