"""Whether draws may be called a posterior: convergence of the chains, and counts like those observed.

Gates (all must hold): r-hat < 1.01 and bulk and tail ESS > 400 for every fitted number (Vehtari et al. 2021, Bayesian
Analysis 16, 667); divergences at most 0.5 % of the draws; draws beyond a fold of the map at most 1 %; no second mode of
comparable height; and, for each group, a chi-square of simulated counts that brackets the observed one.
Warnings fail nothing but are shown: residuals of neighbouring bins that agree more than the likelihood allows, and
parameters about which the counts say little more than the prior.
"""

import json
from dataclasses import asdict, dataclass

import numpy as np

from starcount.inference.mode import Mode
from starcount.inference.model import CENSUS
from starcount.inference.predictive import GroupDraws

R_HAT_MOST = 1.01
ESS_LEAST = 400
DIVERGENT_MOST = 0.005
FOLDED_MOST = 0.01
P_LEAST = 0.001
"""A discrepancy of the observed counts this far in either tail of the simulated ones fails."""

_OTHER_MODE_LN = 10.0
_OTHER_MODE_SIGMA = 1.0
_PRIOR_DOMINATED = 0.9


@dataclass(frozen=True)
class Check:
    """One gate: what was measured, what is required, and whether it holds."""

    name: str
    value: float
    required: str
    passed: bool


@dataclass(frozen=True)
class Verdict:
    """All gates and the warnings."""

    checks: tuple[Check, ...]
    warnings: tuple[str, ...]

    @property
    def passed(self) -> bool:
        """Whether the draws may be called a posterior."""
        return all(check.passed for check in self.checks)

    def __str__(self) -> str:
        if self.passed:
            return f"posterior: all {len(self.checks)} checks passed"
        failed = (f"{c.name} is {c.value:.4g}, required {c.required}" for c in self.checks if not c.passed)
        return "FAILED CHECKS, not a posterior: " + "; ".join(failed)

    def attributes(self) -> dict:
        """The verdict as attributes of a netCDF file."""
        return {
            "verdict": str(self),
            "passed": int(self.passed),
            "checks": json.dumps([asdict(check) for check in self.checks]),
            "warnings": json.dumps(self.warnings),
        }


def judge(diagnostics, statistics, folded: float, mode: Mode, curvature: np.ndarray, groups, shrinkage) -> Verdict:
    """Weigh a fit.

    ``diagnostics`` has r_hat, ess_bulk and ess_tail by fitted number, ``statistics`` the sampler's own; ``folded`` is
    the share of draws beyond a fold, ``curvature`` (p, p) the information at the mode, ``groups`` the predictive draws
    and ``shrinkage`` the posterior's width over the prior's by parameter.
    """
    worst = {key: diagnostics[key].max() if key == "r_hat" else diagnostics[key].min() for key in diagnostics}
    divergent = float(np.mean(statistics["diverging"].values))
    checks = [
        _at_most("largest r-hat", worst["r_hat"], R_HAT_MOST),
        _at_least("smallest bulk ESS", worst["ess_bulk"], ESS_LEAST),
        _at_least("smallest tail ESS", worst["ess_tail"], ESS_LEAST),
        _at_most("share of divergent draws", divergent, DIVERGENT_MOST),
        _at_most("share of draws beyond a fold", folded, FOLDED_MOST),
        Check("other modes", other := _other_modes(mode, curvature), "0", other == 0),
        *(_predictive(group) for group in groups),
    ]
    return Verdict(tuple(checks), tuple(_warnings(groups, shrinkage)))


def _at_most(name: str, value: float, most: float) -> Check:
    return Check(name, float(value), f"at most {most:g}", bool(value <= most))


def _at_least(name: str, value: float, least: float) -> Check:
    return Check(name, float(value), f"at least {least:g}", bool(value >= least))


def _predictive(group: GroupDraws) -> Check:
    p = group.p_value
    if group.name == CENSUS:  # the luminosity functions were made from it: it may fit better than chance, never worse
        return _at_least(f"predictive p of {group.name}", p, P_LEAST)
    return Check(f"predictive p of {group.name}", p, f"{P_LEAST:g} to {1 - P_LEAST:g}", P_LEAST <= p <= 1 - P_LEAST)


def _other_modes(mode: Mode, curvature: np.ndarray) -> int:
    """How many starts ended elsewhere at a comparable height; "elsewhere" in units of the posterior's own width."""
    apart = mode.ends - mode.x
    far = np.einsum("ip,pq,iq->i", apart, curvature, apart) > _OTHER_MODE_SIGMA**2
    return int(np.sum(far & (mode.end_values > mode.value - _OTHER_MODE_LN)))


def _warnings(groups, shrinkage):
    for group in groups:
        if group.neighbour_p < P_LEAST:
            yield (
                f"group {group.name}: residuals of neighbouring bins agree (correlation {group.neighbour:+.2f}): "
                "errors shared by the bins of a field are not in the likelihood, so intervals are too narrow"
            )
    for name, ratio in shrinkage.items():
        if ratio > _PRIOR_DOMINATED:
            yield f"{name}: {ratio:.0%} of the prior's width is left; the counts say little about it"
