"""The bins of a group in survey.toml: edges in magnitude and, with a colour, in colour."""

import numpy as np

from starcount.errors import Problem
from starcount.survey.bins import MOST_FLAT_BINS, edges_from_range, trouble_with_edges, trouble_with_range
from starcount.survey.keys import NUMBERS, RANGE, Place, usable

MAGNITUDE, COLOUR = ("bins", "edges_mag"), ("colour_bins", "edges_colour_mag")
"""The keys of a range and of a list of edges. Bins in colour may be open at both ends."""

BLUEST_MAG, REDDEST_MAG = -1.5, 7.0
"""No star has a colour beyond these without dust: the tables of stars end there."""
MOST_REDDENING_MAG = 5.0
"""So much may dust add to a colour, and more than any survey of stars in the optical has seen through."""


def edges_of(group: dict, keys: tuple[str, str] = MAGNITUDE) -> np.ndarray | None:
    """The edges (bin + 1,) of a group's settings, None where they are not there or not right."""
    edges, limits = usable(group, keys[1], NUMBERS), usable(group, keys[0], RANGE)
    if edges is not None:
        edges_mag = np.array(edges, float)
        return None if trouble_with_edges(edges_mag, keys is COLOUR) else edges_mag
    if limits is None or trouble_with_range(limits["from"], limits["to"], limits["step"]):
        return None
    return edges_from_range(limits["from"], limits["to"], limits["step"])


def trouble_with_bins(group: dict, place: Place) -> list[Problem]:
    """What is wrong with the bins in magnitude and colour."""
    problems = _along(group, MAGNITUDE, place)
    if "colour" in group:
        problems += _along(group, COLOUR, place)
    m_edges, c_edges = edges_of(group), edges_of(group, COLOUR)
    if c_edges is not None:
        problems += _beyond_all_stars(c_edges, COLOUR[0] if COLOUR[0] in group else COLOUR[1], place)
    if m_edges is not None and c_edges is not None:
        n = (m_edges.size - 1) * (c_edges.size - 1)
        if n > MOST_FLAT_BINS:
            found = f"{m_edges.size - 1} x {c_edges.size - 1} bins"
            problems.append(place.problem("colour_bins", found, f"at most {MOST_FLAT_BINS} in all"))
    return problems


def _beyond_all_stars(edges_mag: np.ndarray, key: str, place: Place) -> list[Problem]:
    """Bins in colour none of which any star can be in."""
    reddest_mag = REDDEST_MAG + MOST_REDDENING_MAG
    if edges_mag[-1] > BLUEST_MAG and edges_mag[0] < reddest_mag:
        return []
    found = f"{edges_mag[0]:g} to {edges_mag[-1]:g} mag, where no star can be"
    stars = f"stars have {BLUEST_MAG:g} to {REDDEST_MAG:g} mag, up to {reddest_mag:g} behind dust"
    return [place.problem(key, found, f"bins that meet the colours of stars ({stars})")]


def _along(group: dict, keys: tuple[str, str], place: Place) -> list[Problem]:
    by_range, by_list = keys
    if (by_range in group) == (by_list in group):
        found = f"both {by_range} and {by_list}" if by_range in group else f"no {by_range}"
        return [place.problem(by_range, found, f"{by_range} = {{from = , to = , step = }} or {by_list} = [ ]")]
    edges, limits = usable(group, by_list, NUMBERS), usable(group, by_range, RANGE)
    if edges is not None:
        trouble = trouble_with_edges(np.array(edges, float), keys is COLOUR)
        allowed = "two or more edges, ascending, finite" + (" but for -inf first or inf last" if keys is COLOUR else "")
        return [place.problem(by_list, trouble, allowed)] if trouble else []
    if limits is not None:
        trouble = trouble_with_range(limits["from"], limits["to"], limits["step"])
        return [place.problem(by_range, trouble, "from < to, and a whole number of steps > 0")] if trouble else []
    return []
