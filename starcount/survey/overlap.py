"""Which fields count the same stars: a fit would take them as independent."""

import astropy.units as u
import numpy as np
from astropy_healpix import healpix_to_lonlat, lonlat_to_healpix
from scipy.spatial import cKDTree

from starcount.survey.bins import SAME_EDGE_MAG
from starcount.survey.fields import Fields
from starcount.survey.frames import icrs_from_galactic, pixel_places, separation_deg, unit_vectors
from starcount.survey.groups import Group, Survey

_BORDER_POINTS = 16
"""Points along each side of a pixel where its border is compared with circles and with pixels of another frame."""
_TOUCHING = 1.0 - 1e-9
"""Circles that only touch, but for rounding, do not overlap."""

Pair = tuple[tuple[str, str], tuple[str, str]]


def overlapping_fields(survey: Survey | Group) -> list[Pair]:
    """Pairs of fields, each as (group, field), that share sky and a used bin of the same band.

    Circles overlap where their centres are closer than the sum of the radii; pixels of one frame by
    their place in the hierarchy. A circle against a pixel, and pixels of two frames, are decided by
    points on the borders, which may miss a corner smaller than 1/16 of a side.
    """
    groups = survey.groups if isinstance(survey, Survey) else (survey,)
    pairs = []
    for i, one in enumerate(groups):
        for other in groups[i:]:
            if one.band == other.band:
                first, second = _sharing_sky(one.fields, other.fields, same=one is other)
                both = _sharing_bins(one, other, first, second)
                names = zip(one.fields.name[first[both]], other.fields.name[second[both]], strict=True)
                pairs += [((one.name, str(a)), (other.name, str(b))) for a, b in names]
    return pairs


def _sharing_bins(one: Group, other: Group, first, second) -> np.ndarray:
    """Whether pairs of fields have used bins that hold the same stars, (pair,).

    Bins of one colour must overlap in it too. A group without colour, or with another one, counts stars of every
    colour of ours.
    """
    along_m = _common(one.edges_mag, other.edges_mag)
    if one.colour == other.colour is not None:
        along_c = _common(one.edges_colour_mag, other.edges_colour_mag)
    else:
        along_c = np.ones((one.n_bin // len(along_m), other.n_bin // along_m.shape[1]))
    used = one.used.reshape(-1, *(len(x) for x in (along_m, along_c))).astype(float)
    touched = np.einsum("fmc,cd->fmd", used, along_c, optimize=True)
    touched = np.einsum("fmd,mn->fnd", touched, along_m, optimize=True).reshape(len(used), -1) > 0.0
    return np.any(touched[first] & other.used[second], axis=1)


def _common(edges_mag: np.ndarray, other_mag: np.ndarray) -> np.ndarray:
    """1 where bins (bin, other bin) overlap, else 0."""
    overlap = np.minimum(edges_mag[1:, None], other_mag[1:]) - np.maximum(edges_mag[:-1, None], other_mag[:-1])
    return (overlap > SAME_EDGE_MAG).astype(float)


def _sharing_sky(one: Fields, other: Fields, same: bool) -> tuple[np.ndarray, np.ndarray]:
    """Rows of one and of the other that overlap on the sky, (pair,) each."""
    first, second = _near(one, other)
    if same:
        first, second = first[first < second], second[first < second]
    pixels = one.is_pixel[first].astype(int) + other.is_pixel[second]
    overlap = np.zeros(first.size, dtype=bool)
    circles = pixels == 0
    overlap[circles] = _circles(one, other, first[circles], second[circles])
    alike = (pixels == 2) & (one.pixel_frame[first] == other.pixel_frame[second])
    overlap[alike] = _same_frame(one, other, first[alike], second[alike])
    for k in np.flatnonzero(~circles & ~alike):
        overlap[k] = _by_border(one, other, first[k], second[k]) or _by_border(other, one, second[k], first[k])
    return first[overlap], second[overlap]


def _near(one: Fields, other: Fields) -> tuple[np.ndarray, np.ndarray]:
    """Pairs of rows whose bounding circles meet; searched from the larger one, so that few are looked at."""
    reach = one.bound_deg, other.bound_deg
    places = unit_vectors(one.l_deg, one.b_deg), unit_vectors(other.l_deg, other.b_deg)
    forward = _no_larger(places[0], reach[0], places[1], reach[1])
    backward = _no_larger(places[1], reach[1], places[0], reach[0])
    pairs = np.concatenate([forward, backward[:, ::-1]])
    return tuple(np.unique(pairs, axis=0).T) if len(pairs) else (np.zeros(0, int), np.zeros(0, int))


def _no_larger(places, reach_deg, other_places, other_reach_deg) -> np.ndarray:
    """Pairs (pair, 2) of a row and a row of the other that is no larger and near enough to meet it."""
    chord = 2.0 * np.sin(np.radians(np.minimum(2.0 * reach_deg, 180.0)) / 2.0) + 1e-9
    found = cKDTree(other_places).query_ball_point(places, chord)
    first = np.repeat(np.arange(len(places)), [len(rows) for rows in found])
    second = np.array([row for rows in found for row in rows], dtype=np.int64)
    return np.stack([first, second], axis=1)[other_reach_deg[second] <= reach_deg[first]]


def _circles(one: Fields, other: Fields, first, second) -> np.ndarray:
    apart = separation_deg(one.l_deg[first], one.b_deg[first], other.l_deg[second], other.b_deg[second])
    return apart < (one.radius_deg[first] + other.radius_deg[second]) * _TOUCHING


def _same_frame(one: Fields, other: Fields, first, second) -> np.ndarray:
    """Pixels overlap where one is an ancestor of the other (or the other itself)."""
    nside, other_nside = one.nside[first], other.nside[second]
    coarse = np.minimum(nside, other_nside)
    return _ancestor(_nested(one, first), nside, coarse) == _ancestor(_nested(other, second), other_nside, coarse)


def _ancestor(pixel, nside, coarse) -> np.ndarray:
    return pixel // (nside // coarse) ** 2


def _nested(fields: Fields, rows) -> np.ndarray:
    pixel, nside = fields.pixel[rows], fields.nside[rows]
    ring = fields.pixel_order[rows] == "ring"
    nested = pixel.copy()
    if np.any(ring):
        centre = healpix_to_lonlat(pixel[ring], nside[ring], order="ring")
        nested[ring] = lonlat_to_healpix(*centre, nside[ring], order="nested")
    return nested


def _by_border(one: Fields, other: Fields, i: int, j: int) -> bool:
    """Whether the centre or the border of field i of one comes into field j of the other."""
    l_deg, b_deg = one.l_deg[i : i + 1], one.b_deg[i : i + 1]
    if one.is_pixel[i]:
        border = _border(one, i)
        l_deg, b_deg = (np.concatenate(pair) for pair in zip((l_deg, b_deg), border, strict=True))
    return bool(np.any(_inside(other, j, l_deg, b_deg)))


def _border(fields: Fields, i: int) -> tuple[np.ndarray, np.ndarray]:
    along = np.arange(_BORDER_POINTS) / _BORDER_POINTS
    # A hair inside, so that neighbours do not meet on their common border.
    low, high = np.full_like(along, 1e-6), np.full_like(along, 1.0 - 1e-6)
    x, y = np.concatenate([along, high, 1.0 - along, low]), np.concatenate([low, along, high, 1.0 - along])
    x, y = np.clip(x, 1e-6, 1.0 - 1e-6), np.clip(y, 1e-6, 1.0 - 1e-6)
    return pixel_places(fields.nside[i], fields.pixel[i], fields.pixel_frame[i], fields.pixel_order[i], x, y)


def _inside(fields: Fields, j: int, l_deg, b_deg) -> np.ndarray:
    """Whether directions (Galactic, deg) lie in field j."""
    if not fields.is_pixel[j]:
        apart = separation_deg(l_deg, b_deg, fields.l_deg[j], fields.b_deg[j])
        return apart < fields.radius_deg[j] * _TOUCHING
    return _pixel_at(fields, j, l_deg, b_deg) == fields.pixel[j]


def _pixel_at(fields: Fields, j: int, l_deg, b_deg) -> np.ndarray:
    if fields.pixel_frame[j] == "icrs":
        l_deg, b_deg = icrs_from_galactic(l_deg, b_deg)
    return lonlat_to_healpix(l_deg * u.deg, b_deg * u.deg, int(fields.nside[j]), order=str(fields.pixel_order[j]))
