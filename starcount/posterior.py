"""The draws of a fit: named, checked, saved and loaded. Knows neither the sampler nor PyMC."""

import json
import os
import tempfile
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import xarray as xr
from astropy.table import Table

from starcount.errors import FailedChecks, InputError, UnknownName
from starcount.forward.knots import KNOTS_MAG

FORMAT = 1
SUMMARY_QUANTILES = (0.025, 0.16, 0.5, 0.84, 0.975)
"""Medians and central 68 and 95 % intervals, equal-tailed."""


@dataclass(frozen=True, eq=False)
class Posterior:
    """Draws of a fit as a tree in ArviZ's layout.

    ``posterior`` holds every parameter in its own unit, the error floors, the curves of the luminosity functions
    (``curve.NAME``, over ``knot_mag``) and what was derived from them, over (chain, draw); ``prior`` draws of the same
    before the counts were seen; ``sample_stats`` the sampler's own statistics; ``observed_data`` the counts of each
    group (-1: not used); ``posterior_predictive`` quantiles of simulated counts; ``expected`` expected counts and
    log likelihoods by field for some of the draws; ``diagnostics`` r-hat and effective sizes. The attributes of the
    root hold seed, priors, verdict, checks and versions.
    """

    tree: xr.DataTree

    @property
    def names(self) -> tuple[str, ...]:
        """The parameters that were fitted: the Galaxy's, then the error floors."""
        return tuple(json.loads(self.tree.attrs["fitted"]))

    @property
    def derived_names(self) -> tuple[str, ...]:
        """What was computed from each draw beside the parameters."""
        return tuple(json.loads(self.tree.attrs["derived"]))

    @property
    def size(self) -> int:
        """The number of draws of all chains together."""
        sizes = self.tree["posterior"].sizes
        return sizes["chain"] * sizes["draw"]

    @property
    def certified(self) -> bool:
        """Whether every check passed; only then are the draws a posterior."""
        return bool(self.tree.attrs["passed"])

    @property
    def verdict(self) -> str:
        """The outcome of the checks in words; starts with FAILED CHECKS where one failed."""
        return self.tree.attrs["verdict"]

    @property
    def checks(self) -> list[dict]:
        """Every check: name, value, required, passed."""
        return json.loads(self.tree.attrs["checks"])

    @property
    def warnings(self) -> list[str]:
        """What fails nothing but should be known."""
        return json.loads(self.tree.attrs["warnings"])

    @property
    def priors(self) -> list[dict]:
        """The priors of the fitted parameters: name, unit, prior, median, q16, q84, meaning, reference."""
        return json.loads(self.tree.attrs["priors"])

    def require_certified(self) -> None:
        """Raise ``FailedChecks`` unless every check passed."""
        if not self.certified:
            raise FailedChecks(self.verdict)

    def draws(self, name: str) -> np.ndarray:
        """Return the draws of one quantity, chains one after the other: (draw, ...)."""
        return self._flat("posterior", name)

    def prior_draws(self, name: str) -> np.ndarray:
        """Return draws of one quantity from its prior: (draw, ...)."""
        return self._flat("prior", name)

    def _flat(self, group: str, name: str) -> np.ndarray:
        dataset = self.tree[group].to_dataset()
        if name not in dataset:
            raise UnknownName(f"quantity in the {group}", name, tuple(dataset.data_vars))
        values = dataset[name].transpose("chain", "draw", ...).values
        return values.reshape(-1, *values.shape[2:])

    def values(self, index: int) -> dict[str, float]:
        """Return the Galaxy's fitted parameters of one draw."""
        return {name: float(self.draws(name)[index]) for name in json.loads(self.tree.attrs["parameters"])}

    def floor(self, group: str) -> np.ndarray:
        """Return the fractional scatter of a group's counts beyond Poisson noise: (draw,); zeros with a Poisson fit."""
        name = f"floor.{group}"
        return self.draws(name) if name in self.tree["posterior"] else np.zeros(self.size)

    def curve_factors(self, components: Sequence[str], index: int) -> np.ndarray:
        """Return the factors (layer, knot) that the curves of one draw put on the luminosity functions.

        ``components`` are the names of the layers' components; layers without a curve have 1.
        """
        curves: Mapping[str, list[str]] = json.loads(self.tree.attrs["curves"])
        factors = np.ones((len(components), KNOTS_MAG.size))
        for name, members in curves.items():
            factors[[component in members for component in components]] = np.exp(self.draws(f"curve.{name}")[index])
        return factors

    def at_draw(self, group_model, index: int, parts: bool = False):
        """Return the counts (field, bin) expected of one draw, or with ``parts`` by component and extra row."""
        factors = self.curve_factors([component.name for component, _ in group_model.galaxy.layers], index)
        return group_model.expected(self.values(index), factors=factors, parts=parts)

    def summary(self) -> Table:
        """Return mean, sd, quantiles, r-hat, effective sizes and what is left of the prior's width, by quantity."""
        names = (*self.names, *self.derived_names)
        units = {prior["name"]: prior["unit"] for prior in self.priors}
        drawn = np.array([self.draws(name) for name in names])
        table = Table()
        table["name"], table["unit"] = list(names), [units.get(name, "") for name in names]
        table["mean"], table["sd"] = drawn.mean(axis=1), drawn.std(axis=1, ddof=1)
        for q, row in zip(SUMMARY_QUANTILES, np.quantile(drawn, SUMMARY_QUANTILES, axis=1), strict=True):
            table[f"q{100 * q:g}"] = row
        diagnostics = self.tree["diagnostics"].to_dataset().sel(quantity=list(names))
        for name in ("r_hat", "ess_bulk", "ess_tail", "prior_width_left"):
            table[name] = diagnostics[name].values
        table.meta["verdict"] = self.verdict
        return table

    def save(self, path: Path | str) -> None:
        """Write a netCDF-4 file, under a temporary name first: an interrupted write destroys no earlier file."""
        path = Path(path)
        try:
            handle, part = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.", suffix=".part")
            os.close(handle)
        except OSError as problem:
            raise InputError(f"{path}: cannot be written ({problem.strerror})") from None
        try:
            self.tree.to_netcdf(part, engine="h5netcdf")
            os.chmod(part, 0o644)
            os.replace(part, path)
        finally:
            Path(part).unlink(missing_ok=True)

    @classmethod
    def load(cls, path: Path | str) -> "Posterior":
        """Read a posterior that was saved; refuse any other file."""
        try:
            with xr.open_datatree(path, engine="h5netcdf") as tree:
                tree = tree.load()
        except (OSError, KeyError, ValueError) as problem:
            raise InputError(f"{path}: not a readable posterior ({type(problem).__name__})") from None
        if tree.attrs.get("starcount_posterior") != FORMAT:
            raise InputError(
                f"{path}: not a posterior of this program; expected attribute starcount_posterior = {FORMAT}"
            )
        return cls(tree)
