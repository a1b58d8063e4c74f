"""The map-free model D0: an exponential disc of dust around an empty Local Bubble."""

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from starcount.dust.entries import Entries

BLOCK_LINES = 512
"""Sight lines integrated at a time: their arrays stay in cache."""

HEIGHTS_TO_END = 40.0
"""The integral ends this many scale heights from the plane, where exp(-40) of the dust is left."""

GAUSS_NODES, GAUSS_WEIGHTS = np.polynomial.legendre.leggauss(3)


@dataclass(frozen=True)
class DustDisc:
    """kappa = kappa0 exp(-(R - R0)/h_R - |z + z_sun|/h_z) / (1 + exp(-(d - bubble)/edge)) mag/kpc inside ``R_max_kpc``.

    z is the height above the Sun. The model keeps the distance of the centre and the height of the Sun it was
    calibrated with; they do not follow a fitted Galaxy.
    """

    needs: ClassVar[tuple[str, ...]] = ()

    name: str
    description: str
    kappa0_mag_per_kpc: float
    h_R_kpc: float
    h_z_kpc: float
    R0_kpc: float
    z_sun_kpc: float
    bubble_kpc: float
    bubble_edge_kpc: float
    R_max_kpc: float

    def A_V_mag(self, entries: Entries, d_kpc: np.ndarray) -> np.ndarray:
        """Return the extinction (line, node) to the distances ``d_kpc`` (line, node)."""
        return self.to_distance(entries.l_deg, entries.b_deg, d_kpc)

    def to_distance(self, l_deg: np.ndarray, b_deg: np.ndarray, d_kpc: np.ndarray) -> np.ndarray:
        """Return the extinction (line, node) along the directions (line,), to about 1e-5 of its value."""
        A_V = np.empty(d_kpc.shape)
        for first in range(0, len(d_kpc), BLOCK_LINES):
            block = slice(first, first + BLOCK_LINES)
            A_V[block] = self._block(np.radians(l_deg[block]), np.radians(b_deg[block]), d_kpc[block])
        return A_V

    def total(self, l_deg: np.ndarray, b_deg: np.ndarray) -> np.ndarray:
        """Return the extinction (line,) behind all dust of the model."""
        return self.to_distance(l_deg, b_deg, np.full((len(l_deg), 1), np.inf))[:, 0]

    def kappa_mag_per_kpc(self, l_rad: np.ndarray, b_rad: np.ndarray, d_kpc: np.ndarray) -> np.ndarray:
        """Return the extinction per length (line, node) as if the disc had no outer edge."""
        across = (d_kpc.T * np.cos(b_rad)).T
        R2 = self.R0_kpc**2 + across * (across - 2 * self.R0_kpc * np.cos(l_rad)[:, None])
        height = np.abs(d_kpc * np.sin(b_rad)[:, None] + self.z_sun_kpc)
        disc = np.exp(-(np.sqrt(np.maximum(R2, 0.0)) - self.R0_kpc) / self.h_R_kpc - height / self.h_z_kpc)
        return self.kappa0_mag_per_kpc * disc / (1 + np.exp((self.bubble_kpc - d_kpc) / self.bubble_edge_kpc))

    def _block(self, l_rad: np.ndarray, b_rad: np.ndarray, d_kpc: np.ndarray) -> np.ndarray:
        s = self._grid(l_rad, b_rad)
        kappa, width = self.kappa_mag_per_kpc(l_rad, b_rad, s), np.diff(s, axis=1)
        step = sum(
            w / 2 * width * self.kappa_mag_per_kpc(l_rad, b_rad, s[:, :-1] + (x + 1) / 2 * width)
            for x, w in zip(GAUSS_NODES, GAUSS_WEIGHTS, strict=True)
        )
        A = np.concatenate([np.zeros((len(s), 1)), np.cumsum(step, axis=1)], axis=1)
        return _hermite(s, A, kappa, np.minimum(d_kpc, s[:, -1:]))

    def _grid(self, l_rad: np.ndarray, b_rad: np.ndarray) -> np.ndarray:
        """Return distances (line, grid) in kpc, from the Sun to the end of the disc along each line.

        Fine steps across the edge of the bubble, then growing ones, with nodes at the kinks of kappa: where the line
        crosses the dust plane and where it passes the Galactic centre.
        """
        cos_b, sin_b, cos_l = np.maximum(np.cos(b_rad), 1e-12), np.sin(b_rad), np.cos(l_rad)
        root = np.sqrt(np.maximum(self.R_max_kpc**2 - (self.R0_kpc * np.sin(l_rad)) ** 2, 0.0))
        edge = (self.R0_kpc * cos_l + root) / cos_b
        end = np.minimum(edge, HEIGHTS_TO_END * self.h_z_kpc / np.maximum(np.abs(sin_b), 1e-12))[:, None]
        near = np.broadcast_to(np.linspace(0.0, 0.4, 41), (len(l_rad), 41))
        far = 0.4 * (end / 0.4) ** np.linspace(0.0, 1.0, 101)[1:]
        plane = np.divide(-self.z_sun_kpc, sin_b, out=np.zeros_like(sin_b), where=sin_b < 0)[:, None]
        closest = (self.R0_kpc * cos_l / cos_b)[:, None] + np.array([-0.5, -0.2, -0.05, 0.0, 0.05, 0.2, 0.5])
        return np.sort(np.clip(np.concatenate([near, far, plane, closest], axis=1), 0.0, end), axis=1)


def _hermite(s: np.ndarray, A: np.ndarray, slope: np.ndarray, d: np.ndarray) -> np.ndarray:
    """Interpolate values and slopes (line, grid) at ``d`` (line, node), cubic between the nodes ``s``."""
    # Whole multiples keep the lines apart in one flat search; at 512 lines of 30 kpc the rounding is 1e-11 kpc.
    apart = 2.0 * np.ceil(s[:, -1].max() + 1.0) * np.arange(len(s))[:, None]
    place = np.searchsorted((s + apart).ravel(), (d + apart).ravel(), side="right").reshape(d.shape) - 1
    first = np.arange(len(s))[:, None] * s.shape[1]
    k = np.clip(place, first, first + s.shape[1] - 2)
    s0, A0, m0, m1 = s.ravel()[k], A.ravel()[k], slope.ravel()[k], slope.ravel()[k + 1]
    h, rise = s.ravel()[k + 1] - s0, A.ravel()[k + 1] - A0
    t = np.divide(d - s0, h, out=np.zeros_like(h), where=h > 0)
    return A0 + t * t * (3 - 2 * t) * rise + h * t * (1 - t) * ((1 - t) * m0 - t * m1)


D0 = DustDisc(
    name="D0",
    description="exponential disc of dust around an empty Local Bubble, no map",
    # Calibrated on the latitude medians of Schlegel, Finkbeiner & Davis 1998 on the scale of Schlafly & Finkbeiner
    # 2011. One sight line is wrong by a factor of 1.5 to 2 (rms); toward Baade's window it is 2 times too high.
    kappa0_mag_per_kpc=1.10,
    h_R_kpc=4.0,
    h_z_kpc=0.125,  # Marshall et al. 2006: 125 +17/-7 pc
    R0_kpc=8.2,
    z_sun_kpc=0.015,
    bubble_kpc=0.125,
    bubble_edge_kpc=0.020,
    R_max_kpc=20.0,
)
