"""Sums over bands of Galactic latitude: fields added up bin by bin, for figures and the page."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from starcount.predict import GroupPrediction, Total

LATITUDES_DEG = (0, 5, 15, 30, 45, 60, 90)
"""Edges of the bands in |b|; the finest that a few dozen fields still fill."""


@dataclass(frozen=True, eq=False)
class Band:
    """A few fields added up: counts per bin, their expectation, parts and draws, and the area behind each bin.

    All arrays have shape (bin,), draws (draw, bin). ``compared`` says whether counts stand behind the sums.
    """

    label: str
    edges_mag: np.ndarray
    area_deg2: np.ndarray
    total: Total
    parts: Mapping[str, np.ndarray]
    draws: np.ndarray | None
    compared: bool

    @property
    def per_deg2_mag(self) -> np.ndarray:
        """Divide by this to get stars per square degree and magnitude; not a number in bins without a field."""
        return np.where(self.area_deg2 > 0, self.area_deg2, np.nan) * np.diff(self.edges_mag)


def add_up(prediction: GroupPrediction, fields: np.ndarray, label: str) -> Band:
    """Add up the chosen fields (field,) bool: over the (field, bin) with counts, or over all if there are none."""
    compared = bool(prediction.compared[fields].any())
    where = prediction.compared if compared else np.ones(prediction.expected.shape, bool)
    where = where & fields[:, None]
    area = np.where(where, prediction.group.fields.area_deg2[:, None], 0.0).sum(axis=0)

    def add(values):
        return np.where(where, values, 0.0).sum(axis=-2)

    draws = None if prediction.draws is None else add(prediction.draws)
    shared = 0.0 if draws is None else draws.var(axis=0)
    total = Total(add(prediction.n), add(prediction.expected), add(prediction.own_variance) + shared)
    parts = {name: add(counts) for name, counts in prediction.parts.items()}
    return Band(label, prediction.group.edges_mag, area, total, parts, draws, compared)


def latitude_bands(prediction: GroupPrediction, hemisphere: int = 0) -> dict[int, Band]:
    """The bands of |b| that hold fields, by their place in the list of bands.

    ``hemisphere`` is 1 for the north, -1 for the south, 0 for both.
    """
    b_deg = prediction.group.fields.b_deg
    side = np.ones(b_deg.shape, bool) if hemisphere == 0 else (b_deg >= 0) == (hemisphere > 0)
    bands = {}
    for place, (low, high) in enumerate(pairwise(LATITUDES_DEG)):
        chosen = side & (np.abs(b_deg) >= low) & ((np.abs(b_deg) < high) | (high == LATITUDES_DEG[-1]))
        if number := int(chosen.sum()):
            bands[place] = add_up(prediction, chosen, f"{band_label(place)}, {number} field{'s' if number > 1 else ''}")
    return bands


def band_label(place: int) -> str:
    """How a band is named."""
    return f"|b| {LATITUDES_DEG[place]}°–{LATITUDES_DEG[place + 1]}°"
