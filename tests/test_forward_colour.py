"""Counts in magnitude and colour against brute force, against counts in magnitude, and their gradients."""

import numpy as np
import pytest
import skies
import twin
from numpy.testing import assert_allclose

from starcount import stars
from starcount.dust import band_coefficients
from starcount.errors import InputError
from starcount.forward import ForwardModel, layer_functions
from starcount.forward.kernels import stars_on_grid
from starcount.forward.kernels.products import meeting
from starcount.galaxy import read_galaxy
from starcount.stars.binaries import resolved_gain
from starcount.stars.own import M_V_of_dwarfs
from starcount.survey import Completeness, Observation
from starcount.survey.curves import ColourError

EDGES, COLOURS = np.arange(14.0, 20.1, 1.0), np.array([-np.inf, 0.5, 1.0, 1.5, 2.5, np.inf])
GAIA = ("BP", "RP")


@pytest.fixture(scope="module")
def default():
    """The default Galaxy."""
    return read_galaxy()


@pytest.fixture(scope="module")
def fields():
    """Six small fields, from the pole to 6 deg from the plane."""
    return skies.circles([0, 90, 180, 270, 30, 330], [90, 45, -20, 12, -60, -6], 0.3)


@pytest.fixture(scope="module")
def in_colour(default, fields):
    """The fields counted in G and BP - RP."""
    survey = skies.survey(fields, EDGES, "G", colour=GAIA, edges_colour_mag=COLOURS)
    return ForwardModel(survey, default, dust_range=2.0).groups[0]


@pytest.mark.parametrize(("l", "b"), [(0, 60), (40, 10)])
def test_brute_force_agrees(l, b):
    """Every kind of star at every distance, without grids or splines: 1e-3, its cells' and the colour slabs' part."""
    galaxy = skies.galaxy("disc", [2.6, 0.7, 0, 1000, 1, 0], value=1e-3, population="thick disc")
    fields, edges = skies.circles(l, b, 0.05), (np.array([14.0, 15.0, 18.0, 18.5]), np.array([0.2, 0.8, 1.15, 2.3]))
    survey = skies.survey(fields, edges[0], "G", colour=GAIA, edges_colour_mag=edges[1])
    group = ForwardModel(survey, galaxy).groups[0]
    coefficients = np.stack([band_coefficients(name) for name in ("G", *GAIA)], axis=1)
    lf, locus = group.tables.lf[0], stars.locus("thick disc", "G")
    wanted = twin.expected_in_colour(
        galaxy, 0, lf, locus, "G", GAIA, l, b, fields.area_deg2[0], edges, coefficients
    ).ravel()
    assert_allclose(group.expected()[0], wanted, rtol=1e-3, atol=1e-5 * wanted.sum())


def test_colours_sum_to_magnitudes(default, fields, in_colour):
    """Over all colours the counts are those in magnitude only, to rounding."""
    whole = ForwardModel(skies.survey(fields, EDGES, "G"), default).groups[0].expected()
    summed = in_colour.expected().reshape(len(whole), EDGES.size - 1, -1).sum(axis=2)
    assert_allclose(summed, whole, rtol=1e-10)


@pytest.mark.parametrize(("band", "colour"), [("V", ("B", "V")), ("SDSS r", ("SDSS g", "SDSS r")), ("Ks", ("J", "Ks"))])
def test_colours_sum_to_magnitudes_in_every_system(default, fields, band, colour):
    """Also where magnitudes come from a locus and where one extinction coefficient serves all stars."""
    edges = np.arange(13.0, 17.1, 1.0)
    whole = ForwardModel(skies.survey(fields, edges, band), default).groups[0].expected()
    survey = skies.survey(fields, edges, band, colour=colour, edges_colour_mag=np.array([-np.inf, 0.4, 0.9, np.inf]))
    summed = ForwardModel(survey, default).groups[0].expected().reshape(len(whole), edges.size - 1, -1).sum(axis=2)
    assert_allclose(summed, whole, rtol=1e-10)


def test_closed_colour_bins_leave_the_rest_out(in_colour, default, fields):
    """Bins with finite ends equal the same bins between open ones, to what the spline leaves: 1e-8 of the field."""
    survey = skies.survey(fields, EDGES, "G", colour=GAIA, edges_colour_mag=COLOURS[1:-1])
    closed = ForwardModel(survey, default).groups[0].expected().reshape(6, EDGES.size - 1, -1)
    between = in_colour.expected().reshape(6, EDGES.size - 1, -1)[:, :, 1:-1]
    assert_allclose(closed, between, atol=1e-8 * between.max(), rtol=1e-6)


def test_the_matrix_holds_every_row_that_is_met(in_colour):
    """No star lies on a row that was left out of the matrix, and the product over spans is the whole one: rounding."""
    arrays, v, W = in_colour.projection.arrays, in_colour.galaxy.vector(), in_colour.luminosity_matrix()
    (n_slab, n_x, n_y, n_layer), kept = arrays[17], arrays[21]
    for ln_dust in (-0.6, 0.0, 0.6):
        grid = stars_on_grid(v, np.full(6, ln_dust), *arrays).reshape(6, n_slab, n_x, n_y, n_layer)
        found, met = 0.0, 0.0
        for slab, by_class in enumerate(kept):
            for c, (first, low, high) in enumerate(by_class):
                there = grid[:, slab, c, low:high].reshape(6, -1)
                found, met = found + there @ W[first : first + there.shape[1]], met + there.sum()
        assert_allclose(met, grid.sum(), rtol=1e-12)
        assert_allclose(in_colour.projection.counts(v, W, np.full(6, ln_dust)), found, rtol=1e-11, atol=1e-12)


def test_blocks_do_not_matter(default):
    """110 fields (two blocks) in one call equal the last of them alone, to rounding."""
    rng = np.random.default_rng(2)
    l, b = rng.uniform(0, 360, 110), rng.uniform(-60, 60, 110)

    def counts(k):
        fields = skies.circles(l[k], b[k], 0.1)
        survey = skies.survey(fields, EDGES[2:4], "G", colour=GAIA, edges_colour_mag=COLOURS)
        return ForwardModel(survey, default).groups[0].expected()

    some = np.arange(100, 110)
    assert_allclose(counts(np.arange(110))[some], counts(some), rtol=1e-9)


def test_every_gradient(in_colour):
    """The pull-back against central differences: numbers of the Galaxy, dust factors and W. 3e-6: rounding."""
    rng = np.random.default_rng(5)
    v, W = in_colour.galaxy.vector(), in_colour.luminosity_matrix()
    cotangent = rng.normal(size=in_colour.used.shape) / in_colour.expected().max(axis=0)
    dust = 0.1 * rng.normal(size=6)
    gv, gW, g_dust = in_colour.projection.pull_back(v, W, cotangent, dust)

    def value(v=v, dust=dust, W=W):
        return np.vdot(cotangent, in_colour.projection.counts(v, W, dust))

    names = [f"{c.name}.{p.name}" for c in in_colour.galaxy.components for p in c.law.parameters]
    chosen = [names.index(n) for n in ("thin.h_R_kpc", "thin.h_z_kpc", "thick.h_z_kpc", "halo.q")] + [v.size - 1]
    for i in chosen:
        step = 1e-5 * max(abs(v[i]), 0.02) * np.eye(v.size)[i]
        assert_allclose(gv[i], (value(v=v + step) - value(v=v - step)) / (2 * step[i]), rtol=3e-6, atol=1e-7)
    for f in range(dust.size):
        step = 1e-5 * np.eye(dust.size)[f]
        assert_allclose(g_dust[f], (value(dust=dust + step) - value(dust=dust - step)) / 2e-5, rtol=3e-6, atol=1e-8)
    direction = rng.normal(size=W.shape)
    assert_allclose(np.vdot(gW, direction), value(W=direction), rtol=1e-9)


def test_factors_of_one_change_nothing(in_colour):
    """The matrix is the sum of its pieces, to rounding."""
    ones = np.ones((len(in_colour.galaxy.layers), 10))
    assert_allclose(in_colour.luminosity_matrix(ones), in_colour.luminosity_matrix(), rtol=1e-9, atol=1e-13)


def test_parts_sum_to_the_whole(in_colour):
    """By component, and by component and class: to rounding, and what the splines leave below none in a part."""
    whole = in_colour.expected()
    left = 1e-7 * whole.max()
    assert_allclose(sum(in_colour.expected(parts=True).values()), whole, rtol=1e-10, atol=left)
    by_class = in_colour.expected(parts="class")
    assert_allclose(sum(by_class.values()), whole, rtol=1e-9, atol=left)
    assert {name for _, name in by_class} == set(stars.CLASSES)


def test_completeness_in_colour(default, fields, in_colour):
    """Half of the stars redder than 1.5 and all bluer ones: open bins on either side are 1 and 1/2 of the counts."""
    m, c = np.array([10.0, 25.0]), np.array([-5.0, 1.4999, 1.5001, 20.0])
    half = Completeness(m, np.tile([1.0, 1.0, 0.5, 0.5], (2, 1)), c)
    survey = skies.survey(
        fields, EDGES, "G", colour=GAIA, edges_colour_mag=COLOURS, observation=Observation(completeness=half)
    )
    counted = ForwardModel(survey, default).groups[0].expected().reshape(6, EDGES.size - 1, -1)
    all_of = in_colour.expected().reshape(counted.shape)
    share = np.array([1.0, 1.0, 1.0, 0.5, 0.5])
    assert_allclose(counted, share * all_of, rtol=5e-3, atol=1e-6 * all_of.max())  # the step is 2e-4 mag wide


def test_reddening_moves_stars_to_the_red(in_colour):
    """More dust: every field's mean colour grows, and the sum over all colours falls (all counts grow faintwards)."""
    v, W = in_colour.galaxy.vector(), in_colour.luminosity_matrix()
    clear, dusty = (
        in_colour.projection.counts(v, W, np.full(6, x)).reshape(6, EDGES.size - 1, -1) for x in (-0.5, 0.5)
    )
    red = [np.cumsum(n, axis=2)[:, :, 1] / n.sum(axis=2) for n in (clear, dusty)]
    assert (red[1] < red[0]).all()
    assert (dusty.sum(axis=(1, 2)) < clear.sum(axis=(1, 2))).all()


def test_colours_that_cannot_be_predicted_are_refused(default, fields):
    """A colour that dust does not redden; extra rows, which have no colours."""
    for said, more in (
        ("dust does not redden this colour", {"colour": ("RP", "BP")}),
        ("extra rows have no colours", {"colour": GAIA, "extra": ("quasars",)}),
    ):
        model = ForwardModel(skies.survey(fields, EDGES, "G", edges_colour_mag=COLOURS, **more), default)
        with pytest.raises(InputError, match=said):
            _ = model.groups


def test_resolved_pairs(default, fields):
    """A sharper survey counts more objects, at most as many as there are stars: 1 / 0.80 of the systems."""
    plain = ForwardModel(skies.survey(fields, EDGES, "G"), default).groups[0].expected()
    sharp = [
        ForwardModel(skies.survey(fields, EDGES, "G", resolution_arcsec=x), default).groups[0].expected()
        for x in (3.0, 0.1)
    ]
    assert (plain < sharp[0]).all()
    assert (sharp[0] < sharp[1]).all()
    assert (sharp[1] < plain / 0.79).all()


def test_errors_of_colour_behind_much_dust(default):
    """Stars scattered back across the last edge from redder slabs: a grid as far as all dust goes gives the same."""
    fields = skies.circles([0, 60], [1.5, -1.0], 0.2)
    wide = ColourError(np.array([5.0, 25.0]), np.full(2, -0.3), np.full(2, 0.3))
    counted = []
    for last in (np.inf, 30.0):  # a finite edge beyond all stars makes the grid as long as the excess
        edges = np.array([-np.inf, 0.6, 1.0, last])
        survey = skies.survey(
            fields, EDGES[:4], "G", colour=GAIA, edges_colour_mag=edges, observation=Observation(colour_error=wide)
        )
        counted.append(ForwardModel(survey, default).groups[0].expected().reshape(2, 3, 3))
    assert_allclose(counted[0][..., :2], counted[1][..., :2], rtol=1e-4)


def test_limits_of_layers_are_those_of_V(default):
    """The layer of the brightest giants, cut in M_V, holds as many stars in G as in V: 25 %, coarse rows."""
    row = [layer.name for _, layer in default.layers].index("bright evolved stars")
    in_V, in_G = (layer_functions(default, band)[row].sum() for band in "VG")
    assert_allclose(in_G, in_V, rtol=0.25)


def test_one_window_in_both_bands():
    """Systems with 4.5 < M_V < 8.5 of every population, counted along the locus in G, are one: rounding."""
    for name in ("thick disc", "halo", "bulge"):
        lf, locus = stars.population(name, "G"), stars.locus(name, "G")
        inside = (locus.M_V_mag > 4.5) & (locus.M_V_mag < 8.5) & ~locus.of_class("white dwarf")
        assert_allclose((lf[locus.class_index, locus.cell] * locus.share)[inside].sum(), 1.0, rtol=1e-9)


def test_companions_belong_to_dwarfs(default, fields):
    """A sharper survey counts no more giants and white dwarfs; rounding."""
    plain, sharp = (
        ForwardModel(skies.survey(fields, EDGES, "G", **more), default).groups[0].expected(parts="class")
        for more in ({}, {"resolution_arcsec": 0.5})
    )
    for (component, name), counts in plain.items():
        if name == "dwarf":
            assert (sharp[component, name] >= counts).all()
        else:
            assert_allclose(sharp[component, name], counts, rtol=1e-12)


def test_stars_redder_than_the_last_slab_stay_on_it(default):
    """In the plane: none is lost, and an edge at 6, for which the slabs reach farther, changes no bluer bin."""
    fields = skies.circles(30, 0, 0.1)

    def counts(*edges):
        more = {"colour": GAIA, "edges_colour_mag": np.array([-np.inf, *edges, np.inf])} if edges else {}
        return ForwardModel(skies.survey(fields, EDGES, "G", **more), default).groups[0].expected().reshape(6, -1)

    near, far, whole = counts(0.3), counts(0.3, 6.0), counts()
    assert_allclose(near.sum(axis=1), whole[:, 0], rtol=1e-10)
    assert_allclose(near[:, 0], far[:, 0], rtol=1e-6, atol=1e-8 * whole.max())


def test_resolved_pairs_by_cell(default):
    """A bin of one cell grows by the gain of a dwarf's M_V at the distance of its shift: up to 7 %, to 0.01."""
    edges, at = np.array([15.0, 15.05]), skies.circles(0, 60)
    groups = [
        ForwardModel(skies.survey(at, edges, "Ks", **more), default).groups[0]
        for more in ({}, {"resolution_arcsec": 0.05})
    ]
    y = groups[0].projection.y_mag
    plain, sharp = (group.luminosity_matrix().reshape(y.size, -1).sum(axis=1) for group in groups)
    some = np.flatnonzero((15.0 - y > 3.0) & (15.0 - y < 8.0))
    wanted = resolved_gain(M_V_of_dwarfs("Ks", 15.025 - y[some]), 10 ** (y[some] / 5 + 1), 0.05)
    assert_allclose(sharp[some] / plain[some], wanted, atol=0.01)


def test_classes_with_factors_sum_to_the_whole(default):
    """Split by class, the components keep their own factors on the functions: the thick disc's rises with M_V."""
    group = ForwardModel(skies.survey(skies.circles(0, 60), EDGES, "V"), default).groups[0]
    factors = np.ones((len(default.layers), 10))
    factors[[c.name == "thick" for c, _ in default.layers]] = np.linspace(1.0, 2.0, 10)
    by_class = group.expected(factors=factors, parts="class")
    assert_allclose(sum(by_class.values()), group.expected(factors=factors), rtol=1e-9)


def test_only_rows_of_the_matrix_are_met():
    """A written part that reaches over the rows of the matrix on both sides meets only them: y 3 and 4, two layers."""
    spans, kept, shape = np.array([[[1, 7]]]), np.array([[[10, 3, 5]]]), np.array([1, 1, 8, 2])
    assert meeting(0, 0, spans, kept, shape) == (6, 10, 4)
