"""Which layer of a component holds the stars of which class and magnitude."""

from collections.abc import Sequence
from itertools import pairwise

import numpy as np

from starcount.constants import CLASS_WORDS
from starcount.errors import InputError, UnknownName
from starcount.stars.cells import CLASSES, M_EDGES_MAG, members

RAMP_MAG = 0.25
"""Half width of the linear ramps between layers: the function of a layer may not jump with a star's magnitude."""


def layer_shares(layers: Sequence) -> np.ndarray:
    """Return the share (layer, class, cell) of the stars of each class and cell that belong to each layer.

    A layer has ``classes``, a tuple of class names ("evolved" stands for its four), and ``M_mag``, its (lo, hi). Over
    the layers that hold a class the shares sum to 1: at a limit between two layers they cross in a ramp of +-0.25 mag,
    the brightest layer of a class also holds everything brighter, the faintest everything fainter. A class held by no
    layer has the share 0.
    Raises ``InputError`` where the layers of a class overlap or leave a gap.
    """
    shares = np.zeros((len(layers), len(CLASSES), M_EDGES_MAG.size - 1))
    for layer in layers:
        for name in layer.classes:
            if name not in CLASS_WORDS:
                raise UnknownName("class of stars", name, CLASS_WORDS)
    held = [{c for word in layer.classes for c in members(word)} for layer in layers]
    for c, name in enumerate(CLASSES):
        holding = sorted((layer.M_mag, i) for i, layer in enumerate(layers) if c in held[i])
        limits = _limits(name, [M_mag for M_mag, _ in holding])
        fainter = [np.ones(M_EDGES_MAG.size - 1), *map(_share_fainter, limits), np.zeros(M_EDGES_MAG.size - 1)]
        for k, (_, i) in enumerate(holding):
            shares[i, c] = fainter[k] - fainter[k + 1]
    return shares


def _limits(name: str, ranges: list[tuple[float, float]]) -> list[float]:
    """Return the limits between the layers of a class, checked to tile the magnitudes."""
    reach = f"the layers of class {name!r}"
    for (_, end), (begin, _) in pairwise(ranges):
        if abs(end - begin) > 1e-9:
            raise InputError(f"{reach}: one ends at M = {end:g}, the next begins at {begin:g}; expected the same value")
    limits = [end for _, end in ranges[:-1]]
    if limits and np.diff([M_EDGES_MAG[0], *limits, M_EDGES_MAG[-1]]).min() < 2 * RAMP_MAG - 1e-9:
        raise InputError(f"{reach} have limits at M = {limits}; expected layers at least {2 * RAMP_MAG:g} mag wide")
    return limits


def _share_fainter(limit_mag: float) -> np.ndarray:
    """Return the share (cell,) of each cell on the faint side of a limit, integrated over the ramp."""
    along = np.clip((M_EDGES_MAG - limit_mag) / (2 * RAMP_MAG) + 0.5, 0.0, 1.0)
    beyond = np.maximum(M_EDGES_MAG - limit_mag - RAMP_MAG, 0.0)
    integral = RAMP_MAG * along**2 + beyond
    return np.diff(integral) / np.diff(M_EDGES_MAG)
