"""Which magnitudes count as verified: those that the tables state to be known to 0.1 mag."""

from functools import cache
from importlib.resources import files

import numpy as np
from astropy.table import Table
from numpy.testing import assert_allclose, assert_array_equal

from starcount import stars
from starcount.forward.tables import StarTables
from starcount.galaxy import read_galaxy
from starcount.stars import tracks


@cache
def table(name: str) -> Table:
    """One of the shipped tables."""
    return Table.read(files("starcount.stars") / "data" / f"{name}.ecsv", format="ascii.ecsv")


def dwarfs(feh: float = 0.0) -> Table:
    """The main sequence of one metallicity."""
    return table("dwarfs")[table("dwarfs")["feh"] == feh]


def verified(rows: Table, name: str) -> np.ndarray:
    """Which rows are known to 0.1 mag in a system."""
    return np.asarray(rows[f"error {name}"]) <= 0.1


def test_what_is_not_verified_says_so():
    """Coolest dwarfs in SDSS, metal-poor M dwarfs, u of M dwarfs and of white dwarfs, giants cooler than 3600 K."""
    rows = dwarfs()
    M_V = np.asarray(rows["M_V"])
    assert not verified(rows, "SDSS")[M_V >= 14].any()
    assert verified(rows, "Gaia")[(M_V >= -4) & (M_V <= 18)].all()
    assert verified(rows, "SDSS")[(M_V >= -3) & (M_V <= 13)].all()
    assert not verified(dwarfs(-1.0), "Johnson-Cousins")[(M_V >= 11) & (M_V <= 12)].any()
    assert verified(dwarfs(-0.5), "Gaia")[(M_V >= 1) & (M_V <= 12)].all()
    assert verified(dwarfs(-2.0), "SDSS")[(M_V >= 4) & (M_V <= 9)].all()
    assert not verified(rows, "SDSS u")[M_V >= 11].any()
    assert not verified(table("white_dwarfs"), "LSST u").any()
    assert not verified(table("evolved"), "Gaia")[table("evolved")["Teff"] < 3600].any()


def test_what_rests_on_relations_outside_their_range_is_told():
    """Nearby dwarfs like the Sun rest on none outside; the coolest, M_V 19, do in SDSS."""
    locus, lf = stars.locus("census", "V"), np.zeros((1, 6, 600))
    lf[0, 0, 250:300] = 1.0
    assert stars.outside_share(locus, lf, "Gaia") == 0.0
    assert stars.outside_share(locus, lf, "BP") == 0.0
    far = np.zeros((1, 6, 600))
    far[0, 0, 540] = 1.0
    assert stars.outside_share(locus, far, "SDSS") == 1.0
    assert_allclose(stars.outside_share(locus, lf + 50 * far, "SDSS"), 0.5, rtol=1e-9)
    assert stars.outside_share(locus, far, "V") == 0.0  # counted in V, it rests on no relation


def test_bands_count_one_by_one():
    """A colour is inside where both its bands are, the reference band always; u ends before g; all by the 0.1 mag."""
    locus = stars.locus("census", "G")
    assert locus.inside_of("G").all()
    assert (locus.inside_of("G", "BP") == locus.inside["Gaia"]).all()
    assert (locus.inside_of("SDSS u", "SDSS g") == locus.inside["SDSS u"] & locus.inside["SDSS"]).all()
    assert (locus.inside["SDSS"] & ~locus.inside["SDSS u"]).any()
    for colour in (None, ("G", "RP")):
        outside = StarTables(read_galaxy("default"), "G", colour, np.array([5800.0])).outside()
        assert (outside.sum() > 0) == (colour is not None)


def test_old_populations_have_no_young_giants():
    """Giants of 5 Gyr and older of solar metallicity, at M_V = 0, are 126 K cooler than those of all ages."""
    at = np.searchsorted(stars.M_EDGES_MAG, 0.0)
    young, old = (tracks.branch("red giant", 0.0, age, "V") for age in (0.0, 5.0))
    assert np.exp(old.look[0, :, at]).mean() < np.exp(young.look[0, :, at]).mean() - 50.0


def test_a_kind_is_known_as_badly_as_its_worst_star():
    """Six equal stars in three kinds by temperature: the larger error of each pair, nan where one has none."""
    look, error = np.arange(6.0)[None], np.array([[0.1, 0.2, 0.3, 0.1, np.nan, 0.1]])
    assert_array_equal(tracks._kinds(np.ones(6), look, error)[1], [[0.2, 0.3, np.nan]])
