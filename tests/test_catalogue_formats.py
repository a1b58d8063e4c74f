"""Star lists in every format give the same counts, and take no more memory when they are longer."""

import gzip
import subprocess
import sys
from pathlib import Path

import astropy.units as u
import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from astropy.coordinates import SkyCoord
from astropy.io import fits
from astropy.table import MaskedColumn, QTable, Table
from invented_stars import all_sky, brute_force, invented_stars, survey, write, write_csv

from starcount.catalogue import READERS, count_catalogue
from starcount.survey.fields import circle_fields


@pytest.mark.parametrize("suffix", READERS)
def test_every_reader_gives_the_same_counts(suffix, tmp_path):
    """All formats of one table give the same counts, dropped rows and cuts (numbers, text, true and false)."""
    stars = invented_stars(3000)
    cuts = ["ruwe < 1.4", "n_obs >= 10", "kind == 'star'", "variable == false", "variable != 1"]
    if suffix == ".csv":
        cuts.pop()  # in CSV only the cut tells what a column holds, so not both ways
    counted = count_catalogue(write(stars, tmp_path / f"stars{suffix}"), survey(all_sky()), cuts=cuts)
    kept = (stars["ruwe"] < 1.4) & (stars["n_obs"] >= 10) & (stars["kind"] == "star") & ~stars["variable"]
    np.testing.assert_array_equal(counted.counts["stars"], brute_force(stars[kept], all_sky()))
    assert counted.dropped["failed cut 'ruwe < 1.4'"] == np.sum(stars["ruwe"] >= 1.4)


@pytest.mark.parametrize("suffix", READERS)
def test_missing_values_are_reported_by_name(suffix, tmp_path):
    """Null and NaN in position, magnitude and the column of a cut are counted apart, in every format."""
    stars = invented_stars(10)
    stars["Gmag"] = np.full(10, 10.5)
    stars["n_obs"] = MaskedColumn(np.arange(10), mask=np.arange(10) == 4)
    stars["dec"][1], stars["Gmag"][2], stars["ruwe"] = np.nan, np.nan, [np.nan] + [1.0] * 9
    path = write(stars, tmp_path / f"stars{suffix}")
    counted = count_catalogue(path, survey(all_sky()), cuts=["ruwe < 1.4", "n_obs != 9"])
    assert counted.dropped == {
        "position missing": 1,
        "ruwe missing for cut 'ruwe < 1.4'": 1,
        "failed cut 'ruwe < 1.4'": 0,
        "n_obs missing for cut 'n_obs != 9'": 1,
        "failed cut 'n_obs != 9'": 1,
        "magnitude missing": 1,
        "outside the bins": 0,
        "outside every field": 0,
    }
    assert counted.counted == 5


def test_infinite_values_and_missing_text_are_missing_too(tmp_path):
    """A star without flux has an infinite magnitude; text left out in CSV passes no cut, not even !=."""
    text = "l,b,G,kind\n0,0,inf,star\n0,inf,10,star\n0,0,10,\n0,0,10,galaxy\n0,0,10,star\n"
    counted = count_catalogue(write_csv(tmp_path / "s.csv", text), survey(all_sky()), cuts=["kind != 'galaxy'"])
    assert {reason: n for reason, n in counted.dropped.items() if n} == {
        "position missing": 1,
        "kind missing for cut \"kind != 'galaxy'\"": 1,
        "failed cut \"kind != 'galaxy'\"": 1,
        "magnitude missing": 1,
    }


def test_fits_columns_may_be_scaled_integers_and_logical(tmp_path):
    """TSCAL, TZERO, TNULL and logical columns mean what the FITS standard (4.0, section 7.3) says."""
    columns = [
        fits.Column("RA", "J", unit="deg", array=np.array([0, 1500, 2000])),
        fits.Column("DEC", "D", unit="deg", array=np.zeros(3)),
        fits.Column("Gmag", "I", unit="mag", null=-1, array=np.array([10, 12, -1])),
        fits.Column("good", "L", array=np.array([True, True, True])),
    ]
    table = fits.BinTableHDU.from_columns(columns)
    table.header["TSCAL1"], table.header["TZERO1"] = 1e-3, 100.0
    table.writeto(tmp_path / "scaled.fits")
    circle = circle_fields(["c"], *galactic_of(101.5, 0.0), [0.01])
    counted = count_catalogue(tmp_path / "scaled.fits", survey(circle), cuts=["good == true"])
    assert counted.counts["stars"].tolist() == [[0, 1, 0]]
    assert counted.dropped["magnitude missing"] == 1
    assert counted.dropped["outside every field"] == 1


def galactic_of(ra_deg: float, dec_deg: float) -> tuple[list[float], list[float]]:
    place = SkyCoord(ra_deg, dec_deg, unit=u.deg).galactic
    return [place.l.deg], [place.b.deg]


@pytest.mark.parametrize("suffix", [".csv", ".ecsv", ".fits"])
def test_gzipped_files_are_read(suffix, tmp_path):
    """A compressed file counts as the plain one does."""
    plain = write(invented_stars(500), tmp_path / f"stars{suffix}")
    packed = tmp_path / f"stars{suffix}.gz"
    packed.write_bytes(gzip.compress(plain.read_bytes()))
    counts = [count_catalogue(path, survey(all_sky())).counts["stars"] for path in (plain, packed)]
    np.testing.assert_array_equal(*counts)


def test_ecsv_under_the_suffix_csv_keeps_its_units(tmp_path):
    """Archives deliver ECSV as .csv: radians in its header are believed."""
    stars = invented_stars(500)
    plain = count_catalogue(write(stars, tmp_path / "deg.ecsv"), survey(all_sky()))
    stars["ra"], stars["dec"] = stars["ra"].to(u.rad), stars["dec"].to(u.rad)
    write(stars, tmp_path / "rad.ecsv").rename(tmp_path / "rad.csv")
    turned = count_catalogue(tmp_path / "rad.csv", survey(all_sky()))
    np.testing.assert_array_equal(turned.counts["stars"], plain.counts["stars"])


def test_a_folder_of_parquet_files_is_their_sum(tmp_path):
    """Files of a folder, however deep, and several paths add up; each file's own units count."""
    first, second = invented_stars(400, seed=1), invented_stars(600, seed=2)
    expected = brute_force(first, all_sky()) + brute_force(second, all_sky())
    (tmp_path / "part=1").mkdir()
    QTable(first).write(tmp_path / "part=1" / "a.parquet")
    second["ra"], second["dec"] = second["ra"].to(u.rad), second["dec"].to(u.rad)
    QTable(second).write(tmp_path / "b.parquet")
    assert (count_catalogue(tmp_path, survey(all_sky())).counts["stars"] == expected).all()
    both = count_catalogue([tmp_path / "b.parquet", tmp_path / "part=1"], survey(all_sky()))
    assert (both.counts["stars"] == expected).all()


GROWTH = """
import resource, sys
import numpy as np
from starcount.catalogue import count_catalogue
from starcount.survey.fields import pixel_fields
from starcount.survey.groups import Survey, make_group
fields = pixel_fields([str(i) for i in range(48)], 2, np.arange(48), "galactic", "ring")
survey = Survey("invented", "", True, (make_group("s", "G", [10.0, 15.0], fields),))
count_catalogue(sys.argv[1], survey)
small = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
assert count_catalogue(sys.argv[2], survey).rows == 8 * int(sys.argv[3])
print((resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - small) * 1024)
"""


@pytest.mark.parametrize("suffix", [".parquet", ".fits", ".csv", pytest.param(".ecsv", marks=pytest.mark.slow)])
def test_memory_does_not_grow_with_the_catalogue(suffix, tmp_path):
    """Eight times the rows raise the peak by less than a quarter of what the further rows hold (24 bytes each).

    The small file is already several batches long, so a reader at work has all its buffers; what the allocator keeps
    of them varies by some megabytes from run to run.
    """
    n = {".parquet": 600_000, ".fits": 600_000, ".csv": 250_000, ".ecsv": 250_000}[suffix]
    for times in (1, 8):
        write_long(tmp_path / f"{times}{suffix}", n * times)
    run = [sys.executable, "-c", GROWTH, *(str(tmp_path / f"{times}{suffix}") for times in (1, 8)), str(n)]
    grown = int(subprocess.run(run, check=True, stdout=subprocess.PIPE, text=True).stdout)
    assert grown < 0.25 * 7 * n * 24


def write_long(path: Path, n: int) -> None:
    """Write n stars quickly: one row group, one table, or one line again and again."""
    values = {"ra": np.linspace(0, 360, n, endpoint=False), "dec": np.linspace(-90, 90, n), "G": np.full(n, 12.0)}
    if path.suffix == ".parquet":
        pq.write_table(pa.table(values), path, row_group_size=n)
    elif path.suffix == ".fits":
        Table({"ra": values["ra"] * u.deg, "dec": values["dec"] * u.deg, "G": values["G"] * u.mag}).write(path)
    else:
        delimiter = "," if path.suffix == ".csv" else " "
        line = delimiter.join(["123.456789012345", "-12.3456789012345", "12.0"]) + "\n"
        header = "ra,dec,G\n" if path.suffix == ".csv" else ECSV_HEADER
        path.write_text(header + line * n)


ECSV_HEADER = """# %ECSV 1.0
# ---
# datatype:
# - {name: ra, unit: deg, datatype: float64}
# - {name: dec, unit: deg, datatype: float64}
# - {name: G, unit: mag, datatype: float32}
ra dec G
"""
