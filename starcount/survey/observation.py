"""Observation model: which share of the stars of a true magnitude is counted in which bin."""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from scipy.special import ndtr

from starcount.errors import InputError

WIDEST_MAG, FINEST_MAG = 0.05, 0.02
"""True bins are half the scatter wide, within these limits. The stars of a true bin are taken as uniform within it; of
counts that grow as exp(s m) that makes (s width)^2 / 12 too many: 4e-4 for uniform space, s = 0.6 ln 10 (measured)."""
REACH = 5.0
"""Stars farther from a bin than this many times their scatter are left out: 3e-7 of them land in it."""


@dataclass(frozen=True, eq=False)
class Completeness:
    """The probability ``share`` (node,) that a star of true magnitude ``m_mag`` (node,) is counted.

    Linear between the nodes. Saturation is the same curve falling at its bright end.
    """

    m_mag: np.ndarray
    share: np.ndarray


@dataclass(frozen=True, eq=False)
class PhotometricError:
    """Catalogued minus true magnitude, by true magnitude ``m_mag``: mean and standard deviation, all (node,).

    Linear between the nodes and constant beyond them.
    """

    m_mag: np.ndarray
    offset_mag: np.ndarray
    scatter_mag: np.ndarray

    def at(self, m_mag) -> tuple[np.ndarray, np.ndarray]:
        """Offset and scatter (mag) at true magnitudes."""
        return np.interp(m_mag, self.m_mag, self.offset_mag), np.interp(m_mag, self.m_mag, self.scatter_mag)


@dataclass(frozen=True, eq=False)
class Observation:
    """How the stars of a group were seen; with neither part, every star in its own bin."""

    completeness: Completeness | None = None
    error: PhotometricError | None = None

    def matrix(self, edges_mag: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Edges of the true bins (true + 1,), and the counted share (true, bin) of the stars of each of them.

        The share is the mean of the completeness over the true bin times the probability to be catalogued
        in the bin, for stars uniform in the true bin with a Gaussian error.
        Raises InputError where a table does not reach over the bins.
        """
        if self.completeness is None and self.error is None:
            return edges_mag, np.eye(edges_mag.size - 1)
        shortfall = self.shortfall(edges_mag)
        if shortfall:
            raise InputError(shortfall)
        true_mag = self._true_edges(edges_mag)
        landed = self._landed(true_mag, edges_mag)
        if self.completeness is None:
            return true_mag, landed
        return true_mag, _mean(self.completeness.m_mag, self.completeness.share, true_mag)[:, None] * landed

    def shortfall(self, edges_mag: np.ndarray) -> str:
        """In words, how a table falls short of the bins; '' where it does not."""
        return "; ".join(filter(None, self.shortfalls(edges_mag).values()))

    def shortfalls(self, edges_mag: np.ndarray) -> dict[str, str]:
        """The same for each table, by its key in the survey file."""
        found = {}
        if self.error is not None:
            found["photometric_error"] = _gap(self.error.m_mag, edges_mag[0], edges_mag[-1], "the bins reach")
        if self.completeness is not None:
            reason = "the bins" + (" and the scatter into them" if self.error is not None else "") + " reach"
            found["completeness"] = _gap(self.completeness.m_mag, *self._reach(edges_mag), reason)
        return found

    def _reach(self, edges_mag: np.ndarray) -> tuple[float, float]:
        """The brightest and faintest true magnitudes of which stars land in the bins."""
        bright, faint = edges_mag[0], edges_mag[-1]
        if self.error is None:
            return bright, faint
        farthest = REACH * self.error.scatter_mag.max() + np.abs(self.error.offset_mag).max()
        step = np.arange(0.0, farthest + FINEST_MAG, FINEST_MAG)
        offset, scatter = self.error.at(bright - step)
        bright -= step[bright - step + offset + REACH * scatter > bright].max(initial=-FINEST_MAG) + FINEST_MAG
        offset, scatter = self.error.at(faint + step)
        faint += step[faint + step + offset - REACH * scatter < faint].max(initial=-FINEST_MAG) + FINEST_MAG
        return bright, faint

    def _true_edges(self, edges_mag: np.ndarray) -> np.ndarray:
        """True bins that subdivide the bins and go on to both sides as far as stars come from."""
        bright, faint = self._reach(edges_mag)
        bounds = np.unique(np.concatenate([[bright], edges_mag, [faint]]))
        parts = [_divided(lo, hi, self._width(lo, hi)) for lo, hi in pairwise(bounds)]
        return np.concatenate([*parts, bounds[-1:]])

    def _width(self, lo: float, hi: float) -> float:
        if self.error is None:
            return hi - lo if self._is_constant(lo, hi) else WIDEST_MAG
        _, scatter = self.error.at(np.linspace(lo, hi, 9))
        # Without any scatter the bins are only shifted, which needs no fine steps.
        finest = scatter[scatter > 0.0].min(initial=np.inf) / 2.0
        return float(np.clip(finest, FINEST_MAG, WIDEST_MAG))

    def _is_constant(self, lo: float, hi: float) -> bool:
        """Whether the completeness is the same all over a bin: then the bin need not be divided."""
        inside = (self.completeness.m_mag > lo) & (self.completeness.m_mag < hi)
        shares = np.append(
            np.interp([lo, hi], self.completeness.m_mag, self.completeness.share), self.completeness.share[inside]
        )
        return bool(np.ptp(shares) == 0.0)

    def _landed(self, true_mag: np.ndarray, edges_mag: np.ndarray) -> np.ndarray:
        """Probability (true, bin) that a star of a true bin is catalogued in a bin."""
        if self.error is None:
            return _overlap(true_mag[:-1, None], true_mag[1:, None], edges_mag)
        offset, scatter = (x[:, None] for x in self.error.at((true_mag[:-1] + true_mag[1:]) / 2.0))
        bright, faint = true_mag[:-1, None] + offset, true_mag[1:, None] + offset
        sharp = scatter == 0.0
        s = np.where(sharp, 1.0, scatter)
        spread = s * (_area((edges_mag - bright) / s) - _area((edges_mag - faint) / s)) / (faint - bright)
        uniform = np.clip((edges_mag - bright) / (faint - bright), 0.0, 1.0)
        # Far from a bin the areas are equal but for rounding, which must not leave less than no stars.
        return np.maximum(np.diff(np.where(sharp, uniform, spread), axis=1), 0.0)


def _overlap(bright, faint, edges_mag) -> np.ndarray:
    return np.diff(np.clip((edges_mag - bright) / (faint - bright), 0.0, 1.0), axis=1)


def _area(x: np.ndarray) -> np.ndarray:
    """Integral of the normal distribution function from minus infinity to x: x Phi(x) + phi(x)."""
    return x * ndtr(x) + np.exp(-(x**2) / 2.0) / np.sqrt(2.0 * np.pi)


def _mean(x: np.ndarray, y: np.ndarray, edges: np.ndarray) -> np.ndarray:
    """Means, between neighbouring edges, of the straight lines through (x, y)."""
    knots = np.union1d(x, edges)
    heights = np.interp(knots, x, y)
    total = np.concatenate([[0.0], np.cumsum(np.diff(knots) * (heights[1:] + heights[:-1]) / 2.0)])
    return np.diff(np.interp(edges, knots, total)) / np.diff(edges)


def _divided(lo: float, hi: float, width: float) -> np.ndarray:
    """Edges of equal parts from lo to below hi, at most ``width`` wide."""
    return np.linspace(lo, hi, int(np.ceil((hi - lo) / width - 1e-9)) + 1)[:-1]


def _gap(m_mag: np.ndarray, bright: float, faint: float, reason: str) -> str:
    if m_mag[0] <= bright + 1e-9 and m_mag[-1] >= faint - 1e-9:
        return ""
    return f"m from {m_mag[0]:g} to {m_mag[-1]:g}, but {reason} from {bright:.2f} to {faint:.2f}"
