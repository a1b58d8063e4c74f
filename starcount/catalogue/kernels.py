"""Compiled counting: a block of stars through directions, magnitude bin, sky pixel, candidate fields.

All in one file: numba recompiles a cached function when its own file changes, not when a helper elsewhere does. The
functions of angles are free of branches, so that the loops over them run on whole vectors: 5 ns a star for both, where
calls of the C library take 100.
"""

import math

import numba
import numpy as np

OUTSIDE_BINS, NO_COLOUR, OUTSIDE_COLOURS, OUTSIDE_FIELDS, COUNTED = 1, 2, 3, 4, 5
"""How far a star came; 0 is a star without magnitude."""


EXACT = {"contract", "nsz", "arcp"}
"""Liberties of the compiler in the functions of angles; with reassociation the range reduction would lose digits."""

HALF_PI, HALF_PI_REST = 1.5707963267948966, 6.123233995736766e-17  # pi / 2 as a sum of two doubles
TAN_EIGHTH = 0.41421356237309503  # tan(pi / 8)

BLOCK = 512
"""Stars in a block: its directions, 20 kB, stay in the first cache."""


@numba.njit(cache=True, fastmath=EXACT, forceinline=True, error_model="numpy")
def sine_cosine(angle_rad):
    """Return sine and cosine to 3e-16 for a few turns: Taylor series after reduction to an eighth of a turn."""
    turns = np.floor(angle_rad * (2.0 / math.pi) + 0.5)
    r = (angle_rad - turns * HALF_PI) - turns * HALF_PI_REST
    w = r * r
    s = -1.0 / 1307674368000.0
    s = s * w + 1.0 / 6227020800.0
    s = s * w - 1.0 / 39916800.0
    s = s * w + 1.0 / 362880.0
    s = s * w - 1.0 / 5040.0
    s = s * w + 1.0 / 120.0
    s = s * w - 1.0 / 6.0
    s = r + r * w * s
    c = 1.0 / 20922789888000.0
    c = c * w - 1.0 / 87178291200.0
    c = c * w + 1.0 / 479001600.0
    c = c * w - 1.0 / 3628800.0
    c = c * w + 1.0 / 40320.0
    c = c * w - 1.0 / 720.0
    c = c * w + 1.0 / 24.0
    c = c * w - 0.5
    c = 1.0 + w * c
    quadrant = turns - 4.0 * np.floor(turns * 0.25)
    odd = (quadrant == 1.0) | (quadrant == 3.0)
    sine, cosine = (c if odd else s), (s if odd else c)
    return (-sine if quadrant >= 2.0 else sine), (-cosine if (quadrant == 1.0) | (quadrant == 2.0) else cosine)


@numba.njit(cache=True, fastmath=EXACT, forceinline=True, error_model="numpy")
def direction(y, x):
    """Return the angle of (x, y) in radians to 5e-16, 0 for (0, 0): Taylor series after reduction to pi / 8."""
    far, near = max(abs(x), abs(y)), min(abs(x), abs(y))
    far = max(far, 1e-300)
    steep = near > TAN_EIGHTH * far
    t = (near - far if steep else near) / (near + far if steep else far)
    w = t * t
    p = 1.0 / 39.0
    for n in range(37, 1, -2):
        p = 1.0 / n - w * p
    p = t - t * w * p
    p = p + 0.5 * HALF_PI if steep else p
    p = HALF_PI - p if abs(y) > abs(x) else p
    p = math.pi - p if x < 0.0 else p
    return -p if y < 0.0 else p


@numba.njit(cache=True, forceinline=True)
def spread(v):
    """Return an integer with a zero bit put before every bit of v (v < 2^29)."""
    v = (v | (v << 16)) & 0x0000FFFF0000FFFF
    v = (v | (v << 8)) & 0x00FF00FF00FF00FF
    v = (v | (v << 4)) & 0x0F0F0F0F0F0F0F0F
    v = (v | (v << 2)) & 0x3333333333333333
    return (v | (v << 1)) & 0x5555555555555555


@numba.njit(cache=True, forceinline=True, error_model="numpy")
def nested_pixel(order, sin_lat, cos_lat, lon_rad):
    """Return the NESTED HEALPix index at nside = 2^order (Gorski et al. 2005, ApJ 622, 759, sections 4 and 5).

    With both diagonal directions of a face as axes, a face is a unit square, and the cell along each axis is the
    integer part of nside times the coordinate. Belt and caps are both worked out and one is taken. The caps use
    cos_lat, which keeps its precision at the poles, in the place of sqrt(1 - |z|).
    """
    nside = 1 << order
    last = nside - 1
    quarter = lon_rad * (2.0 / math.pi)
    quarter -= 4.0 * np.floor(quarter * 0.25)

    along, across = nside * (0.5 + quarter), nside * 0.75 * sin_lat
    falling, rising = int(along - across), int(along + across)
    face_falling, face_rising = falling >> order, rising >> order
    face = face_falling & 3 if face_falling < face_rising else 8 + (face_rising & 3)
    face = 4 + (face_falling & 3) if face_falling == face_rising else face
    x, y = rising & last, last - (falling & last)

    cap = min(3, int(quarter))
    within = quarter - cap
    width = nside * cos_lat * math.sqrt(3.0 / (1.0 + abs(sin_lat)))
    cap_x, cap_y = min(last, int(within * width)), min(last, int((1.0 - within) * width))
    north = sin_lat > 0.0
    cap_x, cap_y = (last - cap_y if north else cap_x), (last - cap_x if north else cap_y)
    cap = cap if north else cap + 8

    in_belt = abs(sin_lat) <= 2.0 / 3.0
    face, x, y = (face if in_belt else cap), (x if in_belt else cap_x), (y if in_belt else cap_y)
    return (face << (2 * order)) + spread(x) + (spread(y) << 1)


@numba.njit(cache=True, nogil=True)
def bin_of(m, edges):
    """Return the bin with edges[bin] <= m < edges[bin + 1], or -1; the guess is right at once for equal bins."""
    n_bin = edges.size - 1
    if not (edges[0] <= m < edges[n_bin]):
        return -1
    j = min(n_bin - 1, int((m - edges[0]) / (edges[n_bin] - edges[0]) * n_bin))
    while m < edges[j]:
        j -= 1
    while m >= edges[j + 1]:
        j += 1
    return j


@numba.njit(cache=True, nogil=True)
def colour_bin_of(c, edges):
    """Return the same for edges that may begin with -inf and end with inf."""
    first, last = 0, edges.size - 1
    if edges[0] == -np.inf:
        if c < edges[1]:
            return 0
        first = 1
    if edges[last] == np.inf:
        if c >= edges[last - 1]:
            return last - 1
        last -= 1
    j = bin_of(c, edges[first : last + 1])
    return j + first if j >= 0 else -1


@numba.njit(cache=True, nogil=True)
def find_bins(m_mag, c_mag, use, edges, colour_edges, stage, place):
    """Fill stage (star,), how far each star comes by its magnitude and colour, and place, its bin or -1.

    Bins are numbered magnitude before colour; without a colour c_mag and colour_edges are empty.
    """
    for i in range(m_mag.size):
        seen = use[i] and not math.isnan(m_mag[i])
        place[i] = bin_of(m_mag[i], edges) if seen else -1
        stage[i] = (OUTSIDE_FIELDS if place[i] >= 0 else OUTSIDE_BINS) if seen else 0
    if colour_edges.size == 0:
        return
    for i in range(c_mag.size):
        if place[i] >= 0:
            k = -1 if math.isnan(c_mag[i]) else colour_bin_of(c_mag[i], colour_edges)
            place[i] = place[i] * (colour_edges.size - 1) + k if k >= 0 else -1
            stage[i] = OUTSIDE_FIELDS if k >= 0 else (NO_COLOUR if math.isnan(c_mag[i]) else OUTSIDE_COLOURS)


@numba.njit(cache=True, nogil=True, error_model="numpy")
def rotate(n_star, rotation, place):
    """Turn the first stars of place (5, star) into another frame."""
    for i in range(n_star):
        x, y, z = place[0, i], place[1, i], place[2, i]
        place[0, i] = rotation[0, 0] * x + rotation[0, 1] * y + rotation[0, 2] * z
        place[1, i] = rotation[1, 0] * x + rotation[1, 1] * y + rotation[1, 2] * z
        place[2, i] = rotation[2, 0] * x + rotation[2, 1] * y + rotation[2, 2] * z
    for i in range(n_star):
        x, y = place[0, i], place[1, i]
        place[3, i], place[4, i] = math.sqrt(x * x + y * y), direction(y, x)


@numba.njit(cache=True, nogil=True, error_model="numpy")
def locate(lon_rad, lat_rad, rotation, turn, order, place, index):
    """Fill place (5, star): unit vector in the table's frame, cosine of latitude, longitude; and the pixel index."""
    for i in range(lon_rad.size):
        sin_lat, cos_lat = sine_cosine(lat_rad[i])
        sin_lon, cos_lon = sine_cosine(lon_rad[i])
        place[0, i], place[1, i], place[2, i] = cos_lat * cos_lon, cos_lat * sin_lon, sin_lat
        place[3, i], place[4, i] = cos_lat, lon_rad[i]
    if turn:
        rotate(lon_rad.size, rotation, place)
    for i in range(lon_rad.size):
        index[i] = nested_pixel(order, place[2, i], place[3, i], place[4, i])


@numba.njit(cache=True, nogil=True, error_model="numpy")
def count(
    lon_rad, lat_rad, m_mag, c_mag, use, edges, colour_edges, rotation, turn, orders, first, candidate, shift, pixel,
    centre, cos_radius, counts, reached,
):  # fmt: skip
    """Add stars to counts (field, bin) and raise reached (star,) to how far each of them came.

    use (star,) bool: the others are passed over. Without a colour c_mag and colour_edges are empty. rotation (3, 3),
    applied where ``turn``: from the stars' frame to the table's. orders: (coarse, fine) HEALPix orders of the table;
    candidate[first[p]:first[p + 1]] are the fields that may hold stars of coarse pixel p. A field is a pixel (pixel >=
    0: equal to the fine index >> shift) or a circle (unit vector centre (field, 3), cos_radius).
    """
    coarse, fine = orders
    place, index = np.empty((5, BLOCK)), np.empty(BLOCK, np.int64)
    bins, stages = np.empty(BLOCK, np.int64), np.empty(BLOCK, np.uint8)
    for start in range(0, lon_rad.size, BLOCK):
        stop = min(start + BLOCK, lon_rad.size)
        find_bins(m_mag[start:stop], c_mag[start:stop], use[start:stop], edges, colour_edges, stages, bins)
        locate(lon_rad[start:stop], lat_rad[start:stop], rotation, turn, fine, place, index)
        for o in range(stop - start):
            stage, j = stages[o], bins[o]
            if j >= 0:
                coarse_index = index[o] >> (2 * (fine - coarse))
                for k in range(first[coarse_index], first[coarse_index + 1]):
                    f = candidate[k]
                    if pixel[f] >= 0:
                        inside = (index[o] >> shift[f]) == pixel[f]
                    else:
                        cosine = place[0, o] * centre[f, 0] + place[1, o] * centre[f, 1] + place[2, o] * centre[f, 2]
                        inside = cosine >= cos_radius[f]
                    if inside:
                        counts[f, j] += 1
                        stage = np.uint8(COUNTED)
            reached[start + o] = max(reached[start + o], stage)
