"""The tables of what a fit found: parameters with their priors, derived quantities, truth where it is known."""

from collections.abc import Mapping, Sequence

import numpy as np
from astropy.table import MaskedColumn, Table

from starcount.report.content import ParameterDraws

PRIOR_DOMINATED = 0.1
"""A parameter whose central 68 % shrank by less than this share of the prior's is flagged: its value is the prior's."""

PERCENTS = {"lower_95": 2.5, "lower_68": 16, "median": 50, "upper_68": 84, "upper_95": 97.5}


def intervals(draws: np.ndarray) -> dict[str, float]:
    """Median, equal-tailed intervals and standard deviation of draws (draw,)."""
    values = np.percentile(draws, list(PERCENTS.values()))
    return {**dict(zip(PERCENTS, map(float, values), strict=True)), "sd": float(np.std(draws))}


def parameter_table(parameters: Sequence[ParameterDraws]) -> Table:
    """One row a parameter. ``shrinkage`` is 1 - (width of the central 68 %) / (that of the prior)."""
    rows = [_row(parameter) for parameter in parameters]
    table = Table({name: [row[name] for row in rows] for name in rows[0]})
    truths = np.array([np.nan if p.truth is None else p.truth for p in parameters])
    if np.isfinite(truths).any():
        table["truth"] = MaskedColumn(truths, mask=np.isnan(truths))
        off = (table["median"] - truths) / table["sd"]
        table["off_by_sd"] = MaskedColumn(off, mask=np.isnan(truths), description="(median - truth) / sd")
    table["meaning"] = [parameter.meaning for parameter in parameters]
    return table


def _row(parameter: ParameterDraws) -> dict:
    found = intervals(parameter.draws)
    prior_lower, prior_median, prior_upper = parameter.prior_68
    shrinkage = 1 - (found["upper_68"] - found["lower_68"]) / (prior_upper - prior_lower)
    return {
        "parameter": parameter.name,
        "unit": parameter.unit,
        **found,
        "prior": parameter.prior,
        "prior_median": prior_median,
        "prior_lower_68": prior_lower,
        "prior_upper_68": prior_upper,
        "shrinkage": shrinkage,
        "prior_dominated": bool(shrinkage < PRIOR_DOMINATED),
    }


def derived_table(draws: Mapping[str, np.ndarray]) -> Table:
    """One row a derived quantity, from its draws (draw,) by name; the names carry the units."""
    rows = [{"quantity": name, **intervals(values)} for name, values in draws.items()]
    return Table({name: [row[name] for row in rows] for name in rows[0]})
