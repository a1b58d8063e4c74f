"""Sight lines: as many directions in a field, with weights, as its size and latitude need.

The rule was measured on counts to a limiting distance of 0.1 to 10 kpc without dust (which would
only shorten them) of an exponential disc (h_R 2.6, h_z 0.3 kpc) with an equally dense layer of
h_z 0.05 kpc. What decides is q = sin(r) / sin|b|: the counts of such discs go as 1/sin^3|b|, so one
line errs by about 1.5 q^2. Fields that touch the plane have a kink at b = 0 and are cut there.
"""

from dataclasses import dataclass

import numpy as np
from numpy.polynomial.legendre import leggauss

from starcount.constants import DEG2_SR
from starcount.survey.fields import Fields
from starcount.survey.frames import pixel_places, turned

# Largest q, rings, lines per ring.
_RINGS = ((0.02, 1, 1), (0.13, 1, 3), (0.45, 2, 5), (0.7, 3, 7), (np.inf, 5, 11))
# Circles across the plane are cut there, if larger than the first limit: largest radius (deg), strips on each
# side of the plane, lines along each strip.
_STRIPS_FROM_DEG = 0.4
_STRIPS = ((8.0, 14, 4), (np.inf, 16, 10))
# Largest q, lines along each side of a pixel.
_PIXEL_SIDES = ((0.02, 1), (0.2, 2), (0.4, 3), (0.6, 4), (0.75, 6))
# For pixels that touch the plane: largest circle-equivalent radius (deg), lines along each side.
_PLANE_SIDES = ((1.2, 6), (4.0, 10), (np.inf, 16))


@dataclass(frozen=True, eq=False)
class SightLines:
    """Directions with their shares of the solid angle, all fields in one table.

    ``l_deg, b_deg, omega_sr`` (line,); the lines of field i are ``first[i]:first[i + 1]``, ``first``
    (field + 1,). The shares of a field sum to its area.
    """

    l_deg: np.ndarray
    b_deg: np.ndarray
    omega_sr: np.ndarray
    first: np.ndarray


def sight_lines(fields: Fields) -> SightLines:
    """The sight lines of all fields, in the order of the fields."""
    rules = list(_rules(fields))
    lines = np.zeros(len(fields), dtype=np.int64)
    for rows, _, b_deg, _ in rules:
        lines[rows] = b_deg.shape[1]
    first = np.concatenate([[0], np.cumsum(lines)])
    columns = np.empty((3, first[-1]))
    for rows, l_deg, b_deg, share in rules:
        places = first[rows][:, None] + np.arange(b_deg.shape[1])
        omega_sr = share * (fields.area_deg2[rows] * DEG2_SR)[:, None]
        columns[:, places] = l_deg, b_deg, omega_sr
    return SightLines(*columns, first)


def _rules(fields: Fields):
    """Sets of fields that share a rule: rows (field,), then l, b, share of the area (field, line)."""
    reach_deg = fields.reach_deg
    # A billionth stands for the plane itself, where q would be infinite.
    q = np.sin(np.radians(reach_deg)) / np.maximum(np.abs(np.sin(np.radians(fields.b_deg))), 1e-9)
    circle, crossing = ~fields.is_pixel, (reach_deg > _STRIPS_FROM_DEG) & (reach_deg >= np.abs(fields.b_deg))
    kind = _first_below(q, [limit for limit, *_ in _RINGS])
    for k in np.unique(kind[circle & ~crossing]):
        yield _placed(fields, _rings, circle & ~crossing & (kind == k), *_RINGS[k][1:])
    size = _first_below(reach_deg, [limit for limit, *_ in _STRIPS])
    for k in np.unique(size[circle & crossing]):
        yield _placed(fields, _strips, circle & crossing & (size == k), *_STRIPS[k][1:])
    side = _pixel_sides(q, reach_deg)
    for frame, order, n in sorted(set(zip(fields.pixel_frame, fields.pixel_order, side, strict=True))):
        same = (fields.pixel_frame == frame) & (fields.pixel_order == order) & (side == n) & ~circle
        if np.any(same):
            yield _inside_pixels(fields, same, frame, order, n)


def _first_below(values, limits) -> np.ndarray:
    return np.searchsorted(limits, values, side="left")


def _pixel_sides(q, reach_deg) -> np.ndarray:
    """Lines along each side of a pixel, (field,)."""
    off_plane = np.array([n for _, n in _PIXEL_SIDES] + [0])[_first_below(q, [limit for limit, _ in _PIXEL_SIDES])]
    on_plane = np.array([n for _, n in _PLANE_SIDES])[_first_below(reach_deg, [limit for limit, _ in _PLANE_SIDES])]
    return np.where(off_plane > 0, np.minimum(off_plane, on_plane), on_plane)


def _placed(fields: Fields, rule, chosen, *counts):
    rows = np.flatnonzero(chosen)
    place = (np.radians(x[rows])[:, None] for x in (fields.l_deg, fields.b_deg, fields.radius_deg))
    l, b, share = rule(*place, *counts)
    return rows, turned(np.degrees(l)), np.degrees(b), share


def _rings(l0, b0, r, n_ring: int, n_around: int):
    """Gauss-Legendre rings in the cosine of the angle from the centre, equal steps around each.

    Exact for polynomials in the plane of the cap up to degree min(2 n_ring - 1, n_around - 1).
    """
    node, weight = leggauss(n_ring)
    ring, step = (x.ravel() for x in np.indices((n_ring, n_around)))
    # Half (1 - cos r) by sin^2 of half the angle; a single ring of one line is the centre itself.
    half = np.sin(r / 2.0) ** 2 * (1.0 + node[ring]) / 2.0
    angle = 2.0 * np.arcsin(np.sqrt(half)) if n_around > 1 else np.zeros_like(r)
    # Azimuths start in the east: counts change with b, not with l, and then the first term that an odd
    # number of lines misses is zero. Every other ring is turned by half a step.
    around = 2.0 * np.pi * (step + 0.5 * (ring % 2)) / n_around + np.pi / 2.0
    sin_b = np.sin(b0) * np.cos(angle) + np.cos(b0) * np.sin(angle) * np.cos(around)
    east = np.sin(around) * np.sin(angle)
    inward = np.cos(b0) * np.cos(angle) - np.sin(b0) * np.sin(angle) * np.cos(around)
    b = np.arcsin(np.clip(sin_b, -1.0, 1.0))
    return l0 + np.arctan2(east, inward), b, np.broadcast_to(weight[ring] / (2.0 * n_around), b.shape)


def _strips(l0, b0, r, n_across: int, n_along: int):
    """Strips of latitude on both sides of the plane, finest at the plane; a Gauss rule along each.

    With b = b_edge sin^2 t the lines crowd where the thin layers are, and the length of the strips,
    which goes as the square root of the distance from the edge of the circle, is smooth in t.
    """
    node, weight = leggauss(n_across)
    along, along_weight = leggauss(n_along)
    t = np.pi / 4.0 * (1.0 + node)
    edges = (b0 + r, b0 - r)
    b = np.concatenate([edge * np.sin(t) ** 2 for edge in edges], axis=1)
    height = np.concatenate([np.abs(edge) * np.sin(2.0 * t) * weight for edge in edges], axis=1)
    half = np.arccos(np.clip((np.cos(r) - np.sin(b0) * np.sin(b)) / (np.cos(b0) * np.cos(b)), -1.0, 1.0))
    area = height * np.cos(b) * half
    share = (area / area.sum(axis=1, keepdims=True))[:, :, None] * along_weight / 2.0
    l = l0[:, :, None] + half[:, :, None] * along
    b = np.broadcast_to(b[:, :, None], share.shape)
    return tuple(x.reshape(len(l0), -1) for x in (l, b, share))


def _inside_pixels(fields: Fields, chosen, frame: str, order: str, n: int):
    """A Gauss product rule over the pixel's own equal-area square: far fewer lines than equal sub-pixels."""
    rows = np.flatnonzero(chosen)
    node, weight = leggauss(n)
    x, y = (z.ravel() for z in np.meshgrid((1.0 + node) / 2.0, (1.0 + node) / 2.0))
    l_deg, b_deg = pixel_places(fields.nside[rows, None], fields.pixel[rows, None], frame, order, x, y)
    return rows, l_deg, b_deg, np.broadcast_to(np.outer(weight, weight).ravel() / 4.0, b_deg.shape)
