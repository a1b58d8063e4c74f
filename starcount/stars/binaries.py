"""Unresolved binaries: how many objects an image shows for the stars that are there.

A function of *stars* counts every component, a function of *systems* one object for each system. All our functions
count systems; a survey that splits wide pairs sees more, nearby.

Numbers from memory, unverified, are marked so below.
"""

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import ndtr

SYSTEMS_PER_STAR = (
    (-1.0, 1.000), (0.5, 0.960), (1.5, 0.958), (2.5, 0.950), (3.5, 0.933), (4.5, 0.910), (5.5, 0.872), (6.5, 0.866),
    (8.0, 0.868), (9.5, 0.868), (10.5, 0.857), (11.5, 0.830), (12.5, 0.806), (13.5, 0.806), (15.0, 0.816),
)  # fmt: skip
"""(M_V, systems over stars). A simulation of 600 000 systems: companions by the multiplicity fractions of Duchene &
Kraus 2013 (figure 1), one each, flat in mass ratio from 0.1 to 1, down to 0.1 solar mass; summed over a magnitude,
where its own noise is under 1 %. Brighter than M_V = 1 the simulation holds under 700 stars and says 1 within 5 %."""

_SOLAR_TYPE_UP_TO_MV, _M_DWARF_FROM_MV = 8.0, 10.5
"""About 0.65 and 0.45 solar mass (Pecaut & Mamajek 2013); in between the two distributions are blended."""

_LOG_PERIOD_DAYS = (5.03, 2.28)
"""Mean and spread of log10 of the period of solar-type pairs: Raghavan et al. 2010, ApJS 190, 1."""

_PAIR_MASS_SUN = 1.5
"""A solar-type pair with the mean companion; the separation goes with its cube root only."""

_M_DWARF_LOG_AU = (np.log10(5.3), 2 / 3 * 1.3)
"""Mean and spread of log10 of the semi-major axis of pairs of 0.1-0.5 solar mass: Duchene & Kraus 2013, ARA&A 51, 269
(peak 5.3 au, spread of log period 1.3; from memory, unverified)."""

_AXIS_PER_SEPARATION = 1.26
"""Mean semi-major axis for the separation seen on the sky: Fischer & Marcy 1992, ApJ 396, 178 (from memory)."""

_DAYS_PER_YEAR = 365.25


def system_factor(M_V_mag: ArrayLike) -> np.ndarray:
    """Return the unresolved systems for each star of these absolute V magnitudes, in their shape.

    A function counted star by star becomes one of systems when multiplied by it. Between 0.80 and 1; the last values
    continue beyond the table.
    """
    M_mag, factor = np.array(SYSTEMS_PER_STAR).T
    return np.interp(M_V_mag, M_mag, factor)


def unresolved_share(M_V_mag: ArrayLike, separation_au: ArrayLike) -> np.ndarray:
    """Return the share of pairs that lie closer on the sky than ``separation_au``; the two broadcast.

    Log-normal in the semi-major axis: ``_LOG_PERIOD_DAYS`` through Kepler's third law for solar-type stars and
    brighter, ``_M_DWARF_LOG_AU`` for M dwarfs, mean and spread blended linearly in M_V between them.
    """
    mean_P, spread_P = _LOG_PERIOD_DAYS
    mean_a = 2 / 3 * (mean_P - np.log10(_DAYS_PER_YEAR)) + np.log10(_PAIR_MASS_SUN) / 3
    limits = (_SOLAR_TYPE_UP_TO_MV, _M_DWARF_FROM_MV)
    mean = np.interp(M_V_mag, limits, (mean_a, _M_DWARF_LOG_AU[0]))
    spread = np.interp(M_V_mag, limits, (2 / 3 * spread_P, _M_DWARF_LOG_AU[1]))
    with np.errstate(divide="ignore"):  # at no separation at all every pair is wider: log10(0) is -inf, its share 0
        log_axis = np.log10(np.asarray(separation_au, float) * _AXIS_PER_SEPARATION)
    return ndtr((log_axis - mean) / spread)


def resolved_gain(M_V_mag: ArrayLike, d_pc: ArrayLike, resolution_arcsec: float) -> np.ndarray:
    """Return by how much a function of systems grows when pairs wider than the resolution count as two stars.

    1 + (1 / b - 1) (1 - u): b the systems for each star (``system_factor``), u the share of pairs closer than
    ``d_pc`` x ``resolution_arcsec`` (in au, by the definition of the parsec). 1 far away, 1 / b at distance 0.
    ``M_V_mag`` and ``d_pc`` broadcast: give M_V (cell,) and d (distance, 1) to get (distance, cell).
    A pair is taken as split whatever the difference in brightness of its two stars: at differences of several
    magnitudes real surveys need a wider separation.
    """
    separation_au = np.asarray(d_pc, float) * resolution_arcsec
    return 1 + (1 / system_factor(M_V_mag) - 1) * (1 - unresolved_share(M_V_mag, separation_au))
