"""The machinery of a fit, on the invented toy sky: gradients, likelihoods, priors, map and mode."""

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytensor
import pytensor.tensor as pt
import pytest
from numpy.testing import assert_allclose
from scipy import special, stats
from toy_sky import KERNELS, toy_model

from starcount.errors import InputError, UnknownName
from starcount.forward.knots import KNOTS_MAG, hat
from starcount.galaxy.component import Parameter
from starcount.inference import curve, likelihoods, mode, model, priors, quadratic_map
from starcount.inference.cut_normal import CutQuantile, cut_quantile
from starcount.inference.op import ExpectedCounts, Luminosity
from starcount.inference.target import Target
from starcount.stars import M_EDGES_MAG


def parameter(**changes):
    """An invented parameter."""
    whole = {"name": "thin.h_z_kpc", "value": 0.3, "error": 0.06, "unit": "kpc", "lower": 0.0, "upper": 2.0,
             "prior": "lognormal", "reference": "invented", "meaning": "invented"}  # fmt: skip
    return Parameter(**{**whole, **changes})


@pytest.fixture(scope="module")
def target():
    """The posterior of the toy sky, all parameters, with curves and census."""
    return Target(model.build_model(toy_model(floor=0.05), kernels=KERNELS))


# The operations


@pytest.mark.parametrize("mode", ["NUMBA", "FAST_COMPILE"])
def test_gradients_of_the_operations_are_those_of_differences(mode):
    """Central differences of step 1e-5 agree to 1e-7: their own error; compiled, and called from Python."""
    group = toy_model(n_field=3, n_bin=3).groups[0]
    v, scale, dust = pt.dvector(), pt.dscalar(), pt.dvector()
    factors = pt.exp(scale * pt.arange(2 * KNOTS_MAG.size).reshape((2, -1)) / 20.0)
    W = Luminosity(KERNELS)(factors, *group.matrix.arrays(np.arange(2)))
    counts = ExpectedCounts(KERNELS, fixed_luminosity=False)(v, W, dust, *group.projection.arrays)
    weights = np.random.default_rng(0).normal(size=group.used.shape)
    cost = pt.sum(counts * weights)
    both = pytensor.function([v, scale, dust], [cost, *pytensor.grad(cost, [v, scale, dust])], mode=mode)
    at = [group.galaxy.vector({}), np.array(0.1), np.array([0.2, 0.0, -0.1])]
    found = both(*at)[1:]
    for which, gradient in enumerate(found):
        for i in np.ndindex(np.shape(at[which])):
            high, low = [[x.copy() for x in at] for _ in range(2)]
            high[which][i] += 1e-5
            low[which][i] -= 1e-5
            assert_allclose(gradient[i], (both(*high)[0] - both(*low)[0]) / 2e-5, rtol=1e-7, atol=1e-5)


def test_operations_know_the_code_of_their_kernels():
    """Two kernels with different sources never share compiled code: the digest is part of what compares equal."""
    other = type("Kernels", (), {**vars(KERNELS), "DIGEST": "edited"})
    assert ExpectedCounts(KERNELS, False) == ExpectedCounts(KERNELS, False)
    assert ExpectedCounts(KERNELS, False) != ExpectedCounts(other, False)
    assert Luminosity(KERNELS) != Luminosity(other)


def test_data_of_the_model_keep_all_bits():
    """Addresses of compiled laws need 64 bits; PyMC's own data container would keep 32."""
    built = model.build_model(toy_model(), kernels=KERNELS)
    assert {v.dtype for v in built.data_vars if "luminosity0" in v.name} == {"int64"}


# Likelihoods


@pytest.mark.parametrize("name", list(likelihoods.LIKELIHOODS))
def test_compiled_terms_equal_the_pymc_expression(name):
    """ln L, scores by mean and by ln dispersion, from PyMC's graph and its gradient; 1e-9 is rounding of ln Gamma."""
    import pymc as pm

    law = likelihoods.find(name)
    rng = np.random.default_rng(3)
    n, used = rng.integers(0, 400, (3, 5)).astype(float), rng.random((3, 5)) < 0.7
    mean = rng.uniform(0.2, 400, (3, 5))
    mean_in, floor_in = pt.dvector(), pt.dscalar()
    with pm.Model(coords={"cell": np.arange(used.sum())}) as built:
        rv = law.observe("n", mean_in, floor_in, n[used].astype(int), "cell")
    ln_p = pm.logp(rv, n[used].astype(int))
    by_mean, by_floor = pytensor.grad(ln_p.sum(), [mean_in, floor_in], disconnected_inputs="ignore")
    expression = pytensor.function([mean_in, floor_in], [ln_p, by_mean, by_floor], on_unused_input="ignore")
    ln_each, score_each, score_floor = expression(mean[used], 0.13)
    ln_likelihood, score, _, by_ln_dispersion, _ = law.terms(n, used, mean, 0.13**2)
    rows = np.nonzero(used)[0]
    assert_allclose(ln_likelihood, np.bincount(rows, ln_each, 3), rtol=1e-9)
    assert_allclose(score[used], score_each, rtol=1e-9)
    assert_allclose(2 * by_ln_dispersion.sum() / 0.13, score_floor, rtol=1e-8, atol=1e-12)
    assert built.observed_RVs == [rv]


@pytest.mark.parametrize("name", list(likelihoods.LIKELIHOODS))
def test_bins_that_are_not_used_contribute_nothing(name):
    """Whatever stands in an unused bin, every term stays the same, and is zero in that bin."""
    law = likelihoods.find(name)
    n, mean, used = np.full((1, 3), 7.0), np.full((1, 3), 5.0), np.array([[True, False, True]])
    one = law.terms(n, used, mean, 0.01)
    n[0, 1], mean[0, 1] = 1e9, np.nan
    for before, after in zip(one, law.terms(n, used, mean, 0.01), strict=True):
        assert_allclose(before, after, rtol=0)
    assert one[1][0, 1] == one[2][0, 1] == 0.0


@pytest.mark.parametrize(("name", "mean"), [("poisson", 3.0), ("negative-binomial", 3.0), ("negative-binomial", 400.0)])
def test_expected_information_is_the_mean_square_of_the_score(name, mean):
    """200 000 simulated counts: 4 standard errors, about 2 %; the dispersion's is a normal approximation, 15 %."""
    law, dispersion = likelihoods.find(name), 0.04
    n = law.draw(np.random.default_rng(5), np.full((1, 200_000), mean), dispersion).astype(float)
    everything = np.ones(n.shape, bool)
    _, score, information, _, on_dispersion = law.terms(n, everything, np.full(n.shape, mean), dispersion)
    assert_allclose(np.mean(score**2), information[0, 0], rtol=0.02)
    if law.HAS_FLOOR and mean > 100:
        few = n[:, :2000]
        each = [
            law.terms(few[:, i : i + 1], everything[:, :1], np.full((1, 1), mean), dispersion)[3] for i in range(2000)
        ]
        assert_allclose(np.mean(np.square(each)), on_dispersion[0, 0], rtol=0.15)


def test_negative_binomial_draws_scatter_by_the_floor():
    """variance = mean + floor^2 mean^2, from 1e5 draws: 3 %."""
    n = likelihoods.find("negative-binomial").draw(np.random.default_rng(1), np.full(100_000, 500.0), 0.1**2)
    assert_allclose(n.var(), 500 + 0.01 * 500**2, rtol=0.03)


# Priors


@pytest.mark.parametrize("u", [-5.0, -1.3, 0.0, 0.7, 4.0])
@pytest.mark.parametrize(("low", "high"), [(-2.0, 5.0), (-1.0, 0.5), (0.3, 40.0), (-40.0, -0.2)])
def test_cut_quantile_is_scipys_truncated_normal(u, low, high):
    """The same cumulative probability on both sides, to 1e-12."""
    x = cut_quantile(u, low, high)
    tail, cut = (special.ndtr(u), stats.truncnorm.cdf) if u < 0 else (special.ndtr(-u), stats.truncnorm.sf)
    assert low <= x <= high
    assert_allclose(cut(x, low, high), tail, rtol=1e-9)


def test_slope_of_the_cut_quantile():
    """Against a central difference of step 1e-6: 1e-8."""
    u = pt.dscalar()
    x = CutQuantile(-1.0, 2.0)(u)
    slope = pytensor.function([u], pytensor.grad(x, u), mode="NUMBA")
    for at in (-3.0, 0.4, 2.0):
        difference = (cut_quantile(at + 1e-6, -1.0, 2.0) - cut_quantile(at - 1e-6, -1.0, 2.0)) / 2e-6
        assert_allclose(slope(at), difference, rtol=1e-7)


def test_a_prior_has_its_median_and_width():
    """Lognormal: the value times exp(error / value); normal: the value plus the error; the rest is the table."""
    assert_allclose(priors.value_at(parameter(), 1.0), 0.3 * np.exp(0.2), rtol=1e-9)
    assert_allclose(priors.value_at(parameter(prior="normal"), -1.0), 0.24, rtol=1e-6)
    table = priors.prior_table([parameter(), parameter(name="share", prior="normal", lower=0.25)])
    assert list(table["prior"]) == ["lognormal", "normal, cut to 0.25 ... 2"]
    assert table["q16"][1] > 0.25


def test_parameters_without_a_usable_prior_are_refused():
    """Each in one line that says what was found and what is needed."""
    for changes, said in (
        ({"error": 0.0}, "error is 0.0"),
        ({"lower": 3.0}, "no support"),
        ({"lower": 0.4}, "outside 0.4 to 2.0"),
        ({"value": -1.0}, "above 0 with a lognormal prior"),
        ({"fittable": False}, "cannot be fitted"),
    ):
        with pytest.raises(InputError, match=said):
            priors.check_prior(parameter(**changes))


# The curves of the luminosity functions


def components(*names):
    """Components of these names; only "thin" is made of the census, and "bulge" is scaled by its total."""
    kinds = {"thin": ("census", "sun"), "bulge": ("bulge", "total")}
    found = (kinds.get(name, ("old stars", "sun")) for name in names)
    return [SimpleNamespace(name=n, population=p, anchor=a) for n, (p, a) in zip(names, found, strict=True)]


def test_a_curve_is_zero_on_average_over_the_reference_window():
    """Only then does the amplitude alone set the number of stars; rounding."""
    disc, old = curve.curves(parts := components("thin", "thin", "thick", "bulge"), M_EDGES_MAG)
    middle = 0.5 * (M_EDGES_MAG[1:] + M_EDGES_MAG[:-1])
    inside = (middle > 4.5) & (middle < 8.5)
    assert_allclose((hat(middle[inside]) @ disc.spread).mean(axis=0), 0.0, atol=1e-14)
    assert (disc.components, old.components) == (("thin",), ("thick",))
    assert list(curve.owners((disc, old), parts)) == [1, 1, 2, 0]


def test_curves_bend_as_their_prior_says():
    """Second differences of drawn curves scatter by at most 0.10, and by most of that."""
    disc, _ = curve.curves(components("thin", "thick"), M_EDGES_MAG)
    drawn = disc.spread @ np.random.default_rng(0).standard_normal((disc.spread.shape[1], 4000))
    scatter = np.diff(drawn, 2, axis=0).std(axis=1)
    assert scatter.max() < 0.105
    assert scatter.min() > 0.06
    assert 0.1 < drawn.std(axis=1).max() < 0.35


# What is refused


def test_unknown_names_are_refused():
    """With the names that would work."""
    toy = toy_model(n_field=3)
    with pytest.raises(UnknownName, match=r"no parameter called 'thin.height'; known: .*thin.h_z_kpc"):
        model.build_model(toy, ["thin.height"], kernels=KERNELS)
    with pytest.raises(UnknownName, match="no likelihood called 'gauss'; known: negative-binomial, poisson"):
        model.build_model(toy, likelihood="gauss", kernels=KERNELS)
    with pytest.raises(InputError, match=r"'thick.truncation_kpc' has no prior: error is 0.0"):
        model.build_model(toy, ["thick.truncation_kpc"], kernels=KERNELS)


def test_too_few_counts_are_refused():
    """Three counts cannot fix four parameters; a group without counts is named."""
    toy = toy_model(n_field=2, n_bin=1)
    with pytest.raises(InputError, match="2 counts cannot fix 4 parameters"):
        model.build_model(toy, census=False, kernels=KERNELS)
    toy.groups = (replace(toy.groups[0], counts=None),)
    with pytest.raises(InputError, match="group 'G' holds no counts"):
        model.build_model(toy, kernels=KERNELS)


def test_overlapping_fields_are_refused():
    """Fields 0.2 degrees apart with radii of 0.5 hold the same stars twice."""
    toy = toy_model(n_field=2, spacing_deg=0.0)
    fields = replace(toy.survey.groups[0].fields, b_deg=np.array([40.0, 40.2]))
    toy.survey = replace(toy.survey, groups=(replace(toy.survey.groups[0], fields=fields),))
    with pytest.raises(InputError, match="fields overlap in the same bins: G/F0 and G/F1"):
        model.build_model(toy, kernels=KERNELS)


def test_stars_where_the_model_has_none_are_refused():
    """A bin beyond the reach of every star cannot be fitted when something was counted in it."""
    toy = toy_model(n_field=3)
    dark = toy.groups[0].lf * 0.0
    with pytest.raises(InputError, match="where the model expects none"):
        model.fitted_groups(type("M", (), {"groups": (replace(toy.groups[0], lf=dark),), "census": None}), census=False)
    empty = replace(toy.groups[0], lf=dark, counts=0 * toy.groups[0].counts, name="other")
    found = model.fitted_groups(type("M", (), {"groups": (empty,), "census": None}), census=False)
    assert not found["other"].used.any()


def test_a_field_without_a_star_is_refused_where_many_are_expected():
    """The catalogue does not cover it; a field that expects few stars may hold none."""
    toy = toy_model(n_field=3)
    counts = toy.groups[0].counts.copy()
    counts[1] = 0
    gone = replace(toy.groups[0], counts=counts)
    with pytest.raises(InputError, match=r"not one star in field .*, where some \d+ are expected"):
        model.fitted_groups(type("M", (), {"groups": (gone,), "census": None}), census=False)
    few = replace(gone, lf=gone.lf * 1e-4)
    assert model.fitted_groups(type("M", (), {"groups": (few,), "census": None}), census=False)


# Mode and map


def test_gradient_of_the_posterior(target):
    """Central differences of ln posterior, step 1e-5: 1e-5 of its largest element, away from the mode."""
    x = 0.3 * np.random.default_rng(4).standard_normal(target.size)
    _, gradient = target.log_posterior(x)
    steps = 1e-5 * np.eye(target.size)
    differences = [(target.log_posterior(x + h)[0] - target.log_posterior(x - h)[0]) / 2e-5 for h in steps]
    assert_allclose(gradient, differences, atol=1e-5 * np.abs(gradient).max())


def test_posterior_is_that_of_the_pymc_model(target):
    """Our sum of compiled terms and priors equals PyMC's own ln posterior at two points, up to one constant: none."""
    compiled = target.model.compile_logp()
    for x in (target.x0, target.x0 + 0.2):
        point, first = {}, 0
        for variable, shape in zip(target.model.value_vars, target.shapes, strict=True):
            size = int(np.prod(shape))
            point[variable.name] = x[first : first + size].reshape(shape)
            first += size
        assert_allclose(target.log_posterior(x)[0], compiled(point), rtol=1e-10)


def test_all_starts_reach_one_mode(target):
    """Four starts agree to 1e-3 in ln posterior, and the gradient vanishes there."""
    found = mode.find_mode(target, seed=3)
    assert found.ends.shape[0] == 4
    assert np.ptp(found.end_values) < 1e-3
    J = target.jacobian(found.x)
    gradient = target.log_posterior(found.x)[1]
    assert gradient @ np.linalg.solve(J.T @ J, gradient) < 1e-4


def test_map_and_its_volume():
    """x(z) and ln |dx/dz| against a Jacobian by differences; the pull-back against differences of both: 1e-6."""
    rng = np.random.default_rng(8)
    S = 0.1 * rng.standard_normal((4, 4, 4))
    q = quadratic_map.QuadraticMap(
        rng.normal(size=4), np.tril(rng.uniform(0.5, 1.5, (4, 4))), 0.5 * (S + S.transpose(0, 2, 1)), 1.0
    )
    z, by_x, h = rng.normal(size=4), rng.normal(size=4), 1e-6
    steps = h * np.eye(4)
    jacobian = np.array([(q(z + s)[0] - q(z - s)[0]) / (2 * h) for s in steps]).T
    assert_allclose(q(z)[1], np.log(np.linalg.det(jacobian)), atol=1e-7)
    whole = [np.append(*q(z + s)) - np.append(*q(z - s)) for s in steps]
    assert_allclose(q.pull_back(z, by_x), np.array(whole) @ np.append(by_x, 1.0) / (2 * h), rtol=1e-6)


def test_beyond_a_fold_there_is_no_probability():
    """u = z - z^2 / 2 turns back at z = 1: ln |du/dz| = ln(1 - z) before, -inf after."""
    q = quadratic_map.QuadraticMap(np.zeros(1), np.eye(1), np.ones((1, 1, 1)), 1.0)
    assert_allclose(q(np.array([0.5]))[1], np.log(0.5))
    assert q(np.array([1.5]))[1] == -np.inf
    assert list(quadratic_map.folded(q, np.array([[0.5], [1.5]]))) == [False, True]


def test_map_straightens_a_curved_ridge():
    """Residuals (a, b + a^2): the exact inverse of this quadratic is itself quadratic, so S reproduces it to 1e-9."""
    jacobian = lambda x: np.array([[1.0, 0.0], [2.0 * x[0], 1.0]])  # noqa: E731
    q = quadratic_map.build(np.zeros(2), lambda points: [jacobian(x) for x in points], seed=1)
    for z in np.random.default_rng(2).normal(size=(5, 2)):
        x = q(z)[0]
        residual = q.L.T @ np.array([x[0], x[1] + x[0] ** 2])
        assert_allclose(residual @ residual, z @ z, rtol=1e-9)
    assert q.softened == 1.0


def test_a_map_that_folds_is_softened():
    """A curvature of 3 would fold a third of all draws; after softening at most 1 in 100 of new draws is folded."""
    S = np.zeros((3, 3, 3))
    S[0, 0, 0] = 3.0
    factor = quadratic_map._softening(S, np.random.default_rng(0))
    q = quadratic_map.QuadraticMap(np.zeros(3), np.eye(3), factor * S, factor)
    assert 0.0 < factor < 0.2
    assert np.mean(quadratic_map.folded(q, np.random.default_rng(1).standard_normal((2000, 3)))) < 0.01


def test_the_model_expects_what_the_forward_model_does():
    """Each layer has the curve of its kind, and the census is data: Poisson by scipy, away from the prior's centre."""
    toy = toy_model()
    built, rng = model.build_model(toy, likelihood="poisson", kernels=KERNELS), np.random.default_rng(4)
    point = {name: 0.5 * rng.normal(size=np.shape(u)) for name, u in built.initial_point().items()}
    names = [p.name for p in model.choose(toy.galaxy, None)]
    outputs = built.replace_rvs_by_values([built[name] for name in (*names, "curve.disc", "curve.old")])
    *values, disc, old = built.compile_fn(outputs)(point)
    for name, group in (("G", toy.groups[0]), ("census", toy.census)):
        expected = group.expected(dict(zip(names, values, strict=True)), factors=np.exp([disc, old]))
        wanted = stats.poisson.logpmf(group.counts, np.maximum(expected, model.FEWEST)).sum()
        assert_allclose(built.compile_logp(vars=[built[f"counts.{name}"]])(point), wanted, rtol=1e-9)
