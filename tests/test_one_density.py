"""One reference window: the same sky counted in V and in G has the same density of stars.

The sky is made of the stars of the functions counted in V; its G magnitudes follow from them along the loci. The fit in
G knows only the functions counted in G, made from another census: agreement is not built in.
"""

from dataclasses import replace

import numpy as np
import pytest
import simulated_fits as sim
from numpy.testing import assert_allclose

from starcount import stars

DENSITY = "census.density_pc3"
TRUTH = 0.0105
"""Of the default Galaxy."""

FLOOR = 0.02
"""Scatter of the simulated counts beyond Poisson noise, from bin to bin."""


@pytest.fixture(scope="module")
def in_V():
    """The fields in V; what they expect is the sky."""
    return sim.prepared("V")


@pytest.fixture(scope="module")
def in_G():
    """The fields in G, with the functions counted in G."""
    return sim.prepared("G")


@pytest.fixture(scope="module")
def G_of_the_same_stars():
    """Counts (field, bin) expected in G of the stars that the functions in V hold."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setitem(stars.BANDS, "G", replace(stars.BANDS["G"], reference="V"))
        return sim.prepared("G").groups[0].expected()


def test_functions_of_both_bands_expect_the_same_counts(in_G, G_of_the_same_stars):
    """5 % in every bin of every field: each census row in the window is good to 8 % by its own Poisson noise."""
    assert_allclose(in_G.groups[0].expected(), G_of_the_same_stars, rtol=0.05)


def test_counts_alone_give_one_density(in_V, in_G, G_of_the_same_stars):
    """Without census, curves and noise: V returns the truth, G to 1.5 times the error that noise would make (5 %).

    The functions in G hold 2 to 3 % fewer stars than those in V, and the degeneracy of density and height makes 7 % of
    that.
    """
    skies = (in_V.groups[0].expected(), G_of_the_same_stars)
    V, G = (
        sim.fit_each(forward, [np.round(sky)], lf_curve=False, likelihood="poisson")[0]
        for forward, sky in zip((in_V, in_G), skies, strict=True)
    )
    assert_allclose(V.values[DENSITY], TRUTH, rtol=0.005)
    assert 0.03 < G.errors[DENSITY] / TRUTH < 0.08
    assert abs(G.pull(DENSITY, TRUTH)) < 1.5


@pytest.mark.slow
def test_fits_with_curves_and_census_give_one_density(in_V, in_G, G_of_the_same_stars):
    """Fits as users make them, to their modes: within 2.5 of their errors of the truth, 3 % (an error) of one another.

    Both lean on the census, whose rows do not scatter here: what separates them is the noise of their counts and what
    the curves have to mend.
    """
    found = [
        sim.fit(sim.with_counts(forward, sim.draw(sky, seed, FLOOR)))
        for seed, forward, sky in ((1, in_V, in_V.groups[0].expected()), (2, in_G, G_of_the_same_stars))
    ]
    for one in found:
        assert abs(one.pull(DENSITY, TRUTH)) < 2.5
        assert one.errors[DENSITY] < 0.05 * TRUTH
        assert abs(one.pull("thin.h_z_kpc", 0.30)) < 2.5
    assert_allclose(found[0].values[DENSITY], found[1].values[DENSITY], rtol=0.03)
