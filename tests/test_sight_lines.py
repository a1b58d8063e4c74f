"""Sight lines: their mean over a field is that of the field, and their solid angle is its area."""

import time

import numpy as np
import pytest
from numpy.polynomial.legendre import leggauss
from numpy.testing import assert_allclose, assert_array_equal

from starcount.survey import circle_fields, pixel_fields, sight_lines
from starcount.survey.fields import cap_area_deg2
from starcount.survey.frames import pixel_places, separation_deg

# A round Galaxy for these tests alone: the Sun 8 kpc out and 0.02 kpc above the plane.
R_SUN_KPC, Z_SUN_KPC = 8.0, 0.02
LIMITS_KPC = (0.1, 0.3, 1.0, 3.0, 10.0)


def counts(l_deg, b_deg, limits_kpc=LIMITS_KPC):
    """Counts per sr to limits (limit, line) of a disc, h_R 2.6 and h_z 0.3 kpc, with a layer of 0.05 kpc."""
    l, b = np.radians(l_deg)[:, None], np.radians(b_deg)[:, None]
    node, weight = leggauss(30)
    totals = []
    for limit in limits_kpc:
        pieces = limit * np.array([0.0, 0.03, 0.1, 0.3, 0.6, 1.0])
        width = np.diff(pieces)[:, None] / 2.0
        d, dd = (pieces[:-1, None] + width * (1.0 + node)).ravel(), (width * weight).ravel()
        across = d * np.cos(b)
        R = np.sqrt(R_SUN_KPC**2 + across**2 - 2.0 * R_SUN_KPC * across * np.cos(l))
        z = np.abs(Z_SUN_KPC + d * np.sin(b))
        density = np.exp(-(R - R_SUN_KPC) / 2.6) * (np.exp(-z / 0.3) + np.exp(-z / 0.05))
        totals.append(density @ (d**2 * dd))
    return np.array(totals)


def mean_over_circle(l_deg, b_deg, radius_deg, n=48):
    """Mean counts over a cap by brute force: Gauss rules in latitude, cut at the plane, and in longitude.

    In its own frame a cap at the pole would have no such strips: these tests stay below |b| + r = 90.
    """
    l0, b0, r = np.radians([l_deg, b_deg, radius_deg])
    cuts = [-1.0, 1.0] if r <= abs(b0) else [-1.0, np.clip(-b0 / r, -1.0, 1.0), 1.0]
    node, weight = leggauss(n)
    along, along_weight = leggauss(24)
    total, share = 0.0, 0.0
    for low, high in zip(np.arcsin(cuts[:-1]), np.arcsin(cuts[1:]), strict=True):
        # The square towards both ends crowds the nodes at the plane.
        t = low + (high - low) * np.sin(np.pi / 4.0 * (1.0 + node)) ** 2
        dt = (high - low) * np.sin(np.pi / 2.0 * (1.0 + node)) * np.pi / 4.0 * weight
        b = b0 + r * np.sin(t)
        half = np.arccos(np.clip((np.cos(r) - np.sin(b0) * np.sin(b)) / (np.cos(b0) * np.cos(b)), -1.0, 1.0))
        w = (np.cos(b) * half * np.cos(t) * dt)[:, None] * along_weight
        l = l0 + half[:, None] * along
        total = total + counts(np.degrees(l.ravel()), np.degrees(np.repeat(b, along.size))) @ w.ravel()
        share += w.sum()
    return total / share


def mean_over_lines(fields):
    lines = sight_lines(fields)
    return counts(lines.l_deg, lines.b_deg) @ lines.omega_sr / lines.omega_sr.sum()


CIRCLES = [
    (0.0, 89.0, 0.9), (0.0, 75.0, 1.5), (120.0, -60.0, 8.0), (0.0, 45.0, 20.0), (180.0, 30.0, 0.5), (0.0, -20.0, 4.0),
    (0.0, 20.0, 13.0), (90.0, 10.0, 2.0), (0.0, 10.0, 8.0), (0.0, 5.0, 0.1), (180.0, -5.0, 2.5), (90.0, 2.0, 1.5),
    (0.0, 0.0, 0.2), (0.0, 0.3, 0.5), (90.0, 0.0, 1.0), (180.0, -1.0, 2.0), (0.0, 0.0, 4.0), (90.0, 5.0, 8.0),
]  # fmt: skip


@pytest.mark.parametrize(("l_deg", "b_deg", "radius_deg"), CIRCLES)
def test_counts_of_a_circle(l_deg, b_deg, radius_deg):
    """From bright to faint the counts of a circle are right to 1.5e-3 (the rule aims at 1e-3), with few lines."""
    fields = circle_fields(["f"], [l_deg], [b_deg], [radius_deg])
    assert_allclose(mean_over_lines(fields), mean_over_circle(l_deg, b_deg, radius_deg), rtol=1.5e-3)


@pytest.mark.parametrize(("l_deg", "b_deg", "radius_deg"), [(0.0, 0.0, 30.0), (90.0, 20.0, 30.0), (0.0, -2.0, 15.0)])
def test_counts_of_a_large_circle_across_the_plane(l_deg, b_deg, radius_deg):
    """The largest circles, which hold plane and bulge, are right to 5e-3; pixels do better."""
    fields = circle_fields(["f"], [l_deg], [b_deg], [radius_deg])
    assert_allclose(mean_over_lines(fields), mean_over_circle(l_deg, b_deg, radius_deg, 80), rtol=5e-3)


@pytest.mark.parametrize(("frame", "order"), [("galactic", "ring"), ("icrs", "nested")])
@pytest.mark.parametrize(("nside", "rtol"), [(8, 4e-3), (32, 2e-3), (128, 1e-3)])
def test_counts_of_pixels(nside, rtol, frame, order):
    """Pixels all over the sky against a 32 x 32 rule in each; the larger ones bend at HEALPix's own seams."""
    pixel = np.linspace(0, 12 * nside**2 - 1, 14).astype(int)
    node, weight = leggauss(32)
    x, y = ((1.0 + z.ravel()) / 2.0 for z in np.meshgrid(node, node))
    truth = [
        counts(*pixel_places(nside, p, frame, order, x, y), LIMITS_KPC[:4]) @ np.outer(weight, weight).ravel() / 4.0
        for p in pixel
    ]
    fields = pixel_fields(pixel.astype(str), nside, pixel, frame, order)
    lines = sight_lines(fields)
    each = counts(lines.l_deg, lines.b_deg, LIMITS_KPC[:4]) * lines.omega_sr
    got = np.add.reduceat(each, lines.first[:-1], axis=1) / np.add.reduceat(lines.omega_sr, lines.first[:-1])
    assert_allclose(got.T, truth, rtol=rtol)


def test_a_small_field_far_from_the_plane_has_one_line():
    """Half a degree at b = 45 needs its centre only, and a pixel of nside 128 there too."""
    circle, pixel = circle_fields(["f"], [30.0], [45.0], [0.5]), pixel_fields(["p"], 128, [30_000], "galactic", "ring")
    for fields in (circle, pixel):
        lines = sight_lines(fields)
        assert_array_equal(lines.first, [0, 1])
        assert_allclose([lines.l_deg[0], lines.b_deg[0]], [fields.l_deg[0], fields.b_deg[0]], rtol=1e-13)


@pytest.mark.parametrize("radius_deg", [0.1, 1.0, 3.0, 10.0, 40.0])
@pytest.mark.parametrize("b_deg", [-90.0, -45.0, -8.0, 0.0, 3.0, 30.0, 90.0])
def test_lines_lie_in_the_circle_and_balance(radius_deg, b_deg):
    """No line leaves its circle, and their mean direction is the centre, (1 + cos r) / 2 long as a cap's is.

    The strips across the plane find that mean to 1e-3 of the radius.
    """
    fields = circle_fields(["f"], [77.0], [b_deg], [radius_deg])
    lines = sight_lines(fields)
    assert np.all(separation_deg(lines.l_deg, lines.b_deg, 77.0, b_deg) < radius_deg + 1e-9)
    l, b = np.radians(lines.l_deg), np.radians(lines.b_deg)
    vectors = np.stack([np.cos(b) * np.cos(l), np.cos(b) * np.sin(l), np.sin(b)])
    l0, b0 = np.radians(77.0), np.radians(b_deg)
    centre = np.array([np.cos(b0) * np.cos(l0), np.cos(b0) * np.sin(l0), np.sin(b0)])
    length = (1.0 + np.cos(np.radians(radius_deg))) / 2.0 if lines.l_deg.size > 1 else 1.0
    mean = vectors @ lines.omega_sr / lines.omega_sr.sum()
    assert_allclose(mean, length * centre, atol=1e-3 * np.radians(radius_deg))


def test_solid_angles_sum_to_the_areas():
    """Each field's shares sum to its area in steradians, (pi / 180)^2 per deg2, also where a pixel is partly masked."""
    circles = circle_fields(["a", "b", "c"], [0.0, 10.0, 350.0], [0.0, 4.0, -80.0], [2.0, 3.0, 0.2])
    pixels = pixel_fields(["p", "q"], 8, [5, 300], "icrs", "nested", area_deg2=[40.0, 53.0])
    for fields in (circles, pixels):
        lines = sight_lines(fields)
        sums = np.add.reduceat(lines.omega_sr, lines.first[:-1])
        assert_allclose(sums, fields.area_deg2 * (np.pi / 180.0) ** 2, rtol=1e-13)
    assert_allclose(circles.area_deg2[0], cap_area_deg2(2.0))


def test_order_of_the_fields_is_kept():
    """Fields of several rules keep their lines together and in order; each alone gives the same lines."""
    together = circle_fields(
        ["a", "b", "c", "d"], [0.0, 50.0, 100.0, 150.0], [80.0, 0.0, 2.0, 70.0], [0.3, 5.0, 1.0, 0.4]
    )
    lines = sight_lines(together)
    for i, (l, b, r) in enumerate(zip(together.l_deg, together.b_deg, together.radius_deg, strict=True)):
        alone = sight_lines(circle_fields(["x"], [l], [b], [r]))
        mine = slice(lines.first[i], lines.first[i + 1])
        assert_array_equal(lines.b_deg[mine], alone.b_deg)
        assert_array_equal(lines.omega_sr[mine], alone.omega_sr)


def test_all_sky_in_pixels_is_fast():
    """12 288 pixels of nside 32 in the other frame take well under a second (0.03 s measured)."""
    fields = pixel_fields(np.arange(12288).astype(str), 32, np.arange(12288), "icrs", "nested")
    start = time.perf_counter()
    lines = sight_lines(fields)
    assert time.perf_counter() - start < 1.0
    assert lines.first[-1] < 8 * 12288
