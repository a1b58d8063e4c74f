"""Evolved stars by class: what the census counts together, split by a model and by counts."""

from functools import cache
from importlib.resources import files

import numpy as np

from starcount.errors import InputError
from starcount.stars.cells import CLASSES, M_MIDDLE_MAG
from starcount.stars.ecsv import read_ecsv

REFERENCES = ("V", "G")
"""The bands in which luminosity functions are counted; all other bands are reached along the loci."""


def require_reference(band: str) -> None:
    """Refuse a band in which nothing was counted."""
    if band not in REFERENCES:
        raise InputError(f"band {band!r} is not a reference band: functions are counted in V and G, others are spread")


@cache
def evolved_split(reference: str) -> np.ndarray:
    """Return the share (class, cell) of each class in the evolved stars of the thin disc, from a table with sources.

    The four evolved classes sum to 1 in every cell, the other classes are 0.
    """
    require_reference(reference)
    table = read_ecsv(files(__package__) / "data" / "evolved_split.ecsv")
    table = table[table["band"] == reference]
    split = np.zeros((len(CLASSES), M_MIDDLE_MAG.size))
    for name in ("subgiant", "red giant", "clump"):
        split[CLASSES.index(name)] = np.interp(M_MIDDLE_MAG, table["M"], table[name])
    split /= split.sum(axis=0)
    split.setflags(write=False)
    return split
