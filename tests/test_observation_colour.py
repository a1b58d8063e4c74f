"""Observation model in colour: from true colour cells to colour bins, at true magnitudes; the bias of faint BP."""

import time

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy.integrate import quad
from scipy.stats import norm, truncnorm

from starcount.errors import InputError
from starcount.survey import ColourError, Completeness, FaintBP, Observation, PhotometricError
from starcount.survey.faint_BP import flux_ratio

CELLS_MAG = np.round(0.05 * np.arange(-30, 141), 10)
EDGES_MAG = np.concatenate([[-np.inf], np.round(np.arange(-0.5, 4.05, 0.1), 10), [np.inf]])
M_MAG, C_MAG = np.array([12.0, 15.0, 18.0, 21.0]), np.array([-1.0, 0.5, 3.0])
PLAIN = ColourError(M_MAG, np.array([0.0, 0.01, 0.02, 0.1]), np.array([0.02, 0.03, 0.08, 0.3]))
GRID = ColourError(
    M_MAG,
    np.array([[0.0, 0.0, 0.05], [0.0, 0.01, 0.1], [0.02, 0.0, -0.2], [0.05, 0.0, -0.4]]),
    np.array([[0.02, 0.02, 0.04], [0.03, 0.03, 0.06], [0.06, 0.07, 0.2], [0.2, 0.2, 0.5]]),
    C_MAG,
)
SEEN = Completeness(M_MAG, np.array([[1.0, 1.0, 1.0], [1.0, 1.0, 0.9], [1.0, 0.9, 0.5], [0.6, 0.5, 0.1]]), C_MAG)


def bilinear(m_nodes, c_nodes, table, m, c):
    """A table over magnitude and colour by two plain interpolations."""
    return np.interp(c, c_nodes, [np.interp(m, m_nodes, column) for column in table.T])


def by_quadrature(m, lo, hi, edge_lo, edge_hi):
    """Mean over a cell of completeness x probability of a bin, at one magnitude, by definition."""

    def integrand(c):
        offset, scatter = (bilinear(M_MAG, C_MAG, x, m, c) for x in (GRID.offset_mag, GRID.scatter_mag))
        landed = norm.cdf((edge_hi - c - offset) / scatter) - norm.cdf((edge_lo - c - offset) / scatter)
        return landed * bilinear(M_MAG, C_MAG, SEEN.share, m, c)

    return quad(integrand, lo, hi, epsabs=1e-10)[0] / (hi - lo)


def test_a_perfect_observation_is_the_overlap():
    """Cells of 0.05 mag fall into bins of 0.1 mag in pairs; open bins take everything beyond, closed ones nothing."""
    response = Observation().colour_response(np.array([15.0]), CELLS_MAG, EDGES_MAG)
    assert response.shape == (1, 170, 47)
    bins = np.searchsorted(EDGES_MAG, CELLS_MAG[:-1] + 0.025) - 1
    assert_array_equal(np.argmax(response[0], axis=1), bins)
    assert_allclose(response.sum(axis=2), 1.0, atol=1e-12)
    closed = Observation().colour_response(np.array([15.0]), CELLS_MAG, EDGES_MAG[1:-1])
    assert_allclose(closed, response[:, :, 1:-1], atol=1e-12)
    # Cells that an edge cuts in the middle are shared by halves.
    halved = Observation().colour_response(np.array([15.0]), CELLS_MAG + 0.025, EDGES_MAG)
    assert_allclose(halved[0, 21, 1:3], [0.5, 0.5], atol=1e-9)


def test_against_quadrature():
    """Errors and completeness that change with magnitude and colour, at and between the tables' nodes.

    The scatter is that of the middle of the cell. Where it changes by 0.05 mag per mag, as between the second and the
    third colour at 17.3 mag, that costs 0.05 x 0.05^2 / 12 x 0.4 / 0.066^2 = 1e-3 of the cell's stars.
    """
    observation = Observation(SEEN, colour_error=GRID)
    m_mag = np.array([12.0, 17.3, 20.0])
    response = observation.colour_response(m_mag, CELLS_MAG, EDGES_MAG)
    rng = np.random.default_rng(3)
    for k in range(m_mag.size):
        for i in rng.integers(0, 170, 8):
            for j in {*rng.integers(0, 47, 4), np.searchsorted(EDGES_MAG, CELLS_MAG[i]) - 1}:
                expected = by_quadrature(m_mag[k], *CELLS_MAG[i : i + 2], *EDGES_MAG[j : j + 2])
                assert response[k, i, j] == pytest.approx(expected, abs=1.2e-3)


def test_between_open_bins_every_counted_star_is_somewhere():
    """Over bins open at both ends the response sums to the completeness, 1 without one, and is never negative."""
    m_mag = np.array([12.0, 16.0, 21.0])
    for seen in (None, SEEN):
        response = Observation(seen, colour_error=GRID, faint_BP=FaintBP(40.0, "G")).colour_response(
            m_mag, CELLS_MAG, EDGES_MAG
        )
        total = np.ones((3, 170)) if seen is None else seen.in_cells(m_mag, CELLS_MAG)
        assert response.min() >= 0.0
        assert_allclose(response.sum(axis=2), total, atol=1e-12)
    middle = SEEN.at(m_mag, (CELLS_MAG[1:] + CELLS_MAG[:-1]) / 2.0)
    # Means of straight lines are the values in the middle, but in cells with a node inside: there are none.
    assert_allclose(total, middle, atol=1e-12)


def test_completeness_is_applied_once():
    """By magnitude alone it belongs to the response in magnitude; with a colour to that in colour, and only there."""
    bins, m_edges = np.array([15.0, 16.0]), np.array([15.0, 15.05])
    alone = Observation(Completeness(np.array([10.0, 20.0]), np.array([0.5, 0.5])))
    assert_allclose(alone.magnitude_response(m_edges, bins), 0.5)
    assert_allclose(alone.colour_response(np.array([15.0]), CELLS_MAG, EDGES_MAG).sum(axis=2), 1.0)
    assert_allclose(Observation(SEEN).magnitude_response(m_edges, bins), 1.0)


BIASED = {
    "error": Observation(colour_error=PLAIN),
    "error and completeness by colour": Observation(SEEN, colour_error=GRID),
    "faint BP": Observation(colour_error=PLAIN, faint_BP=FaintBP(40.0, "G")),
    "completeness by colour": Observation(SEEN),
}


@pytest.mark.parametrize("observation", BIASED.values(), ids=BIASED)
def test_the_response_is_straight_between_its_nodes(observation):
    """Interpolated between the nodes, the response is good to 1.5e-3, but for faint BP among the reddest stars (5e-3).

    A node's share is held to 7e-4 below each of a bin's two edges, at colours half a magnitude apart.
    """
    nodes = observation.colour_nodes_mag(13.0, 21.0)
    assert (nodes[0], nodes[-1]) == (13.0, 21.0)
    assert np.all(np.diff(nodes) > 0.04)
    m = np.linspace(13.0, 21.0, 331)
    at_nodes = observation.colour_response(nodes, CELLS_MAG, EDGES_MAG)
    weight = np.stack([np.interp(m, nodes, row) for row in np.eye(nodes.size)], axis=1)
    straight = np.tensordot(weight, at_nodes, axes=1)
    off = np.abs(straight - observation.colour_response(m, CELLS_MAG, EDGES_MAG))
    assert off.max() < (5e-3 if observation.faint_BP else 1.6e-3)
    assert off[:, CELLS_MAG[:-1] < 3.0].max() < 1.6e-3


@pytest.mark.parametrize("observation", [Observation(), Observation(Completeness(M_MAG, np.ones(4)))])
def test_one_node_where_nothing_depends_on_magnitude(observation):
    """A perfect colour needs one node, also where the completeness is a matter of magnitude alone."""
    assert_array_equal(observation.colour_nodes_mag(13.0, 21.0), [17.0])


def test_tables_must_reach_over_the_bins():
    """An error of the colour known to 18 mag says nothing about bins to 21."""
    short = ColourError(np.array([10.0, 18.0]), np.zeros(2), np.full(2, 0.1))
    observation = Observation(colour_error=short, error=PhotometricError(M_MAG, np.zeros(4), np.zeros(4)))
    with pytest.raises(InputError, match=r"m from 10 to 18, but the bins reach from 14.00 to 21.00"):
        observation.magnitude_response(np.array([14.0, 21.0]), np.array([14.0, 21.0]))


def test_flux_in_bp_is_that_of_the_sun():
    """M_G 4.67, M_BP 4.99, M_RP 4.17 (Casagrande & VandenBerg 2018, MNRAS 479, L102); 0.02 is their rounding and the
    scatter of stars about the mean flux excess."""
    for band, m in (("G", 4.67), ("RP", 4.17)):
        flux = FaintBP(40.0, band).flux_e_s([m], [0.82])[0, 0]
        assert 25.3385 - 2.5 * np.log10(flux) == pytest.approx(4.99, abs=0.02)


def test_the_bias_is_the_mean_of_a_cut_off_normal_distribution():
    """Mean of the transits above 1 electron per second, by scipy's truncated normal distribution, from 0.03 to 100
    electrons per second; to 1e-9 where that is still precise."""
    bias, m = FaintBP(30.0, "RP"), np.array([20.3, 21.0, 22.5, 25.0, 29.0])
    flux = bias.flux_e_s(m, [0.0])
    mean = truncnorm((1.0 - flux) / 30.0, np.inf, flux, 30.0).mean()
    assert_allclose(bias.offset_mag(m, [0.0]), -2.5 * np.log10(mean / flux), rtol=1e-7)


def test_the_bias_sets_in_where_the_catalogue_warns():
    """The known issues of Gaia EDR3 warn of BP fainter than 20.3: with the noise of a transit of a faint star, about 40
    electrons per second, it is under 0.01 mag there, and over 0.1 mag at 21."""
    offset = FaintBP(40.0, "RP").offset_mag(np.array([18.0, 20.3, 21.0]), [0.0])[:, 0]
    assert offset[0] == pytest.approx(0.0, abs=1e-6)
    assert -0.01 < offset[1] < -0.003
    assert -0.2 < offset[2] < -0.1


def test_biased_stars_land_in_bluer_bins():
    """At G = 20.7 stars of BP - RP = 1 are catalogued 0.18 mag too blue, at 15 as they are; the table adds its offset.

    The mean over bins of 0.01 mag, uniform inside, is exact; 2e-4 is the bend of the bias within a cell of 0.05 mag.
    """
    level = ColourError(np.array([10.0, 21.0]), np.full(2, 0.03), np.full(2, 0.1))
    bias, bins = FaintBP(40.0, "G"), np.linspace(-1.0, 3.0, 401)
    response = Observation(colour_error=level, faint_BP=bias).colour_response([15.0, 20.7], [0.975, 1.025], bins)
    mean = response[:, 0] @ (bins[1:] + bins[:-1]) / 2.0
    assert_allclose(mean, [1.03, 1.03 + bias.offset_mag([20.7], [1.0])[0, 0]], atol=2e-4)
    assert mean[1] == pytest.approx(0.85, abs=0.01)


def test_stars_whose_colours_are_squeezed_are_all_counted():
    """Where the offset falls as steeply as the colour rises, whole cells land on one point and none is lost."""
    level = ColourError(M_MAG, np.tile([2.0, -2.0], (4, 1)), np.zeros((4, 2)), np.array([-1.0, 3.0]))
    response = Observation(colour_error=level).colour_response(np.array([15.0]), CELLS_MAG, EDGES_MAG)
    # Catalogued at 1.0 whatever the colour: half below, half above that edge, by the width a cell is never under.
    assert_allclose(response.sum(axis=2), 1.0, atol=1e-12)
    assert_allclose(response[0, 20:80, 15:17].sum(axis=1), 1.0, atol=1e-6)


def test_sixty_responses_are_fast():
    """Cells of the whole colour axis at 33 nodes, moved sixty times by dust: 0.1 s on a free core."""
    observation = Observation(colour_error=PLAIN)
    nodes = observation.colour_nodes_mag(13.0, 21.0)
    observation.colour_response(nodes, CELLS_MAG, EDGES_MAG)
    start = time.thread_time()
    for k in range(60):
        observation.colour_response(nodes, CELLS_MAG + 0.05 * k, EDGES_MAG)
    assert time.thread_time() - start < 1.5


def test_flux_excess_in_its_three_pieces():
    """Riello et al. 2021, table 2, by hand: below BP - RP = 0.5, up to 4, beyond, and level from 7 on."""
    assert_allclose(flux_ratio(np.array([-0.5, 2.0, 5.0, 9.0])), [1.145543, 1.33492, 1.760257, 2.041331], atol=1e-6)
