"""Bad star lists, names and cuts are refused in one clear line each."""

import gzip

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from astropy.io import fits
from invented_stars import all_sky, brute_force, invented_stars, survey, write, write_csv

from starcount.catalogue import count_catalogue
from starcount.catalogue.cuts import parse_cut
from starcount.catalogue.source import BATCH_ROWS
from starcount.errors import InputError, UnknownName
from starcount.survey.groups import Survey, make_group

BAD_CSV = {
    "text in a number": ("ra,dec,G\n1,2,10\n1,2,bright\n", r"s.csv: line 3, column 'G': 'bright'; expected a number"),
    "comment and text": (
        "# x\nra,dec,G\n1,2,10\n1,east,9\n",
        r"s.csv: line 4, column 'dec': 'east'; expected a number",
    ),
    "short row": ("ra,dec,G\n1,2,10\n1,2\n", r"s.csv: line 3: 2 values; expected 3"),
    "latitude": ("l,b,G\n1,2,10\n1,91,10\n", r"s.csv: row 2, column 'b': 91 = 91 deg; expected -90 to 90 deg"),
    "empty": ("", r"s.csv: empty; expected a line of column names"),
    "no rows": ("ra,dec,G\n", r"s.csv: holds no rows"),
    "no magnitude": (
        "ra,dec,H\n1,2,3\n",
        r"s.csv: magnitude in G: none of .* ra, dec, H; expected phot_g_mean_mag, Gmag",
    ),
    "no position": ("alpha,dec,G\n1,2,3\n", r"s.csv: position: none of its columns alpha, dec, G; expected l, b; "),
    "name twice": ("ra,dec,ra,G\n1,2,3,4\n", r"s.csv: column names: 'ra' stands twice"),
}


@pytest.mark.parametrize(("text", "message"), BAD_CSV.values(), ids=BAD_CSV)
def test_bad_csv_is_refused_in_one_line(text, message, tmp_path):
    """The message names file, line or column, what was found and what is expected."""
    with pytest.raises(InputError, match=message) as refusal:
        count_catalogue(write_csv(tmp_path / "s.csv", text), survey(all_sky()))
    assert "\n" not in str(refusal.value)


def test_the_row_of_a_bad_value_counts_from_the_start_of_the_file(tmp_path):
    """The message has the file's first bad row, here in the second batch, though all further batches are bad too."""
    dec = np.zeros(9 * BATCH_ROWS)
    dec[BATCH_ROWS + 2 :] = -90.1
    pq.write_table(pa.table({"ra": dec, "dec": dec, "G": dec}), tmp_path / "s.parquet")
    with pytest.raises(InputError, match=f"s.parquet: row {BATCH_ROWS + 3}, column 'dec': -90.1 = -90.1 deg"):
        count_catalogue(tmp_path / "s.parquet", survey(all_sky()))


def test_one_letter_names_are_not_found_in_the_other_case(tmp_path):
    """B is a band and no latitude, g is another band than G; longer names are found however they are spelled."""
    path = write_csv(tmp_path / "s.csv", "L,B,RA,Dec,GMAG\n1,99,3,4,10\n")
    assert count_catalogue(path, survey(all_sky())).columns == {"ra": "RA", "dec": "Dec", "mag": "GMAG"}
    with pytest.raises(InputError, match="magnitude in G: none of its columns ra, dec, g"):
        count_catalogue(write_csv(tmp_path / "g.csv", "ra,dec,g\n1,2,10\n"), survey(all_sky()))


BAD_CALLS = {
    "near miss": ({"columns": {"mag": "Gmg"}}, r"magnitude: no column 'Gmg'; expected .*; did you mean 'Gmag'\?"),
    "cut column": ({"cuts": ["ruwee < 1"]}, r"cut 'ruwee < 1': no column 'ruwee'; .*did you mean 'ruwe'\?"),
    "cut kind": ({"cuts": ["kind < 1"]}, r"column 'kind': holds text; expected a number column"),
    "cut grammar": ({"cuts": ["ruwe = 1"]}, r"cut 'ruwe = 1': expected one comparison"),
    "half a position": ({"columns": {"l": "ra"}}, r"columns named for l; expected both l and b, or both ra and dec"),
    "unknown key": (
        {"columns": {"magnitude": "Gmag"}},
        r"no key for a column called 'magnitude'; known: b, blue, colour, dec, l",
    ),
    "unknown group": ({"group": "faint"}, r"no group in the survey called 'faint'; known: stars"),
    "other unit": ({"columns": {"unit": "rad"}}, r"column 'ra': unit 'deg'; expected no other unit given \('rad'\)"),
}


@pytest.mark.parametrize(("call", "message"), BAD_CALLS.values(), ids=BAD_CALLS)
def test_bad_calls_are_refused_in_words(call, message, tmp_path):
    """Names, keys, cuts and groups that do not exist are named, with what does."""
    path = write(invented_stars(5), tmp_path / "stars.fits")
    with pytest.raises(InputError, match=message):
        count_catalogue(path, survey(all_sky()), **call)


def test_one_magnitude_column_cannot_serve_two_bands(tmp_path):
    """A survey in G and V takes a named magnitude group by group only; unnamed, each band finds its own column."""
    groups = tuple(make_group(band, band, [0, 20], all_sky(1)) for band in "GV")
    both, path = Survey("invented", "", True, groups), write_csv(tmp_path / "s.csv", "l,b,G,V\n0,0,1,30\n")
    with pytest.raises(InputError, match="one magnitude column named for bands G, V; count group by group"):
        count_catalogue(path, both, columns={"mag": "V"})
    assert {band: n.sum() for band, n in count_catalogue(path, both).counts.items()} == {"G": 1, "V": 0}


def test_all_problems_of_the_columns_come_at_once(tmp_path):
    """Two units and a cut's column wrong: three lines."""
    stars = invented_stars(5)
    stars["ra"].unit, stars["Gmag"].unit = "m", "deg"
    path = write(stars, tmp_path / "stars.ecsv")
    with pytest.raises(InputError) as refusal:
        count_catalogue(path, survey(all_sky()), cuts=["x > 1"])
    lines = str(refusal.value).splitlines()
    assert [line.split(": ", 1)[1].split(";")[0] for line in lines] == [
        "column 'ra': unit 'm'",
        "column 'Gmag': unit 'deg'",
        "cut 'x > 1': no column 'x'",
    ]


def test_units_are_compulsory_where_the_format_carries_them(tmp_path):
    """A FITS angle without unit is refused, and read once the user gives the unit; an unknown unit is named."""
    stars = invented_stars(50)
    expected = brute_force(stars, all_sky())
    stars["ra"].unit = stars["dec"].unit = None
    path = write(stars, tmp_path / "stars.fits")
    with pytest.raises(InputError, match="column 'ra': no unit; expected deg or rad in the file, or unit=deg"):
        count_catalogue(path, survey(all_sky()))
    given_unit = count_catalogue(path, survey(all_sky()), columns={"unit": "deg"})
    np.testing.assert_array_equal(given_unit.counts["stars"], expected)
    with pytest.raises(InputError, match="column 'ra': unknown unit 'degg'; expected an angle such as deg or rad"):
        count_catalogue(path, survey(all_sky()), columns={"unit": "degg"})


@pytest.mark.parametrize("suffix", [".fits", ".parquet"])
@pytest.mark.parametrize("kept", [0.98, 0.5, 0.01])
def test_truncated_files_are_refused(suffix, kept, tmp_path):
    """Cut anywhere, a binary file is refused before a star is counted."""
    path = write(invented_stars(3000), tmp_path / f"stars{suffix}")
    content = path.read_bytes()
    path.write_bytes(content[: int(kept * len(content))])
    with pytest.raises(
        InputError, match=f"stars{suffix}: .*(truncated|not a readable FITS|no binary table)"
    ) as refusal:
        count_catalogue(path, survey(all_sky()))
    assert "\n" not in str(refusal.value)


def test_truncation_inside_the_heap_of_a_fits_table_is_refused(tmp_path):
    """Rows of variable length lie behind the table (PCOUNT bytes); a file that ends there is not whole."""
    ra = fits.Column("ra", "D", unit="deg", array=np.zeros(9))
    lists = fits.Column("spectrum", "PD()", array=np.array([np.zeros(900)] * 9, dtype=object))
    fits.BinTableHDU.from_columns([ra, lists]).writeto(tmp_path / "s.fits")
    (tmp_path / "s.fits").write_bytes((tmp_path / "s.fits").read_bytes()[:-9000])
    with pytest.raises(InputError, match=r"s.fits: truncated; \d+ bytes; expected at least \d+ from its header"):
        count_catalogue(tmp_path / "s.fits", survey(all_sky()))


@pytest.mark.parametrize("suffix", [".csv", ".fits"])
def test_truncated_gzip_is_refused(suffix, tmp_path):
    """A compressed file that ends early shows it only when read; it is refused all the same."""
    plain = write(invented_stars(3000), tmp_path / f"stars{suffix}")
    packed = tmp_path / f"stars{suffix}.gz"
    packed.write_bytes(gzip.compress(plain.read_bytes())[:-5000])
    with pytest.raises(InputError, match=f"stars{suffix}.gz: "):
        count_catalogue(packed, survey(all_sky()))


@pytest.mark.parametrize(
    ("name", "message"),
    [
        ("nowhere.fits", r"nowhere.fits: no such file"),
        ("stars.xls", r"stars.xls: no star-list format called '.xls'; known: .parquet, .fits, .fit, .csv, .ecsv"),
        ("stars.parquet.gz", r"no star-list format called '.gz'"),
        ("folder", r"folder: folder without files \*.parquet"),
        ("noise.fits", r"noise.fits: not a readable FITS file"),
        ("noise.parquet", r"noise.parquet: not a whole Parquet file"),
        ("noise.ecsv", r"noise.ecsv: starts without '# %ECSV'"),
    ],
)
def test_files_that_cannot_be_star_lists_are_refused(name, message, tmp_path):
    """Missing, unknown or foreign files: one line each."""
    (tmp_path / "folder").mkdir()
    for other in ("stars.xls", "stars.parquet.gz", "noise.fits", "noise.parquet", "noise.ecsv"):
        (tmp_path / other).write_bytes(b"no star list at all")
    with pytest.raises(InputError, match=message):
        count_catalogue(tmp_path / name, survey(all_sky()))


def test_unknown_names_are_unknown_names():
    """A program can tell an unknown key from other bad input."""
    with pytest.raises(UnknownName):
        count_catalogue([], survey(all_sky()), group="other")


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("ruwe < 1.4", ("ruwe", "<", 1.4, "number")),
        ("  phot_g_n_obs>=10 ", ("phot_g_n_obs", ">=", 10, "number")),
        ("x!=-2.5e-3", ("x", "!=", -2.5e-3, "number")),
        ("x.y-z > .5", ("x.y-z", ">", 0.5, "number")),
        ("id == 4295806720123456789", ("id", "==", 4295806720123456789, "number")),
        ("kind == 'a < b'", ("kind", "==", "a < b", "text")),
        ('kind != ""', ("kind", "!=", "", "text")),
        ("flag == true", ("flag", "==", True, "boolean")),
    ],
)
def test_cuts_are_read(text, expected):
    """Column, operator, value and kind."""
    cut = parse_cut(text)
    assert (cut.column, cut.operator, cut.value, cut.kind) == expected


@pytest.mark.parametrize(
    ("operator", "passing"),
    [("<", [1]), ("<=", [1, 2]), ("==", [2]), ("!=", [1, 3]), (">=", [2, 3]), (">", [3])],
)
def test_operators_mean_what_they_mean_in_mathematics(operator, passing):
    """Each operator on values below, at and above the number."""
    missing, passes = parse_cut(f"x {operator} 2").apply(pa.array([1.0, 2.0, 3.0]))
    assert not missing.any()
    assert (np.flatnonzero(passes) + 1).tolist() == passing


@pytest.mark.parametrize(
    "text",
    ["", "ruwe", "ruwe <", "< 1.4", "1 < x < 2", "x < 1 and y > 2", "x = 1", "x => 1", "x == y", "x < nan", "x < 1e",
     "__import__('os')", "x == 'open", "kind < 'a'", "x <> 1", "a b < 1"],
)  # fmt: skip
def test_what_is_no_cut_is_refused(text):
    """Nothing but one comparison with a value passes, so nothing can be evaluated."""
    with pytest.raises(InputError, match="cut "):
        parse_cut(text)
