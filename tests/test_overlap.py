"""Overlapping fields: found where sky, band and bins are shared, and only there."""

import time

import astropy.units as u
import numpy as np
import pytest
from astropy_healpix import lonlat_to_healpix
from numpy.testing import assert_array_equal

from starcount.survey import Survey, circle_fields, make_group, overlapping_fields, pixel_fields
from starcount.survey.frames import pixel_places, separation_deg

EDGES_MAG = np.array([10.0, 11.0, 12.0, 13.0])


def group(fields, name="g", band="G", edges_mag=EDGES_MAG, used=None, **colour):
    return make_group(name, band, edges_mag, fields, used=used, **colour)


def survey(*groups):
    return Survey("s", "", True, groups)


@pytest.mark.parametrize(("apart_deg", "overlap"), [(1.4999, True), (1.5001, False)])
def test_circles(apart_deg, overlap):
    """Circles of 1 and 0.5 deg overlap if less than 1.5 deg apart; also across l = 0 and a pole."""
    for l, b in (
        ([0.0, apart_deg], [0.0, 0.0]),
        ([359.3, apart_deg - 0.7], [0.0, 0.0]),
        ([0.0, 180.0], [89.5, 90.5 - apart_deg]),
    ):
        found = overlapping_fields(group(circle_fields(["a", "b"], l, b, [1.0, 0.5])))
        assert found == ([(("g", "a"), ("g", "b"))] if overlap else [])


def test_a_small_circle_inside_a_large_one():
    """A field whose centre is far from the large one's but inside it is found, whichever comes first."""
    one = circle_fields(["large", "small", "far"], [0.0, 25.0, 60.0], [0.0, 0.0, 0.0], [30.0, 0.1, 1.0])
    other = circle_fields(["small", "large"], [25.0, 0.0], [0.0, 0.0], [0.1, 30.0])
    assert overlapping_fields(group(one)) == [(("g", "large"), ("g", "small"))]
    assert overlapping_fields(group(other)) == [(("g", "small"), ("g", "large"))]


@pytest.mark.parametrize("order", ["ring", "nested"])
def test_the_pixels_of_a_sky_do_not_overlap(order):
    """All 768 pixels of nside 8 meet at their borders only."""
    fields = pixel_fields(np.arange(768).astype(str), 8, np.arange(768), "icrs", order)
    assert overlapping_fields(group(fields)) == []


def test_a_pixel_overlaps_its_ancestors_only():
    """Nested pixel 5 of nside 2 holds 20 to 23 of nside 4 (4 p to 4 p + 3) and no other."""
    coarse = group(pixel_fields(["c"], 2, [5], "galactic", "nested"), "coarse")
    fine = group(pixel_fields(np.arange(192).astype(str), 4, np.arange(192), "galactic", "nested"), "fine")
    assert overlapping_fields(survey(coarse, fine)) == [(("coarse", "c"), ("fine", str(p))) for p in range(20, 24)]


def test_circle_against_pixel_is_decided_by_the_border():
    """Circles around pixel corners and centres, judged by 100 x 100 points inside the pixel."""
    rng = np.random.default_rng(4)
    pixel = pixel_fields(["p"], 4, [37], "icrs", "nested")
    x, y = (z.ravel() for z in np.meshgrid(np.linspace(0.0, 1.0, 100), np.linspace(0.0, 1.0, 100)))
    places = pixel_places(4, 37, "icrs", "nested", x, y)
    n = 60
    l_deg, b_deg = pixel.l_deg + rng.uniform(-25.0, 25.0, n), pixel.b_deg + rng.uniform(-20.0, 20.0, n)
    circles = circle_fields(np.arange(n).astype(str), l_deg, b_deg, rng.uniform(1.0, 6.0, n))
    nearest = [separation_deg(*places, l, b).min() for l, b in zip(circles.l_deg, circles.b_deg, strict=True)]
    margin = nearest - circles.radius_deg
    pairs = overlapping_fields(survey(group(pixel, "p"), group(circles, "c")))
    found = {circle for (one, _), (_, circle) in pairs if one == "p"}
    # Where the border is missed by less than 1/16 of a side (1 deg) the answer is not promised.
    assert {str(i) for i in np.flatnonzero(margin < -0.5)} <= found
    assert found <= {str(i) for i in np.flatnonzero(margin < 0.1)}
    assert 5 < len(found) < n - 5


def test_pixels_of_two_frames():
    """A Galactic and an equatorial pixel that hold the same point overlap; antipodes do not."""
    one = group(pixel_fields(["a"], 16, [100], "galactic", "nested"), "one")
    centres = pixel_places(16, np.arange(3072), "icrs", "nested")
    nearest = np.argmin(separation_deg(*centres, one.fields.l_deg, one.fields.b_deg))
    same_place = pixel_fields(["b"], 16, [nearest], "icrs", "nested")
    assert overlapping_fields(survey(one, group(same_place, "two"))) == [(("one", "a"), ("two", "b"))]
    opposite = circle_fields(["b"], one.fields.l_deg + 180.0, -one.fields.b_deg, [1.0])
    assert overlapping_fields(survey(one, group(opposite, "two"))) == []


def test_other_bins_or_bands_do_not_overlap():
    """The same sky may be counted twice in bins that do not meet, or in two bands."""
    fields = circle_fields(["a"], [0.0], [50.0], [1.0])
    bright, faint = group(fields, "bright"), group(fields, "faint", edges_mag=np.array([13.0, 14.0]))
    assert overlapping_fields(survey(bright, faint)) == []
    assert overlapping_fields(survey(bright, group(fields, "v", band="V"))) == []
    half = group(fields, "half", edges_mag=np.array([12.5, 14.0]))
    assert overlapping_fields(survey(bright, half)) == [(("bright", "a"), ("half", "a"))]


def test_unused_bins_do_not_overlap():
    """Two fields of the same sky with no common used bin hold different stars."""
    fields = circle_fields(["a", "b"], [0.0, 0.1], [50.0, 50.0], [1.0, 1.0])
    used = np.array([[True, True, False], [False, False, True]])
    assert overlapping_fields(group(fields, used=used)) == []
    assert len(overlapping_fields(group(fields, used=used | [False, True, False]))) == 1


def in_colour(name, edges_colour_mag, colour=("BP", "RP"), used=None):
    field = circle_fields(["a"], [0.0], [50.0], [1.0])
    return group(field, name, colour=colour, edges_colour_mag=edges_colour_mag, used=used)


def test_bins_of_one_colour_must_meet_in_colour_too():
    """Blue and red bins hold different stars, half-open bins included; in another colour, or in none, they do not."""
    blue, red = in_colour("blue", [-np.inf, 1.0]), in_colour("red", [1.0, 1.5, np.inf])
    pair = [(("blue", "a"), ("red", "a"))]
    assert overlapping_fields(survey(blue, red)) == []
    assert overlapping_fields(survey(blue, in_colour("red", [0.9, np.inf]))) == pair
    assert overlapping_fields(survey(blue, in_colour("red", [1.0, 2.0], ("BP", "G")))) == pair
    assert overlapping_fields(survey(blue, group(blue.fields, "red"))) == pair


def test_used_bins_count_in_magnitude_and_colour():
    """Only bins in the same magnitude and colour, both used, hold the same stars: bin = 2 x m bin + colour bin."""
    edges, used = [0.0, 1.0, 2.0], np.zeros((1, 6), bool)
    used[0, 1] = True  # 10 to 11 mag, colours 1 to 2
    one = in_colour("one", edges, used=used)
    for b, meets in ((0, False), (1, True), (3, False)):
        other = np.zeros((1, 6), bool)
        other[0, b] = True
        assert bool(overlapping_fields(survey(one, in_colour("other", edges, used=other)))) == meets
    magnitudes = np.array([[False, True, True]])
    assert overlapping_fields(survey(one, group(one.fields, "plain", used=magnitudes))) == []
    assert overlapping_fields(survey(one, group(one.fields, "plain", used=~magnitudes))) != []


def test_a_whole_sky_is_fast():
    """3072 pixels against themselves and the same sky in fainter bins; 12 288 take 2 s on a free core."""
    fields = pixel_fields(np.arange(3072).astype(str), 16, np.arange(3072), "icrs", "nested")
    start = time.perf_counter()
    both = survey(group(fields, "bright"), group(fields, "faint", edges_mag=np.array([12.0, 14.0])))
    found = overlapping_fields(both)
    assert time.perf_counter() - start < 10.0
    assert_array_equal(len(found), 3072)


@pytest.mark.parametrize(("frame", "order"), [("icrs", "nested"), ("galactic", "ring")])
def test_a_small_circle_inside_a_pixel(frame, order):
    """Far from the pixel's centre and border alike, a circle is found by its own centre; outside it is not."""
    pixel = group(pixel_fields(["p"], 4, [37], frame, order), "p")
    inside = circle_fields(["c"], *pixel_places(4, np.array([37]), frame, order, 0.5, 0.2), [0.5])
    outside = circle_fields(["c"], pixel.fields.l_deg + 40.0, pixel.fields.b_deg, [0.5])
    assert overlapping_fields(survey(pixel, group(inside, "c"))) == [(("p", "p"), ("c", "c"))]
    assert overlapping_fields(survey(group(inside, "c"), pixel)) == [(("c", "c"), ("p", "p"))]
    assert overlapping_fields(survey(pixel, group(outside, "c"))) == []


@pytest.mark.parametrize("nside", [1, 4, 32])
def test_pixels_lie_within_their_bounds(nside):
    """All four corners of all pixels are within ``bound_deg`` of the centre, by which candidates are searched."""
    pixel = np.arange(12 * nside**2)
    fields = pixel_fields(pixel.astype(str), nside, pixel, "galactic", "ring")
    for x in (0.0, 1.0):
        for y in (0.0, 1.0):
            corner = pixel_places(nside, pixel, "galactic", "ring", x, y)
            assert np.all(separation_deg(fields.l_deg, fields.b_deg, *corner) < fields.bound_deg)


def test_ring_and_nested_numbers_are_one_sky():
    """A coarse pixel numbered by rings overlaps the four nested ones whose centres astropy-healpix puts into it."""
    coarse = group(pixel_fields(["c"], 2, [17], "galactic", "ring"), "coarse")
    fine = group(pixel_fields(np.arange(192).astype(str), 4, np.arange(192), "galactic", "nested"), "fine")
    parent = lonlat_to_healpix(fine.fields.l_deg * u.deg, fine.fields.b_deg * u.deg, 2, order="ring")
    expected = [(("coarse", "c"), ("fine", str(p))) for p in np.flatnonzero(parent == 17)]
    assert len(expected) == 4
    assert overlapping_fields(survey(coarse, fine)) == expected
