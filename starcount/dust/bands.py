"""Extinction in a band over visual extinction."""

from importlib.resources import files

from astropy.table import Table

from starcount.errors import UnknownName


def band_coefficient(band: str) -> float:
    """Return A_band / A_V, one number a band; sources and limits are in ``data/band_coefficients.ecsv``."""
    table = Table.read(files(__package__) / "data" / "band_coefficients.ecsv", format="ascii.ecsv")
    ratios = dict(zip(table["band"], table["A_over_A_V"], strict=True))
    if band not in ratios:
        raise UnknownName("band with an extinction coefficient", band, tuple(ratios))
    return float(ratios[band])
