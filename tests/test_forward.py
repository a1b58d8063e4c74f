"""The projection against an independent twin, closed forms, its own transpose and finite differences."""

import dataclasses

import numpy as np
import pytest
import skies
import twin
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.integrate import quad

from starcount import stars
from starcount.dust import band_coefficients
from starcount.forward import ForwardModel, census_density_pc3, derived_quantities, layer_functions, sphere_means
from starcount.forward import nodes as nodes_module
from starcount.forward.kernels import luminosity, luminosity_back, stars_on_grid
from starcount.forward.knots import KNOTS_MAG
from starcount.forward.nodes import place_nodes
from starcount.galaxy import read_galaxy

EDGES = np.arange(10.0, 20.1, 0.5)
NO_DUST = {"dust": "constant", "A_V_mag": 0.0}


@pytest.fixture(scope="module")
def default():
    """The default Galaxy."""
    return read_galaxy()


@pytest.fixture(scope="module")
def sky(default):
    """Eight small fields in the default Galaxy."""
    fields = skies.circles([0, 10, 90, 180, 270, 30, 200, 0], [90, -6, 45, -20, 3, -60, 12, -35], 0.4)
    return ForwardModel(skies.survey(fields, EDGES, "G"), default, dust_range=2.0)


@pytest.mark.parametrize(("l", "b"), [(0, 90), (0, -30), (40, 10), (180, -25), (320, -4), (100, 2)])
@pytest.mark.parametrize("band", ["G", "V"])
def test_the_twin_agrees(default, l, b, band):
    """Adaptive quadrature with laws, frame and dust written independently: 1e-4, twice what a line is settled to."""
    fields = skies.circles(l, b, 0.05)
    edges = np.array([7.0, 8.0, 12.0, 12.5, 18.0, 18.5, 20.0])
    group = ForwardModel(skies.survey(fields, edges, band), default).groups[0]
    found = group.expected()[0]
    table = group.tables.whole[..., 0]
    coefficients = band_coefficients(band) if table.shape[1] == 3 else band_coefficients(band)[:1]
    wanted = twin.expected(default, table, stars.M_EDGES_MAG, l, b, fields.area_deg2[0], edges, coefficients)
    assert_allclose(found, wanted, rtol=1e-4)


def test_uniform_space():
    """N = n Omega / 3 integral of d^3 dlf: counts grow as 10^(0.6 m), the depth as the cube root (Seeliger 1898)."""
    edges = np.array([9.0, 10.0, 11.0, 12.0])
    galaxy = skies.galaxy("uniform", [], value=1e-3)
    group = ForwardModel(skies.survey(skies.circles(0, 90, 1.0, **NO_DUST), edges), galaxy).groups[0]
    found = group.expected()[0]
    # The nearest nodes, at 2.5 pc, do not miss stars brighter than M = 12, and fainter ones do not matter here.
    lf = group.tables.lf.sum(axis=(0, 1))
    middle = (stars.M_EDGES_MAG[1:] + stars.M_EDGES_MAG[:-1]) / 2
    cube = 1e3 * 10 ** (0.6 * (edges[:, None] - middle))  # pc^3 out to which a star of M is brighter than m
    brighter = 1e-3 * group.group.fields.area_deg2[0] * (np.pi / 180) ** 2 / 3 * (lf * cube).sum(axis=1)
    assert_allclose(found, np.diff(brighter), rtol=5e-4)  # 1.6e-4: cells of 0.05 mag at their middle
    assert_allclose(found[1:] / found[:-1], 10**0.6, rtol=2e-4)
    assert_allclose((found[2] / found[0]) ** (1 / 3), 10**0.4, rtol=2e-4)


def test_exponential_disc_at_the_pole():
    """One bin that holds every star: n Omega 2 h^3, the Sun in the plane, no dust."""
    h_pc = 300.0
    galaxy = skies.galaxy("disc", [2.6, h_pc / 1e3, 0, 1000, 1, 0], value=1e-3, z0_kpc=0.0)
    fields = skies.circles([0, 0], [90, -90], 0.5, **NO_DUST)
    group = ForwardModel(skies.survey(fields, np.array([-40.0, 60.0])), galaxy).groups[0]
    stars_per_window = group.tables.lf.sum()
    # R grows as d sin(0.5 deg): negligible; the closest star is at 2.5 pc, (2.5 / 300)^3 / 6 of the integral.
    wanted = 1e-3 * stars_per_window * fields.area_deg2 * (np.pi / 180) ** 2 * 2 * h_pc**3
    assert_allclose(group.expected()[:, 0], wanted, rtol=2e-4)


def test_the_rule_converges_at_its_order(monkeypatch):
    """Three Gauss-Legendre points: halving panels gains 2^6 on a stretch that does not vanish at its end."""
    monkeypatch.setattr(nodes_module, "PANEL_MAG", 5.0)
    end = nodes_module.panel_limits_mag(np.full((1, 2), np.nan), 0)[0, 2]  # 6.2 mag, 174 pc
    per_mu = lambda mu: 10 ** (0.6 * mu) * np.exp(-(10 ** (mu / 5 + 1)) / 300.0)  # noqa: E731
    exact = quad(per_mu, -3, end, epsabs=0, epsrel=1e-13)[0]
    errors = []
    for halvings in (0, 1, 2):
        n = place_nodes([0.0], [90.0], 8.178, 0.0208, halvings)
        near = n.mu_mag[0] < end
        total = (n.volume_pc3[0] * np.exp(-1e3 * n.d_kpc[0] / 300.0))[near].sum() / (np.log(10) / 5 * 1e3)
        errors.append(abs(total / exact - 1))
    order = -np.polyfit(np.arange(3), np.log2(errors), 1)[0]
    assert 5.5 < order < 6.5, errors


def test_panels_meet_the_kinks():
    """A limit lies where a line passes the axis, R0 cos l / cos b, and where it crosses the plane, -z0 / sin b."""
    kinks = nodes_module.kinks_kpc(np.array([0.0, 180.0]), np.array([-30.0, 30.0]), 8.178, 0.0208)
    assert_allclose(kinks[0], [8.178 / np.cos(np.radians(30)), 0.0416])
    assert np.isnan(kinks[1]).all()
    limits = nodes_module.panel_limits_mag(kinks, 1)
    for kink in kinks[0]:
        assert np.abs(limits[0] - (5 * np.log10(kink) + 10)).min() < 1e-12


def test_where_the_galaxy_ends(default, monkeypatch):
    """A halo that went on as a power law to 1000 kpc adds less than 1 % at 20 < G < 21, at the pole and at b = 40."""
    fields = skies.circles([0, 0], [90, 40], 0.1)
    make = lambda: ForwardModel(skies.survey(fields, np.array([20.0, 21.0]), "G"), default).groups[0].expected()  # noqa: E731
    ends = make()
    monkeypatch.setattr(nodes_module, "D_MAX_KPC", 1000.0)
    farther = make()
    assert (farther > ends).all()
    assert_allclose(ends, farther, rtol=0.01)


def test_every_gradient(sky):
    """The pull-back against central differences: by every number of the vector, dust factors and W. 2e-6: rounding."""
    group = sky.groups[0]
    rng = np.random.default_rng(5)
    v, W = group.galaxy.vector(), group.luminosity_matrix()
    cotangent = rng.normal(size=group.used.shape) / group.expected().max(axis=0)
    dust = 0.1 * rng.normal(size=group.projection.n_field)
    gv, gW, g_dust = group.projection.pull_back(v, W, cotangent, dust)
    assert np.count_nonzero(gv) >= 17  # all but neutral edges, holes and settings

    def value(v=v, dust=dust, W=W):
        return np.vdot(cotangent, group.projection.counts(v, W, dust))

    settings_at = [
        i for i, p in enumerate(p for c in group.galaxy.components for p in c.law.parameters) if p.neutral is not None
    ]
    for i in range(v.size):
        if i in settings_at and v[i] in (0.0, 1.0, 1000.0):
            continue  # at the neutral end of the support there is no central difference
        step = 1e-5 * max(abs(v[i]), 0.02) * np.eye(v.size)[i]
        assert_allclose(
            gv[i], (value(v=v + step) - value(v=v - step)) / (2 * step[i]), rtol=2e-6, atol=1e-7, err_msg=str(i)
        )
    for f in range(dust.size):
        step = 1e-5 * np.eye(dust.size)[f]
        assert_allclose(g_dust[f], (value(dust=dust + step) - value(dust=dust - step)) / 2e-5, rtol=2e-6, atol=1e-8)
    direction = rng.normal(size=W.shape)
    assert_allclose(np.vdot(gW, direction), value(W=direction), rtol=1e-10)  # linear in W


@pytest.mark.parametrize("name", ["thin.R_hole_kpc", "thick.R_edge_kpc", "thick.w_edge_kpc"])
def test_gradients_of_parameters_that_are_neutral_by_default(default, name):
    """Hole and edge switched on: the pull-back against central differences."""
    values = {"thin.R_hole_kpc": 2.0, "thick.R_edge_kpc": 10.0, "thick.w_edge_kpc": 0.7}
    group = ForwardModel(skies.survey(skies.circles([0, 180], [10, 15], 0.3), EDGES, "G"), default).groups[0]
    names = [f"{c.name}.{p.name}" for c in default.components for p in c.law.parameters]
    at, W, cotangent = names.index(name), group.luminosity_matrix(), np.ones(group.used.shape)
    v = default.vector(values)
    step = 1e-5 * np.eye(v.size)[at]
    numeric = (group.projection.counts(v + step, W).sum() - group.projection.counts(v - step, W).sum()) / 2e-5
    assert_allclose(group.projection.pull_back(v, W, cotangent)[0][at], numeric, rtol=1e-6)


def test_blocks_and_threads_do_not_matter(default):
    """70 fields (three blocks) in one call equal each field alone, to rounding."""
    rng = np.random.default_rng(2)
    fields = skies.circles(rng.uniform(0, 360, 70), rng.uniform(30, 80, 70), 0.1)
    model = ForwardModel(skies.survey(fields, np.array([15.0, 16.0]), "G"), default).groups[0]
    v, W = default.vector(), model.luminosity_matrix()
    grid = stars_on_grid(v, np.zeros(70), *model.projection.arrays)
    assert_allclose(model.expected(), grid @ W, rtol=1e-12)


@given(seed=st.integers(0, 2**31))
@settings(max_examples=30, derandomize=True, deadline=None)
def test_the_luminosity_matrix_and_its_transpose(seed):
    """<L f, g> = <f, L^T g> for factors f on the functions."""
    rng = np.random.default_rng(seed)
    n_row, n_block, n_piece, width = (int(n) for n in rng.integers(1, 6, 4))
    owner, first = rng.integers(0, 3, n_row), rng.integers(0, 10 - n_piece + 1, n_block)
    row, bin = rng.integers(0, n_row, n_block), width * rng.integers(0, 3, n_block)
    arrays = (np.array([3 * width]), owner, row, bin, first, rng.normal(size=(n_block, n_piece, width)))
    f, g = rng.normal(size=(3, 10)), rng.normal(size=(n_row, 3 * width))
    back = luminosity_back(g, f.shape, *arrays)
    assert_allclose(np.vdot(luminosity(f, *arrays), g), np.vdot(f, back), rtol=1e-9, atol=1e-9)


def test_the_luminosity_matrix_against_its_plain_twin(default):
    """Without errors: differences of the interpolated cumulative function at the bins' edges; equal to rounding."""
    edges = np.array([5.0, 8.02, 15.5])
    group = ForwardModel(skies.survey(skies.circles(0, 60), edges, "V"), default).groups[0]
    found = group.luminosity_matrix().reshape(group.projection.y_mag.size, -1, 2)
    for row, lf in enumerate(group.tables.lf):
        below = np.concatenate([[0.0], np.cumsum(lf.sum(axis=0))])
        at = np.interp(edges - group.projection.y_mag[:, None], stars.M_EDGES_MAG, below)
        assert_allclose(found[:, row], np.diff(at, axis=1), rtol=1e-9, atol=1e-11)


def test_factors_on_the_luminosity_functions(default):
    """Ones change nothing (rounding); factors on one component change that component, as a straight line in M_V."""
    group = ForwardModel(skies.survey(skies.circles(0, 60), EDGES, "V"), default).groups[0]
    factors = np.ones((len(default.layers), KNOTS_MAG.size))
    assert_allclose(group.luminosity_matrix(factors), group.luminosity_matrix(), rtol=1e-12, atol=1e-16)
    thick = [c.name == "thick" for c, _ in default.layers]
    factors[thick] = 1.0 + 0.1 * (KNOTS_MAG - KNOTS_MAG[0])
    middle = (stars.M_EDGES_MAG[1:] + stars.M_EDGES_MAG[:-1]) / 2
    tilted = group.tables.lf[thick] * np.clip(1.0 + 0.1 * (middle + 2.0), 1.0, 2.8)
    y = group.projection.y_mag
    found = group.luminosity_matrix(factors).reshape(y.size, -1, EDGES.size - 1)[:, thick].sum(axis=1)
    below = np.concatenate([[0.0], np.cumsum(tilted.sum(axis=(0, 1)))])
    wanted = np.diff(np.interp(EDGES - y[:, None], stars.M_EDGES_MAG, below), axis=1)
    assert_allclose(found, wanted, rtol=1e-6, atol=1e-9)


def test_counts_scale_and_add(sky, default):
    """Half the area halves, merged bins add, parts sum to the whole; more dust never adds to stars brighter than m."""
    whole = sky.groups[0].expected()
    assert_allclose(sum(sky.groups[0].expected(parts=True).values()), whole, rtol=1e-12)
    fields = sky.survey.groups[0].fields
    half = dataclasses.replace(fields, area_deg2=fields.area_deg2 / 2)
    assert_allclose(ForwardModel(skies.survey(half, EDGES, "G"), default).groups[0].expected(), whole / 2, rtol=1e-12)
    merged = ForwardModel(skies.survey(fields, EDGES[::2], "G"), default).groups[0].expected()
    assert_allclose(merged, whole[:, ::2] + whole[:, 1::2], rtol=2e-4)  # each settled to 1e-4 by itself
    v, W = default.vector(), sky.groups[0].luminosity_matrix()
    brighter = [np.cumsum(sky.groups[0].projection.counts(v, W, np.full(8, x)), axis=1) for x in (-0.5, 0.0, 0.5)]
    assert (np.diff(brighter, axis=0) < 0).all()


def test_north_and_south_are_alike_with_the_sun_in_the_plane(default):
    """Without dust and with z0 = 0 mirrored fields have the same counts, to the settling of their lines."""
    parameters = dict(default.parameters)
    parameters["sun.z0_kpc"] = dataclasses.replace(parameters["sun.z0_kpc"], value=0.0)
    flat = dataclasses.replace(default, parameters=parameters)
    fields = skies.circles([30, 30], [40, -40], 0.3, **NO_DUST)
    north, south = ForwardModel(skies.survey(fields, EDGES, "G"), flat).groups[0].expected()
    assert_allclose(north, south, rtol=1e-6)


@pytest.mark.parametrize("band", ["G", "V"])
def test_the_census_returns(default, band):
    """The model counted in spheres around the Sun gives the census rows as counted, to 1 % (0.1 % here)."""
    survey = skies.survey(skies.circles(0, 90), EDGES, band)
    census = ForwardModel(survey, default).census
    found, rows = census.expected(), stars.census(band)
    counted = census.counts[census.used]
    seen = counted > 0
    assert seen.sum() > 30
    assert_allclose(found[census.used][seen], counted[seen], rtol=1e-3)
    radius = np.unique(rows.radius_pc)
    assert {25.0, 100.0, 200.0} <= set(np.round(radius, 3))


def test_sphere_means_against_brute_force(default):
    """A hundred thousand points in a sphere of 100 pc: 2e-3 is their noise for a layer of 50 pc."""
    rng = np.random.default_rng(3)
    p = rng.normal(size=(100_000, 3))
    p *= (0.1 * rng.random(100_000) ** (1 / 3) / np.linalg.norm(p, axis=1))[:, None]
    l, b, d = (
        np.degrees(np.arctan2(p[:, 1], p[:, 0])),
        np.degrees(np.arcsin(p[:, 2] / np.linalg.norm(p, axis=1))),
        np.linalg.norm(p, axis=1),
    )
    place = default.place(l, b, d)
    means = sphere_means(default, np.array([100.0]))[:, 0]
    for row in np.flatnonzero([c.anchor == "sun" for c, _ in default.layers]):
        assert_allclose(means[row], np.exp(default.ln_relative_density(row, *place)).mean(), rtol=2e-3)


def test_one_reference_window_for_both_bands(default):
    """The Galaxy's census density is what the V census holds in the window; thin, thick, halo have one star there."""
    assert_allclose(default.values["census.density_pc3"], census_density_pc3(default), rtol=0.01)
    lf = layer_functions(default, "V")
    for name in ("thin", "thick", "halo"):
        rows = [c.name == name for c, _ in default.layers]
        assert_allclose(stars.window(lf[rows].sum(axis=0)), 1.0)


def test_extra_rows_are_their_surface_density_times_the_area(default):
    """Quasars and galaxies add the same number per square degree everywhere."""
    fields = skies.circles([10, 20], [60, -70], 0.4)
    with_rows = ForwardModel(skies.survey(fields, np.array([18.0, 19.0]), "G", extra=("quasars", "galaxies")), default)
    parts = with_rows.groups[0].expected(parts=True)
    # 6.56 quasars per square degree; with galaxies 3.63 % of Gaia's 416 at |b| > 60: estimates from published counts.
    assert_allclose(parts["quasars"][:, 0], 6.56 * fields.area_deg2, rtol=1e-3)
    both = parts["quasars"][:, 0] + parts["galaxies"][:, 0]
    assert_allclose(both, 0.0363 * 416.0 * fields.area_deg2, rtol=2e-3)


def test_derived_quantities_of_one_disc():
    """An exponential disc has its own scale height as effective height, and Sigma = 2 n(0) h_z (closed forms)."""
    one = skies.galaxy("disc", [2.6, 0.28, 0, 1000, 1, 0], value=1e-3, z0_kpc=0.0)
    found = derived_quantities(one)({})
    assert_allclose(found["effective_height_kpc"], 0.28, rtol=1e-9)
    assert_allclose(found["only.surface_pc2"], 2 * 1e-3 * 280.0, rtol=1e-6)


def test_derived_quantities_of_the_default(default):
    """Surface ratio share x h_thick / h_thin, 0.12 x 0.85 / 0.30 at the Sun; Juric et al. 2008 have 0.36."""
    found = derived_quantities(default)({})
    sun = np.exp(0.0208 / 0.85 - 0.0208 / 0.30)  # amplitudes are defined at the Sun, not in the plane
    assert_allclose(found["thick.surface_ratio"], 0.12 * 0.85 / 0.30 * sun, rtol=0.01)
    assert 0.30 < found["effective_height_kpc"] < 0.60
