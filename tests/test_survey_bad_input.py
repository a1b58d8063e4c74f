"""Bad surveys: every mistake is refused in one line that says file, place, value and what is allowed."""

import re

import pytest
from astropy.io import ascii as ascii_tables
from survey_files import COUNTS, FIELDS, lay_out

from starcount.errors import InputError, Problems
from starcount.survey import read_survey

ROWS = slice(FIELDS.index("pole 0.0"), None)
COUNT_ROWS = slice(COUNTS.index("pole 10.0"), None)
NO_B = FIELDS.replace("# - {name: b, unit: deg, datatype: float64}\n", "")
NO_B = re.sub(r"^(\S+ \S+) \S+", r"\1", NO_B[NO_B.index("name l b") :], flags=re.M)
NO_B = FIELDS[: FIELDS.index("name l b")].replace("# - {name: b, unit: deg, datatype: float64}\n", "") + NO_B
EXTRA_COLUMN = FIELDS.replace("name: A_V", "name: Av").replace(" A_V ", " Av ")

# What is changed in the files of survey_files.py (file, old text, new text); the one line that must come.
MISTAKES = {
    "latitude": ("fields", "0.0 90.0", "0.0 91.0", "fields.ecsv: line 18, b: 91 deg; expected -90 <= b <= 90"),
    "longitude": ("fields", "359.0", "361.0", "line 19, l: 361 deg; expected -360 <= l <= 360"),
    "nan": ("fields", "0.0 90.0", "0.0 nan", "line 18, b: nan; expected a finite number"),
    "infinite": ("fields", "359.0", "-inf", "line 19, l: -inf; expected a finite number"),
    "text in a column": ("fields", "359.0", "abc", "fields.ecsv: line 19: .*'abc'; expected a whole ECSV table"),
    "no position": ("fields", "359.0", '""', "line 19, position: no value; expected l, b or ra, dec"),
    "area zero": ("fields", " 50.0 ", " 0 ", "line 20, area: 0 deg2; expected area > 0"),
    "area of a circle": (
        "fields",
        "3.1415 1.0",
        "3.31 1.0",
        "area: 3.31 deg2; expected the area of the circle within 5 %",
    ),
    "small circle": ("fields", "3.1415 1.0", "2.9 1.0", "area: 2.9 deg2; expected the area of the circle within 5 %"),
    "area of a pixel": (
        "fields",
        " 50.0 ",
        " 56.5 ",
        "area: 56.5 deg2; expected at most the area of the pixel, 53.7148",
    ),
    "radius zero": ("fields", "3.1415 1.0", "3.1415 0.0", "radius: 0 deg; expected 0 < radius <= 40 deg"),
    "radius too large": ("fields", "3.1415 1.0", "3.1415 50", "radius: 50 deg; expected 0 < radius <= 40 deg"),
    "no unit": ("fields", "l, unit: deg", "l", "column l: no unit; expected unit deg"),
    "unknown unit": ("fields", "l, unit: deg", "l, unit: dgree", "column l: unknown unit 'dgree'; expected unit deg"),
    "wrong unit": ("fields", "l, unit: deg", "l, unit: kpc", "column l: unit kpc; expected unit deg"),
    "length of an area": ("fields", "deg2", "deg", "column area: unit deg; expected unit deg2"),
    "dex is not mag": ("fields", "A_V, unit: mag", "A_V, unit: dex", "column A_V: unit dex; expected unit mag"),
    "no column": ("fields", FIELDS, NO_B, "columns: no column 'b'; expected columns with 'b'"),
    "unknown column": ("fields", FIELDS, EXTRA_COLUMN, r"unknown column 'Av'; expected .*did you mean 'A_V'\?"),
    "same name": ("fields", "centre 359", "pole 359", "line 19, name: 'pole' again; expected a name of its own"),
    "no name": ("fields", "centre 359", '"" 359', "line 19, name: no value; expected a text"),
    "nside": ("fields", "8 3 icrs", "6 3 icrs", "line 20, nside: 6; expected a power of two"),
    "fractional nside": ("fields", "nside, datatype: int64", "nside, datatype: float64", None),
    "pixel": ("fields", "8 3 icrs", "8 768 icrs", r"line 20, pixel: 768; expected 0 to 767 \(nside 8\)"),
    "pixel alone": ("fields", "8 3 icrs", '"" 3 icrs', "line 20, nside: no value; expected a number to go with pixel"),
    "frame": (
        "fields",
        "icrs",
        "icr",
        r"line 20, frame: 'icr'; expected one of galactic, icrs \(did you mean 'icrs'\?\)",
    ),
    "no order": ("fields", "nested", '""', "line 20, order: no value; expected one of ring, nested"),
    "wrong order": ("fields", 'tile "" ""', "tile 10.0 20.0", "pixel: the given position .* expected a place inside"),
    "both shapes": ("fields", '50.0 ""', "50.0 4.0", "radius: 4 deg; expected a radius .* or nside and pixel"),
    "no shape": ("fields", "3.1415 1.0", '3.1415 ""', "radius: no value; expected a radius .* or nside and pixel"),
    "dust": ("fields", "constant", "constnt", r"dust: 'constnt'; expected .*did you mean 'constant'\?"),
    "dust without A_V": (
        "fields",
        "constant 1.5",
        'constant ""',
        "A_V: no value; expected a value, which dust 'constant'",
    ),
    "A_V unread": ("fields", 'D0 "" ""', 'D0 0.3 ""', "A_V: a value; expected none, as dust 'D0' does not use it"),
    "negative A_V": ("fields", "constant 1.5", "constant -1.5", "A_V: -1.5 mag; expected A_V >= 0"),
    "unlisted profile": (
        "fields",
        "cloud",
        "clod",
        r"profile: 'clod'; expected one of cloud \(did you mean 'cloud'\?\)",
    ),
    "no fields": ("fields", FIELDS[ROWS], "", "fields.ecsv: a table without rows; expected one row a field"),
    "cut off": (
        "fields",
        'icrs nested profile "" cloud\n',
        "ic",
        "fields.ecsv: line 20: .*; expected a whole ECSV table",
    ),
    "not a table": ("fields", FIELDS, "name,l\n1,2\n", "fields.ecsv: .*ECSV.*; expected a whole ECSV table"),
    "negative count": ("counts", "10.5 4", "10.5 -4", "counts.ecsv: line 10, n: -4; expected a whole number >= 0"),
    "fractional count": ("counts", "int64", "float64", None),
    "count of no field": ("counts", "centre 11", "center 11", "line 12, field: 'center'; .*did you mean 'centre'"),
    "count of no bin": (
        "counts",
        "11.0 11.5",
        "11.0 11.6",
        "line 12, m_lo, m_hi: 11 to 11.6 mag; expected a bin of the group",
    ),
    "count twice": ("counts", "pole 10.5 11.0", "pole 10.0 10.5", "line 11, field, m_lo, m_hi: the same .* again"),
    "field not counted": (
        "counts",
        "tile 11.5 12.0 900\n",
        "",
        "field 'tile': no counted bin; expected at least one row",
    ),
    "nothing counted": ("counts", COUNTS[COUNT_ROWS], "", "field 'pole': no counted bin; expected at least one row"),
    "unit of a count": ("counts", "n, datatype", "n, unit: mag, datatype", "column n: unit mag; expected no unit"),
    "completeness": ("completeness", "10.0 1.0", "10.0 1.1", "completeness: 1.1; expected 0 <= completeness <= 1"),
    "short table": (
        "completeness",
        "13.0 0.9",
        "11.5 0.9",
        "m from 9 to 11.5, but the bins and the scatter into them reach",
    ),
    "unsorted": ("completeness", "10.0 1.0", "9.0 1.0", "line 9, m: 9 after 9; expected m that grows"),
    "negative scatter": ("errors", "0.02", "-0.02", "scatter: -0.02 mag; expected scatter >= 0"),
    "short errors": (
        "errors",
        "9.0 0.0",
        "10.5 0.0",
        "errors.ecsv: column m: m from 10.5 to 13, but the bins reach from 10",
    ),
    "profile back": ("profiles", "cloud 0.5", "cloud 0.0", "line 10, d: 0 after 0; expected distances that grow"),
    "profile down": (
        "profiles",
        "cloud 0.0 0.0",
        "cloud 0.0 1.3",
        "line 10, A_V: 1.2 after 1.3; expected A_V that never falls",
    ),
    "not TOML": ("survey", '= "G"', "= G", "survey.toml: line 8: .*; expected TOML, whole"),
    "TOML cut off": ("survey", '["quasars"]\n', '["qua', "survey.toml: line 15: .*; expected TOML, whole"),
    "unknown key": ("survey", "band =", "bnd =", r"line 8, group 1, bnd: unknown key; .*did you mean 'band'\?"),
    "no key": ("survey", 'band = "G"\n', "", "group 1, band: no such key; expected a text in quotes"),
    "type of a key": ("survey", "invented = true", "invented = 1", "line 4, invented: 1; expected true or false"),
    "format": ("survey", "format = 1", "format = 2", "line 1, format: 2; expected 1"),
    "group name": ("survey", '"bright"', '"../bright"', "group 1, name: '../bright'; expected letters, digits"),
    "band": ("survey", '"G"', '"g"', r"line 8, group 1, band: 'g'; expected one of G, V \(did you mean 'G'\?\)"),
    "steps": (
        "survey",
        "0.5}",
        "0.3}",
        "line 9, group 1, bins: 6.66667 steps of 0.3; expected from < to, and a whole number",
    ),
    "reversed bins": ("survey", "from = 10", "from = 13", "bins: from 13 to 12 in steps of 0.5; expected from < to"),
    "overlapping bins": (
        "survey",
        "bins = {from = 10, to = 12, step = 0.5}",
        "edges_mag = [10, 11, 10.5]",
        "11 followed by 10.5",
    ),
    "no file": ("survey", "fields.ecsv", "feilds.ecsv", "feilds.ecsv: no such file; expected a table"),
    "ending": ("survey", "fields.ecsv", "fields.txt", "fields.txt: ending '.txt'; expected one of .ecsv, .fits, .vot"),
    "extra": ("survey", "quasars", "quasar", r"extra: 'quasar'; expected .*did you mean 'quasars'\?"),
    "extra file": ("survey", "quasars", "q.ecsv", "extra: no file 'q.ecsv'; expected the path of a table"),
}


def complaints(folder) -> list[str]:
    with pytest.raises(Problems) as caught:
        read_survey(folder, bands=("G", "V"))
    return str(caught.value).split("\n")


@pytest.mark.parametrize("mistake", [name for name, (*_, line) in MISTAKES.items() if line])
def test_a_mistake_is_named(tmp_path, mistake):
    """The line for a mistake says where it is, what was found and what is allowed."""
    file, old, new, line = MISTAKES[mistake]
    said = complaints(lay_out(tmp_path, **{file: (old, new)}))
    assert any(re.search(line, one) for one in said), said
    assert all("; expected " in one and "np.str_" not in one for one in said)


@pytest.mark.parametrize("mistake", [name for name, (*_, line) in MISTAKES.items() if not line])
def test_whole_numbers_may_be_stored_as_floats(tmp_path, mistake):
    """A column of floats that are whole is accepted, as FITS files from elsewhere hold counts so."""
    file, old, new, _ = MISTAKES[mistake]
    read_survey(lay_out(tmp_path, **{file: (old, new)}))


def test_fractional_counts_are_refused(tmp_path):
    """4.5 stars are not a count."""
    text = COUNTS.replace("int64", "float64").replace("10.5 4", "10.5 4.5")
    assert "line 10, n: 4.5; expected a whole number >= 0" in complaints(lay_out(tmp_path, counts=(COUNTS, text)))[0]


def test_all_mistakes_come_at_once(tmp_path):
    """Mistakes in the settings and in two tables are reported together, each once."""
    folder = lay_out(
        tmp_path,
        survey=("extra =", "extras ="),
        fields=("0.0 90.0 3.1415", "0.0 95.0 -1.0"),
        counts=("10.5 4", "10.5 -4"),
    )
    said = complaints(folder)
    assert [re.search(r"(\w+\.\w+): (line \d+)", one).groups() for one in said] == [
        ("survey.toml", "line 15"),
        ("fields.ecsv", "line 18"),
        ("fields.ecsv", "line 18"),
        ("counts.ecsv", "line 10"),
    ]


def test_many_bad_rows_are_counted(tmp_path):
    """Ten rows of one kind are named, the rest is counted: a screen stays readable."""
    rows = "".join(f"f{i} 0.0 95.0 3.1415 1.0 '' '' '' '' D0 '' ''\n".replace("'", '"') for i in range(25))
    text = FIELDS[: FIELDS.index("pole 0.0")] + rows
    said = [one for one in complaints(lay_out(tmp_path, fields=(FIELDS, text))) if "fields.ecsv" in one]
    assert len(said) == 11
    assert "b: the same in 15 more rows" in said[-1]


def test_two_groups_of_one_name(tmp_path):
    """Groups are told apart by name; the line of the second one is given."""
    folder = lay_out(tmp_path)
    text = (folder / "survey.toml").read_text()
    (folder / "survey.toml").write_text(text + text[text.index("[[group]]") :])
    assert "line 17, group 2, name: 'bright' again" in complaints(folder)[0]


def test_nothing_there(tmp_path):
    """A path that does not exist, and a folder without a survey, are refused in one line."""
    for path in (tmp_path / "nowhere.toml", tmp_path):
        with pytest.raises(InputError, match=r"No such file or directory; expected a survey.toml"):
            read_survey(path)


@pytest.mark.filterwarnings("ignore::astropy.utils.exceptions.AstropyUserWarning")
@pytest.mark.parametrize("share", [0.01, 0.4, 0.7])
@pytest.mark.parametrize(("ending", "kind"), [(".fits", "fits"), (".vot", "votable")])
def test_damaged_tables_of_other_formats(tmp_path, ending, kind, share):
    """A FITS or VOTable that is cut off, in its head or in its rows, is refused in one line."""
    folder = lay_out(tmp_path, survey=('"fields.ecsv"', f'"fields{ending}"'))
    path = folder / f"fields{ending}"
    ascii_tables.read(FIELDS, format="ecsv").write(path, format=kind)
    path.write_bytes(path.read_bytes()[: int(share * path.stat().st_size)])
    assert re.search(rf"fields{ending}: .*; expected a whole {ending[1:].upper()} table", complaints(folder)[0])
