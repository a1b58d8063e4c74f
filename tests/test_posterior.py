"""What a fit hands over: names, draws, verdict, saving and loading; and a whole fit of the invented toy sky."""

import json
import os
import subprocess
import sys
from dataclasses import replace

import numpy as np
import pytest
import xarray as xr
from numpy.testing import assert_allclose, assert_array_equal
from toy_sky import KERNELS, TRUTH, toy_model

from starcount.errors import FailedChecks, InputError, UnknownName
from starcount.forward.knots import KNOTS_MAG
from starcount.posterior import FORMAT, Posterior


def invented(passed=True):
    """Two chains of three draws of one height and one floor, and a curve that doubles the disc beyond M = 0."""
    draw = np.array([[0.30, 0.31, 0.32], [0.33, 0.34, 0.35]])
    posterior = xr.Dataset(
        {
            "thin.h_z_kpc": (("chain", "draw"), draw),
            "floor.G": (("chain", "draw"), draw / 10),
            "curve.disc": (("chain", "draw", "knot_mag"), np.log(2.0) * np.ones((2, 3, KNOTS_MAG.size))),
        },
        {"knot_mag": KNOTS_MAG},
    )
    names = ["thin.h_z_kpc", "floor.G"]
    ones = {key: ("quantity", np.ones(2)) for key in ("r_hat", "ess_bulk", "ess_tail", "prior_width_left")}
    tree = xr.DataTree.from_dict(
        {"posterior": posterior, "prior": posterior, "diagnostics": xr.Dataset(ones, {"quantity": names})}
    )
    tree.attrs = {
        "starcount_posterior": FORMAT,
        "parameters": json.dumps(names[:1]),
        "fitted": json.dumps(names),
        "derived": "[]",
        "curves": json.dumps({"disc": ["thin"]}),
        "priors": json.dumps([{"name": "thin.h_z_kpc", "unit": "kpc"}]),
        "passed": int(passed),
        "verdict": "posterior: all 1 checks passed" if passed else "FAILED CHECKS, not a posterior: it is not",
        "checks": "[]",
        "warnings": '["beware"]',
    }
    return Posterior(tree)


def test_draws_run_through_the_chains_one_after_the_other():
    """Draw 3 is the first of the second chain; sizes and values follow."""
    posterior = invented()
    assert_array_equal(posterior.draws("thin.h_z_kpc"), [0.30, 0.31, 0.32, 0.33, 0.34, 0.35])
    assert posterior.draws("curve.disc").shape == (6, 10)
    assert (posterior.size, posterior.names) == (6, ("thin.h_z_kpc", "floor.G"))
    assert posterior.values(3) == {"thin.h_z_kpc": 0.33}


def test_a_group_without_a_floor_has_none():
    """A Poisson fit scatters by Poisson noise only."""
    assert_array_equal(invented().floor("V"), np.zeros(6))
    assert_allclose(invented().floor("G")[0], 0.03)


def test_unknown_quantities_are_refused():
    """With the names there are."""
    with pytest.raises(UnknownName, match=r"no quantity in the posterior called 'h_z'; known: .*thin.h_z_kpc"):
        invented().draws("h_z")


def test_curves_correct_the_layers_of_their_components_only():
    """A curve of ln 2 doubles the thin disc and leaves the halo alone."""
    factors = invented().curve_factors(["thin", "halo"], 0)
    assert_allclose(factors[0], 2.0)
    assert_array_equal(factors[1], 1.0)


def test_parts_are_those_of_the_draw():
    """Height of the draw, thin disc doubled by the curve, thick disc and galaxies not: by hand from the toy sky."""
    toy = toy_model(n_field=2, extra=5.0).groups[0]
    parts = invented().at_draw(toy, 4, parts=True)
    plain = toy.expected({"thin.h_z_kpc": 0.34}, parts=True)
    assert_allclose(parts["thin"], 2.0 * plain["thin"], rtol=1e-12)
    assert_allclose(parts["thick"], plain["thick"])
    assert_allclose(parts["galaxies"], 5.0)


def test_summary_of_known_draws():
    """Mean, standard deviation (n - 1) and median of 0.30 ... 0.35, by hand."""
    row = invented().summary()[0]
    assert (row["name"], row["unit"]) == ("thin.h_z_kpc", "kpc")
    assert_allclose([row["mean"], row["q50"], row["sd"]], [0.325, 0.325, np.sqrt(0.0035 / 10)], rtol=1e-9)


def test_draws_that_failed_their_checks_are_no_posterior():
    """The verdict says so first, and asking for a certified one is an error of exit status 6."""
    failed = invented(passed=False)
    assert not failed.certified
    assert failed.verdict.startswith("FAILED CHECKS")
    with pytest.raises(FailedChecks, match="FAILED CHECKS, not a posterior") as caught:
        failed.require_certified()
    assert caught.value.exit_status == 6
    invented().require_certified()


def test_saved_and_loaded_is_the_same(tmp_path):
    """Every group, value and attribute comes back, and no temporary file stays."""
    posterior = invented()
    posterior.save(tmp_path / "fit.nc")
    again = Posterior.load(tmp_path / "fit.nc")
    for name, group in posterior.tree.children.items():
        xr.testing.assert_equal(group.to_dataset(), again.tree[name].to_dataset())
    assert {key: again.tree.attrs[key] for key in posterior.tree.attrs} == posterior.tree.attrs
    assert os.listdir(tmp_path) == ["fit.nc"]


def test_files_that_are_no_posterior_are_refused(tmp_path):
    """Missing, truncated, or another netCDF file: one line with the path."""
    whole = tmp_path / "fit.nc"
    invented().save(whole)
    (tmp_path / "cut.nc").write_bytes(whole.read_bytes()[:2000])
    xr.Dataset({"a": 1}).to_netcdf(tmp_path / "other.nc", engine="h5netcdf")
    for name in ("missing.nc", "cut.nc", "other.nc"):
        with pytest.raises(InputError, match=name) as caught:
            Posterior.load(tmp_path / name)
        assert "\n" not in str(caught.value)


def test_a_folder_that_is_not_there_is_named(tmp_path):
    """And an earlier file survives a write that fails."""
    with pytest.raises(InputError, match="cannot be written"):
        invented().save(tmp_path / "none" / "fit.nc")
    whole = tmp_path / "fit.nc"
    invented().save(whole)
    broken = invented()
    broken.tree.attrs["bad"] = object()
    with pytest.raises(TypeError):
        broken.save(whole)
    assert Posterior.load(whole).size == 6
    assert os.listdir(tmp_path) == ["fit.nc"]


def test_a_posterior_is_read_without_the_sampler():
    """Importing it loads neither PyMC nor PyTensor: reports need neither."""
    code = "import sys, starcount.posterior; print({'pymc', 'pytensor', 'nutpie'} & set(sys.modules))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "set()"


@pytest.mark.slow
def test_a_fit_recovers_the_toy_sky(tmp_path):
    """Counts drawn from known numbers with 5 % scatter: all within 4 sd of the truth, checks passed, and saved."""
    from starcount.inference import fit_galaxy

    told = []
    toy = toy_model(n_field=6, floor=0.05, seed=4)
    unused = toy.groups[0].used.copy()
    unused[3, :2] = False
    toy.groups = (replace(toy.groups[0], used=unused),)
    posterior = fit_galaxy(
        toy, kernels=KERNELS, draws=600, tune=200, seed=2, progress=lambda *now: told.append(now),
        derived=lambda values: {"sum": values["thin.h_z_kpc"] + values["thick.h_z_kpc"]},
    )  # fmt: skip
    assert posterior.certified, posterior.verdict
    for name, truth in {**TRUTH, "floor.G": 0.05}.items():
        drawn = posterior.draws(name)
        assert abs(drawn.mean() - truth) < 4 * drawn.std(), name
    assert_allclose(posterior.draws("sum"), posterior.draws("thin.h_z_kpc") + posterior.draws("thick.h_z_kpc"))
    assert posterior.derived_names == ("sum",)
    assert posterior.tree["observed_data"]["G"].values[3, 0] == -1
    assert np.isnan(posterior.tree["posterior_predictive"]["G"].values[:, 3, 0]).all()
    shares = [share for _, share in told]
    assert shares == sorted(shares)
    assert shares[-1] == 1.0
    posterior.save(tmp_path / "fit.nc")
    assert Posterior.load(tmp_path / "fit.nc").verdict == posterior.verdict


@pytest.mark.slow
def test_a_wrong_likelihood_fails_its_checks():
    """Counts with 20 % scatter taken for pure Poisson: the predictive check finds it and names the group."""
    from starcount.inference import fit_galaxy

    posterior = fit_galaxy(
        toy_model(n_field=6, floor=0.2), likelihood="poisson", kernels=KERNELS, lf_curve=False, draws=300, tune=200
    )
    assert not posterior.certified
    assert "predictive p of G" in posterior.verdict
