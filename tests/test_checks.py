"""Which draws may be called a posterior: every gate by itself, and the predictive check on counts that do not fit."""

from dataclasses import replace

import numpy as np
import pytest
from toy_sky import KERNELS, TRUTH, toy_model

from starcount.inference import checks, mode, model
from starcount.inference.predictive import predictive_draws, thinned
from starcount.inference.target import Target

TWO_PLACES = np.array([[0.0, 0.0], [5.0, 0.0]])


def convergence(r_hat, ess_bulk, ess_tail):
    """The convergence numbers of two fitted numbers, one of them perfect."""
    return {
        "r_hat": np.array([1.0, r_hat]),
        "ess_bulk": np.array([4000.0, ess_bulk]),
        "ess_tail": np.array([4000.0, ess_tail]),
    }


def good_fit():
    """The numbers of a fit without fault."""
    ends = np.zeros((4, 2))
    return {
        "diagnostics": convergence(1.004, 900.0, 800.0),
        "statistics": {"diverging": type("A", (), {"values": np.zeros((4, 500), bool)})},
        "folded": 0.0,
        "mode": mode.Mode(ends[0], -10.0, 5, ends, np.full(4, -10.0)),
        "curvature": np.eye(2),
        "groups": (),
        "shrinkage": {"thin.h_z_kpc": 0.3},
    }


def test_a_fit_without_fault_passes():
    """And says so."""
    assert str(checks.judge(**good_fit())) == "posterior: all 6 checks passed"


@pytest.mark.parametrize(
    ("key", "value", "said"),
    [
        ("diagnostics", convergence(1.02, 900.0, 900.0), "r-hat is 1.02"),
        ("diagnostics", convergence(1.0, 399.0, 900.0), "bulk ESS is 399"),
        ("diagnostics", convergence(1.0, 900.0, 10.0), "tail ESS is 10"),
        ("diagnostics", convergence(np.nan, 900.0, 900.0), "r-hat is nan"),
        ("statistics", {"diverging": type("A", (), {"values": np.arange(1000) < 6})}, "divergent draws is 0.006"),
        ("folded", 0.02, "fold is 0.02"),
        ("mode", mode.Mode(np.zeros(2), -10.0, 5, TWO_PLACES, np.array([-10.0, -12.0])), "other modes is 1"),
    ],
)  # fmt: skip
def test_each_fault_fails_and_is_named(key, value, said):
    """One fault is enough, and the verdict starts with FAILED CHECKS."""
    verdict = checks.judge(**{**good_fit(), key: value})
    assert not verdict.passed
    assert str(verdict).startswith("FAILED CHECKS, not a posterior: ")
    assert said in str(verdict)


def test_prior_dominated_parameters_are_warned_about():
    """A parameter that keeps 97 % of its prior's width was not measured."""
    verdict = checks.judge(**{**good_fit(), "shrinkage": {"thick.h_R_kpc": 0.97}})
    assert verdict.passed
    assert verdict.warnings == ("thick.h_R_kpc: 97% of the prior's width is left; the counts say little about it",)


def test_counts_that_do_not_fit_fail_the_predictive_check():
    """At the truth Poisson counts pass; the same counts with 30 % scatter from field to field do not."""
    toy = toy_model(n_field=6, seed=5)
    names = list(TRUTH)
    rng = np.random.default_rng(0)
    spoilt = rng.poisson(toy.groups[0].counts * rng.gamma(9, 1 / 9, (6, 1)))
    for counts, passes in ((toy.groups[0].counts, True), (spoilt, False)):
        toy.groups = (replace(toy.groups[0], counts=counts),)
        target = Target(model.build_model(toy, names, likelihood="poisson", lf_curve=False, kernels=KERNELS))
        found = mode.find_mode(target, seed=1, starts=1)
        x = found.x + 0.0 * rng.standard_normal((300, target.size))
        draws = predictive_draws(target, thinned(x, 48), model.fitted_groups(toy, True), seed=1)
        verdict = checks.judge(**{**good_fit(), "groups": draws})
        assert verdict.passed is passes, str(verdict)
    assert any("neighbouring bins agree" in warning for warning in verdict.warnings)
