"""Luminosity functions and the local census."""

import logging
from importlib.resources import files
from itertools import pairwise
from types import SimpleNamespace

import numpy as np
import pytest
from astropy.table import Table
from numpy.testing import assert_allclose

from starcount import stars
from starcount.errors import InputError, Problems, UnknownName
from starcount.stars.cells import cell_range, to_cells

Z_SUN_KPC = 0.0208
WHITE_DWARF = stars.CLASSES.index("white dwarf")
EVOLVED = slice(1, 5)


def exponential(h_kpc):
    return lambda z: np.exp(-(abs(z) - Z_SUN_KPC) / h_kpc)


def sech2(h_kpc):
    return lambda z: (np.cosh(Z_SUN_KPC / (2 * h_kpc)) / np.cosh(z / (2 * h_kpc))) ** 2


# Published-like heights: 50 pc for A stars to 300 pc for K and M dwarfs.
DWARF_LAYERS = [((-9, 0), sech2(0.05)), ((0, 2), sech2(0.09)), ((2, 3.5), sech2(0.15)), ((3.5, 30), exponential(0.30))]
LAYERS = [SimpleNamespace(classes=("dwarf",), M_mag=limits) for limits, _ in DWARF_LAYERS[:-1]]
LAYERS += [
    SimpleNamespace(classes=("dwarf", "white dwarf"), M_mag=DWARF_LAYERS[-1][0]),
    SimpleNamespace(classes=("evolved",), M_mag=(-9, 30)),
]
LAWS = [law for _, law in DWARF_LAYERS] + [exponential(0.25)]
OTHERS = {"thick disc": (0.12, exponential(0.85)), "halo": (0.002, exponential(10.0))}


def sphere_mean(law, radius_pc):
    """Mean of a law of the height over a sphere around the Sun, by brute force over its slices."""
    u = np.linspace(-radius_pc, radius_pc, 4001) / 1e3
    weight = (radius_pc / 1e3) ** 2 - u**2
    return (weight * law(u + Z_SUN_KPC)).sum() / weight.sum()


def means(laws, census):
    return np.array([[sphere_mean(law, r) for r in census.radius_pc] for law in laws])


def others_at_the_sun(band, thick_share=None):
    """Thick disc and halo (other, class, cell) as shares of the dwarfs counted at 4.5 < M_V < 8.5."""
    v = stars.census("V")
    dwarfs = v.density_pc3[(v.class_index == 0) & (v.M_lo >= 4.5) & (v.M_hi <= 8.5)].sum()
    shares = {name: share for name, (share, _) in OTHERS.items()}
    shares["thick disc"] = thick_share or shares["thick disc"]
    return np.array([stars.population(name, band) * share * dwarfs for name, share in shares.items()])


def at_the_sun(band, others):
    census = stars.census(band)
    layer_means = means(LAWS, census)
    other_means = means([law for _, law in OTHERS.values()], census)
    lf = stars.census_at_the_sun(census, stars.layer_shares(LAYERS), layer_means, others, other_means)
    return census, lf, layer_means, other_means


@pytest.mark.parametrize("band", stars.REFERENCES)
def test_spheres_return_the_census(band):
    """The components counted in the census spheres hold the stars that were counted, row by row, to 1 %."""
    others = others_at_the_sun(band)
    census, lf, layer_means, other_means = at_the_sun(band, others)
    for row, n in enumerate(census.n):
        k, cells = stars.CENSUS_SETS[census.class_index[row]], cell_range(census.M_lo[row], census.M_hi[row])
        density = layer_means[:, row] @ (lf[:, :, cells].sum(2) @ k)
        density += other_means[:, row] @ (others[:, :, cells].sum(2) @ k)
        assert_allclose(density * census.volume_pc3[row] / census.systems[row], n, rtol=0.01, atol=1e-9)


@pytest.mark.parametrize("band", stars.REFERENCES)
def test_no_row_is_clipped_with_published_shares(band):
    """Thick disc 0.12 (the upper end of 0.04-0.13) and halo 0.002 leave at least 70 % of every counted row."""
    census = stars.census(band)
    other_means = means([law for _, law in OTHERS.values()], census)
    left = stars.remainder(census, others_at_the_sun(band), other_means)
    assert not left.clipped.any()
    counted = census.n > 0
    assert (left.density_pc3[counted] > 0.7 * census.density_pc3[counted]).all()


def test_rows_owned_by_others_become_empty_and_are_reported(caplog):
    """A thick disc larger than the census leaves nothing, never less; the log names the row."""
    with caplog.at_level(logging.WARNING):
        census, lf, _, other_means = at_the_sun("V", others_at_the_sun("V", thick_share=1.5))
    left = stars.remainder(census, others_at_the_sun("V", thick_share=1.5), other_means)
    assert left.density_pc3.min() == 0.0
    assert (left.excess_pc3[left.clipped] > 0).all()
    assert lf.min() == 0.0
    assert lf[:, 0, cell_range(9.5, 10.5)].sum() == 0.0
    assert "dwarf, M 9.5 to 10.5" in caplog.text


def test_every_cell_is_finite_and_white_dwarfs_belong_to_the_thin_disc():
    """No cell is negative; the 20 white dwarfs within 10 pc are all in the layer that holds their class."""
    census, lf, *_ = at_the_sun("G", others_at_the_sun("G"))
    assert np.isfinite(lf).all()
    assert (lf >= 0).all()
    assert census.n[census.class_index == 2].sum() == 20  # Reyle et al. 2021
    assert lf[[0, 1, 2, 4], WHITE_DWARF].sum() == 0.0
    # The layer's mean over 10 pc is within 2 % of 1.
    assert_allclose(lf[3, WHITE_DWARF].sum(), 20 / 4188.8 * 0.83, rtol=0.02)


def test_a_class_without_layer_is_refused():
    """Counted white dwarfs need a layer that holds them."""
    census = stars.census("V")
    layers = [SimpleNamespace(classes=("dwarf", "evolved"), M_mag=(-8, 22))]
    ones, nothing = np.ones((1, len(census.n))), np.zeros((0, len(census.n)))
    with pytest.raises(InputError, match="class 'white dwarf', but no layer does"):
        stars.census_at_the_sun(census, stars.layer_shares(layers), ones, np.zeros((0, 6, 600)), nothing)


def test_rows_of_the_10_pc_sample_are_made_systems():
    """Single-star counts, fainter than 8.5 in V, carry 0.83 (Duchene & Kraus 2013 through a simulation); others 1."""
    census = stars.census("V")
    assert (census.systems[census.M_lo >= 8.5] == 0.83).all()
    assert (census.systems[census.M_hi <= 8.5] == 1).all()
    assert_allclose(4 / 3 * np.pi * census.radius_pc**3, census.volume_pc3, rtol=1e-3)  # radii to 0.01 pc


@pytest.mark.parametrize("band", stars.REFERENCES)
def test_local_densities_agree_with_published_ones(band):
    """Stars and white dwarfs 0.0799 +- 0.0011 pc^-3 (Golovin et al. 2023, from memory); white dwarfs 4.5e-3 +- 0.4e-3
    (Hollands et al. 2018). The census' own Poisson error is 0.0043 and 0.0011."""
    census = stars.census(band)
    single = census.n / census.volume_pc3
    assert_allclose(single.sum(), 0.0799, atol=2 * 0.0043)
    assert_allclose(single[census.class_index == 2].sum(), 4.5e-3, atol=0.0011)


def test_main_sequence_density_agrees_with_the_25_pc_count():
    """4946 main-sequence stars within 25 pc, 0.0756 pc^-3 (Golovin et al. 2023): within the Poisson 6 % of 10 pc."""
    census = stars.census("V")
    dwarfs = census.class_index == 0
    assert_allclose((census.n / census.volume_pc3)[dwarfs].sum(), 4946 / (4 / 3 * np.pi * 25**3), rtol=0.06)


def red_giants_pc3(correct):
    """Red giants with M_V < 3 at the Sun, the column that counts them apart from subgiants."""
    census = stars.census("V")
    table = Table.read(files("starcount.stars") / "data" / "census_V.ecsv")
    return (table["n_giant"] / census.volume_pc3 / [correct(r) for r in census.radius_pc]).sum()


def test_red_giants_agree_with_published_densities():
    """2.7e-4 (Mamajek 2016) to 3.1e-4 +- 0.7e-4 pc^-3 (20 within 25 pc, Golovin et al. 2023), counted, at the Sun."""
    assert 2.5e-4 < red_giants_pc3(lambda r: 1.0) < 3.2e-4
    assert 2.7e-4 < red_giants_pc3(lambda r: sphere_mean(exponential(0.25), r)) < 3.3e-4


def test_giants_per_dwarf_of_the_disc():
    """N(M_V < 3, red giants) / N(4.5 <= M_V < 8.5) is 0.028: the sum of an independent mid-plane table of the same
    samples with sech^2(z / 150 pc); its smoothing of the dwarfs allows 3 %."""
    census = stars.census("V")
    k = (census.class_index == 0) & (census.M_lo >= 4.5) & (census.M_hi <= 8.5)
    law = sech2(0.075)
    dwarfs = (census.n[k] / census.volume_pc3[k]).sum() / sphere_mean(law, 25.0)
    assert_allclose(red_giants_pc3(lambda r: sphere_mean(law, r)) / dwarfs, 0.028, rtol=0.03)


@pytest.mark.parametrize("name", stars.POPULATIONS)
def test_giants_per_dwarf_of_old_populations(name):
    """N(M_V < 3, evolved) / N(4.5 <= M_V < 8.5) is 0.016 for every old model population (printed to two digits), stars
    over stars; our dwarfs are systems, 0.87 for each star in the window."""
    lf = stars.population(name, "V")
    assert_allclose(lf[EVOLVED, : cell_range(-8, 3).stop].sum(), 0.016 / 0.868, atol=0.0007)


@pytest.mark.parametrize("name", stars.POPULATIONS)
def test_populations_are_normalised_in_V_whatever_the_band(name):
    """The window holds one star in V; G has the same stars: all and the evolved ones are as many in both, to 4 %."""
    lf_V, lf_G = stars.population(name, "V"), stars.population(name, "G")
    assert_allclose(stars.window(lf_V), 1.0, rtol=1e-12)
    assert_allclose(lf_G.sum(), lf_V.sum(), rtol=0.04)  # half-magnitude rows; windows along the locus
    assert_allclose(lf_G[EVOLVED].sum(), lf_V[EVOLVED].sum(), rtol=0.04)
    assert lf_G[WHITE_DWARF].sum() == 0.0


def test_halo_main_sequence_peaks_where_it_is_observed():
    """The halo function peaks at M_V 10.5 (Gould 2003, subdwarfs); the model's peak is at 10.25, in bins of 0.5."""
    lf = stars.population("halo", "V")[0]
    assert_allclose(stars.M_EDGES_MAG[np.argmax(lf)], 10.5, atol=0.6)


def test_spread_keeps_rows_and_signs():
    """Every row keeps its total, no cell is negative, a flat function stays flat."""
    edges, totals = np.arange(-2.0, 5.0), np.array([0.0, 1e-6, 3.0, 0.0, 0.5, 0.2])
    cells = to_cells(edges, totals)
    assert (cells >= 0).all()
    rows = [cells[cell_range(lo, hi)].sum() for lo, hi in pairwise(edges)]
    assert_allclose(rows, totals, rtol=1e-12, atol=1e-15)
    assert_allclose(to_cells(edges, np.ones(6))[cell_range(-2, 4)], 0.05, rtol=1e-9)
    assert_allclose(to_cells(np.array([1.0, 3.0]), np.array([4.0]))[cell_range(1, 3)], 0.1, rtol=1e-9)


def test_layer_shares_sum_to_one_and_cross_in_ramps():
    """Over the layers of a class the shares sum to 1; at a limit each holds half, 0.25 mag away all."""
    shares = stars.layer_shares(LAYERS)
    assert_allclose(shares.sum(0), 1.0, rtol=1e-12)
    assert shares.min() == 0.0
    young, limit = shares[0, 0], cell_range(-8, 0).stop
    assert_allclose(young[limit - 1] + young[limit], 1.0, rtol=1e-12)
    assert_allclose([young[limit - 1 - 5], young[limit + 5]], [1.0, 0.0], atol=1e-12)
    assert_allclose(np.diff(young[limit - 5 : limit + 5]), -0.1, rtol=1e-9)  # 0.05 of 0.5 mag a cell


def test_layers_that_do_not_tile_are_refused():
    """A gap between two layers of a class is named with its limits; an unknown class with the known ones."""
    with pytest.raises(InputError, match="ends at M = 2, the next begins at 3"):
        stars.layer_shares([SimpleNamespace(classes=("dwarf",), M_mag=m) for m in ((-8, 2), (3, 22))])
    with pytest.raises(UnknownName, match="known: clump, dwarf, evolved, horizontal branch, red"):
        stars.layer_shares([SimpleNamespace(classes=("giant",), M_mag=(-8, 22))])


def write(path, band="V", unit="mag", meta=None, **columns):
    """An ECSV table of a user's, two classes by default."""
    rows = {"class": ["dwarf", "dwarf", "evolved"], "M_lo": [2.5, 4.5, 0.0], "M_hi": [4.5, 8.5, 2.0], "n": [3, 40, 2]}
    table = Table({**rows, **columns}, meta={"band": band, **(meta or {})})
    for name in ("M_lo", "M_hi"):
        table[name].unit = unit
    table.write(path, format="ascii.ecsv")
    return path


def test_a_users_table_in_V(tmp_path):
    """Its rows are per star in its own window."""
    lf = stars.population(write(tmp_path / "mine.ecsv"), "V")
    assert_allclose(lf[0, cell_range(2.5, 4.5)].sum(), 3 / 40, rtol=1e-12)
    assert_allclose(lf[EVOLVED].sum(), 2 / 40, rtol=1e-12)


def test_phi_is_multiplied_by_the_width(tmp_path):
    """``phi`` per magnitude and ``n`` per row mean the same function."""
    table = Table.read(write(tmp_path / "n.ecsv"))
    table["phi"] = table["n"] / (table["M_hi"] - table["M_lo"])
    table["phi"].unit = "1 / (pc3 mag)"
    table.remove_column("n")
    table.write(tmp_path / "phi.ecsv")
    of_n, of_phi = (stars.population(tmp_path / name, "V") for name in ("n.ecsv", "phi.ecsv"))
    assert_allclose(of_phi, of_n, rtol=1e-12)


def test_a_table_in_G_only_needs_its_window(tmp_path):
    """Without V rows the meta key ``window`` gives the stars of the reference window; its absence is named."""
    lf = stars.population(write(tmp_path / "with.ecsv", "G", meta={"window": 20}), "G")
    assert_allclose(lf[0].sum(), 43 / 20, rtol=1e-12)
    with pytest.raises(Problems, match="meta key window: missing, and there are no rows of band V; expected more"):
        stars.population(write(tmp_path / "without.ecsv", "G"), "G")


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"unit": None}, "column M_lo: no unit; expected a column of finite numbers in mag"),
        ({"unit": "pc"}, "column M_lo: unit 'pc'"),
        ({"n": [3, -1, 2]}, "row 2, n: -1; expected no negative number"),
        ({"n": [3, np.nan, 2]}, "row 2, n: nan"),
        ({"n": ["a", "b", "c"]}, "column n: holds <U1 values"),
        ({"class": ["dwarf", "giant", "evolved"]}, "row 2, class: giant; expected one of dwarf, subgiant"),
        ({"M_lo": [2.5, 4.0, 0.0]}, "row 2, M_lo: 4; expected 4.5, the end of the dwarf row before it in V"),
        ({"M_lo": [2.5, 9.0, 0.0]}, "row 2, M_lo: 9 to 8.5; expected -8 <= M_lo < M_hi <= 22"),
        ({"band": "Q"}, "row 1, band: Q; expected one of G, V"),
        ({"band": "G"}, "meta key window: missing, and there are no rows of band V"),
        ({"meta": {"counts": "pairs"}}, "meta key counts: pairs; expected one of stars, systems"),
        ({"class": ["dwarf", "clump", "evolved"]}, "column class: evolved beside clump; expected the word evolved or"),
        ({"phi": [1.0, 1.0, 1.0]}, "columns: phi and n; expected one of phi and n"),
        ({"n": [3, 0, 2]}, "rows of band V: 0.0; expected more than 0"),
    ],
)
def test_what_is_wrong_with_a_users_table_is_said(tmp_path, change, message):
    """The message names file, place, what was found and what is allowed."""
    path = write(tmp_path / "bad.ecsv", **change)
    with pytest.raises(Problems) as problems:
        stars.population(path, "V")
    assert f"{path}: {message}" in str(problems.value)


def test_unknown_names_and_unreadable_files(tmp_path):
    """An unknown population or band lists the known ones; a missing or broken file is named."""
    with pytest.raises(UnknownName, match=r"known: PATH\.ecsv, PATH\.toml, bulge, halo, thick disc"):
        stars.population("young disc", "V")
    with pytest.raises(UnknownName, match="no band called 'Q'; known: B, BP, G,"):
        stars.census("Q")
    with pytest.raises(InputError, match="band 'BP' is not a reference band: functions are counted in V and G,"):
        stars.census("BP")
    with pytest.raises(Problems, match="no such file; expected an ECSV table"):
        stars.population(tmp_path / "none.ecsv", "V")
    (tmp_path / "text.ecsv").write_text("not a table\n")
    with pytest.raises(Problems, match="cannot be read"):
        stars.population(tmp_path / "text.ecsv", "V")
    empty = tmp_path / "empty.ecsv"
    empty.write_bytes(b"")
    with pytest.raises(Problems, match="cannot be read"):
        stars.population(empty, "V")


def test_the_classes_of_the_census_share_the_six():
    """Every class belongs to one class of the census, "evolved" to four, and their shares sum to 1 at any magnitude."""
    assert len(stars.CLASSES) == 6
    assert_allclose(stars.CENSUS_SETS.sum(axis=0), 1.0)
    assert_allclose(stars.CENSUS_SETS.sum(axis=1), [1, 4, 1])
    for reference in stars.REFERENCES:
        split = stars.evolved_split(reference)
        assert_allclose(split.sum(axis=0), 1.0, rtol=1e-12)
        assert split[[0, WHITE_DWARF]].sum() == 0.0


def test_subgiants_of_the_census_are_those_that_are_not_red_giants():
    """The split leaves as many red giants (with the clump) in each magnitude as were counted apart, of 94 and more."""
    census, lf, *_ = at_the_sun("V", others_at_the_sun("V"))
    table = Table.read(files("starcount.stars") / "data" / "census_V.ecsv")
    giants = [stars.CLASSES.index(name) for name in ("red giant", "clump", "horizontal branch")]
    for row in np.flatnonzero((census.class_index == 1) & (census.M_lo >= -0.5) & (census.M_hi <= 2.5)):
        cells = cell_range(census.M_lo[row], census.M_hi[row])
        share = lf[-1, giants, cells].sum() / lf[-1, EVOLVED, cells].sum()
        # 7 points: a logistic through four counted shares of 48 to 150 stars, whose own error is 3 to 6.
        assert_allclose(share, table["n_giant"][row] / table["n"][row], atol=0.07)


def test_a_layer_may_name_its_evolved_stars_one_by_one():
    """ "evolved" is short for its four classes; a layer of clump stars alone leaves the rest to another."""
    word = stars.layer_shares([SimpleNamespace(classes=("evolved",), M_mag=(-8, 22))])
    names = ("subgiant", "red giant", "clump", "horizontal branch")
    assert_allclose(stars.layer_shares([SimpleNamespace(classes=names, M_mag=(-8, 22))]), word)
    two = [SimpleNamespace(classes=(name,), M_mag=(-8, 22)) for name in ("clump", "dwarf")]
    assert_allclose(stars.layer_shares(two)[0, stars.CLASSES.index("clump")], 1.0)


@pytest.mark.parametrize("band", stars.REFERENCES)
@pytest.mark.parametrize(("name", "he"), [("thick disc", "clump"), ("bulge", "clump"), ("halo", "horizontal branch")])
def test_old_populations_hold_every_class_that_the_model_has(name, he, band):
    """Core-helium-burning stars per window star: 6.6e-4/0.188, 6.3e-4/0.218, 6.6e-4/0.165 of the model (two digits),
    over systems instead of stars."""
    lf = stars.population(name, band)
    shares = stars.class_fractions(lf)
    other = "clump" if he == "horizontal branch" else "horizontal branch"
    assert shares[other] == 0.0
    assert min(shares[k] for k in ("dwarf", "subgiant", "red giant")) > 0
    model = {"thick disc": 6.6e-4 / 0.188, "halo": 6.3e-4 / 0.218, "bulge": 6.6e-4 / 0.165}[name]
    assert_allclose(
        lf[stars.CLASSES.index(he)].sum(), model / 0.87, rtol=0.05
    )  # two digits; 0.87 to 0.88; the window in G


def test_tables_of_stars_become_systems(tmp_path):
    """Dwarfs counted one by one are fewer as systems: between M_V 2.5 and 4.5, 0.92 to 0.95 of them; 0.87 in the
    window (Duchene & Kraus 2013 through a simulation). Giants stay."""
    systems, singles = (
        stars.population(write(tmp_path / f"{counts}.ecsv", meta={"counts": counts}), "V")
        for counts in ("systems", "stars")
    )
    ratio = singles.sum(axis=1)[[0, 2]] / systems.sum(axis=1)[[0, 2]]
    assert_allclose(stars.window(singles), 1.0, rtol=1e-12)
    assert_allclose(ratio[1], 1 / 0.872, rtol=0.01)
    assert_allclose(singles[0, cell_range(2.5, 4.5)].sum() * 40 / 3, 0.935 / 0.872, rtol=0.02)


@pytest.mark.parametrize("name", stars.TRACERS_ABSENT)
def test_kinds_without_a_source_are_refused_with_the_reason(name):
    """A kind of stars that is known but absent is never silently zero."""
    with pytest.raises(InputError, match=f"{name}: not in these populations; "):
        stars.population(name, "V")
