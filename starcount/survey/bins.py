"""Magnitude bins: edges from a range or a list, and which bin a pair of limits is."""

import numpy as np

SAME_EDGE_MAG = 1e-6
"""Two edges closer than this are the same: finer than any catalogue, coarser than rounding."""


MOST_BINS = 10_000
"""More bins than any survey has: a slip in the step, which would fill the memory."""


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


def trouble_with_edges(edges_mag: np.ndarray) -> str:
    """What is wrong with a list of edges, in words; '' if nothing."""
    if edges_mag.size < 2:
        return f"{edges_mag.size} edges"
    if not np.all(np.isfinite(edges_mag)):
        return "an edge that is not finite"
    step = np.diff(edges_mag)
    if np.any(step <= SAME_EDGE_MAG):
        i = int(np.argmax(step <= SAME_EDGE_MAG))
        return f"{edges_mag[i]:g} followed by {edges_mag[i + 1]:g}"
    return ""


def bin_of(edges_mag: np.ndarray, m_lo: np.ndarray, m_hi: np.ndarray) -> np.ndarray:
    """The bin with these limits, -1 where there is none; shape as ``m_lo``."""
    guess = np.clip(np.searchsorted(edges_mag, m_lo - SAME_EDGE_MAG), 0, edges_mag.size - 2)
    same = np.abs(edges_mag[guess] - m_lo) < SAME_EDGE_MAG
    same &= np.abs(edges_mag[guess + 1] - m_hi) < SAME_EDGE_MAG
    return np.where(same, guess, -1)
