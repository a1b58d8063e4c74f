"""Observation model in magnitude: completeness and photometric error as a matrix from true cells to bins."""

from itertools import pairwise

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import quad
from scipy.stats import norm

from starcount.errors import InputError
from starcount.survey import Completeness, Observation, PhotometricError

EDGES_MAG = np.array([14.0, 15.0, 15.5, 17.0])
# Saturated at the bright end, fading at the faint one.
COMPLETENESS = Completeness(np.array([10.0, 14.0, 14.4, 15.8, 17.2, 22.0]), np.array([0.0, 0.2, 1.0, 0.95, 0.3, 0.0]))
ERROR = PhotometricError(np.array([12.0, 15.0, 18.0]), np.array([0.05, -0.02, -0.1]), np.array([0.03, 0.06, 0.2]))
SLOPE = 0.6 * np.log(10.0)


def cells(observation, edges_mag=EDGES_MAG):
    """Edges of true cells of 0.05 mag, which meet the bins', as far as stars come from."""
    bright, faint = observation.reach(edges_mag)
    return np.round(0.05 * np.arange(np.floor(bright / 0.05 + 1e-6), np.ceil(faint / 0.05 - 1e-6) + 1), 10)


def counted(observation, density):
    """Expected counts per bin: stars of a true density per mag through the response."""
    true_mag = cells(observation)
    stars = [quad(density, lo, hi, epsabs=0.0, epsrel=1e-10)[0] for lo, hi in pairwise(true_mag)]
    return np.array(stars) @ observation.magnitude_response(true_mag, EDGES_MAG)


def by_quadrature(completeness, error, density):
    """The same by definition: the integral over true magnitude of density x completeness x probability of the bin."""
    share = (lambda m: np.interp(m, completeness.m_mag, completeness.share)) if completeness else (lambda m: 1.0)

    def integrand(m, lo, hi):
        offset, scatter = error.at(m)
        return density(m) * share(m) * (norm.cdf((hi - m - offset) / scatter) - norm.cdf((lo - m - offset) / scatter))

    knots = np.arange(12.0, 20.0, 0.05)
    return [
        sum(quad(integrand, a, b, (lo, hi), epsabs=1e-9)[0] for a, b in pairwise(knots))
        for lo, hi in pairwise(EDGES_MAG)
    ]


def growing(m):
    """Counts that grow as in uniform space, tenfold in 1.67 mag."""
    return np.exp(SLOPE * (m - 15.0))


def test_perfect_observation_is_the_overlap():
    """Without curves a cell inside a bin is counted there, and one that an edge cuts is shared by its parts."""
    assert Observation().reach(EDGES_MAG) == (14.0, 17.0)
    response = Observation().magnitude_response(np.array([13.9, 14.5, 15.3, 15.4, 17.2]), EDGES_MAG)
    # 0.6 mag of which 0.5 in the first bin; 0.8 of which 0.5 and 0.3; inside; 1.8 of which 0.1 and 1.5.
    assert_allclose(response, [[5 / 6, 0, 0], [5 / 8, 3 / 8, 0], [0, 1, 0], [0, 1 / 18, 15 / 18]], atol=1e-12)


@pytest.mark.parametrize("completeness", [None, COMPLETENESS])
def test_against_quadrature(completeness):
    """Counts that grow fourfold per magnitude: 4e-4 is what uniform stars within true cells of 0.05 mag cost.

    Where completeness climbs by 0.8 in 0.4 mag, density and completeness grow together inside a true cell; that
    costs another 1.4 x 2 x 0.05^2 / 12 there. The rest is offset and scatter taken at the middle of a true cell.
    """
    got = counted(Observation(completeness, ERROR), growing)
    assert_allclose(got, by_quadrature(completeness, ERROR, growing), rtol=1e-3)


def test_uniform_stars_are_exact():
    """With as many stars at every magnitude and constant errors all is exact: 1e-6 is the cut at 5 scatters."""
    error = PhotometricError(np.array([0.0, 30.0]), np.array([0.07, 0.07]), np.array([0.15, 0.15]))
    got = counted(Observation(error=error), lambda m: 1.0)
    assert_allclose(got, np.diff(EDGES_MAG), rtol=1e-6)


def test_completeness_alone_is_its_mean_over_the_true_cell():
    """Mean of straight lines worked by hand: from 14.0 to 14.05 the curve climbs from 0.2 to 0.3."""
    response = Observation(COMPLETENESS).magnitude_response(cells(Observation(COMPLETENESS)), EDGES_MAG)
    assert_allclose(response[0], [0.25, 0.0, 0.0], rtol=1e-12)
    # Over the first bin: 0.4 mag at a mean of 0.6, then 0.6 mag from 1 down to 1 - 0.05 * 0.6 / 1.4.
    assert_allclose(response[:20, 0].mean(), 0.4 * 0.6 + 0.6 * (1.0 - 0.05 * 0.6 / 1.4 / 2.0), rtol=1e-12)


def test_a_pure_offset_moves_stars_to_the_fainter_bin():
    """Catalogued 0.25 mag too faint without scatter: a quarter of a bin of 1 mag lands in the next one."""
    error = PhotometricError(np.array([0.0, 30.0]), np.array([0.25, 0.25]), np.zeros(2))
    edges, observation = np.array([14.0, 15.0, 16.0]), Observation(error=error)
    true_mag = cells(observation, edges)
    response, width = observation.magnitude_response(true_mag, edges), np.diff(true_mag)
    within = (true_mag[:-1] >= 14.0) & (true_mag[1:] <= 15.0)
    assert_allclose(width[within] @ response[within], [0.75, 0.25], rtol=1e-12)
    assert_allclose(width @ response, [1.0, 1.0], rtol=1e-12)


def test_scatter_brings_more_stars_in_than_out():
    """Eddington (1913, MNRAS 73, 359): counts that grow as exp(s m) are raised by exp(s^2 sigma^2 / 2)."""
    sigma = 0.3
    error = PhotometricError(np.array([0.0, 30.0]), np.zeros(2), np.full(2, sigma))
    got = counted(Observation(error=error), growing)
    unblurred = np.diff(np.exp(SLOPE * (EDGES_MAG - 15.0))) / SLOPE
    # Uniform stars in true cells of 0.05 mag: (1.38 * 0.05)^2 / 12 = 4e-4.
    assert_allclose(got / unblurred, np.exp(SLOPE**2 * sigma**2 / 2.0), rtol=5e-4)


def test_no_star_is_counted_twice():
    """Every row of the response sums to at most the completeness of its cell, and nowhere is it negative."""
    observation = Observation(COMPLETENESS, ERROR)
    response = observation.magnitude_response(cells(observation), EDGES_MAG)
    assert response.min() >= 0.0
    assert response.sum(axis=1).max() <= 1.0 + 1e-12


def test_the_reach_is_five_scatters():
    """Stars land in the bins from as far as 5 scatters, those at their own magnitude; found in steps of 0.02 mag."""
    bright, faint = Observation(error=ERROR).reach(EDGES_MAG)
    assert faint + ERROR.at(faint)[0] - 5.0 * ERROR.at(faint)[1] == pytest.approx(17.0, abs=0.03)
    assert bright + ERROR.at(bright)[0] + 5.0 * ERROR.at(bright)[1] == pytest.approx(14.0, abs=0.03)


def test_tables_that_end_too_early_are_refused():
    """A completeness known to 16 mag says nothing about a bin to 17; the words say how far to go."""
    short = Completeness(np.array([10.0, 16.0]), np.ones(2))
    with pytest.raises(InputError, match=r"m from 10 to 16, but the bins reach from 14.00 to 17.00"):
        Observation(short).magnitude_response(EDGES_MAG, EDGES_MAG)
    with pytest.raises(InputError, match=r"the bins and the scatter into them reach from 13\.\d\d to 18\.\d\d"):
        Observation(short, ERROR).magnitude_response(EDGES_MAG, EDGES_MAG)
