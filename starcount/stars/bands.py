"""The photometric bands that have luminosity functions."""

from dataclasses import dataclass

from starcount.errors import UnknownName


@dataclass(frozen=True)
class Band:
    """A photometric band: its name in survey files, its system and where the definition is published."""

    name: str
    system: str
    description: str
    source: str


BANDS = {
    band.name: band
    for band in (
        Band("G", "Gaia", "Gaia G, Vega magnitudes", "Riello et al. 2021, A&A 649, A3"),
        Band("V", "Johnson-Cousins", "Johnson V, Vega magnitudes", "Bessell 1990, PASP 102, 1181"),
    )
}


def require_band(name: str) -> None:
    """Refuse a band that has no luminosity functions."""
    if name not in BANDS:
        raise UnknownName("band", name, tuple(BANDS))
