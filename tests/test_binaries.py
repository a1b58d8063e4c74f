"""Unresolved binaries: systems for stars, and pairs that a survey splits."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from starcount.stars.binaries import resolved_gain, system_factor, unresolved_share

MAGNITUDES = np.arange(-8.0, 22.0, 0.5)


def test_systems_for_stars_returns_the_simulated_ratios():
    """Systems over stars of the binary simulation (multiplicities of Duchene & Kraus 2013): M_V 4-5 12599 / 13850, M_V
    6-7 16958 / 19618, M_V 12-14 169619 / 211805; 1 % is the simulation's own noise and the smoothing's."""
    assert_allclose(system_factor([4.5, 6.5, 13.0]), [12599 / 13850, 16958 / 19618, 169619 / 211805], rtol=0.01)


def test_systems_never_outnumber_stars():
    """A system is at least one star: 0.8 to 1 at every magnitude, also beyond the table."""
    assert (system_factor(MAGNITUDES) <= 1).all()
    assert (system_factor(MAGNITUDES) >= 0.8).all()


def test_ten_parsec_sample_has_the_census_factor():
    """The census multiplies its star-by-star rows (M_V 8.5 to 16) by 0.83, their mean."""
    assert_allclose(system_factor(np.arange(8.75, 16.25, 0.5)).mean(), 0.83, atol=0.01)


@pytest.mark.parametrize(("M_V", "low_au", "high_au"), [(4.8, 35, 60), (12.0, 3, 8)])
def test_half_of_the_pairs_are_closer_than_the_published_median(M_V, low_au, high_au):
    """Raghavan et al. 2010 put the median of solar-type pairs at 300 years, about 45 au; Duchene & Kraus 2013 that of M
    dwarfs at 5 au. Seen on the sky they are 1.26 times closer."""
    axis = np.geomspace(1, 1000, 2001)
    median_au = axis[np.searchsorted(unresolved_share(M_V, axis / 1.26), 0.5)]
    assert low_au < median_au < high_au


def test_share_of_wide_solar_type_pairs():
    """By hand: log P (days) of a pair of 1.5 solar masses with a = 1260 au is 7.12, 0.916 spreads beyond 5.03; so 18 %
    of the pairs look wider than 1000 au."""
    log_period = np.log10(365.25) + 1.5 * np.log10(1260) - 0.5 * np.log10(1.5)
    assert_allclose(log_period, 7.125, atol=0.001)
    assert_allclose(1 - unresolved_share(4.8, 1000.0), 0.179, atol=0.001)


def test_gain_goes_from_all_stars_to_all_systems():
    """At the Sun every pair is split (1 / b); beyond the widest pairs none is (1)."""
    assert_allclose(resolved_gain(MAGNITUDES, 0.0, 1.0), 1 / system_factor(MAGNITUDES), rtol=1e-12)
    assert_allclose(resolved_gain(MAGNITUDES, 1e9, 1.0), 1.0, atol=1e-3)


def test_gain_falls_with_distance_and_with_the_blur():
    """Only distance times resolution matters, and a wider one never splits more."""
    d_pc = np.geomspace(1, 1e4, 30)[:, None]
    gain = resolved_gain(MAGNITUDES, d_pc, 0.6)
    assert gain.shape == (30, MAGNITUDES.size)
    assert (np.diff(gain, axis=0) <= 0).all()
    assert (gain >= 1).all()
    assert_allclose(resolved_gain(MAGNITUDES, d_pc / 2, 1.2), gain, rtol=1e-12)


def test_pairs_between_the_two_kinds_are_blended():
    """Solar-type up to M_V = 8, M dwarfs from 10.5 with 84 % of the axes within one spread; between them, a blend."""
    one_spread_au = 5.3 * 10 ** (2 / 3 * 1.3) / 1.26
    assert_allclose(unresolved_share([10.5, 15.0], one_spread_au), 0.8413, atol=1e-4)
    assert_allclose(unresolved_share([0.0, 8.0], 1000.0), 0.821, atol=1e-3)
    log_median_au = np.array([2 / 3 * (5.03 - np.log10(365.25)) + np.log10(1.5) / 3, np.log10(5.3)])
    assert_allclose(unresolved_share(9.25, 10 ** log_median_au.mean() / 1.26), 0.5, atol=1e-9)
