"""The photometric bands. To add one: a line here, a column in the loci of ``data/``, a row of dust coefficients.

Gaia, Johnson-Cousins and 2MASS are on Vega, the other systems on AB. Luminosity functions are counted in the reference
band of a band's system (V for Johnson-Cousins, G for all others) and spread over the other bands along the loci.
"""

from dataclasses import dataclass

from starcount.errors import InputError, UnknownName


@dataclass(frozen=True)
class Band:
    """A photometric band: its name in survey files, its system and zero point, and where it is defined."""

    name: str
    system: str
    magnitudes: str
    """"Vega" or "AB"."""
    reference: str
    """The band whose luminosity functions stand behind counts in this one: "V" or "G"."""
    description: str
    source: str


def _bands(system: str, magnitudes: str, reference: str, source: str, **descriptions: str) -> tuple[Band, ...]:
    prefix = f"{system} " if magnitudes == "AB" else ""
    return tuple(
        Band(f"{prefix}{short}", system, magnitudes, reference, description, source)
        for short, description in descriptions.items()
    )


BANDS: dict[str, Band] = {
    band.name: band
    for band in (
        *_bands(
            "Gaia",
            "Vega",
            "G",
            "Riello et al. 2021, A&A 649, A3",
            G="Gaia (E)DR3 G, white light",
            BP="Gaia (E)DR3 blue photometer, 330-680 nm",
            RP="Gaia (E)DR3 red photometer, 640-1050 nm",
        ),
        *_bands(
            "Johnson-Cousins",
            "Vega",
            "V",
            "Bessell 1990, PASP 102, 1181",
            B="Johnson B",
            V="Johnson V",
            I="Cousins I",
        ),
        *_bands(
            "SDSS",
            "AB",
            "G",
            "Fukugita et al. 1996, AJ 111, 1748",
            u="Sloan u, 355 nm",
            g="Sloan g, 472 nm",
            r="Sloan r, 617 nm",
            i="Sloan i, 748 nm",
            z="Sloan z, 892 nm",
        ),
        *_bands(
            "PS1",
            "AB",
            "G",
            "Tonry et al. 2012, ApJ 750, 99",
            g="Pan-STARRS1 g, 488 nm",
            r="Pan-STARRS1 r, 620 nm",
            i="Pan-STARRS1 i, 752 nm",
            z="Pan-STARRS1 z, 866 nm",
            y="Pan-STARRS1 y, 962 nm",
        ),
        *_bands(
            "LSST",
            "AB",
            "G",
            "Rubin Observatory technical note RTN-099 (the filters as in its commissioning camera)",
            u="Rubin LSST u, 374 nm",
            g="Rubin LSST g, 482 nm",
            r="Rubin LSST r, 621 nm",
            i="Rubin LSST i, 754 nm",
            z="Rubin LSST z, 866 nm",
            y="Rubin LSST y, 973 nm",
        ),
        *_bands(
            "2MASS",
            "Vega",
            "G",
            "Skrutskie et al. 2006, AJ 131, 1163",
            J="2MASS J, 1.24 micron",
            H="2MASS H, 1.65 micron",
            Ks="2MASS Ks, 2.16 micron",
        ),
    )
}

SYSTEMS: tuple[str, ...] = tuple(dict.fromkeys(band.system for band in BANDS.values()))
"""Names of the photometric systems, in the order of ``BANDS``."""

ABSENT: dict[str, str] = {
    "U": "the loci hold U only on the way to SDSS u and LSST u, and nothing at hand checks it",
    "R": "no locus in Cousins R was checked against measured stars; I is there",
    "PS1 w": "no locus of cool stars in w was found in a source that could be read",
    "G_RVS": "no extinction coefficient of the Gaia spectrometer's band was found in a source that could be read",
}
"""Bands that someone may ask for and that are left out, with the reason."""


def require_band(name: str) -> None:
    """Refuse a band that stars cannot be counted in, with the reason where it is left out on purpose."""
    if name in ABSENT:
        raise InputError(f"band {name!r} is left out: {ABSENT[name]}")
    if name not in BANDS:
        raise UnknownName("band", name, tuple(BANDS))
