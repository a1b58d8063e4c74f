"""Surveys in magnitude and colour: read as the files stand, written back byte for byte, mistakes named."""

import re
from types import SimpleNamespace

import numpy as np
import pytest
from numpy.testing import assert_array_equal
from survey_files import COLOUR_ERRORS, COMPLETENESS_IN_COLOUR, COUNTS_IN_COLOUR, FILES_IN_COLOUR, differences, lay_out

from starcount import stars, steps
from starcount.errors import Problems
from starcount.survey import FaintBP, bin_settings, circle_fields, make_group, read_survey, write_survey

BANDS = ("G", "BP", "RP", "V", "SDSS g", "SDSS r")


def complaints(folder) -> list[str]:
    with pytest.raises(Problems) as caught:
        read_survey(folder, bands=BANDS)
    return str(caught.value).split("\n")


def test_hand_made_files_are_read_as_they_stand(tmp_path):
    """Every number of the files, worked by hand, is where the objects should hold it."""
    (group,) = read_survey(lay_out(tmp_path, FILES_IN_COLOUR), BANDS).groups
    assert (group.colour, group.resolution_arcsec, group.n_bin) == (("BP", "RP"), 0.5, 6)
    assert_array_equal(group.edges_colour_mag, [-np.inf, 0.5, 1.5, np.inf])
    # Magnitude before colour: 18 to 20 blue, middle, red, then 20 to 20.5.
    assert_array_equal(group.counts, [[3, 40, 0, 0, 0, 7]])
    assert_array_equal(group.used, [[True, True, False, False, False, True]])
    seen = group.observation
    assert_array_equal(seen.completeness.share, [[1.0, 1.0], [0.8, 0.4]])
    assert_array_equal(seen.completeness.c_mag, [0.0, 2.0])
    assert_array_equal(seen.colour_error.scatter_mag, [[0.05, 0.06, 0.1], [0.25, 0.3, 0.5]])
    assert (seen.error, seen.faint_BP) == (None, FaintBP(40.0, "G"))


def test_bins_are_flat_with_magnitude_first():
    """bin = m bin x colour bins + colour bin; without a colour its limits are nan and there is one bin a magnitude."""
    field = circle_fields(["a"], [0.0], [50.0], [1.0])
    bins = make_group("g", "G", [10, 11, 13], field, colour=("BP", "RP"), edges_colour_mag=[0, 1, np.inf]).bins
    assert_array_equal([bins.m_lo, bins.m_hi], [[10, 10, 11, 11], [11, 11, 13, 13]])
    assert_array_equal([bins.c_lo, bins.c_hi], [[0, 1, 0, 1], [1, np.inf, 1, np.inf]])
    assert (bins.band, bins.colour) == ("G", ("BP", "RP"))
    plain = make_group("g", "G", [10, 11, 13], field)
    assert_array_equal([plain.bins.m_lo, plain.bins.m_hi], [[10, 11], [11, 13]])
    assert np.isnan([plain.bins.c_lo, plain.bins.c_hi]).all()
    assert (plain.n_bin, plain.bins.colour) == (2, None)


def test_colour_bins_may_be_a_range(tmp_path):
    """From 0 to 2 in steps of 0.5 are four bins."""
    change = "edges_colour_mag = [-inf, 0.5, 1.5, inf]", "colour_bins = {from = 0, to = 2, step = 0.5}"
    rows = COUNTS_IN_COLOUR[COUNTS_IN_COLOUR.index("pole") :]
    folder = lay_out(tmp_path, FILES_IN_COLOUR, survey=change, counts=(rows, "pole 18.0 20.0 1.5 2.0 9\n"))
    (group,) = read_survey(folder).groups
    assert_array_equal(group.edges_colour_mag, [0.0, 0.5, 1.0, 1.5, 2.0])
    assert group.counts[0, 3] == group.counts.sum() == 9


def test_rewriting_changes_no_byte(tmp_path):
    """write(read(write(read(files)))) is byte for byte write(read(files)), open bins and grids included."""
    survey = read_survey(lay_out(tmp_path / "hand", FILES_IN_COLOUR))
    write_survey(survey, tmp_path / "one")
    again = read_survey(tmp_path / "one")
    write_survey(again, tmp_path / "two")
    assert differences(survey, again) == []
    for path in (tmp_path / "one").iterdir():
        assert path.read_bytes() == (tmp_path / "two" / path.name).read_bytes()


def test_rows_of_a_grid_may_come_in_any_order(tmp_path):
    """A table over magnitude and colour is the same whatever the order of its rows."""
    head, *rows = re.split(r"(?m)^(?=\d)", COLOUR_ERRORS)
    turned = FILES_IN_COLOUR | {"errors.ecsv": head + "".join(rows[::-1])}
    folders = lay_out(tmp_path / "a", FILES_IN_COLOUR), lay_out(tmp_path / "b", turned)
    assert differences(*(read_survey(folder) for folder in folders)) == []


ONE_COLOUR, ONE_MAGNITUDE = (
    "\n".join(line for line in COMPLETENESS_IN_COLOUR.split("\n") if not re.match(unwanted, line)) + "\n"
    for unwanted in (r"[\d.]+ 2\.0", r"17\.0")
)

# What is changed in the files of survey_files.py (file, old text, new text); the one line that must come.
MISTAKES = {
    "one band": ("survey", '["BP", "RP"]', '["BP"]', r"line 10, group 1, colour: \['BP'\]; expected two different"),
    "same bands": ("survey", '["BP", "RP"]', '["BP", "BP"]', "colour: .*; expected two different bands, bluer first"),
    "a text": ("survey", '["BP", "RP"]', '"BP-RP"', "colour: 'BP-RP'; expected a list of texts"),
    "unknown band": ("survey", '["BP", "RP"]', '["BP", "Rp"]', r"colour: 'Rp'; .*did you mean 'RP'\?"),
    "bins too red": (
        "survey",
        "[-inf, 0.5, 1.5, inf]",
        "[12, 13, inf]",
        "line 11, group 1, edges_colour_mag: 12 to inf mag, where no star can be; expected .* -1.5 to 7 mag, up to 12",
    ),
    "bins too blue": (
        "survey",
        "edges_colour_mag = [-inf, 0.5, 1.5, inf]",
        "colour_bins = {from = -5, to = -1.5, step = 0.5}",
        "line 11, group 1, colour_bins: -5 to -1.5 mag, where no star can be; expected bins that meet the colours",
    ),
    "no colour bins": (
        "survey",
        "edges_colour_mag = [-inf, 0.5, 1.5, inf]",
        "",
        "colour_bins: no colour_bins; expected",
    ),
    "no colour": (
        "survey",
        'colour = ["BP", "RP"]',
        "",
        'edges_colour_mag: no colour; expected colour = \\["BLUE", "RED"',
    ),
    "both bins": (
        "survey",
        "fields =",
        "colour_bins = {from = 0, to = 1, step = 0.5}\nfields =",
        "colour_bins: both colour_bins and edges_colour_mag; expected",
    ),
    "inf inside": (
        "survey",
        "[-inf, 0.5",
        "[0, inf",
        "edges_colour_mag: inf in the place of edge 2; expected two or more",
    ),
    "open range": (
        "survey",
        "edges_colour_mag = [-inf, 0.5, 1.5, inf]",
        "colour_bins = {from = -inf, to = 1, step = 0.5}",
        "colour_bins: a limit that is not finite",
    ),
    "open magnitudes": (
        "survey",
        "[18, 20,",
        "[-inf, 20,",
        "edges_mag: -inf in the place of edge 1; expected .* finite",
    ),
    "falling": ("survey", "[-inf, 0.5, 1.5", "[-inf, 1.5, 0.5", "edges_colour_mag: 1.5 followed by 0.5"),
    "noise": (
        "survey",
        "noise = 40",
        "noise = 0",
        "faint_BP_noise: 0; expected a finite number of electrons per second > 0",
    ),
    "noise of others": (
        "survey",
        '["BP", "RP"]',
        '["SDSS g", "SDSS r"]',
        "faint_BP_noise: colour SDSS g-SDSS r in band G; expected colour BP-RP in band G or RP",
    ),
    "noise in BP": ("survey", 'band = "G"', 'band = "BP"', "faint_BP_noise: colour BP-RP in band BP; expected colour"),
    "resolution": (
        "survey",
        "arcsec = 0.5",
        "arcsec = -0.5",
        "resolution_arcsec: -0.5; expected a finite number of arcsec",
    ),
    "kind of resolution": ("survey", "arcsec = 0.5", 'arcsec = "0.5"', "resolution_arcsec: '0.5'; expected a number"),
    "no c_hi": (
        "counts",
        "# - {name: c_hi, unit: mag, datatype: float64}\n",
        "",
        "counts.ecsv: .*; expected a whole ECSV table",
    ),
    "colour bin": (
        "counts",
        "0.5 1.5 40",
        "0.6 1.5 40",
        "line 13, c_lo, c_hi: 0.6 to 1.5 mag; expected a bin of the group",
    ),
    "open the wrong way": ("counts", "-inf 0.5 3", "inf 0.5 3", "line 12, c_lo, c_hi: inf to 0.5 mag; expected a bin"),
    "nan": ("counts", "-inf 0.5 3", "nan 0.5 3", "line 12, c_lo: nan; expected a number"),
    "bin twice": (
        "counts",
        "20.0 0.5 1.5 40",
        "20.0 -inf 0.5 40",
        "line 13, field, m_lo, m_hi, c_lo, c_hi: the same field and bin again",
    ),
    "unit": ("counts", "c_lo, unit: mag", "c_lo, unit: deg", "column c_lo: unit deg; expected unit mag"),
    "hole": ("completeness", "21.0 2.0 0.4\n", "", "m, c: 0 rows for m = 21, c = 2; expected one row for every pair"),
    "pair twice": (
        "completeness",
        "21.0 2.0 0.4",
        "21.0 0.0 0.4",
        "m, c: 2 rows for m = 21, c = 0 .one of 2 such pairs",
    ),
    "one colour": ("completeness", COMPLETENESS_IN_COLOUR, ONE_COLOUR, "column c: 1 values; expected two at least"),
    "neither": ("completeness", COMPLETENESS_IN_COLOUR, ONE_MAGNITUDE, "column m: 1 values; expected two at least"),
    "range": ("completeness", "2.0 0.4", "2.0 1.4", "line 11, completeness: 1.4; expected 0 <= completeness <= 1"),
    "negative scatter": (
        "errors",
        "0.02 0.10",
        "0.02 -0.1",
        "errors.ecsv: line 12, scatter: -0.1 mag; expected scatter >= 0",
    ),
    "ends early": ("survey", "[18, 20, 20.5]", "[17.5, 20, 20.5]", "m from 18 to 21, but the bins reach from 17.50"),
}


@pytest.mark.parametrize("mistake", MISTAKES)
def test_a_mistake_is_named(tmp_path, mistake):
    """The line for a mistake says where it is, what was found and what is allowed."""
    file, old, new, line = MISTAKES[mistake]
    said = complaints(lay_out(tmp_path, FILES_IN_COLOUR, **{file: (old, new)}))
    assert any(re.search(line, one) for one in said), said
    assert all("; expected " in one and "np." not in one for one in said)


def test_bands_left_out_are_refused_with_the_reason(tmp_path):
    """A band that is absent on purpose is named with its reason, in the band of the counts and in the colour."""
    folder = lay_out(tmp_path, FILES_IN_COLOUR, survey=('"RP"]', '"R"]'))
    with pytest.raises(Problems, match=r"line 10, group 1, colour: 'R', left out \(no locus\); expected one of G, BP"):
        read_survey(folder, bands=BANDS, absent={"R": "no locus"})


@pytest.mark.parametrize("colour", [("RP", "BP"), ("RP", "SDSS i"), ("Ks", "V")])
def test_the_redder_band_first_is_refused(tmp_path, colour):
    """By the bands' wavelengths, with line and key; two bands at one wavelength (RP's, here) are no colour."""
    nm = {name: SimpleNamespace(wavelength_nm=band.wavelength_nm) for name, band in stars.BANDS.items()}
    nm["SDSS i"] = nm["RP"]
    change = '["BP", "RP"]', str(list(colour)).replace("'", '"')
    folder = lay_out(tmp_path, FILES_IN_COLOUR, survey=change)
    with pytest.raises(Problems, match=r"line 10, group 1, colour: '.*' at .* nm; expected two different bands, bluer"):
        read_survey(folder, bands=nm)


def test_the_program_refuses_a_redder_band_first(tmp_path):
    """The check of a survey knows the wavelengths of our bands, and takes the right order."""
    assert steps.check(lay_out(tmp_path / "right", FILES_IN_COLOUR))["groups"][0]["colour"]["bands"] == ["BP", "RP"]
    with pytest.raises(Problems, match=r"'RP' at 7.* nm before 'BP' at 5.* nm; expected two different bands, bluer"):
        steps.check(lay_out(tmp_path / "turned", FILES_IN_COLOUR, survey=('["BP", "RP"]', '["RP", "BP"]')))


@pytest.mark.parametrize("edges", ["[-5, -4, -1.4]", "[11.9, 13]", "[-inf, -3, inf]", "[8, 9]"])
def test_bins_that_a_star_may_reach_pass(tmp_path, edges):
    """One end within -1.5 to 12 mag is enough: dust reddens and errors scatter."""
    folder = lay_out(tmp_path, FILES_IN_COLOUR, survey=("[-inf, 0.5, 1.5, inf]", edges))
    text = (folder / "survey.toml").read_text()
    (folder / "survey.toml").write_text(text.replace('counts = "counts.ecsv"\n', ""))
    assert len(read_survey(folder).groups) == 1


def test_colours_of_stars_are_those_of_their_tables():
    """Surveys know no stars: their limits of colour are stated again, and are the cells' own."""
    assert tuple(stars.C_EDGES_MAG[[0, -1]]) == (bin_settings.BLUEST_MAG, bin_settings.REDDEST_MAG)


def test_too_many_bins_are_refused(tmp_path):
    """Nine thousand by nine thousand bins are a slip, not a survey: they would fill the memory."""
    new = "colour_bins = {from = 0, to = 9000, step = 1}"
    folder = lay_out(tmp_path, FILES_IN_COLOUR, survey=("edges_colour_mag = [-inf, 0.5, 1.5, inf]", new))
    text = (folder / "survey.toml").read_text()
    (folder / "survey.toml").write_text(
        text.replace("edges_mag = [18, 20, 20.5]", "bins = {from = 18, to = 20, step = 0.1}")
    )
    assert "colour_bins: 20 x 9000 bins; expected at most 100000 in all" in complaints(folder)[0]


def test_completeness_in_colour_needs_a_colour(tmp_path):
    """A group without a colour cannot use a completeness that depends on one."""
    lines = ("colour = ", "edges_colour_mag", "colour_error", "faint_BP_noise", "counts = ")
    folder = lay_out(tmp_path, FILES_IN_COLOUR)
    kept = [t for t in (folder / "survey.toml").read_text().split("\n") if not t.startswith(lines)]
    (folder / "survey.toml").write_text("\n".join(kept))
    assert complaints(folder) == [
        f"{folder / 'completeness.ecsv'}: columns: column 'c'; expected no such column in a group without a colour"
    ]


def test_all_mistakes_come_at_once(tmp_path):
    """Settings, counts and two tables: each mistake once."""
    changes = {
        "survey": ("arcsec = 0.5", "arcsec = 0"),
        "counts": ("0.5 1.5 40", "0.5 1.6 40"),
        "completeness": ("21.0 2.0 0.4\n", ""),
        "errors": ("0.02 0.10", "0.02 -0.1"),
    }
    said = complaints(lay_out(tmp_path, FILES_IN_COLOUR, **changes))
    assert [re.search(r"(\w+)\.\w+:", one)[1] for one in said] == ["survey", "completeness", "errors", "counts"]
