"""Extinction in a band over visual extinction, by the temperature of the star behind the dust."""

from collections.abc import Sequence
from functools import cache
from importlib.resources import files

import numpy as np
from astropy.table import Table

from starcount.errors import UnknownName

TEMPERATURES_K = (3500.0, 5800.0, 10000.0)
"""The stars the coefficients are given for; one in between is shared out linearly in ln(temperature)."""

FLAT_TEMPERATURE_K = 5800.0


def band_coefficients(band: str) -> np.ndarray:
    """Return A_band / A_V (3,) at ``TEMPERATURES_K`` for R_V = 3.1.

    One number three times where it varies by less than 3 per cent over these temperatures; sources and limits are in
    ``data/band_coefficients.ecsv``. Raises ``UnknownName`` for a band without coefficients.
    """
    coefficients = _table()
    if band not in coefficients:
        raise UnknownName("band with an extinction coefficient", band, tuple(coefficients))
    return coefficients[band].copy()


def extinction_temperatures(bands: Sequence[str]) -> np.ndarray:
    """Return the temperatures (x,) in K that the extinction of stars in ``bands`` must be told apart by.

    One, where no coefficient depends on temperature; else ``TEMPERATURES_K``.
    """
    flat = all(np.ptp(band_coefficients(band)) == 0 for band in bands)
    return np.array([FLAT_TEMPERATURE_K] if flat else TEMPERATURES_K)


@cache
def _table() -> dict[str, np.ndarray]:
    table = Table.read(files(__package__) / "data" / "band_coefficients.ecsv", format="ascii.ecsv")
    columns = [np.asarray(table[f"A_over_A_V_{temperature:.0f}"], float) for temperature in TEMPERATURES_K]
    return dict(zip(table["band"].tolist(), np.transpose(columns), strict=True))
