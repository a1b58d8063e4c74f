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
    wavelength_nm: float
    """Mean wavelength of the response, computed from the filter curves as the package speclite 1.0 has them: it says
    which of two bands is the bluer one."""


def _bands(system: str, magnitudes: str, reference: str, source: str, **bands: tuple[float, str]) -> tuple[Band, ...]:
    prefix = f"{system} " if magnitudes == "AB" else ""
    return tuple(
        Band(f"{prefix}{short}", system, magnitudes, reference, description, source, wavelength_nm)
        for short, (wavelength_nm, description) in bands.items()
    )


BANDS: dict[str, Band] = {
    band.name: band
    for band in (
        *_bands(
            "Gaia",
            "Vega",
            "G",
            "Riello et al. 2021, A&A 649, A3",
            G=(625.1, "Gaia (E)DR3 G, white light"),
            BP=(521.4, "Gaia (E)DR3 blue photometer, 330-680 nm"),
            RP=(769.8, "Gaia (E)DR3 red photometer, 640-1050 nm"),
        ),
        *_bands(
            "Johnson-Cousins",
            "Vega",
            "V",
            "Bessell 1990, PASP 102, 1181",
            B=(443.2, "Johnson B"),
            V=(550.7, "Johnson V"),
            I=(802.7, "Cousins I"),
        ),
        *_bands(
            "SDSS",
            "AB",
            "G",
            "Fukugita et al. 1996, AJ 111, 1748",
            u=(361.8, "Sloan u, 355 nm"),
            g=(473.3, "Sloan g, 472 nm"),
            r=(617.7, "Sloan r, 617 nm"),
            i=(748.6, "Sloan i, 748 nm"),
            z=(887.8, "Sloan z, 892 nm"),
        ),
        *_bands(
            "PS1",
            "AB",
            "G",
            "Tonry et al. 2012, ApJ 750, 99",
            g=(487.9, "Pan-STARRS1 g, 488 nm"),
            r=(620.0, "Pan-STARRS1 r, 620 nm"),
            i=(752.4, "Pan-STARRS1 i, 752 nm"),
            z=(866.5, "Pan-STARRS1 z, 866 nm"),
            y=(961.6, "Pan-STARRS1 y, 962 nm"),
        ),
        *_bands(
            "LSST",
            "AB",
            "G",
            "Rubin Observatory technical note RTN-099 (the filters as in its commissioning camera)",
            u=(373.5, "Rubin LSST u, 374 nm"),
            g=(482.2, "Rubin LSST g, 482 nm"),
            r=(620.6, "Rubin LSST r, 621 nm"),
            i=(753.7, "Rubin LSST i, 754 nm"),
            z=(866.4, "Rubin LSST z, 866 nm"),
            y=(973.2, "Rubin LSST y, 973 nm"),
        ),
        *_bands(
            "2MASS",
            "Vega",
            "G",
            "Skrutskie et al. 2006, AJ 131, 1163",
            J=(1230.4, "2MASS J, 1.24 micron"),
            H=(1639.2, "2MASS H, 1.65 micron"),
            Ks=(2153.3, "2MASS Ks, 2.16 micron"),
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


def bluer_first(blue: str, red: str) -> bool:
    """Whether two of ``BANDS`` make a colour as written here: two different ones, the bluer first."""
    return BANDS[blue].wavelength_nm < BANDS[red].wavelength_nm
