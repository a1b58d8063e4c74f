"""Distances along sight lines: where the density is evaluated, and with which weights.

The integral over the distance modulus is composite Gauss-Legendre. Panels are one magnitude wide and are halved,
line by line, until counts stop changing (see ``forward.lines``). The panel limits nearest to the two kinks of any disc,
the point closest to the Galactic axis and the crossing of the plane, are moved onto them, so that the rule meets smooth
pieces only. Three points a panel: luminosity functions bend on the scale of tenths of a magnitude, so that higher
orders on wider panels were no better (DEVELOPERS.md).
"""

from dataclasses import dataclass

import numpy as np

from starcount.constants import D_MAX_KPC

MU_FIRST_MAG = -3.0  # 2.5 pc: nearer than any star but the Sun
PANEL_MAG = 1.0
ORDER = 3  # Gauss-Legendre points a panel
_LN10_5 = np.log(10.0) / 5.0


@dataclass(frozen=True, eq=False)
class Nodes:
    """Distances (line, node) in kpc, their moduli in mag, and d^3 dln(d) in pc^3 per steradian."""

    d_kpc: np.ndarray
    mu_mag: np.ndarray
    volume_pc3: np.ndarray


def kinks_kpc(l_deg, b_deg, R0_kpc: float, z0_kpc: float) -> np.ndarray:
    """Return where a line passes the Galactic axis and where it crosses the plane, (line, 2); nan where it does not."""
    cos_b, sin_b = np.cos(np.radians(b_deg)), np.sin(np.radians(b_deg))
    with np.errstate(divide="ignore", invalid="ignore"):
        axis = R0_kpc * np.cos(np.radians(l_deg)) / cos_b
        plane = -z0_kpc / sin_b
    return np.stack([np.where(x > 0.0, x, np.nan) for x in (axis, plane)], axis=-1)


def panel_limits_mag(kinks: np.ndarray, halvings: int) -> np.ndarray:
    """Return the panel limits (line, limit) in distance modulus, halved ``halvings`` times."""
    last = 5.0 * np.log10(D_MAX_KPC) + 10.0
    n_panel = int(np.ceil((last - MU_FIRST_MAG) / PANEL_MAG)) * 2**halvings
    limits = np.tile(np.linspace(MU_FIRST_MAG, last, n_panel + 1), (len(kinks), 1))
    width = (last - MU_FIRST_MAG) / n_panel
    for kink in kinks.T:
        mu = 5.0 * np.log10(np.where(np.isfinite(kink), kink, 1.0)) + 10.0
        nearest = np.rint((mu - MU_FIRST_MAG) / width).astype(int)
        inside = np.isfinite(kink) & (nearest > 0) & (nearest < n_panel)
        limits[inside, nearest[inside]] = mu[inside]
    return np.sort(limits, axis=1)


def place_nodes(l_deg, b_deg, R0_kpc: float, z0_kpc: float, halvings: int) -> Nodes:
    """Return the nodes of sight lines whose panels are halved ``halvings`` times."""
    limits = panel_limits_mag(kinks_kpc(np.asarray(l_deg), np.asarray(b_deg), R0_kpc, z0_kpc), halvings)
    at, weight = np.polynomial.legendre.leggauss(ORDER)
    middle, half = (limits[:, 1:] + limits[:, :-1]) / 2.0, np.diff(limits, axis=1) / 2.0
    mu = (middle[:, :, None] + half[:, :, None] * at).reshape(len(limits), -1)
    step = (half[:, :, None] * weight).reshape(len(limits), -1)
    d_pc = 10.0 ** (mu / 5.0 + 1.0)
    return Nodes(d_kpc=d_pc / 1e3, mu_mag=mu, volume_pc3=d_pc**3 * _LN10_5 * step)
