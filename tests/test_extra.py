"""Extra rows: extragalactic sources and a user's table."""

from importlib.resources import files
from itertools import pairwise

import numpy as np
import pytest
from astropy.table import Table
from numpy.testing import assert_allclose

from starcount.errors import InputError, Problems, UnknownName
from starcount.forward.extra import EXTRA, extra_rows

# Sources of Gaia DR3 at |b| > 60 per square degree, G 16-17 to 20-21 (53 HEALPix pixels, 2830 square degrees).
GAIA_DEG2 = np.array([193.4, 283.8, 416.0, 631.9, 1011.1])


def test_share_of_gaia_at_high_latitude():
    """Quasars and galaxies are 0.5, 1.2, 3.6, 7.8, 12 % of Gaia from G 16-17 to 20-21, to the printed digits."""
    share = extra_rows(["quasars", "galaxies"], "G", np.arange(16.0, 22.0)).sum(0) / GAIA_DEG2
    assert_allclose(np.round(100 * share[:-1], 1), [0.5, 1.2, 3.6, 7.8], atol=1e-9)
    assert round(100 * share[-1]) == 12


def test_rows_lie_inside_their_printed_errors():
    """Both tables lie between their 16 and 84 % limits in every row."""
    for name in EXTRA.values():
        table = Table.read(files("starcount.forward") / "data" / name)
        assert (table["n_lo"] <= table["n"]).all()
        assert (table["n"] <= table["n_hi"]).all()


def test_quasars_agree_with_a_survey():
    """Richards et al. 2006 count 5.07 per square degree at g < 19.1 and z < 2.2, that is G < 18.9; the table, which has
    z up to 4 and a 20 % error at this magnitude, 6.5."""
    counted = extra_rows(["quasars"], "G", np.array([10.0, 18.9]))[0, 0]
    assert 5.07 * 0.9 < counted < 5.07 * 1.5


@pytest.mark.parametrize("name", EXTRA)
def test_finer_bins_add_up(name):
    """Bins that split others hold the same counts, inside rows, across them and beyond the bright end."""
    coarse, fine = np.array([12.0, 15.7, 16.3, 19.0, 21.0]), np.sort(np.append(np.linspace(12, 21, 91), [15.7, 16.3]))
    counts = extra_rows([name], "G", fine)[0]
    summed = [counts[(fine[:-1] >= lo - 1e-9) & (fine[1:] <= hi + 1e-9)].sum() for lo, hi in pairwise(coarse)]
    assert_allclose(extra_rows([name], "G", coarse)[0], summed, rtol=1e-9)


@pytest.mark.parametrize("name", EXTRA)
def test_counts_grow_and_are_never_zero(name):
    """Fainter bins hold more, also brighter than the table, where a stated slope continues it."""
    counts = extra_rows([name], "G", np.arange(8.0, 21.01, 0.25))[0]
    assert (counts > 0).all()
    assert (np.diff(counts) > 0).mean() > 0.95  # rows need not join where their slopes change


def test_bright_galaxies_grow_as_euclid_says():
    """Brighter than the table by 10^0.6 a magnitude (Yasuda et al. 2001)."""
    bright, next_one = extra_rows(["galaxies"], "G", np.array([12.0, 13.0, 14.0]))[0]
    assert_allclose(next_one / bright, 10**0.6, rtol=1e-9)


def test_no_rows():
    """A group without extra rows has none."""
    assert extra_rows([], "V", np.arange(5.0)).shape == (0, 4)


def test_where_the_tables_say_nothing_they_refuse():
    """Another band, fainter bins and unknown names are refused by name, never answered with 0."""
    with pytest.raises(InputError, match="extra row 'quasars' is in band G; expected a table in band V"):
        extra_rows(["quasars"], "V", np.array([16.0, 17.0]))
    with pytest.raises(InputError, match="'galaxies' ends at m = 21, the bins at 22; expected bins inside"):
        extra_rows(["galaxies"], "G", np.array([20.0, 22.0]))
    with pytest.raises(UnknownName, match=r"no extra row called 'quasar'; known: PATH\.ecsv, galaxies, quasars"):
        extra_rows(["quasar"], "G", np.array([16.0, 17.0]))


def write(path, lo=(16, 17, 18), hi=(17, 18, 19), n=(1.0, 10.0, 100.0), unit="1 / (deg2 mag)", **meta):
    """A user's table."""
    table = Table({"m_lo": np.array(lo, float), "m_hi": np.array(hi, float), "n": np.array(n)}, meta=meta)
    table["m_lo"].unit = table["m_hi"].unit = "mag"
    table["n"].unit = unit
    table.write(path, format="ascii.ecsv")
    return str(path)


def test_a_users_power_law_is_integrated_exactly(tmp_path):
    """Rows of a power law 10^m give the closed form in any bin: n(< m) is 10^m but for a factor."""
    name = write(tmp_path / "mine.ecsv", bright_slope=1.0)
    edges = np.array([13.0, 16.2, 16.9, 17.4, 19.0])
    exact = 10 ** (edges - 16.0)
    exact /= (10.0 - 1.0) / 1.0  # the first row, 16 to 17, holds one source
    assert_allclose(extra_rows([name], "V", edges)[0], np.diff(exact), rtol=1e-9)


def test_a_users_table_ends_where_it_ends(tmp_path):
    """Without a stated slope, bins brighter than the table are refused; empty rows stay empty; its band is checked."""
    name = write(tmp_path / "mine.ecsv", n=(0.0, 2.0, 3.0), band="G")
    assert_allclose(extra_rows([name], "G", np.array([16.0, 17.0, 18.0]))[0], [0.0, 2.0])
    with pytest.raises(InputError, match="begins at m = 16, the bins at 15; expected bins inside, or bright_slope"):
        extra_rows([name], "G", np.array([15.0, 17.0]))
    with pytest.raises(InputError, match="is in band G; expected a table in band V"):
        extra_rows([name], "V", np.array([16.0, 17.0]))


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"unit": None}, "column n: no unit; expected a column of finite numbers in 1 / (deg2 mag)"),
        ({"unit": "1 / mag"}, "column n: unit '1 / mag'"),
        ({"n": (1.0, -1.0, 2.0)}, "row 2, n: -1; expected no negative number"),
        ({"n": (1.0, np.inf, 2.0)}, "row 2, n: inf"),
        ({"lo": (16, 17.5, 18)}, "row 2, m_lo: 17.5; expected m_hi of the row before, 17"),
        ({"hi": (17, 16, 19)}, "row 2: m_lo 17, m_hi 16; expected m_lo < m_hi"),
        ({"lo": (), "hi": (), "n": ()}, "no rows; expected at least one row"),
        ({"bright_slope": -0.6}, "meta key bright_slope: -0.6; expected a number above 0"),
    ],
)
def test_what_is_wrong_with_a_users_table_is_said(tmp_path, change, message):
    """The message names file, place, what was found and what is allowed."""
    name = write(tmp_path / "bad.ecsv", **change)
    with pytest.raises(Problems) as problems:
        extra_rows([name], "G", np.array([16.0, 17.0]))
    assert f"{name}: {message}" in str(problems.value)
