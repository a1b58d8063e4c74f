"""The Galactocentric frame: right-handed, the Sun at (-sqrt(R0^2 - z0^2), 0, z0), y along Galactic rotation.

The plane l, b = 0 is tilted by asin(z0 / R0) against the plane z = 0, so that the direction l = b = 0 meets the centre.
Agreement with astropy's frame is tested.
"""

import numpy as np


def unit_vectors(l_deg: np.ndarray, b_deg: np.ndarray) -> np.ndarray:
    """Return the directions (..., 3) of Galactic coordinates: towards l = 0, l = 90 deg and b = 90 deg."""
    l, b = np.radians(l_deg), np.radians(b_deg)
    return np.stack([np.cos(b) * np.cos(l), np.cos(b) * np.sin(l), np.sin(b)], axis=-1)


def galactocentric(l_deg, b_deg, d_kpc, R0_kpc: float, z0_kpc: float) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return R (kpc), azimuth phi (rad; 0 at the Sun, growing with rotation) and z (kpc, positive north)."""
    X, Y, Z = np.moveaxis(unit_vectors(l_deg, b_deg), -1, 0) * d_kpc
    sine = z0_kpc / R0_kpc
    cosine = np.sqrt(1.0 - sine**2)
    x = cosine * (X - R0_kpc) + sine * Z
    z = -sine * (X - R0_kpc) + cosine * Z
    return np.hypot(x, Y), np.arctan2(Y, -x), z
