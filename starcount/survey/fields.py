"""Fields: patches of sky with an area and dust, as circles or HEALPix pixels."""

from dataclasses import dataclass

import numpy as np

from starcount.constants import DEG2_SR
from starcount.survey.frames import pixel_places, turned

PIXEL_FRAMES = ("galactic", "icrs")
PIXEL_ORDERS = ("ring", "nested")
FARTHEST_CORNER = 1.86
"""No corner of a HEALPix pixel is farther from its centre than this many circle-equivalent radii: 1.44 at nside 1,
1.846 at 64, 1.850 at 256, each doubling adding half as much (measured)."""
DUST_NEEDS = {"D0": (), "constant": ("A_V",), "profile": ("profile",), "anchored": ("A_V",)}
"""The dust models a field may name, and the columns of the field table each of them needs."""


@dataclass(frozen=True, eq=False)
class Fields:
    """Columns, one row a field, all of shape (field,).

    ``l_deg, b_deg`` Galactic centre; ``area_deg2`` the area in which stars were counted, which for a
    pixel may be less than the pixel. A circle has a ``radius_deg``, nside 0, pixel -1 and frame and
    order ''; a HEALPix pixel has nside, ``pixel``, the frame and order of its number, and radius nan.
    Names and notes have no blanks at their ends. ``A_V_mag`` is nan and ``profile`` '' where the dust model needs none.
    """

    name: np.ndarray
    l_deg: np.ndarray
    b_deg: np.ndarray
    area_deg2: np.ndarray
    radius_deg: np.ndarray
    nside: np.ndarray
    pixel: np.ndarray
    pixel_frame: np.ndarray
    pixel_order: np.ndarray
    dust: np.ndarray
    A_V_mag: np.ndarray
    profile: np.ndarray
    note: np.ndarray

    def __len__(self) -> int:
        return self.name.size

    @property
    def is_pixel(self) -> np.ndarray:
        """True for HEALPix pixels, False for circles, (field,)."""
        return self.nside > 0

    @property
    def reach_deg(self) -> np.ndarray:
        """The radius, for a pixel that of the circle of its full area, (field,)."""
        full = pixel_area_deg2(np.maximum(self.nside, 1))
        return np.where(self.is_pixel, cap_radius_deg(full), self.radius_deg)

    @property
    def bound_deg(self) -> np.ndarray:
        """The radius of a circle about the centre that holds all of the field, (field,)."""
        return self.reach_deg * np.where(self.is_pixel, FARTHEST_CORNER, 1.0)


def cap_area_deg2(radius_deg) -> np.ndarray:
    """Area of a spherical cap, 2 pi (1 - cos r), in the form that keeps its precision for small r."""
    return 4.0 * np.pi * np.sin(np.radians(radius_deg) / 2.0) ** 2 / DEG2_SR


def cap_radius_deg(area_deg2) -> np.ndarray:
    """Radius of the spherical cap of an area; inverse of ``cap_area_deg2``."""
    return np.degrees(2.0 * np.arcsin(np.sqrt(np.asarray(area_deg2) * DEG2_SR / (4.0 * np.pi))))


def pixel_area_deg2(nside) -> np.ndarray:
    """Area of a HEALPix pixel: the sphere divided by 12 nside^2."""
    return 4.0 * np.pi / (12.0 * np.asarray(nside, float) ** 2) / DEG2_SR


def circle_fields(name, l_deg, b_deg, radius_deg, **columns) -> Fields:
    """Circular fields with the area of their caps; ``columns`` may set dust, A_V_mag, profile, note."""
    name = np.asarray(name, dtype=str)
    shape = {
        "area_deg2": cap_area_deg2(radius_deg),
        "radius_deg": radius_deg,
        "nside": 0,
        "pixel": -1,
        "pixel_frame": "",
        "pixel_order": "",
    }
    return _fields(name, l_deg=turned(l_deg), b_deg=b_deg, **(shape | columns))


def pixel_fields(name, nside: int, pixel, frame: str, order: str, **columns) -> Fields:
    """HEALPix pixels of one nside as fields; ``columns`` may also give a smaller ``area_deg2``."""
    name = np.asarray(name, dtype=str)
    l_deg, b_deg = pixel_places(nside, pixel, frame, order)
    shape = {
        "area_deg2": pixel_area_deg2(nside),
        "radius_deg": np.nan,
        "nside": nside,
        "pixel": pixel,
        "pixel_frame": frame,
        "pixel_order": order,
    }
    return _fields(name, l_deg=l_deg, b_deg=b_deg, **(shape | columns))


_DEFAULTS = {"dust": "D0", "A_V_mag": np.nan, "profile": "", "note": ""}
_WHOLE = ("nside", "pixel")


def _fields(name: np.ndarray, **columns) -> Fields:
    columns = _DEFAULTS | columns
    full = {key: np.broadcast_to(np.asarray(value), name.shape).copy() for key, value in columns.items()}
    kinds = {key: np.int64 if key in _WHOLE else float for key, value in full.items() if value.dtype.kind != "U"}
    return Fields(name=name, **{key: value.astype(kinds.get(key, str)) for key, value in full.items()})
