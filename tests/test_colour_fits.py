"""What colours do for a fit of the Galaxy: simulated surveys in magnitude, and in magnitude and BP - RP.

Simulated, as no deep colour counts are at hand.
"""

import numpy as np
import pytest
import simulated_fits as sim

THIN, THICK = "thin.h_z_kpc", "thick.h_z_kpc"
DENSITY = "census.density_pc3"
COLOURS = np.array([-np.inf, 0.6, 0.9, 1.3, 1.8, 2.4, np.inf])
FLOOR = 0.02
TRUTH = {THIN: 0.27, THICK: 0.95, "thick.share": 0.09, "halo.q": 0.60}
"""What is drawn: off the centres of the priors, by 0.4 to 0.7 of their widths."""


@pytest.fixture(scope="module")
def in_magnitude():
    """The fields in G."""
    return sim.prepared("G")


@pytest.fixture(scope="module")
def in_colour():
    """The same fields and bins of G, and six bins of BP - RP."""
    return sim.prepared("G", ("BP", "RP"), COLOURS)


@pytest.fixture(scope="module")
def foreseen(in_magnitude, in_colour):
    """The errors that counts alone would have at the default Galaxy: (magnitude, magnitude and colour).

    Poisson noise and 2 % a bin, functions known, no priors and no census.
    """
    return [sim.foreseen(forward, FLOOR) for forward in (in_magnitude, in_colour)]


def test_colour_breaks_the_degeneracy_of_density_and_height(foreseen):
    """A forecast with analytic functions, 8 such fields, three classes: 0.027 kpc become 0.002; correlation -0.99.

    Another galaxy, other functions and another limit: errors within a factor of 2, their ratio below 1/5. Six bins of
    colour leave -0.88 of the correlation here.
    """
    magnitude, colour = foreseen
    assert 0.5 < magnitude.errors[THIN] / 0.027 < 2.0
    assert 0.5 < colour.errors[THIN] / 0.0021 < 2.0
    assert colour.errors[THIN] < magnitude.errors[THIN] / 5.0
    pair = sim.PARAMETERS.index(DENSITY), sim.PARAMETERS.index(THIN)
    assert magnitude.correlations[pair] < -0.95
    assert colour.correlations[pair] > -0.92


def test_colour_narrows_every_parameter(foreseen):
    """Counts summed over colour know less: every error is smaller with colours, most by a factor of 2 and more."""
    magnitude, colour = foreseen
    ratios = np.array([colour.errors[name] / magnitude.errors[name] for name in sim.PARAMETERS])
    assert ratios.max() < 1.0
    assert np.median(ratios) < 0.5


def pulls(forward, n: int, first_seed: int) -> np.ndarray:
    """(fitted - true) / error of fits of n simulated skies."""
    expected = forward.groups[0].expected(TRUTH)
    skies = (sim.draw(expected, seed) for seed in range(first_seed, first_seed + n))
    found = sim.fit_each(forward, skies, lf_curve=False, likelihood="poisson")
    return np.array([[one.pull(name, TRUTH[name]) for name in (THIN, THICK)] for one in found])


def check(pulls: np.ndarray) -> None:
    """No bias and errors of the right size, within 3.5 standard errors of both: pulls (sky, parameter)."""
    n = len(pulls)
    assert np.all(np.abs(pulls.mean(axis=0)) < 3.5 / np.sqrt(n))
    assert np.all(np.abs(np.log(pulls.std(axis=0))) < 3.5 / np.sqrt(2 * n))


def test_heights_come_back_from_magnitudes_and_colours(in_colour):
    """Eight simulated skies."""
    check(pulls(in_colour, 8, 0))


@pytest.mark.slow
def test_heights_come_back_from_many_skies(in_colour):
    """Forty simulated skies."""
    check(pulls(in_colour, 40, 1000))
