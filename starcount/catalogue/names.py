"""Names under which star lists hold positions, magnitudes and colours."""

import re
from collections.abc import Mapping

POSITION_NAMES = (
    ("galactic", "l", "b"),
    ("galactic", "l_deg", "b_deg"),
    ("galactic", "l_rad", "b_rad"),
    ("galactic", "glon", "glat"),
    ("icrs", "ra", "dec"),
    ("icrs", "ra_deg", "dec_deg"),
    ("icrs", "ra_rad", "dec_rad"),
    ("icrs", "ra_icrs", "de_icrs"),
    ("icrs", "raj2000", "dej2000"),
)
"""Pairs of names looked for, in this order, so Galactic before ICRS."""

MAGNITUDE_NAMES = {
    "G": ("phot_g_mean_mag", "Gmag", "G"),
    "BP": ("phot_bp_mean_mag", "BPmag", "BP"),
    "RP": ("phot_rp_mean_mag", "RPmag", "RP"),
    "B": ("Bmag", "B"),
    "V": ("Vmag", "V"),
    "I": ("Icmag", "Imag", "I"),
    **{f"SDSS {x}": (f"psfMag_{x}", f"SDSS_{x}", f"SDSS {x}", f"{x}mag") for x in "ugriz"},
    **{f"PS1 {x}": (f"{x}MeanPSFMag", f"PS1_{x}", f"PS1 {x}", f"{x}mag") for x in "grizy"},
    **{f"LSST {x}": (f"LSST_{x}", f"LSST {x}") for x in "ugrizy"},
    "J": ("j_m", "Jmag", "J"),
    "H": ("h_m", "Hmag", "H"),
    "Ks": ("k_m", "ks_m", "Ksmag", "Kmag", "Ks"),
}
"""Names looked for per band of the survey. SDSS and Pan-STARRS lists share some: the survey says which system it is."""

_BAND_LETTERS = re.compile(r"[a-z]([-_][a-z])?(?=(mag)?$)", re.IGNORECASE)
"""Where capitals tell bands apart: gmag is Sloan's and Gmag Gaia's, B is a band and b a latitude."""


def colour_names(blue: str, red: str) -> tuple[str, ...]:
    """Names looked for as the column of a colour: those of the two bands joined, without their system."""
    short = blue.split()[-1], red.split()[-1]
    return "_".join(short), "-".join(short)


def spelling(columns: Mapping[str, object], name: str) -> str | None:
    """How a star list spells a name, None if it has none like it; capitals matter where they tell bands apart."""
    if name in columns:
        return name
    return next((own for own in columns if _folded(own) == _folded(name)), None)


def _folded(name: str) -> str:
    """A name in small letters, but for the letters of bands."""
    letters = _BAND_LETTERS.match(name)
    kept = letters[0] if letters else ""
    return kept + name[len(kept) :].lower()
