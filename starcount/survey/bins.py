"""Bins in magnitude and colour: edges from a range or a list, which bin a pair of limits is, all limits flat."""

from dataclasses import dataclass

import numpy as np

SAME_EDGE_MAG = 1e-6
"""Two edges closer than this are the same: finer than any catalogue, coarser than rounding."""


MOST_BINS = 10_000
"""More bins than any survey has: a slip in the step, which would fill the memory."""
MOST_FLAT_BINS = 100_000
"""The same for bins in magnitude and colour together."""


@dataclass(frozen=True, eq=False)
class Bins:
    """The limits of a group's bins in the order of its counts, magnitude before colour, all (bin,), in mag.

    ``c_lo`` and ``c_hi`` are nan where the group has no colour, and infinite at open bins. ``colour``: the two bands
    of the colour, or None.
    """

    band: str
    m_lo: np.ndarray
    m_hi: np.ndarray
    colour: tuple[str, str] | None
    c_lo: np.ndarray
    c_hi: np.ndarray


def flat_bins(
    band: str, edges_mag: np.ndarray, colour: tuple[str, str] | None, edges_colour_mag: np.ndarray | None
) -> Bins:
    """The bins between edges of magnitude and, with a colour, of colour."""
    edges_colour_mag = np.full(2, np.nan) if colour is None else edges_colour_mag
    n_m, n_c = edges_mag.size - 1, edges_colour_mag.size - 1
    m_lo, m_hi = np.repeat(edges_mag[:-1], n_c), np.repeat(edges_mag[1:], n_c)
    return Bins(band, m_lo, m_hi, colour, np.tile(edges_colour_mag[:-1], n_m), np.tile(edges_colour_mag[1:], n_m))


def edges_from_range(start: float, stop: float, step: float) -> np.ndarray:
    """Edges (bin + 1,) from ``start`` to ``stop``; rounded so that 0.1 * 3 is 0.3."""
    return np.round(start + step * np.arange(round((stop - start) / step) + 1), 10)


def trouble_with_range(start: float, stop: float, step: float) -> str:
    """What is wrong with a range of bins, in words; '' if nothing."""
    if not np.all(np.isfinite([start, stop, step])):
        return "a limit that is not finite"
    if step <= 0.0 or stop <= start:
        return f"from {start:g} to {stop:g} in steps of {step:g}"
    steps = (stop - start) / step
    if steps > MOST_BINS:
        return f"{steps:.3g} bins, more than {MOST_BINS}"
    return "" if abs(steps - round(steps)) < SAME_EDGE_MAG else f"{steps:g} steps of {step:g}"


def trouble_with_edges(edges_mag: np.ndarray, may_be_open: bool = False) -> str:
    """What is wrong with a list of edges, in words; '' if nothing. ``may_be_open``: -inf first, inf last are right."""
    if edges_mag.size < 2:
        return f"{edges_mag.size} edges"
    good = np.isfinite(edges_mag)
    if may_be_open:
        good[0] |= edges_mag[0] == -np.inf
        good[-1] |= edges_mag[-1] == np.inf
    if not np.all(good):
        return f"{edges_mag[np.argmin(good)]:g} in the place of edge {int(np.argmin(good)) + 1}"
    step = np.diff(edges_mag)
    if np.any(step <= SAME_EDGE_MAG):
        i = int(np.argmax(step <= SAME_EDGE_MAG))
        return f"{edges_mag[i]:g} followed by {edges_mag[i + 1]:g}"
    return ""


def bin_of(edges_mag: np.ndarray, m_lo: np.ndarray, m_hi: np.ndarray) -> np.ndarray:
    """The bin with these limits, -1 where there is none or a limit is nan; shape as ``m_lo``."""
    guess = np.clip(np.searchsorted(edges_mag, m_lo - SAME_EDGE_MAG), 0, edges_mag.size - 2)
    return np.where(_same(edges_mag[guess], m_lo) & _same(edges_mag[guess + 1], m_hi), guess, -1)


def _same(edge_mag: np.ndarray, limit_mag: np.ndarray) -> np.ndarray:
    # Comparing first, since the difference of two infinite limits is nan.
    return (edge_mag == limit_mag) | np.isclose(edge_mag, limit_mag, rtol=0.0, atol=SAME_EDGE_MAG)
