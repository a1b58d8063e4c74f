"""Counting star lists in magnitude and colour: against independent code, and every star accounted for."""

import itertools

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from astropy.table import MaskedColumn
from hypothesis import given, settings
from hypothesis import strategies as st
from invented_stars import EDGES_MAG, all_sky, invented_stars, pixels_of, write, write_csv

from starcount.catalogue import READERS, count_catalogue, kernels
from starcount.catalogue.names import MAGNITUDE_NAMES, spelling
from starcount.errors import InputError
from starcount.survey.groups import Survey, make_group

OPEN_MAG = np.array([-np.inf, 0.5, 1.0, 1.6, np.inf])
CLOSED_MAG = np.array([0.0, 0.5, 1.0, 1.6])


def survey(edges_colour_mag=OPEN_MAG, fields=None, colour=("BP", "RP"), band="G", edges_mag=EDGES_MAG) -> Survey:
    fields = all_sky() if fields is None else fields
    group = make_group("stars", band, edges_mag, fields, colour=colour, edges_colour_mag=edges_colour_mag)
    return Survey("invented", "", True, (group,))


def coloured_stars(n: int, precision="f8"):
    """Invented stars with magnitudes in two more bands."""
    stars, rng = invented_stars(n), np.random.default_rng(11)
    stars["RPmag"] = (stars["Gmag"] - rng.uniform(0.1, 1.1, n)).astype(precision)
    stars["BPmag"] = (stars["RPmag"] + rng.uniform(-0.5, 2.5, n)).astype(precision)
    return stars


def brute_force(stars, edges_colour_mag) -> np.ndarray:
    """Counts (field, m bin, colour bin) the slow way: numpy's histogram of astropy-healpix's pixels."""
    edges = np.arange(49) - 0.5, EDGES_MAG, np.clip(edges_colour_mag, -1e9, 1e9)
    values = pixels_of(stars, 2), np.asarray(stars["Gmag"], float), np.asarray(stars["BPmag"] - stars["RPmag"], float)
    return np.histogramdd(np.transpose(values), edges)[0]


@pytest.mark.parametrize("edges_colour_mag", [OPEN_MAG, CLOSED_MAG], ids=["open", "closed"])
@pytest.mark.parametrize("suffix", READERS)
def test_counts_equal_brute_force(suffix, edges_colour_mag, tmp_path):
    """Every format gives the counts that numpy's histogram gives, flat with magnitude before colour; none is lost."""
    stars = coloured_stars(4000)
    counted = count_catalogue(write(stars, tmp_path / f"stars{suffix}"), survey(edges_colour_mag))
    expected = brute_force(stars, edges_colour_mag)
    np.testing.assert_array_equal(counted.counts["stars"], expected.reshape(48, -1))
    assert counted.columns == {"ra": "ra", "dec": "dec", "mag": "Gmag", "blue": "BPmag", "red": "RPmag"}
    assert counted.rows == counted.counted + sum(counted.dropped.values()) == len(stars)


def test_colour_bins_sum_to_the_counts_in_magnitude(tmp_path):
    """Between open bins every star has a colour: summed over colour the counts are those of a survey without one."""
    path = write(coloured_stars(4000), tmp_path / "stars.fits")
    plain = Survey("invented", "", True, (make_group("stars", "G", EDGES_MAG, all_sky()),))
    expected = count_catalogue(path, plain).counts["stars"]
    found = count_catalogue(path, survey()).counts["stars"].reshape(48, 3, 4)
    np.testing.assert_array_equal(found.sum(axis=2), expected)


def test_one_colour_column_counts_as_its_two_magnitudes(tmp_path):
    """Without one of the two magnitudes the column of the colour is taken; with both, and the colour named, it wins."""
    stars = coloured_stars(4000)
    stars["bp_rp"] = stars["BPmag"] - stars["RPmag"]
    expected = count_catalogue(write(stars, tmp_path / "both.fits"), survey())
    named = count_catalogue(tmp_path / "both.fits", survey(), columns={"colour": "bp_rp"})
    stars.remove_column("BPmag")
    found = count_catalogue(write(stars, tmp_path / "one.fits"), survey())
    for one in (named, found):
        np.testing.assert_array_equal(one.counts["stars"], expected.counts["stars"])
        assert one.columns == {"ra": "ra", "dec": "dec", "mag": "Gmag", "colour": "bp_rp"}


def test_the_user_names_the_two_magnitudes(tmp_path):
    """blue and red win over common names; here they are the wrong way round, and the colours turn with them."""
    stars = coloured_stars(4000)
    path = write(stars, tmp_path / "stars.parquet")
    turned = count_catalogue(path, survey(-OPEN_MAG[::-1]), columns={"blue": "RPmag", "red": "BPmag"})
    expected = brute_force(stars, OPEN_MAG)
    np.testing.assert_array_equal(turned.counts["stars"].reshape(48, 3, 4)[:, :, ::-1], expected)


@pytest.mark.parametrize("suffix", READERS)
def test_stars_without_colour_have_reasons_of_their_own(suffix, tmp_path):
    """No BP, no RP, infinite BP, too blue, too red: each under its name, after the magnitude and before the field."""
    stars = coloured_stars(9)
    stars["Gmag"], stars["RPmag"] = np.full(9, 10.5), np.full(9, 10.0)
    stars["BPmag"] = MaskedColumn(
        np.array([10.2, 0, np.nan, np.inf, 9.9, 11.6, 10.0, 10.2, 10.2]), mask=np.arange(9) == 1
    )
    stars["RPmag"][7], stars["Gmag"][8] = np.nan, 30.0
    counted = count_catalogue(write(stars, tmp_path / f"stars{suffix}"), survey(CLOSED_MAG))
    assert {reason: n for reason, n in counted.dropped.items() if n} == {
        "colour missing": 4,
        "outside the colour bins": 2,
        "outside the bins": 1,
    }
    assert counted.counted == 2


def test_groups_with_and_without_colour_are_counted_in_one_pass(tmp_path):
    """A star without colour counts where none is asked for; a row is dropped only if no group takes it."""
    text = "l,b,G,BP,RP\n0,0,5,1,0\n0,0,5,,\n0,0,15,1,0\n"
    groups = (
        make_group("plain", "G", [0, 10], all_sky(1)),
        make_group("coloured", "G", [0, 10, 20], all_sky(1), colour=("BP", "RP"), edges_colour_mag=[0, 0.9, 2]),
    )
    counted = count_catalogue(write_csv(tmp_path / "s.csv", text), Survey("invented", "", True, groups))
    assert {name: n.sum(axis=0).tolist() for name, n in counted.counts.items()} == {
        "plain": [2],
        "coloured": [0, 1, 0, 1],
    }
    assert (counted.counted, sum(counted.dropped.values())) == (3, 0)


@pytest.mark.parametrize("precision", ["f4", "f8"])
def test_differences_open_the_bins_of_their_decimals(precision, tmp_path):
    """15.3 - 14.8 opens the bin at 0.5, though rounding makes it 0.4999995 in single precision, 5e-16 less in double.

    All colours that are multiples of 0.1 mag, of magnitudes in steps of 0.013: each falls in the bin that it opens.
    """
    red, tenths = np.meshgrid(np.arange(8.0, 22.0, 0.013), np.arange(-5, 30))
    blue, red = np.round(red + tenths / 10.0, 3).ravel().astype(precision), np.round(red, 3).ravel().astype(precision)
    stars = {"l": np.zeros(red.size), "b": np.zeros(red.size), "G": np.full(red.size, 10.5), "BP": blue, "RP": red}
    pq.write_table(pa.table(stars), tmp_path / "s.parquet")
    edges = np.round(np.arange(-5, 31) / 10.0, 10)
    counts = count_catalogue(tmp_path / "s.parquet", survey(edges, edges_mag=[10.0, 11.0])).counts["stars"]
    np.testing.assert_array_equal(counts.sum(axis=0), np.full(35, red.size // 35))


@settings(max_examples=100, derandomize=True, deadline=None)
@given(
    c=st.floats(-3, 8),
    step=st.lists(st.floats(1e-3, 2), min_size=0, max_size=9),
    open_ends=st.tuples(st.booleans(), st.booleans()),
)
def test_colour_bins_are_closed_left_and_open_right(c, step, open_ends):
    """The bin is that of numpy's binary search, with and without open ends, and on the edges themselves."""
    inner = np.cumsum([0.1, *step])
    edges = np.concatenate([[-np.inf] * open_ends[0], inner, [np.inf] * open_ends[1]])
    if edges.size < 2:
        edges = np.array([0.1, 0.2])
    for star in (c, *inner):
        expected = np.searchsorted(edges, star, side="right") - 1
        assert kernels.colour_bin_of(star, edges) == (expected if expected < edges.size - 1 else -1)
    assert kernels.colour_bin_of(c, np.array([-np.inf, np.inf])) == 0


@pytest.mark.parametrize(
    ("columns", "message"),
    [
        ({"blue": "BPmag"}, "columns named for blue; expected colour alone, or both blue and red"),
        (
            {"colour": "x", "blue": "BPmag", "red": "RPmag"},
            "columns named for colour, blue, red; expected colour alone",
        ),
        ({"colour": "bp_pr"}, "colour: no column 'bp_pr'; expected one of"),
        ({"blue": "BPmga", "red": "RPmag"}, r"colour: no column 'BPmga'; .*did you mean 'BPmag'\?"),
        ({"colour": "kind"}, "column 'kind': holds text; expected a number column"),
        ({"colour": "ra"}, "column 'ra': unit 'deg'; expected mag"),
    ],
)
def test_bad_columns_are_refused_in_words(columns, message, tmp_path):
    """Half a colour, two of them, and columns that are not there or hold something else."""
    with pytest.raises(InputError, match=message):
        count_catalogue(write(coloured_stars(5), tmp_path / "stars.fits"), survey(), columns=columns)


def test_a_list_without_colour_is_refused(tmp_path):
    """The message names the colour and the columns that would serve."""
    with pytest.raises(
        InputError, match=r"colour BP-RP: none of its columns ra, dec, .*; expected two of phot_bp_mean"
    ):
        count_catalogue(write(invented_stars(5), tmp_path / "stars.fits"), survey())


def test_columns_of_a_colour_need_one_colour(tmp_path):
    """A column cannot serve two colours, nor a survey without any."""
    path, field = write(coloured_stars(5), tmp_path / "stars.fits"), all_sky(1)
    pairs = (("a", ("BP", "RP")), ("b", ("G", "RP")))
    two = [make_group(n, "G", EDGES_MAG, field, colour=c, edges_colour_mag=[0, 1]) for n, c in pairs]
    with pytest.raises(InputError, match="colour, but the survey has colours BP-RP, G-RP; count group by group"):
        count_catalogue(path, Survey("two", "", True, tuple(two)), columns={"colour": "BPmag"})
    plain = Survey("none", "", True, (make_group("a", "G", EDGES_MAG, field),))
    with pytest.raises(InputError, match="named for blue, red, but the survey has groups without a colour"):
        count_catalogue(path, plain, columns={"blue": "BPmag", "red": "RPmag"})


def test_capitals_tell_the_bands_of_two_systems_apart():
    """gmag is Sloan's and Gmag Gaia's, whichever of them a list has; longer names may be spelled in any way."""
    both = dict.fromkeys(["gmag", "Gmag", "imag", "psfmag_R", "RA"])
    assert spelling(both, "Gmag") == "Gmag"
    assert spelling({"gmag": None}, "Gmag") is None
    assert spelling({"GMAG": None}, "Gmag") == "GMAG"
    assert spelling({"Imag": None}, "imag") is None
    assert spelling(both, "psfMag_r") == "psfmag_R"
    assert spelling({"g-r": None}, "G-R") is None


def test_no_name_serves_two_bands_of_one_system():
    """A name looked for in two bands would count one as the other; SDSS and Pan-STARRS may share: the survey tells."""
    shared = {"SDSS", "PS1"}
    for (one, names), (other, others) in itertools.combinations(MAGNITUDE_NAMES.items(), 2):
        if {one.split()[0], other.split()[0]} != shared or one.split()[1] != other.split()[1]:
            assert not any(spelling(dict.fromkeys(others), name) for name in names), (one, other)
