"""Sums over bands of Galactic latitude: fields added up bin by bin, for figures and the page."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from starcount.predict import GroupPrediction, Total

LATITUDES_DEG = (0, 5, 15, 30, 45, 60, 90)
"""Edges of the bands in |b|; the finest that a few dozen fields still fill."""

WIDE_LATITUDES_DEG = (0, 15, 30, 60, 90)
"""The same for figures of magnitude and colour, which need more stars and more room."""


@dataclass(frozen=True, eq=False)
class Band:
    """A few fields added up: counts per bin, their expectation, parts and draws, and the area behind each bin.

    All arrays have the shape of the bins, draws (draw, ...): (magnitude, colour) in ``add_up_cells``, one axis less
    after ``summed``. ``edges_colour_mag`` is None where the group has no colour or colours were summed over.
    ``own_variance`` is what a bin shares with no other. ``compared`` says whether counts stand behind the sums.
    """

    label: str
    edges_mag: np.ndarray
    edges_colour_mag: np.ndarray | None
    area_deg2: np.ndarray
    n: np.ndarray
    expected: np.ndarray
    own_variance: np.ndarray
    parts: Mapping[str, np.ndarray]
    draws: np.ndarray | None
    compared: bool

    @property
    def total(self) -> Total:
        """Counts, expectation and variance of each bin; the draws were added up before they are squared."""
        shared = 0.0 if self.draws is None else self.draws.var(axis=0)
        return Total(self.n, self.expected, self.own_variance + shared)

    @property
    def area_or_nan_deg2(self) -> np.ndarray:
        """Divide by this to get stars per square degree; not a number in bins without a field."""
        return np.where(self.area_deg2 > 0, self.area_deg2, np.nan)

    @property
    def per_deg2_mag(self) -> np.ndarray:
        """Divide sums over colour by this to get stars per square degree and magnitude."""
        return self.area_or_nan_deg2 * np.diff(self.edges_mag)

    def rows(self, first: int, last: int) -> Band:
        """The magnitude bins from ``first`` to before ``last``, of (magnitude, colour)."""

        def cut(values):
            return values[..., first:last, :]

        return self._with(cut, cut(self.area_deg2), self.edges_mag[first : last + 1], self.edges_colour_mag)

    def summed(self, axis: int) -> Band:
        """Sum over magnitude (axis -2) or colour (axis -1), of (magnitude, colour).

        Bins that are used in different fields have different areas. The sum's area is the one by which stars per
        square degree add up: that of the bins' expectations divided by the sum of expectations per area.
        """
        density = self.expected / self.area_or_nan_deg2
        expected, dense = self.expected.sum(axis=axis), np.nansum(density, axis=axis)
        area = np.where(dense > 0, expected / np.where(dense > 0, dense, 1.0), self.area_deg2.max(axis=axis))
        colours = None if axis == -1 else self.edges_colour_mag
        return self._with(lambda values: values.sum(axis=axis), area, self.edges_mag, colours)

    def _with(self, change, area_deg2, edges_mag, edges_colour_mag) -> Band:
        return Band(
            label=self.label,
            edges_mag=edges_mag,
            edges_colour_mag=edges_colour_mag,
            area_deg2=area_deg2,
            n=change(self.n),
            expected=change(self.expected),
            own_variance=change(self.own_variance),
            parts={name: change(counts) for name, counts in self.parts.items()},
            draws=None if self.draws is None else change(self.draws),
            compared=self.compared,
        )


def add_up_cells(prediction: GroupPrediction, fields: np.ndarray, label: str) -> Band:
    """Add up the chosen fields (field,) bool: over the (field, bin) with counts, or over all if there are none.

    The bins come as (magnitude, colour), with one colour where the group has none.
    """
    group = prediction.group
    compared = bool(prediction.compared[fields].any())
    where = prediction.compared if compared else np.ones(prediction.expected.shape, bool)
    where = where & fields[:, None]

    def add(values):
        total = np.where(where, values, 0.0).sum(axis=-2)
        return total.reshape(*total.shape[:-1], group.edges_mag.size - 1, -1)

    return Band(
        label=label,
        edges_mag=group.edges_mag,
        edges_colour_mag=group.edges_colour_mag,
        area_deg2=add(group.fields.area_deg2[:, None]),
        n=add(prediction.n),
        expected=add(prediction.expected),
        own_variance=add(prediction.own_variance),
        parts={name: add(counts) for name, counts in prediction.parts.items()},
        draws=None if prediction.draws is None else add(prediction.draws),
        compared=compared,
    )


def add_up(prediction: GroupPrediction, fields: np.ndarray, label: str) -> Band:
    """The same against magnitude alone, (bin,): the colours that are used are added up."""
    return add_up_cells(prediction, fields, label).summed(-1)


def latitude_bands(prediction: GroupPrediction, hemisphere: int = 0) -> dict[int, Band]:
    """The bands of |b| that hold fields, against magnitude, by their place in the list of bands.

    ``hemisphere`` is 1 for the north, -1 for the south, 0 for both.
    """
    b_deg = prediction.group.fields.b_deg
    side = np.ones(b_deg.shape, bool) if hemisphere == 0 else (b_deg >= 0) == (hemisphere > 0)
    return {
        place: add_up(prediction, chosen & side, _label(LATITUDES_DEG, place, chosen & side))
        for place, chosen in _chosen(b_deg, LATITUDES_DEG)
        if (chosen & side).any()
    }


def colour_bands(prediction: GroupPrediction) -> tuple[Band, ...]:
    """The wide bands of |b| that hold fields, in magnitude and colour."""
    return tuple(
        add_up_cells(prediction, chosen, _label(WIDE_LATITUDES_DEG, place, chosen))
        for place, chosen in _chosen(prediction.group.fields.b_deg, WIDE_LATITUDES_DEG)
        if chosen.any()
    )


def _chosen(b_deg: np.ndarray, edges_deg) -> list[tuple[int, np.ndarray]]:
    """Which fields lie in each band, by the band's place; the last holds the poles."""
    inside = [
        (np.abs(b_deg) >= low) & ((np.abs(b_deg) < high) | (high == edges_deg[-1])) for low, high in pairwise(edges_deg)
    ]
    return list(enumerate(inside))


def _label(edges_deg, place: int, fields: np.ndarray) -> str:
    number = int(fields.sum())
    return f"{band_label(place, edges_deg)}, {number} field{'s' if number > 1 else ''}"


def band_label(place: int, edges_deg=LATITUDES_DEG) -> str:
    """How a band is named."""
    return f"|b| {edges_deg[place]}°–{edges_deg[place + 1]}°"
