"""Populations of a user's own: functions and colour tables in four formats, and what is said of bad ones."""

import logging

import numpy as np
import pytest
from astropy.table import Table
from numpy.testing import assert_allclose
from own_files import COLOUR_TABLE, ENDINGS, FUNCTION, ISOCHRONES, colour_rows, function_rows, isochrone_rows, write_own

from starcount import stars
from starcount.errors import InputError, Problems, UnknownName
from starcount.stars.cells import CLASSES, cell_range
from starcount.stars.own_tables import read_own

ANY = np.array([5800.0])


@pytest.mark.parametrize("ending", ENDINGS)
@pytest.mark.parametrize(
    ("settings", "table"),
    [(FUNCTION, function_rows()), (COLOUR_TABLE, colour_rows()), (ISOCHRONES, isochrone_rows())],
    ids=["function", "colour table", "isochrones"],
)
def test_every_kind_reads_from_every_format(tmp_path, settings, table, ending):
    """ECSV, FITS, VOTable and Parquet give the same function to rounding."""
    found = read_own(write_own(tmp_path, settings, table, ending)).per_star("G")
    plain = read_own(write_own(tmp_path, settings, table, name="plain")).per_star("G")
    assert plain.sum() > 0
    assert_allclose(found, plain, rtol=1e-12, atol=1e-15)


def test_columns_and_units_of_the_user(tmp_path):
    """Columns under other names, and without units, are mapped by the settings."""
    table = function_rows()
    for name in ("M_lo", "M_hi"):
        table[name].unit = None
    table.rename_columns(["M_lo", "M_hi", "n", "class"], ["Mmin", "Mmax", "N", "kind of star"])
    mapped = {"M_lo": "Mmin", "M_hi": "Mmax", "n": "N", "class": "kind of star"}
    settings = {**FUNCTION, "columns": mapped, "units": {"M_lo": "mag", "M_hi": "mag"}}
    found = read_own(write_own(tmp_path, settings, table)).per_star("V")
    assert_allclose(found, read_own(write_own(tmp_path, FUNCTION, function_rows())).per_star("V"), rtol=1e-12)


def test_function_is_counted_per_star_of_the_window(tmp_path):
    """1000 dwarfs at 4.5 < M_V < 8.5 in even rows of 250 a magnitude: 0.25 a magnitude."""
    lf = stars.population(write_own(tmp_path, FUNCTION, function_rows()), "V")
    assert_allclose(stars.window(lf), 1.0, rtol=1e-12)
    assert_allclose(lf[0, cell_range(6, 7)].sum(), 0.25, rtol=1e-12)


def test_colours_are_those_of_the_named_population(tmp_path):
    """``colours_of`` gives the locus of ours, a metallicity one of its own."""
    locus = stars.locus(write_own(tmp_path, FUNCTION, function_rows()), "G")
    assert_allclose(locus.Teff_K, stars.locus("thick disc", "G").Teff_K)
    given = {key: value for key, value in FUNCTION.items() if key != "colours_of"}
    halo_like = {**given, "metallicity": {"mean": -1.5, "spread": 0.5}}
    locus = stars.locus(write_own(tmp_path, halo_like, function_rows(), name="metallicity"), "G")
    assert_allclose(locus.Teff_K, stars.locus("halo", "G").Teff_K)


def test_a_function_in_one_reference_band_serves_the_other(tmp_path):
    """V rows alone: the function in G holds the same stars per star of the window, moved to where dwarfs are in G."""
    table = function_rows()
    own = read_own(write_own(tmp_path, FUNCTION, table[table["band"] == "V"]))
    V, G = own.per_star("V")[0], own.per_star("G")[0]
    assert_allclose(G.sum(), V.sum(), rtol=1e-12)
    middle = stars.M_MIDDLE_MAG
    # A Sun-like to M-dwarf sequence: G is 0.15 to 1 mag brighter than V (Riello et al. 2021).
    assert 0.15 < (V @ middle - G @ middle) / V.sum() < 1.0


def test_a_bare_table_says_that_its_colours_are_assumed(tmp_path, caplog):
    """Without the meta key ``colours_of`` an ECSV table takes those of the census, and the log says so."""
    table = function_rows()
    table.write(tmp_path / "bare.ecsv")
    with caplog.at_level(logging.WARNING):
        locus = stars.locus(tmp_path / "bare.ecsv", "G")
    assert "no meta key colours_of; its stars get the colours and temperatures of the census" in caplog.text
    assert_allclose(locus.Teff_K, stars.locus("census", "G").Teff_K)
    caplog.clear()
    table.meta["colours_of"] = "halo"
    table.write(tmp_path / "said.ecsv")
    assert_allclose(stars.locus(tmp_path / "said.ecsv", "G").Teff_K, stars.locus("halo", "G").Teff_K)
    assert not caplog.text


def test_an_edited_file_is_read_again(tmp_path):
    """The same path with other numbers gives the others; the smooth cumulative moves 1 % of a row over M_V 8.5."""
    path = write_own(tmp_path, FUNCTION, function_rows())
    before = stars.population(path, "V")[0, cell_range(9, 10)].sum()
    n = np.full(18, 250.0)
    n[6] = 500.0
    write_own(tmp_path, FUNCTION, function_rows(n=n))
    assert_allclose(stars.population(path, "V")[0, cell_range(9, 10)].sum(), 2 * before, rtol=0.02)


def test_colour_table_returns_its_own_rows(tmp_path):
    """Counted again in its rows of magnitude and colour, the spread table gives n / window, to the least scatter."""
    rows = colour_rows()
    rows["c_hi"][::3] = rows["c_lo"][1::3] = 0.4  # rows of unequal width
    path = write_own(tmp_path, COLOUR_TABLE, rows)
    lf, locus = stars.population(path, "G"), stars.locus(path, "G")
    table = stars.spread(locus, lf[None], "SDSS r", ("SDSS g", "SDSS r"), ANY)[0, 0]
    for row in rows:
        cells = cell_range(row["M_lo"], row["M_hi"])
        c = slice(*np.round((np.array([row["c_lo"], row["c_hi"]]) + 1.5) / 0.05).astype(int))
        assert_allclose(table[cells, c].sum(), row["n"] / 10.0, rtol=1e-9, atol=1e-12)


def test_colour_table_predicts_only_its_band_and_colour(tmp_path):
    """G, and g - i, are refused by name; so is a band of the colour by itself."""
    path = write_own(tmp_path, COLOUR_TABLE, colour_rows())
    lf, locus = stars.population(path, "G"), stars.locus(path, "G")
    for band, colour, name in (
        ("G", None, "'G'"),
        ("SDSS g", None, "'SDSS g'"),
        ("SDSS r", ("SDSS g", "SDSS i"), "'SDSS g'"),
    ):
        with pytest.raises(InputError, match=f"no magnitude in band {name}"):
            stars.spread(locus, lf[None], band, colour, ANY)


def test_stars_without_M_V_have_their_own_magnitude_for_smooth_factors(tmp_path):
    """A factor on the function needs M_V of every star: that of the locus, or the magnitude the table counts in."""
    locus = stars.locus("halo", "G")
    assert_allclose(locus.M_V_mag, locus.M_mag["V"])
    own = stars.locus(write_own(tmp_path, COLOUR_TABLE, colour_rows()), "G")
    assert_allclose(own.M_V_mag, own.M_mag["SDSS r"])


def test_colour_table_has_temperatures_of_dwarfs_unless_it_gives_them(tmp_path):
    """The Sun has 5772 K and g - r = 0.45 +- 0.02 (Holmberg et al. 2006), a cell and its colour error 100 K."""
    table = colour_rows()
    locus = stars.locus(write_own(tmp_path, COLOUR_TABLE, table), "G")
    solar = np.abs(locus.colour_mag("SDSS g", "SDSS r") - 0.45) < 0.026
    assert_allclose(locus.Teff_K[solar].mean(), 5772, atol=100)
    table["Teff"] = 4321.0
    table["Teff"].unit = "K"
    assert_allclose(stars.locus(write_own(tmp_path, COLOUR_TABLE, table), "G").Teff_K, 4321.0)


def test_colour_table_in_V_counts_its_own_window(tmp_path):
    """In V no window is needed: the rows from 4.5 on are counted, smooth over magnitudes."""
    given = {key: value for key, value in COLOUR_TABLE.items() if key != "window"}
    path = write_own(tmp_path, {**given, "band": "V", "colour": ["B", "V"]}, colour_rows())
    assert_allclose(stars.window(stars.population(path, "V")), 1.0, rtol=1e-12)


def test_single_stars_of_a_colour_table_become_systems(tmp_path):
    """counts = "stars" takes dwarfs of M_r 4 to 7 (M_V 4 to 8) down to 0.86-0.93 of their number."""
    systems = stars.population(write_own(tmp_path, COLOUR_TABLE, colour_rows(), name="systems"), "G")
    single = {**COLOUR_TABLE, "counts": "stars"}
    singles = stars.population(write_own(tmp_path, single, colour_rows(), name="singles"), "G")
    assert 0.86 < singles.sum() / systems.sum() < 0.93


def lines(tmp_path, settings, table):
    with pytest.raises(Problems) as refused:
        read_own(write_own(tmp_path, settings, table))
    return str(refused.value).splitlines()


def edited(table: Table, row: int, **cells) -> Table:
    table = table.copy()
    for name, value in cells.items():
        table[name][row] = value
    return table


@pytest.mark.parametrize(
    ("settings", "table", "message"),
    [
        (COLOUR_TABLE, edited(colour_rows(), 4, n=-7.0), "own.ecsv: row 5, n: -7; expected no negative number"),
        (FUNCTION, edited(function_rows(), 4, n=-7.0), "own.ecsv: row 5, n: -7; expected no negative number"),
        (COLOUR_TABLE, edited(colour_rows(), 4, c_lo=0.55), "row 5, c_lo: 0.55; expected 0.5, where the dwarf row"),
        (COLOUR_TABLE, edited(colour_rows(), 4, c_lo=0.45), "row 5, c_lo: 0.45; expected 0.5, where the dwarf row"),
        (COLOUR_TABLE, colour_rows()[[0, 1, 2, 6, 7, 8]], "row 4, M_lo: 6; expected 5, where the dwarf row before it"),
        (COLOUR_TABLE, edited(colour_rows(), 4, c_hi=0.4), "row 5, c_lo: 0.5 to 0.4; expected -1.5 <= c_lo < c_hi"),
        (COLOUR_TABLE, edited(colour_rows(), 8, M_hi=40.0), "row 9, M_lo: 6 to 40; expected -8 <= M_lo < M_hi <= 22"),
        (COLOUR_TABLE, edited(colour_rows(), 4, **{"class": "cool"}), "row 5, class: cool; expected one of dwarf"),
        (FUNCTION, function_rows()[[0, 1, 3, 4]], "row 3, M_lo: 6; expected 5, the end of the dwarf row before it"),
    ],
)
def test_a_bad_row_is_one_line(tmp_path, settings, table, message):
    """Negative densities, gaps, overlaps and unknown classes: the row, the value and what is allowed, on one line."""
    found = lines(tmp_path, settings, table)
    assert len(found) == 1
    assert message in found[0]


def test_wrong_units_are_one_line(tmp_path):
    """A magnitude in parsecs, or without a unit."""
    for unit, found in (("pc", "unit 'pc'"), (None, "no unit")):
        table = colour_rows()
        table["M_lo"].unit = unit
        message = f"column M_lo: {found}; expected a column of finite numbers in mag"
        assert [line.split("own.ecsv: ")[1] for line in lines(tmp_path, COLOUR_TABLE, table)] == [message]


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"format": 2}, "format: 2; expected 1"),
        ({"kind": "tracks"}, "kind: 'tracks'; expected one of function, colour table, isochrones"),
        ({"colours_of": "young disc"}, "colours_of: 'young disc'; expected one of census, thick disc"),
        (
            {"metallicity": {"mean": 0, "spread": 0.1}},
            "colours_of, metallicity: colours_of and metallicity; expected one",
        ),
        ({"colour": ["B", "V"]}, "colour: not a setting of this kind of population; expected one of"),
        ({"columns": {"M_lo": "Mmin"}}, "columns.M_lo: 'Mmin'; expected a column of own.ecsv: band, class"),
        ({"units": {"n": "stone"}}, "units.n: 'stone'; expected a unit such as mag"),
        ({"units": {"M_lo": "pc"}}, "units.M_lo: pc; expected nothing: the table itself says mag"),
        ({"counts": "binaries"}, 'counts: \'binaries\'; expected "stars" or "systems"'),
    ],
)
def test_a_bad_setting_of_a_function_is_one_line(tmp_path, change, message):
    """Each names the file, the setting, the value and what is allowed."""
    found = lines(tmp_path, {**FUNCTION, **change}, function_rows())
    assert len(found) == 1
    assert f"own.toml: {message}" in found[0]


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"band": "U"}, "own.toml: band: band 'U' is left out: "),
        ({"colour": ["SDSS g", "g"]}, "own.toml: colour: no band called 'g'; known: "),
        ({"colour": ["SDSS g"]}, "own.toml: colour: ['SDSS g']; expected two different bands, bluer first"),
        ({"window": -1}, "own.toml: window: -1; expected more than 0 of the table's systems with 4.5 < M_V < 8.5"),
    ],
)
def test_a_bad_setting_of_a_colour_table_is_one_line(tmp_path, change, message):
    """Bands without a source are refused with the reason."""
    found = lines(tmp_path, {**COLOUR_TABLE, **change}, colour_rows())
    assert len(found) == 1
    assert message in found[0]


def test_files_that_are_not_there_or_not_tables(tmp_path):
    """A missing TOML, a missing table, a broken table, and a name that is no population."""
    with pytest.raises(Problems, match=r"none\.toml: no such file; expected a population in TOML"):
        stars.population(tmp_path / "none.toml", "G")
    path = write_own(tmp_path, FUNCTION, function_rows(), ".fits")
    (tmp_path / "own.fits").write_bytes(b"SIMPLE")
    with pytest.raises(Problems, match=r"own\.fits: cannot be read .*; expected a \.fits table"):
        stars.population(path, "G")
    (tmp_path / "own.fits").unlink()
    with pytest.raises(Problems, match=r"own\.fits: no such file; expected the table of a population"):
        stars.population(path, "G")
    with pytest.raises(UnknownName, match="no population called 'young disc'"):
        stars.population("young disc", "G")


def test_a_class_that_its_colours_do_not_know_is_refused(tmp_path):
    """The census has no horizontal branch, so a function with one cannot have its colours."""
    table = function_rows(**{"class": np.full(18, "horizontal branch")})
    path = write_own(tmp_path, {**FUNCTION, "window": 1.0, "colours_of": "census"}, table[table["band"] == "G"])
    lf = stars.population(path, "G")
    assert_allclose(lf[CLASSES.index("horizontal branch")].sum(), 9 * 250.0, rtol=1e-12)
    with pytest.raises(InputError, match=r"stars of class 'horizontal branch' at M = 3\.02, but its locus does not"):
        stars.spread(stars.locus(path, "G"), lf[None], "G", None, ANY)


def test_every_colour_of_a_table_has_its_own_temperature(tmp_path):
    """Rows from 4000 to 6000 K: each colour cell has that of the row it lies in, whatever the others' numbers."""
    table = colour_rows()
    table["Teff"] = np.tile([6000.0, 5000.0, 4000.0], 3)
    table["Teff"].unit = "K"
    locus = stars.locus(write_own(tmp_path, COLOUR_TABLE, table), "G")
    row = np.searchsorted([0.5, 0.8], locus.colour_mag("SDSS g", "SDSS r"))
    assert_allclose(locus.Teff_K, np.array([6000.0, 5000.0, 4000.0])[row], rtol=1e-12)


def test_only_dwarfs_of_isochrones_become_systems(tmp_path):
    """Of single stars giants stay one object each; dwarfs of M_RP = 8 without V have the factor of their M_V = 9.9."""
    given = {key: value for key, value in ISOCHRONES.items() if key != "counts"}
    table = isochrone_rows()
    table.remove_columns(["V", "G", "BP"])
    for settings, name in ((ISOCHRONES, "systems"), (given, "singles")):
        write_own(tmp_path, {**settings, "window": 0.1}, table, name=name)
    systems, singles = (read_own(tmp_path / f"{name}.toml").per_star("G") for name in ("systems", "singles"))
    giants, at = CLASSES.index("red giant"), cell_range(8, 8.05)
    assert_allclose(singles[giants].sum(), systems[giants].sum(), rtol=1e-12)
    assert_allclose(singles[0, at] / systems[0, at], 0.863, atol=0.002)
