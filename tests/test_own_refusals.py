"""What a user's own population may not hold: impossible stars, no stars, steps too wide, settings of a wrong type."""

from itertools import pairwise

import numpy as np
import pytest
from astropy.table import Table, vstack
from numpy.testing import assert_allclose
from own_files import COLOUR_TABLE, FUNCTION, ISOCHRONES, colour_rows, function_rows, isochrone_rows, write_own

from starcount import stars
from starcount.cli import main
from starcount.errors import InputError, Problems
from starcount.stars.bands import BANDS, SYSTEMS, bluer_first
from starcount.stars.cells import CLASSES
from starcount.stars.ecsv import SHOWN_ROWS
from starcount.stars.histories import History, Metallicity
from starcount.stars.imf import mass_function
from starcount.stars.loci import locus_of
from starcount.stars.locus import Locus
from starcount.stars.own_tables import read_own


def lines(tmp_path, settings, table):
    """What is said of a population file, line by line."""
    with pytest.raises(Problems) as refused:
        read_own(write_own(tmp_path, settings, table))
    return str(refused.value).splitlines()


def one_line(tmp_path, settings, table):
    found = lines(tmp_path, settings, table)
    assert len(found) == 1, found
    return found[0]


def with_Teff(Teff_K):
    table = colour_rows()
    table["Teff"] = 5000.0
    table["Teff"][4] = Teff_K
    table["Teff"].unit = "K"
    return table


@pytest.mark.parametrize("Teff_K", [-5000.0, 0.0, 3.6, 6e5])
def test_a_temperature_that_no_star_has_is_refused(tmp_path, Teff_K):
    """Outside 1000 to 500 000 K in a colour table and in isochrones, also a logarithm in the wrong column."""
    message = f"row 5, Teff: {Teff_K:g}; expected 1000 to 500000 K"
    assert message in one_line(tmp_path, COLOUR_TABLE, with_Teff(Teff_K))
    table = isochrone_rows()
    table["Teff"][4] = Teff_K
    assert message in one_line(tmp_path, ISOCHRONES, table)


def test_an_age_in_the_place_of_its_logarithm_is_refused(tmp_path):
    """Ten billion years in the column log_age."""
    table = isochrone_rows()
    table["log_age"] = 10.0
    table["log_age"][4] = 1e10
    if "age" in table.colnames:
        table.remove_column("age")
    found = lines(tmp_path, ISOCHRONES, table)
    assert any("row 5, log_age: 1e+10; expected 5 to 10.5" in line for line in found)


def test_a_temperature_in_the_place_of_its_logarithm_is_refused(tmp_path):
    """5000 in the column log_Teff, which 10^5000 K would be."""
    table = isochrone_rows()
    table["log_Teff"] = np.log10(table["Teff"])
    table["log_Teff"][4] = 5000.0
    assert "row 5, log_Teff: 5000; expected 3 to 5.69897" in one_line(tmp_path, ISOCHRONES, table)


@pytest.mark.parametrize("name", ["Teff_K", "scatter_mag"])
def test_spread_refuses_a_locus_that_is_not_finite(name):
    """One nan among the temperatures or scatters is an error in words, never a place outside the result."""
    plain = stars.locus("halo", "G")
    arrays = plain.arrays()
    arrays[name] = arrays[name].copy()
    arrays[name][100] = np.nan
    lf = np.zeros((1, len(CLASSES), stars.M_MIDDLE_MAG.size))
    lf[0, plain.class_index, plain.cell] = 1.0
    with pytest.raises(InputError, match="no finite number"):
        stars.spread(Locus.from_arrays(arrays), lf, "G", ("BP", "RP"), np.array([3500.0, 5800.0, 1e4]))


@pytest.mark.parametrize(("band", "value"), [("BP", 99.0), ("V", -9.99), ("RP", -99.0)])
def test_a_magnitude_that_no_star_has_is_refused(tmp_path, band, value):
    """Signs for "no value", outside -8 to 22 mag, by band and row; a row that is left out may hold them."""
    table = isochrone_rows()
    table[band][20] = value
    assert f"row 21, {band}: {value:g}; expected -8 to 22 mag" in one_line(tmp_path, ISOCHRONES, table)
    table["phase"][20] = 9
    read_own(write_own(tmp_path, {**ISOCHRONES, "phases": {**ISOCHRONES["phases"], "left out": [9]}}, table))


def test_stars_that_are_left_out_go_to_no_other_row(tmp_path):
    """Giants around a row of 1.1 solar masses that is left out, up to half way on either side of it; the last row, of
    1.2, is left out too."""
    table = isochrone_rows(masses=[*np.arange(0.1, 1.01, 0.05), 1.02, 1.05, 1.10, 1.15, 1.2])
    table["phase"][-3], table["phase"][-1] = 3, 3
    settings = {**ISOCHRONES, "phases": {"dwarf": [0], "red giant": [2], "left out": [3]}}
    imf = mass_function("Kroupa 2001")
    lf = read_own(write_own(tmp_path, settings, table)).per_star("V").sum(axis=1) * imf.number(0.55, 0.95)
    giants = imf.number(1.01, 1.075) + imf.number(1.125, 1.175)
    assert_allclose(lf[CLASSES.index("red giant")], giants, rtol=1e-12)
    assert_allclose(lf.sum(), imf.number(0.1, 1.01) + giants, rtol=1e-12)


def test_an_age_of_which_all_is_left_out_is_missing(tmp_path):
    """A history over three ages, of which the rows of one are left out."""
    table = isochrone_rows(ages_Gyr=(4.0, 5.0, 6.0, 7.0, 8.0))
    table["phase"][table["age"] == 6.0] = 9
    settings = {**ISOCHRONES, "star_formation": {"from_Gyr": 4.0, "to_Gyr": 8.0}}
    settings["phases"] = {**ISOCHRONES["phases"], "left out": [9]}
    assert "ages: none between 5 and 7 Gyr" in one_line(tmp_path, settings, table)


def said(problems):
    return [f"{problem.where}: {problem.found}" for problem in problems]


def test_metallicities_too_far_apart_are_refused():
    """Nodes -2 and 0.5 around -0.75 +- 0.1; a wide step where there are no stars, or of two spreads, stands."""
    assert said(Metallicity(-0.75, 0.1).problems(np.array([-2, 0.5]), "f")) == ["[Fe/H]: none between -2 and 0.5"]
    assert said(Metallicity(-0.75, 0.0).problems(np.array([-2, 0.5]), "f")) == ["[Fe/H]: none between -2 and 0.5"]
    assert not Metallicity(-0.25, 0.1).problems(np.array([-4, -2, -0.5, 0.0, 0.5]), "f")
    assert not Metallicity(-0.5, 0.0).problems(np.array([-2, -0.5, 0.5]), "f")
    assert not Metallicity(-1.0, 0.5).problems(np.array([-2.0, -1.0, 0.0]), "f")


def test_ages_too_far_apart_are_refused():
    """Ages 4 and 12, or 4, 5 and 12 Gyr, for a history from 4 to 12; factors of 2 stand, and steps outside it."""
    assert said(History(4, 12).problems(np.array([4.0, 12.0]), "f")) == ["ages: none between 4 and 12 Gyr"]
    assert said(History(4, 12).problems(np.array([4.0, 5.0, 12.0]), "f")) == ["ages: none between 5 and 12 Gyr"]
    assert said(History(7, 7).problems(np.array([4.0, 12.0]), "f")) == ["ages: none between 4 and 12 Gyr"]
    assert not History(3, 12).problems(np.array([3.0, 6.0, 12.0]), "f")
    assert not History(4, 5).problems(np.array([4.0, 5.0, 12.0]), "f")


def test_an_age_of_nothing_is_refused(tmp_path):
    """An age of 0 Gyr has no logarithm."""
    table = isochrone_rows()
    table["age"][3] = 0.0
    assert "row 4, age: 0; expected more than 0 Gyr" in one_line(tmp_path, ISOCHRONES, table)


def test_a_metallicity_far_from_our_colours_is_refused(tmp_path):
    """-4 +- 0.3 has no colours here; half a spread outside stands."""
    given = {key: value for key, value in FUNCTION.items() if key != "colours_of"}
    line = one_line(tmp_path, {**given, "metallicity": {"mean": -4.0, "spread": 0.3}}, function_rows())
    assert "metallicity: mean -4 with spread 0.3; expected a mean no further than the spread outside -2 to 0.25" in line
    read_own(write_own(tmp_path, {**given, "metallicity": {"mean": -2.1, "spread": 0.2}}, function_rows()))


def test_stars_far_outside_the_tracks_are_not_inside():
    """[Fe/H] -3 has the colours of -2, not verified; at -2.3 and at -1.75, within the tracks, the Sun's kin are."""

    def inside(feh):
        locus = locus_of(feh, 0.0, "G")
        return locus.inside_of("BP")[locus.of_class("dwarf") & (np.abs(locus.middle_mag - 6) < 0.5)]

    assert not inside(-3.0).any()
    assert inside(-2.3).all()
    assert inside(-1.75).all()


@pytest.mark.parametrize(
    ("settings", "table", "message"),
    [
        ({**FUNCTION, "kind": ["function"]}, function_rows(), "kind: ['function']; expected one of function"),
        ({**FUNCTION, "kind": {"a": 1}}, function_rows(), "kind: {'a': 1}; expected one of function"),
        ({**FUNCTION, "colours_of": ["halo"]}, function_rows(), "colours_of: ['halo']; expected one of census"),
        ({**ISOCHRONES, "imf": ["Kroupa 2001"]}, isochrone_rows(), "imf: ['Kroupa 2001']; expected one of Chabrier"),
        ({**ISOCHRONES, "imf": {"a": 1}}, isochrone_rows(), "imf: {'a': 1}; expected one of Chabrier"),
        ({**COLOUR_TABLE, "colour": [["B"], "V"]}, colour_rows(), "colour: [['B'], 'V']; expected two different"),
        ({**COLOUR_TABLE, "colour": [{"a": 1}, "V"]}, colour_rows(), "colour: [{'a': 1}, 'V']; expected two different"),
        ({**COLOUR_TABLE, "band": ["V"]}, colour_rows(), "band: ['V']; expected a band"),
        ({**ISOCHRONES, "phases": {"dwarf": [[0], 1]}}, isochrone_rows(), "phases: {'dwarf': [[0], 1]}; expected a"),
    ],
)
def test_a_setting_of_a_wrong_type_is_one_line(tmp_path, settings, table, message):
    """Lists and tables in the place of a word are refused in words."""
    assert message in one_line(tmp_path, settings, table)


@pytest.mark.parametrize("settings", [FUNCTION, COLOUR_TABLE, ISOCHRONES], ids=lambda settings: settings["kind"])
def test_a_table_without_rows_is_refused(tmp_path, settings):
    """An empty table of any kind."""
    table = {"function": function_rows, "colour table": colour_rows, "isochrones": isochrone_rows}[settings["kind"]]()
    assert one_line(tmp_path, settings, table[:0]).endswith("own.ecsv: no rows; expected at least one row")


def test_a_bare_table_without_rows_is_refused(tmp_path):
    """An ECSV table alone."""
    function_rows()[:0].write(tmp_path / "bare.ecsv")
    with pytest.raises(Problems, match=r"bare\.ecsv: no rows; expected at least one row"):
        stars.population(tmp_path / "bare.ecsv", "G")


def test_a_table_without_stars_is_refused(tmp_path):
    """All rows 0, in one band or in all; all rows left out; isochrones of one mass."""
    n = np.where(function_rows()["band"] == "G", 0.0, 250.0)
    assert "rows of band G: all 0; expected some stars" in one_line(tmp_path, FUNCTION, function_rows(n=n))
    table = colour_rows()
    table["n"] = 0.0
    assert "own.ecsv: rows: no stars in any of them; expected some" in one_line(tmp_path, COLOUR_TABLE, table)
    line = one_line(tmp_path, {**ISOCHRONES, "phases": {"left out": [0, 2]}}, isochrone_rows())
    assert "phases: every row is left out; expected some rows of a class" in line
    table = isochrone_rows(masses=[0.9])
    assert "own.ecsv: rows: no stars in any of them; expected some" in one_line(tmp_path, ISOCHRONES, table)


@pytest.mark.parametrize("colour", [["SDSS r", "SDSS g"], ["V", "B"], ["G", "G"], ["Ks", "J"]])
def test_the_redder_band_first_is_refused(tmp_path, colour, capsys):
    """In a colour table and on the command line, by the bands' mean wavelengths."""
    line = one_line(tmp_path, {**COLOUR_TABLE, "colour": colour}, colour_rows())
    assert f"own.toml: colour: {colour!r}; expected two different bands, bluer first" in line
    assert main(["population", "halo", "--out", str(tmp_path / "new"), "--colour", *colour]) == 2
    assert "expected two different bands, bluer first" in capsys.readouterr().err


def test_wavelengths_are_where_the_bands_lie():
    """To 5 %, what kinds of mean differ by: G 622, BP 511, RP 777 nm (pivots, Riello et al. 2021, from memory), V 551
    (Bessell 1990, from memory), Ks 2159 (Cohen et al. 2003, from memory); the others as the bands' lines describe."""
    stated = {"G": 622, "BP": 511, "RP": 777, "V": 551, "SDSS r": 617, "PS1 y": 962, "LSST u": 374, "Ks": 2159}
    for name, wavelength_nm in stated.items():
        assert_allclose(BANDS[name].wavelength_nm, wavelength_nm, rtol=0.05)
    for system in SYSTEMS:
        names = [name for name, band in BANDS.items() if band.system == system and name != "G"]
        assert all(bluer_first(*pair) for pair in pairwise(names))


def many(table: Table, copies: int) -> Table:
    return vstack([table] * copies)


def bad(table: Table, **columns) -> Table:
    for name, value in columns.items():
        table[name] = value
    return table


def masked(table: Table) -> Table:
    table["n"] = np.full(len(table), np.nan)
    return table


@pytest.mark.parametrize(
    ("settings", "table", "where", "n_bad"),
    [
        (FUNCTION, masked(function_rows()), "n", 18),
        (FUNCTION, function_rows(n=np.full(18, -1.0)), "n", 18),
        (FUNCTION, bad(function_rows(), **{"class": "cool"}), "class", 18),
        (FUNCTION, bad(function_rows(), M_hi=function_rows()["M_lo"] + 0.5), "M_lo", 16),
        (COLOUR_TABLE, bad(many(colour_rows(), 2), n=-1.0), "n", 18),
        (COLOUR_TABLE, bad(many(colour_rows(), 2), c_hi=0.0), "c_lo", 18),
        (COLOUR_TABLE, many(colour_rows(), 3), "c_lo", 18),
        (ISOCHRONES, bad(isochrone_rows(), initial_mass=-1.0), "initial_mass", 21),
        (ISOCHRONES, bad(isochrone_rows(), BP=99.0), "BP", 21),
    ],
)
def test_ten_bad_rows_are_named_and_the_others_counted(tmp_path, settings, table, where, n_bad):
    """One mistake in a whole column does not fill the screen."""
    found = [line.split("own.ecsv: ")[1] for line in lines(tmp_path, settings, table)]
    assert len(found) == SHOWN_ROWS + 1
    assert all(f", {where}: " in line for line in found[:SHOWN_ROWS])
    assert found[SHOWN_ROWS] == f"{where}: the same in {n_bad - SHOWN_ROWS} more rows; expected as above"


def test_phases_that_nothing_says_anything_about_are_one_line(tmp_path):
    """A column of serial numbers in the place of phases."""
    table = isochrone_rows()
    table["phase"] = np.arange(len(table))
    line = one_line(tmp_path, {**ISOCHRONES, "phases": {"dwarf": [0]}}, table)
    assert "phases: phase 1, 2, 3, 4, 5, 6, 7, 8, 9, 10 and 10 others is in none of them" in line


@pytest.mark.parametrize("name", ["rr lyrae", "RR LYRAE", "Blue Stragglers"])
def test_absent_kinds_are_known_in_any_case(name):
    """The reason is given however the name is written."""
    with pytest.raises(InputError, match="not in these populations; "):
        stars.population(name, "V")
