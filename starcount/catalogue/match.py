"""Which fields a place on the sky may belong to: a coarse HEALPix table of candidates per frame."""

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache

import astropy.units as u
import numpy as np
from astropy.coordinates import ICRS, CartesianRepresentation, Galactic, SkyCoord
from astropy_healpix import core as healpix

FRAMES = {"galactic": Galactic, "icrs": ICRS}

COARSE_ORDER = (6, 9)
"""Least and greatest order of the table: pixels of 0.9 deg hold few circles each, pixels of 0.1 deg fill 13 MB."""


@dataclass(frozen=True, eq=False)
class Table:
    """The fields that are looked up in one frame, in the form that ``kernels.count`` takes.

    rotation (3, 3) turns unit vectors of the stars' frame into ``frame``; orders = (coarse, fine); candidate (entry,)
    lists field rows, those of coarse pixel p from first[p] to first[p + 1]; shift, pixel, cos_radius (field,) and
    centre (field, 3) as the kernel says.
    """

    frame: str
    rotation: np.ndarray
    turn: bool
    orders: tuple[int, int]
    first: np.ndarray
    candidate: np.ndarray
    shift: np.ndarray
    pixel: np.ndarray
    centre: np.ndarray
    cos_radius: np.ndarray

    @property
    def arrays(self) -> tuple:
        return (
            self.rotation,
            self.turn,
            self.orders,
            self.first,
            self.candidate,
            self.shift,
            self.pixel,
            self.centre,
            self.cos_radius,
        )


def tables(fields, star_frame: str) -> tuple[Table, ...]:
    """Return one table per frame that is needed to find the fields of stars given in ``star_frame``.

    Pixels belong to their own frame. Circles are the same in every frame: they go with the pixels, or with the stars
    where there are none, so that a survey in one frame needs one table.
    """
    is_pixel = np.asarray(fields.nside) > 0
    pixel_frame = np.asarray(fields.pixel_frame)
    frames = sorted(set(pixel_frame[is_pixel].tolist()))
    home = star_frame if star_frame in frames or not frames else frames[0]
    needed = sorted({*frames, home}) if not is_pixel.all() else frames
    return tuple(
        table(fields, frame, star_frame, np.where(is_pixel, pixel_frame == frame, frame == home)) for frame in needed
    )


def table(fields, frame: str, star_frame: str, mine: np.ndarray) -> Table:
    """Return the table of the fields marked in ``mine`` (field,) bool."""
    nside, order = np.asarray(fields.nside), field_orders(fields)
    is_pixel = nside > 0
    deepest = int(order[mine & is_pixel].max(initial=0))
    coarse = int(np.clip(deepest, *COARSE_ORDER))
    fine = max(coarse, deepest)
    pixel = nested(fields, mine & is_pixel)
    centre = unit_vectors(fields.l_deg, fields.b_deg) @ rotation("galactic", frame).T
    pairs = [*pixel_pairs(pixel, order, coarse), *circle_pairs(centre, fields.radius_deg, mine & ~is_pixel, coarse)]
    field, place = (np.concatenate([pair[i] for pair in pairs]) for i in (0, 1))
    by_place = np.argsort(place, kind="stable")
    first = np.zeros(12 * 4**coarse + 1, dtype=np.int64)
    np.cumsum(np.bincount(place, minlength=12 * 4**coarse), out=first[1:])
    return Table(
        frame=frame,
        rotation=rotation(star_frame, frame),
        turn=star_frame != frame,
        orders=(coarse, fine),
        first=first,
        candidate=field[by_place],
        shift=2 * (fine - order),
        pixel=pixel,
        centre=centre,
        cos_radius=np.cos(np.radians(np.nan_to_num(np.asarray(fields.radius_deg, dtype=float)))),
    )


def field_orders(fields) -> np.ndarray:
    """Return log2(nside) (field,); 0 for circles."""
    return np.log2(np.maximum(np.asarray(fields.nside), 1)).astype(np.int64)


def nested(fields, mine: np.ndarray) -> np.ndarray:
    """Return NESTED pixel numbers (field,), -1 where a field is not one of ``mine``."""
    number = np.where(mine, np.asarray(fields.pixel), -1).astype(np.int64)
    ring = mine & (np.asarray(fields.pixel_order) == "ring")
    number[ring] = healpix.ring_to_nested(number[ring], np.asarray(fields.nside)[ring])
    return number


def pixel_pairs(pixel: np.ndarray, order: np.ndarray, coarse: int) -> Iterator[tuple[np.ndarray, np.ndarray]]:
    """Yield (field, coarse pixel) arrays: the coarse pixels inside each pixel field, or the one it lies in."""
    for depth in np.unique(order):
        field = np.flatnonzero((pixel >= 0) & (order == depth))
        if depth > coarse:
            yield field, pixel[field] >> 2 * (depth - coarse)
        else:
            n_inside = 4 ** (coarse - depth)
            place = pixel[field][:, None] * n_inside + np.arange(n_inside)
            yield np.repeat(field, n_inside), place.ravel()


def circle_pairs(
    centre: np.ndarray, radius_deg: np.ndarray, mine: np.ndarray, coarse: int
) -> Iterator[tuple[np.ndarray, np.ndarray]]:
    """Yield (field, coarse pixel) arrays: every pixel a circle may touch, and a few that it does not.

    No point of a pixel is farther from its centre than 1.5 times its side (the square root of its area).
    """
    if not mine.any():
        return
    side_rad = np.sqrt(4 * np.pi / (12 * 4**coarse))
    lon, lat = healpix.healpix_to_lonlat(np.arange(12 * 4**coarse), 2**coarse, order="nested")
    pixels = unit_vectors(lon.to_value(u.deg), lat.to_value(u.deg))
    for field in np.flatnonzero(mine):
        reach = min(np.radians(radius_deg[field]) + 1.5 * side_rad, np.pi)
        place = np.flatnonzero(pixels @ centre[field] >= np.cos(reach))
        yield np.full(place.size, field), place


def unit_vectors(lon_deg: np.ndarray, lat_deg: np.ndarray) -> np.ndarray:
    """Return unit vectors (place, 3)."""
    lon, lat = np.radians(lon_deg), np.radians(lat_deg)
    return np.stack([np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)], axis=-1)


@cache
def rotation(from_frame: str, to_frame: str) -> np.ndarray:
    """Return the matrix (3, 3) that turns unit vectors of one frame into the other, as astropy turns the three axes."""
    axes = SkyCoord(CartesianRepresentation(np.eye(3)), frame=FRAMES[from_frame])
    return np.ascontiguousarray(axes.transform_to(FRAMES[to_frame]()).cartesian.xyz.value)
