"""Extinction along sight lines, and in bands."""

import time
from itertools import pairwise
from types import SimpleNamespace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import quad

from starcount.dust import D0, DUST, A_V_mag
from starcount.errors import InputError
from starcount.galaxy import read_galaxy

# A_V of the disc with these parameters by the trapezium rule on 40 000 nodes: l, b, then 0.5, 1, 2, 4, 8, 8.2, 20 kpc.
TABLE = """
0       0      0.3955  0.9843  2.4075  6.5814 24.8089 26.2873 55.0145
359.944 -0.046 0.3963  0.9880  2.4252  6.6826 25.6665 27.2236 58.1616
1       -3.9   0.4181  0.9157  1.7156  2.7550  3.6504  3.6728  3.8127
30      0      0.3912  0.9639  2.3018  5.8632 16.0122 16.5399 30.4559
90      0      0.3652  0.8487  1.7906  3.4940  5.8926  5.9775  7.8004
180     0      0.3386  0.7433  1.4155  2.3469  3.2544  3.2801  3.5782
30      3      0.3434  0.7617  1.4755  2.4937  3.3840  3.4018  3.5566
90      10     0.2401  0.4142  0.5419  0.5789  0.5809  0.5809  0.5809
220     -10    0.2889  0.4832  0.6106  0.6417  0.6430  0.6430  0.6430
110     28     0.1216  0.1535  0.1588  0.1589  0.1589  0.1589  0.1589
35      -50    0.0897  0.0995  0.1000  0.1000  0.1000  0.1000  0.1000
0       90     0.0445  0.0467  0.0468  0.0468  0.0468  0.0468  0.0468
0       -90    0.0566  0.0594  0.0594  0.0594  0.0594  0.0594  0.0594
"""


def d0(l_deg, b_deg, d_kpc):
    """D0 along one line to a number of distances."""
    return D0.to_distance(np.array([l_deg]), np.array([b_deg]), np.atleast_2d(np.asarray(d_kpc, float)))[0]


def sky(dust, b_deg=30.0, l_deg=40.0, A_V=np.nan, profile="", n_line=2):
    """One field of a few sight lines."""
    fields = SimpleNamespace(
        name=np.array(["F1"]),
        b_deg=np.array([b_deg]),
        dust=np.array([dust]),
        A_V_mag=np.array([A_V]),
        profile=np.array([profile]),
    )
    lines = SimpleNamespace(
        l_deg=np.full(n_line, l_deg), b_deg=b_deg + 0.2 * np.arange(n_line), first=np.array([0, n_line])
    )
    return fields, lines


DISTANCES = np.tile([0.1, 0.5, 1.0, 3.0, 30.0], (2, 1))
PROFILES = {"cloud": (np.array([0.2, 0.5, 1.0]), np.array([0.0, 0.6, 0.7]))}


def quadrature(l_deg, b_deg, d_kpc):
    """The integral of the printed formula, piece by piece between its kinks, independent of the model's grid."""
    l, b = np.radians([l_deg, b_deg])

    def kappa(s):
        R = np.sqrt((8.2 - s * np.cos(b) * np.cos(l)) ** 2 + (s * np.cos(b) * np.sin(l)) ** 2)
        disc = np.exp(-(R - 8.2) / 4.0 - abs(s * np.sin(b) + 0.015) / 0.125)
        return (R < 20.0) * 1.10 * disc / (1 + np.exp(-(s - 0.125) / 0.020))

    edge = (8.2 * np.cos(l) + np.sqrt(20.0**2 - (8.2 * np.sin(l)) ** 2)) / np.cos(b)
    kinks = [-0.015 / np.sin(b) if b < 0 else 0.0, 8.2 * np.cos(l) / np.cos(b), edge]
    cuts = sorted({0.0, d_kpc, *(s for s in (0.125, 0.25, 0.5, 1.0, 2.0, 5.0, 12.0, *kinks) if 0 < s < d_kpc)})
    return sum(quad(kappa, s0, s1, epsabs=1e-13, epsrel=1e-11, limit=200)[0] for s0, s1 in pairwise(cuts))


@pytest.mark.parametrize("row", TABLE.strip().splitlines())
def test_d0_agrees_with_its_table(row):
    """Thirteen sight lines to 0.2 %, which is what the table's digits and step are good for."""
    l_deg, b_deg, *A_V = map(float, row.split())
    assert_allclose(d0(l_deg, b_deg, [0.5, 1, 2, 4, 8, 8.2, 20]), A_V, rtol=2e-3)


@pytest.mark.parametrize(
    ("l_deg", "b_deg"),
    [
        (0, 0),
        (0.3, 0.2),
        (359.5, -0.1),
        (2, -2),
        (20, -1),
        (95, -25.4),
        (60, 5),
        (100, -8),
        (180, 0),
        (250, -35),
        (300, 60),
    ],
)
def test_d0_agrees_with_quadrature(l_deg, b_deg):
    """Adaptive quadrature of the formula at any distance; 2e-5 is better than counts need, and is lost when the grid
    misses a kink."""
    d_kpc = [0.05, 0.11, 0.137, 0.3, 0.77, 2.9, 7.9, 8.1, 8.3, 8.6, 13.0, 30.0]
    assert_allclose(d0(l_deg, b_deg, d_kpc), [quadrature(l_deg, b_deg, d) for d in d_kpc], rtol=2e-5)


def test_d0_is_fast_enough():
    """12 288 lines of 120 distances in less than 3 s."""
    rng = np.random.default_rng(1)
    l_deg, b_deg = rng.uniform(0, 360, 12288), np.degrees(np.arcsin(rng.uniform(-1, 1, 12288)))
    d_kpc = np.tile(10 ** (np.linspace(-1, 24, 120) / 5 - 2), (12288, 1))
    start = time.perf_counter()
    A_V = D0.to_distance(l_deg, b_deg, d_kpc)
    assert time.perf_counter() - start < 3.0
    assert np.isfinite(A_V).all()


def test_about_thirty_magnitudes_to_the_galactic_centre():
    """Common practice: about 30 mag of visual extinction, one photon in 10^12, over some 26 000 light years.

    Stars give about 30 (Nogueras-Lara et al. 2020), a near-infrared law 21 to 39; D0 says 26.
    """
    assert 25 < d0(0, 0, read_galaxy().R0_kpc)[0] < 32
    assert_allclose(10 ** (-0.4 * 30), 1e-12, rtol=1e-9)
    assert_allclose(read_galaxy().R0_kpc * 3261.56, 26_000, rtol=0.03)  # light years in a kiloparsec


def test_poles():
    """A_V 0.047 north and 0.059 south; the map of Schlegel, Finkbeiner & Davis 1998 has 0.03-0.07 and 0.04-0.06."""
    north, south = d0(0, 90, 50)[0], d0(0, -90, 50)[0]
    assert_allclose([north, south], [0.047, 0.059], atol=0.0005)
    assert 0.03 < north < 0.07
    assert 0.04 < south < 0.06


def test_baades_window_is_known_to_be_too_dusty():
    """D0 knows no clearings: 3.65 mag where Gonzalez et al. 2012 adopt 1.7, a factor of 2.1 that users must know."""
    assert_allclose(d0(1.0, -3.9, 8.0)[0], 3.65, rtol=2e-3)
    assert_allclose(d0(1.0, -3.9, 8.0)[0] / 1.7, 2.15, rtol=0.02)


@pytest.mark.parametrize("name", DUST)
def test_no_model_falls_with_distance(name):
    """Every model of the table is finite, never negative and never falls along a line."""
    fields, lines = sky(name, A_V=0.4, profile="cloud")
    A_V = A_V_mag(fields, lines, DISTANCES, PROFILES)
    assert A_V.shape == DISTANCES.shape
    assert np.isfinite(A_V).all()
    assert (A_V >= 0).all()
    assert (np.diff(A_V, axis=1) >= -1e-12).all()


def test_each_field_has_its_own_model():
    """Fields of different models in one survey get what each would get alone, whatever their order."""
    constant, other = sky("constant", A_V=0.3), sky("constant", A_V=0.1)
    parts = [constant, sky("D0", b_deg=5.0), sky("anchored", b_deg=-20.0, A_V=0.5), other]
    columns = ("name", "b_deg", "dust", "A_V_mag", "profile")
    fields = SimpleNamespace(**{c: np.concatenate([getattr(f, c) for f, _ in parts]) for c in columns})
    lines = SimpleNamespace(**{c: np.concatenate([getattr(s, c) for _, s in parts]) for c in ("l_deg", "b_deg")})
    lines.first = np.arange(5) * 2
    alone = np.concatenate([A_V_mag(*part, DISTANCES) for part in parts])
    assert_allclose(A_V_mag(fields, lines, np.tile(DISTANCES, (4, 1))), alone, rtol=1e-12)


def test_constant_is_the_same_at_every_distance():
    """A screen at the Sun."""
    assert_allclose(A_V_mag(*sky("constant", A_V=0.3), DISTANCES), 0.3)


def test_anchored_reaches_its_total_in_the_shape_of_d0():
    """Far away the field's total on every line; half of D0's dust means half of the total."""
    fields, lines = sky("anchored", b_deg=12.0, A_V=2.0)
    A_V = A_V_mag(fields, lines, DISTANCES)
    assert_allclose(A_V[:, -1], 2.0, rtol=1e-9)
    assert_allclose(A_V[0] / 2.0, d0(40.0, 12.0, DISTANCES[0]) / d0(40.0, 12.0, 100.0), rtol=1e-9)


def test_profile_passes_its_nodes_and_goes_on_as_d0():
    """The nodes are met, the Sun is at 0, and beyond the last one D0's increments are added."""
    fields, lines = sky("profile", b_deg=5.0, profile="cloud", n_line=1)
    A_V = A_V_mag(fields, lines, np.array([[0.0, 0.1, 0.2, 0.5, 1.0, 2.0, 9.0]]), PROFILES)[0]
    assert_allclose(A_V[:5], [0.0, 0.0, 0.0, 0.6, 0.7], atol=1e-12)
    near, far = d0(40.0, 5.0, [1.0, 9.0])
    assert_allclose(A_V[6] - 0.7, far - near, rtol=1e-9)


@pytest.mark.parametrize(
    ("field", "profiles", "message"),
    [
        ({"dust": "constant"}, {}, "field F1: dust 'constant' has A_V = nan; expected a finite A_V >= 0 mag"),
        ({"dust": "anchored", "A_V": -1.0}, {}, "field F1: dust 'anchored' has A_V = -1"),
        ({"dust": "anchored", "A_V": 30.0, "b_deg": 1.5}, {}, r"'anchored' at b = 1.5 deg; expected \|b\| >= 2"),
        ({"dust": "D1"}, {}, "no dust model called 'D1'; known: D0, anchored, constant, profile"),
        ({"dust": "profile"}, PROFILES, "field F1: dust 'profile' without a profile"),
        ({"dust": "profile", "profile": "x"}, PROFILES, "no dust profile called 'x'; known: cloud"),
        ({"dust": "profile", "profile": "x"}, {"x": ([1, 1], [0, 1])}, "expected rising ones"),
        ({"dust": "profile", "profile": "x"}, {"x": ([1, 2], [1, 0])}, "none falling"),
        ({"dust": "profile", "profile": "x"}, {"x": ([0, 2], [1, 2])}, "at the Sun is 1 mag; expected 0"),
        ({"dust": "profile", "profile": "x"}, {"x": ([], [])}, "at least one row"),
        ({"dust": "profile", "profile": "x"}, {"x": ([1, np.nan], [1, 2])}, "finite distances"),
    ],
)
def test_entries_a_model_cannot_work_with_are_refused(field, profiles, message):
    """The error names the field or profile, what was given and what is expected."""
    with pytest.raises(InputError, match=message):
        A_V_mag(*sky(**field), DISTANCES, profiles)
