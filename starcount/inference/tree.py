"""A finished fit as a tree of datasets in ArviZ's layout."""

import json
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import arviz
import numpy as np
import xarray as xr

from starcount.inference import compat, curve, model
from starcount.inference.checks import judge
from starcount.inference.mapped_nuts import Chains
from starcount.inference.mode import Mode
from starcount.inference.predictive import QUANTILES, GroupDraws, predictive_draws, thinned
from starcount.inference.priors import prior_table
from starcount.inference.quadratic_map import QuadraticMap, folded
from starcount.inference.target import Target
from starcount.posterior import FORMAT

PRIOR_DRAWS = 2000
_FOLDS_LOOKED_AT = 500
_CENTRAL = (0.16, 0.84)


@dataclass(frozen=True, eq=False)
class Fit:
    """Everything a fit was asked for and found."""

    forward_model: object
    parameters: Sequence[str] | None
    likelihood: str
    lf_curve: bool
    census: bool
    seed: int
    target: Target
    mode: Mode
    map: QuadraticMap
    chains: Chains
    derived: Callable[[Mapping[str, float]], Mapping[str, float]] | None

    @property
    def galaxy(self):
        """The Galaxy that was fitted."""
        return self.forward_model.galaxy

    @property
    def names(self) -> tuple[str, ...]:
        """The Galaxy's fitted parameters."""
        return tuple(p.name for p in model.choose(self.galaxy, self.parameters))

    @property
    def groups(self) -> dict:
        """The group models that were fitted, by name, the census included."""
        return model.fitted_groups(self.forward_model, self.census)


def assemble(fit: Fit) -> xr.DataTree:
    """Return the tree that ``Posterior`` wraps."""
    z = fit.chains.z
    x = np.array([[fit.map(one)[0] for one in chain] for chain in z])
    posterior, derived = _named(fit, x)
    standard = np.random.default_rng(fit.seed).standard_normal((1, PRIOR_DRAWS, fit.target.size))
    prior, _ = _named(fit, standard)
    flat = x.reshape(-1, x.shape[2])
    n_cell = sum(group.used.size for group in fit.groups.values())
    draws = predictive_draws(fit.target, thinned(flat, n_cell), fit.groups, fit.seed)
    diagnostics = _diagnostics(posterior, prior)
    verdict = _judge(fit, diagnostics, draws)
    tree = xr.DataTree.from_dict(
        {
            "posterior": posterior,
            "prior": prior,
            "sample_stats": fit.chains.statistics,
            "observed_data": xr.merge([_observed(name, group) for name, group in fit.groups.items()]),
            "posterior_predictive": xr.merge([_quantiles(group) for group in draws]),
            "expected": xr.merge([_expected(group) for group in draws]),
            "diagnostics": diagnostics,
        }
    )
    tree.attrs.update(_attributes(fit, posterior, derived), **verdict.attributes())
    return tree


def _named(fit: Fit, x: np.ndarray) -> tuple[xr.Dataset, tuple[str, ...]]:
    """The named quantities at draws ``x`` (chain, draw, p), and the names of those that were derived."""
    shown = [name for name in fit.target.names if not name.startswith("u.")]
    rows = [fit.target.named(one) for one in x.reshape(-1, x.shape[2])]
    columns = {name: np.array([row[name] for row in rows]) for name in shown}
    derived: list = []
    if fit.derived is not None:
        derived = [fit.derived({name: float(row[name]) for name in fit.names}) for row in rows]
        columns |= {name: np.array([row[name] for row in derived]) for name in derived[0]}
    variables = {}
    for name, column in columns.items():
        dims = ("chain", "draw", curve.DIMENSION)[: 1 + column.ndim]
        variables[name] = (dims, column.reshape(*x.shape[:2], *column.shape[1:]))
    coords = {"chain": np.arange(x.shape[0]), "draw": np.arange(x.shape[1])}
    if any(curve.DIMENSION in dims for dims, _ in variables.values()):
        coords[curve.DIMENSION] = curve.KNOTS_MAG
    return xr.Dataset(variables, coords), tuple(derived[0]) if derived else ()


def _diagnostics(posterior: xr.Dataset, prior: xr.Dataset) -> xr.Dataset:
    """r-hat, effective sizes and the share of the prior's central 68 % width that is left, by quantity."""
    measured = {
        "r_hat": arviz.rhat(posterior),
        "ess_bulk": arviz.ess(posterior, method="bulk"),
        "ess_tail": arviz.ess(posterior, method="tail"),
        "prior_width_left": _width(posterior) / _width(prior),
    }
    names = [label for name in posterior.data_vars for label in _labels(posterior, name)]
    columns = {
        key: ("quantity", np.concatenate([np.ravel(found[name].values) for name in posterior.data_vars]))
        for key, found in measured.items()
    }
    return xr.Dataset(columns, {"quantity": names})


def _labels(posterior: xr.Dataset, name: str) -> list[str]:
    if curve.DIMENSION not in posterior[name].dims:
        return [name]
    return [f"{name}[{knot:g}]" for knot in posterior[curve.DIMENSION].values]


def _width(draws: xr.Dataset) -> xr.Dataset:
    quantiles = draws.quantile(_CENTRAL, ("chain", "draw"))
    return quantiles.isel(quantile=1, drop=True) - quantiles.isel(quantile=0, drop=True)


def _judge(fit: Fit, diagnostics: xr.Dataset, draws: Sequence[GroupDraws]):
    flat = fit.chains.z.reshape(-1, fit.chains.z.shape[2])
    looked_at = flat[:: max(1, len(flat) // _FOLDS_LOOKED_AT)]
    J = fit.target.jacobian(fit.mode.x)
    left = diagnostics["prior_width_left"].sel(quantity=list(fit.names))
    convergence = diagnostics[["r_hat", "ess_bulk", "ess_tail"]]
    return judge(
        {key: convergence[key].values for key in convergence},
        fit.chains.statistics,
        float(np.mean(folded(fit.map, looked_at))),
        fit.mode,
        J.T @ J,
        draws,
        dict(zip(fit.names, left.values, strict=True)),
    )


def _dims(name: str) -> tuple[str, str]:
    return f"field.{name}", f"bin.{name}"


def _observed(name: str, group) -> xr.Dataset:
    return xr.Dataset({name: (_dims(name), np.where(group.used, group.counts, -1))})


def _quantiles(group: GroupDraws) -> xr.Dataset:
    with np.errstate(invalid="ignore"):
        values = np.quantile(group.simulated, QUANTILES, axis=0)
    return xr.Dataset({group.name: (("quantile", *_dims(group.name)), values)}, {"quantile": list(QUANTILES)})


def _expected(group: GroupDraws) -> xr.Dataset:
    field, bins = _dims(group.name)
    return xr.Dataset(
        {
            group.name: (("sample", field, bins), group.expected.astype(np.float32)),
            f"ln_likelihood.{group.name}": (("sample", field), group.ln_likelihood),
        }
    )


def _attributes(fit: Fit, posterior: xr.Dataset, derived: tuple[str, ...]) -> dict:
    with_floor = [name for name in fit.groups if f"floor.{name}" in posterior]
    fitted = (*model.choose(fit.galaxy, fit.parameters), *(model.floor_of(name) for name in with_floor))
    table = prior_table(fitted)
    rows = [{name: column.tolist()[i] for name, column in table.columns.items()} for i in range(len(table))]
    components = tuple(component for component, _ in fit.galaxy.layers)
    used_curves = curve.curves(components, model.M_EDGES_MAG) if fit.lf_curve else ()
    return {
        "starcount_posterior": FORMAT,
        "parameters": json.dumps(fit.names),
        "fitted": json.dumps([p.name for p in fitted]),
        "derived": json.dumps(derived),
        "curves": json.dumps({c.name: list(c.components) for c in used_curves}),
        "priors": json.dumps(rows),
        "likelihood": fit.likelihood,
        "census": int(fit.census),
        "seed": fit.seed,
        "sampler": fit.chains.sampler,
        "mode_ln_posterior": fit.mode.value,
        "mode_starts": json.dumps(fit.mode.end_values.tolist()),
        "map_softened": fit.map.softened,
        "versions": json.dumps(compat.versions()),
    }
