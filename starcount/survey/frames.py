"""Directions: from the equatorial to the Galactic frame, and the places inside HEALPix pixels."""

import astropy.units as u
import numpy as np
from astropy.coordinates import SkyCoord
from astropy_healpix import healpix_to_lonlat


def galactic_from_icrs(ra_deg, dec_deg) -> tuple[np.ndarray, np.ndarray]:
    """Galactic l, b (deg) of ICRS positions; l in [0, 360)."""
    galactic = SkyCoord(ra_deg, dec_deg, unit=u.deg, frame="icrs").galactic
    return turned(galactic.l.deg), np.asarray(galactic.b.deg)


def icrs_from_galactic(l_deg, b_deg) -> tuple[np.ndarray, np.ndarray]:
    """ICRS ra, dec (deg) of Galactic positions; inverse of ``galactic_from_icrs``."""
    icrs = SkyCoord(l_deg, b_deg, unit=u.deg, frame="galactic").icrs
    return turned(icrs.ra.deg), np.asarray(icrs.dec.deg)


def turned(longitude_deg) -> np.ndarray:
    """Longitudes brought into [0, 360)."""
    angle = np.mod(longitude_deg, 360.0)
    # The remainder of a tiny negative angle rounds to 360 itself.
    return np.where(angle >= 360.0, 0.0, angle)


def pixel_places(nside, pixel, frame: str, order: str, x=0.5, y=0.5) -> tuple[np.ndarray, np.ndarray]:
    """Galactic l, b (deg) of the point (x, y), each from 0 to 1, inside HEALPix pixels.

    Equal areas of the (x, y) square are equal areas on the sky (Gorski et al. 2005, ApJ 622, 759).
    All arguments but the two names broadcast.
    """
    nside, pixel, x, y = np.broadcast_arrays(nside, pixel, x, y)
    longitude, latitude = healpix_to_lonlat(pixel, nside, dx=x, dy=y, order=order)
    longitude, latitude = longitude.to_value(u.deg), latitude.to_value(u.deg)
    if frame == "icrs":
        return galactic_from_icrs(longitude, latitude)
    return turned(longitude), latitude


def unit_vectors(l_deg, b_deg) -> np.ndarray:
    """Unit vectors (..., 3) of Galactic directions: x to the Galactic centre, z to the north pole."""
    l, b = np.radians(l_deg), np.radians(b_deg)
    return np.stack([np.cos(b) * np.cos(l), np.cos(b) * np.sin(l), np.sin(b)], axis=-1)


def separation_deg(l_deg, b_deg, other_l_deg, other_b_deg) -> np.ndarray:
    """Angles between directions, by the chord, which keeps its precision at small angles."""
    chord = np.linalg.norm(unit_vectors(l_deg, b_deg) - unit_vectors(other_l_deg, other_b_deg), axis=-1)
    return np.degrees(2.0 * np.arcsin(np.minimum(chord / 2.0, 1.0)))
