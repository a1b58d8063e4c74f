"""Initial mass functions: how many stars of which mass are born, for each solar mass formed.

To add one: a ``MassFunction`` and a line in ``IMFS``. All constants are from memory, unverified, and standard.
"""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from scipy.special import ndtr

from starcount.errors import UnknownName

FORMED_SUN = (0.08, 120.0)
"""The masses over which a mass function holds one solar mass: stars, without brown dwarfs."""


@dataclass(frozen=True)
class Power:
    """dn/dm = scale m^-slope."""

    slope: float

    def integral(self, m_lo: np.ndarray, m_hi: np.ndarray, moment: int) -> np.ndarray:
        """Return the integral of m^moment dn/dm between the masses."""
        p = moment + 1 - self.slope
        return np.log(m_hi / m_lo) if abs(p) < 1e-12 else (m_hi**p - m_lo**p) / p

    def __call__(self, m: float) -> float:
        return m**-self.slope


@dataclass(frozen=True)
class LogNormal:
    """dn/dm = exp(-(log10 m - log10 centre)^2 / (2 width^2)) / m."""

    centre: float
    width: float

    def integral(self, m_lo: np.ndarray, m_hi: np.ndarray, moment: int) -> np.ndarray:
        """Return the integral of m^moment dn/dm between the masses."""
        # m^moment shifts the centre of a normal distribution of ln m by moment times its variance.
        mean, sigma = np.log(self.centre), self.width * np.log(10)
        shifted = mean + moment * sigma**2
        scale = np.exp(moment * mean + (moment * sigma) ** 2 / 2) * sigma * np.sqrt(2 * np.pi)
        return scale * (ndtr((np.log(m_hi) - shifted) / sigma) - ndtr((np.log(m_lo) - shifted) / sigma))

    def __call__(self, m: float) -> float:
        return np.exp(-((np.log10(m) - np.log10(self.centre)) ** 2) / (2 * self.width**2)) / m


@dataclass(frozen=True)
class MassFunction:
    """Pieces that meet without a step at ``breaks_sun``, one piece more than breaks."""

    name: str
    source: str
    breaks_sun: tuple[float, ...]
    pieces: tuple[Power | LogNormal, ...]

    def number(self, m_lo_sun: np.ndarray, m_hi_sun: np.ndarray) -> np.ndarray:
        """Return the stars born between two masses for each solar mass formed, in the masses' shape."""
        return self._integral(m_lo_sun, m_hi_sun, 0) / self._integral(*FORMED_SUN, 1)

    def _integral(self, m_lo, m_hi, moment: int) -> np.ndarray:
        total = 0.0
        limits = pairwise((0.0, *self.breaks_sun, np.inf))
        for (first, last), piece, scale in zip(limits, self.pieces, self._scales(), strict=True):
            lo, hi = np.clip(m_lo, first, last), np.clip(m_hi, first, last)
            total = total + scale * piece.integral(lo, hi, moment)
        return np.asarray(total)

    def _scales(self) -> list[float]:
        scales = [1.0]
        for m, (below, above) in zip(self.breaks_sun, pairwise(self.pieces), strict=True):
            scales.append(scales[-1] * below(m) / above(m))
        return scales


IMFS = {
    imf.name: imf
    for imf in (
        MassFunction(
            "Kroupa 2001",
            "Kroupa 2001, MNRAS 322, 231: single stars",
            (0.08, 0.5),
            (Power(0.3), Power(1.3), Power(2.3)),
        ),
        MassFunction(
            "Kroupa, Tout & Gilmore 1993",
            "Kroupa, Tout & Gilmore 1993, MNRAS 262, 545: single stars",
            (0.5, 1.0),
            (Power(1.3), Power(2.2), Power(2.7)),
        ),
        MassFunction(
            "Chabrier 2003",
            "Chabrier 2003, PASP 115, 763, equation 17: single stars of the disc",
            (1.0,),
            (LogNormal(0.079, 0.69), Power(2.3)),
        ),
    )
}
"""Name -> mass function. Chabrier's is printed per log10 m: 0.158 exp(..) below, 0.044 m^-1.3 above one solar mass,
which meet within 1 %; here they meet exactly."""


def mass_function(name: str) -> MassFunction:
    """Return a mass function by its name; raises ``UnknownName``."""
    if not isinstance(name, str) or name not in IMFS:  # settings of a file may hold anything
        raise UnknownName("initial mass function", name, tuple(IMFS))
    return IMFS[name]
