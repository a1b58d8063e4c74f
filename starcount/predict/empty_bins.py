"""Bins in which no star is expected in any field: most likely a slip in the bins, or in the band or colour."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from starcount.survey import Group

EMPTY_SHARE = 1e-6
"""A row of magnitude or column of colour with less than this share of its group's expectation holds no star."""

NO_STAR = 0.05
"""A group with fewer expected stars than this holds none, and is printed as 0.0."""


def caution_of_empty_bins(group: Group, expected: np.ndarray) -> str:
    """In words, which bins of a group are expected (field, bin) to hold no star in any field; '' if there are none."""
    total = expected.sum()
    if total < NO_STAR:
        return f"group {group.name}: no star is expected in any of its bins and fields ({total:.2g} in all)"
    grid = expected.sum(axis=0).reshape(group.edges_mag.size - 1, -1)
    named = list(_named(group.band, group.edges_mag, grid.sum(axis=1) < EMPTY_SHARE * total))
    if group.colour:
        columns = grid.sum(axis=0) < EMPTY_SHARE * total
        named += _named("-".join(group.colour), group.edges_colour_mag, columns)
    if not named:
        return ""
    return f"group {group.name}: no star is expected at {', '.join(named)} in any field (less than 1e-6 of the group)"


def _named(axis: str, edges_mag: np.ndarray, empty: np.ndarray) -> Iterator[str]:
    """Such as ``BP-RP 9 to 12``: the empty bins along one axis, neighbours as one."""
    turns = np.diff(np.concatenate([[False], empty, [False]]).astype(int))
    for first, last in zip(np.flatnonzero(turns == 1), np.flatnonzero(turns == -1), strict=True):
        low, high = edges_mag[first], edges_mag[last]
        ends = "all bluer" if low == -np.inf else f"{low:g}", "all redder" if high == np.inf else f"{high:g}"
        yield f"{axis} {' to '.join(ends)}"
