"""When the stars of a population were born, and with which metallicity: weights of the nodes of an isochrone table."""

from dataclasses import dataclass

import numpy as np
from scipy.special import ndtr

from starcount.errors import Problem

_LEAST_SHARE = 1e-6

_GAP = 1.6
"""A step this many times the usual one means that an age is missing."""

WIDEST_STEP_DEX = np.log10(2.0)
"""Steps in the logarithm of age, where there are stars: at most a factor of 2. Between 4 and 12 Gyr the turn-off of an
old population moves by a magnitude, and stars of one of the two ages would stand for all between."""

WIDEST_STEP_FEH = 0.5
"""Steps in [Fe/H] where there are stars, in dex, or two spreads if that is more: stars of one [Fe/H] stand for those
around it. Public tables of isochrones have steps of 0.25 to 0.5 dex."""

_SEEN_SHARE = 0.01
"""A wide step in [Fe/H] matters where it holds more than this part of the stars."""


@dataclass(frozen=True)
class History:
    """Star formation between two ages, at a rate that fell by e every ``e_folding_Gyr`` (None: constant)."""

    from_Gyr: float
    to_Gyr: float
    e_folding_Gyr: float | None = None

    def nodes(self, ages_Gyr: np.ndarray) -> list[tuple[float, float]]:
        """Return the ages that hold stars, each with its share of the stellar mass formed; the shares sum to 1.

        A node takes what was formed nearer to it than to its neighbours; a single moment goes to the nodes around it.
        """
        if self.to_Gyr == self.from_Gyr:
            shares = _between(ages_Gyr, self.from_Gyr)
        else:
            limits = np.concatenate([[self.from_Gyr], (ages_Gyr[1:] + ages_Gyr[:-1]) / 2, [self.to_Gyr]])
            formed = self._formed(np.clip(limits, self.from_Gyr, self.to_Gyr))
            shares = np.diff(formed) / (formed[-1] - formed[0])
        return _holding(ages_Gyr, shares)

    def _formed(self, age_Gyr: np.ndarray) -> np.ndarray:
        """The mass formed at younger ages than these, up to a constant."""
        if self.e_folding_Gyr is None:
            return age_Gyr
        return np.exp((age_Gyr - self.to_Gyr) / self.e_folding_Gyr)

    def problems(self, ages_Gyr: np.ndarray, file: str) -> list[Problem]:
        """Return what keeps the ages (age,) of a table from holding this history."""
        youngest, oldest = ages_Gyr[0], ages_Gyr[-1]
        slack = 1e-6 * oldest
        if self.from_Gyr < youngest - slack or self.to_Gyr > oldest + slack:
            found = f"{self.from_Gyr:g} to {self.to_Gyr:g} Gyr"
            allowed = f"inside {youngest:.6g} to {oldest:.6g} Gyr, the ages of the table"
            return [Problem(file, "star_formation", found, allowed)]
        held = (ages_Gyr[1:] > self.from_Gyr + slack) & (ages_Gyr[:-1] < self.to_Gyr - slack)
        wide = np.diff(np.log10(ages_Gyr)) > WIDEST_STEP_DEX + 1e-5  # ages are rounded to 1e-6 dex
        return [
            Problem(
                file,
                "ages",
                f"none between {ages_Gyr[k]:.4g} and {ages_Gyr[k + 1]:.4g} Gyr",
                "steps of at most a factor of 2 in age" if wide[k] else "steps as elsewhere in the table",
            )
            for k in np.flatnonzero(held & (wide | _gaps(ages_Gyr)))
        ]


def _gaps(ages_Gyr: np.ndarray) -> np.ndarray:
    """Return which steps are wider than usual, in age or in its logarithm, whichever is more even in the table."""
    if ages_Gyr.size < 3:
        return np.zeros(ages_Gyr.size - 1, bool)
    steps = min((np.diff(ages_Gyr), np.diff(np.log(ages_Gyr))), key=lambda step: step.std() / step.mean())
    return steps > _GAP * np.median(steps)


@dataclass(frozen=True)
class Metallicity:
    """[Fe/H], normally distributed."""

    mean: float
    spread: float

    def nodes(self, feh: np.ndarray) -> list[tuple[float, float]]:
        """Return the [Fe/H] of a table that hold stars, each with its share; the end nodes take the tails."""
        if self.spread == 0:
            return _holding(feh, _between(feh, self.mean))
        limits = np.concatenate([[-np.inf], (feh[1:] + feh[:-1]) / 2, [np.inf]])
        return _holding(feh, np.diff(ndtr((limits - self.mean) / self.spread)))

    def problems(self, feh: np.ndarray, file: str) -> list[Problem]:
        """Return what keeps the [Fe/H] (node,) of a table from holding this distribution."""
        if feh[0] - 1e-9 > self.mean - self.spread or self.mean + self.spread > feh[-1] + 1e-9:
            allowed = f"mean +- spread inside {feh[0]:g} to {feh[-1]:g}, the [Fe/H] of the table"
            return [Problem(file, "metallicity", f"{self.mean:g} +- {self.spread:g}", allowed)]
        widest = max(2 * self.spread, WIDEST_STEP_FEH)
        wide = (np.diff(feh) > widest + 1e-9) & (self._between(feh) > _SEEN_SHARE)
        allowed = f"steps of at most {widest:g} dex where there are stars ({self.mean:g} +- {self.spread:g})"
        return [
            Problem(file, "[Fe/H]", f"none between {feh[k]:g} and {feh[k + 1]:g}", allowed)
            for k in np.flatnonzero(wide)
        ]

    def _between(self, feh: np.ndarray) -> np.ndarray:
        """Return the share of the stars between neighbouring nodes (node - 1,)."""
        if self.spread == 0:
            return ((feh[:-1] + 1e-9 < self.mean) & (self.mean < feh[1:] - 1e-9)).astype(float)
        return np.diff(ndtr((feh - self.mean) / self.spread))


def _between(nodes: np.ndarray, at: float) -> np.ndarray:
    """Shares (node,) of a single value: linear between the two nodes around it."""
    return np.array([np.interp(at, nodes, one) for one in np.eye(nodes.size)])


def _holding(nodes: np.ndarray, shares: np.ndarray) -> list[tuple[float, float]]:
    """Return the nodes with more than a millionth of the stars and their shares, which then sum to 1."""
    kept = np.where(shares > _LEAST_SHARE, shares, 0.0)
    kept /= kept.sum()
    return [(float(node), float(share)) for node, share in zip(nodes, kept, strict=True) if share > 0]
