"""The BP magnitudes of faint Gaia stars, which come out too bright.

The catalogue's mean BP flux leaves out transits whose flux is below 1 electron per second (Riello et al. 2021, A&A
649, A3, section 8.1). Where the noise of a transit is as large as the flux, the transits that are left are the bright
ones: their mean is that of a normal distribution cut off below, and BP - RP comes out too blue.
"""

from dataclasses import dataclass

import numpy as np
from scipy.special import log_ndtr

BANDS = ("G", "RP")
"""Bands of the counts in which the bias of the colour is known. In BP the magnitudes themselves are biased."""
LEAST_FLUX_E_S = 1.0
"""Transits with less are left out, electrons per second (Riello et al. 2021)."""
ZERO_POINT_MAG = {"G": 25.6874, "BP": 25.3385, "RP": 24.7479}
"""Vega magnitude of one electron per second (Riello et al. 2021, Gaia EDR3)."""


@dataclass(frozen=True)
class FaintBP:
    """The noise of a single BP transit in electrons per second, and the band in which the stars are counted."""

    noise_e_s: float
    band: str

    def offset_mag(self, m_mag, c_mag) -> np.ndarray:
        """Catalogued minus true BP - RP (k, colour), never positive, at true magnitudes (k,) and colours (colour,)."""
        flux = self.flux_e_s(m_mag, c_mag)
        cut = (LEAST_FLUX_E_S - flux) / self.noise_e_s
        # phi(x) / (1 - Phi(x)) in logarithms, which reach where both are zero to the computer.
        excess = np.exp(-0.5 * cut**2 - 0.5 * np.log(2.0 * np.pi) - log_ndtr(-cut))
        return -2.5 * np.log10(1.0 + self.noise_e_s * excess / flux)

    def flux_e_s(self, m_mag, c_mag) -> np.ndarray:
        """True BP flux (k, colour) of stars of a magnitude in ``band`` and a colour BP - RP."""
        m_mag, c_mag = np.asarray(m_mag, float)[:, None], np.asarray(c_mag, float)[None, :]
        if self.band == "RP":
            return 10.0 ** (-0.4 * (m_mag + c_mag - ZERO_POINT_MAG["BP"]))
        red_over_blue = 10.0 ** (0.4 * (c_mag - ZERO_POINT_MAG["BP"] + ZERO_POINT_MAG["RP"]))
        return flux_ratio(c_mag) / (1.0 + red_over_blue) * 10.0 ** (-0.4 * (m_mag - ZERO_POINT_MAG["G"]))


def flux_ratio(c_mag) -> np.ndarray:
    """Mean (BP flux + RP flux) / G flux of stars of a colour BP - RP (Riello et al. 2021, table 2; -1 to 7 mag)."""
    c = np.clip(c_mag, -1.0, 7.0)
    blue = 1.154360 + 0.033772 * c + 0.032277 * c**2
    middle = 1.162004 + 0.011464 * c + 0.049255 * c**2 - 0.005879 * c**3
    red = 1.057572 + 0.140537 * c
    return np.where(c < 0.5, blue, np.where(c < 4.0, middle, red))
