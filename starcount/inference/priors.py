"""Priors: every fitted number is a function of a standard normal variable, so that all start on one scale.

``u`` ~ N(0, 1); the value is the same quantile of the parameter's prior: a normal of the parameter's error, or a
normal of its logarithm with width error / value, cut at the parameter's support.
"""

import math
from collections.abc import Iterable

import numpy as np
import pymc as pm
import pytensor.tensor as pt
from astropy.table import Table

from starcount.errors import InputError
from starcount.galaxy.component import Parameter
from starcount.inference.cut_normal import CutQuantile, cut_quantile

CUT_SIGMA = 6.0
"""A support that ends farther out than this cuts nothing: 1e-9 of the prior lies beyond."""


def check_prior(parameter: Parameter) -> None:
    """Refuse a parameter whose prior has no width, or no part inside its support."""
    p = parameter
    where = f"parameter {p.name!r}"
    if not p.fittable:
        raise InputError(f"{where} cannot be fitted: it is a switch or a fixed setting")
    if not (np.isfinite(p.error) and p.error > 0):
        raise InputError(f"{where} has no prior: error is {p.error!r}; expected a number above 0 to fit it")
    if p.prior == "lognormal" and not p.value > 0:
        raise InputError(f"{where}: value is {p.value!r}; expected a number above 0 with a lognormal prior")
    if not p.lower < p.upper:
        raise InputError(f"{where} has no support: lower {p.lower!r} is not below upper {p.upper!r}")
    if not p.lower < p.value < p.upper:
        raise InputError(f"{where}: the centre of its prior, {p.value!r}, is outside {p.lower!r} to {p.upper!r}")


def variable(parameter: Parameter):
    """Add a parameter to the open PyMC model: ``u.NAME`` ~ N(0, 1) and the value as ``NAME``; return the value."""
    u = pm.Normal(f"u.{parameter.name}", 0.0, 1.0)
    return pm.Deterministic(parameter.name, value_at(parameter, u, pt))


def value_at(parameter: Parameter, u, xp=np):
    """Return the value at standard normal ``u``; ``xp`` is numpy or ``pytensor.tensor``."""
    low, high = _ends(parameter)
    if low > -CUT_SIGMA or high < CUT_SIGMA:
        u = cut_quantile(float(u), low, high) if xp is np else CutQuantile(low, high)(u)
    if parameter.prior == "lognormal":
        return parameter.value * xp.exp(u * (parameter.error / parameter.value))
    return parameter.value + parameter.error * u


def _ends(p: Parameter) -> tuple[float, float]:
    """The support in standard deviations of the uncut prior."""
    if p.prior == "normal":
        return (p.lower - p.value) / p.error, (p.upper - p.value) / p.error
    width = p.error / p.value
    low = math.log(p.lower / p.value) / width if p.lower > 0 else -math.inf
    return low, math.log(p.upper / p.value) / width if math.isfinite(p.upper) else math.inf


def prior_table(parameters: Iterable[Parameter]) -> Table:
    """Return the priors as a person reads them: name, unit, prior, median, central 68 % and its source."""
    parameters = tuple(parameters)
    quantiles = np.array([[value_at(p, u) for u in (-1.0, 0.0, 1.0)] for p in parameters]).reshape(-1, 3)
    table = Table()
    table["name"] = [p.name for p in parameters]
    table["unit"] = [p.unit for p in parameters]
    table["prior"] = [_wording(p) for p in parameters]
    table["median"], table["q16"], table["q84"] = quantiles[:, 1], quantiles[:, 0], quantiles[:, 2]
    table["meaning"] = [p.meaning for p in parameters]
    table["reference"] = [p.reference for p in parameters]
    return table


def _wording(p: Parameter) -> str:
    low, high = _ends(p)
    cut = f", cut to {p.lower:g} ... {p.upper:g}" if low > -CUT_SIGMA or high < CUT_SIGMA else ""
    return f"{p.prior}{cut}"
