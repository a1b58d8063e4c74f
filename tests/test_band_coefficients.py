"""Extinction in bands against the published table, the published polynomials and integrals made elsewhere."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from starcount import dust
from starcount.errors import UnknownName
from starcount.stars.bands import BANDS

A_OVER_E = {
    "B": 3.626, "V": 2.742, "I": 1.505,
    "SDSS g": 3.303, "SDSS r": 2.285, "SDSS i": 1.698, "SDSS z": 1.263,
    "PS1 g": 3.172, "PS1 r": 2.271, "PS1 i": 1.682, "PS1 z": 1.322, "PS1 y": 1.087,
    "LSST g": 3.237, "LSST r": 2.273, "LSST i": 1.684, "LSST z": 1.323, "LSST y": 1.088,
    "J": 0.723, "H": 0.460, "Ks": 0.310,
}  # fmt: skip
"""Schlafly & Finkbeiner 2011, Table 6, R_V = 3.1 (J, H, Ks: the IRSA dust extinction service): A / E(B-V)."""

F99 = {
    "B": 1.317, "I": 0.5625, "SDSS u": 1.568, "SDSS g": 1.224, "SDSS r": 0.848, "SDSS i": 0.6305, "SDSS z": 0.474,
    "PS1 g": 1.1795, "PS1 r": 0.845, "PS1 i": 0.625, "PS1 z": 0.492, "PS1 y": 0.411,
    "LSST u": 1.529, "LSST g": 1.197, "LSST r": 0.844, "LSST i": 0.624, "LSST z": 0.492, "LSST y": 0.403,
    "J": 0.270, "H": 0.170, "Ks": 0.115, "G": 0.884, "BP": 1.096, "RP": 0.614,
}  # fmt: skip
"""A_band / A_V of a black body of 7000 K through the law of Fitzpatrick 1999 and the bands' own transmission curves."""

BY_TEMPERATURE = {
    "B": (1.2621, 1.2935, 1.312), "V": (0.9862, 1.0017, 1.0106), "I": (0.5824, 0.5884, 0.5918),
    "SDSS u": (1.5016, 1.5556, 1.5708), "SDSS g": (1.1769, 1.2055, 1.225), "SDSS r": (0.86, 0.8686, 0.8738),
    "SDSS z": (0.493, 0.4974, 0.4998), "PS1 g": (1.134, 1.1633, 1.1833), "PS1 y": (0.4274, 0.4288, 0.4296),
    "LSST u": (1.4612, 1.5111, 1.5222), "LSST g": (1.144, 1.1785, 1.2016), "J": (0.2756, 0.2771, 0.278),
    "Ks": (0.1072, 0.1074, 0.1075), "G": (0.7391, 0.8585, 0.9569), "BP": (0.9894, 1.0715, 1.1395),
    "RP": (0.6069, 0.6342, 0.65),
}  # fmt: skip
"""A_band for thin dust of unit column: black bodies of 3500, 5800 and 10 000 K, law of Gordon et al. 2023."""

EDR3 = {
    "G": (0.259021858973784, 0.93676111876298, -0.437446499585492, 0.0783508476444952, -0.00136127433235224,
          0.000797222688660053, -2.52364537395233e-05, -0.029981504413869, 0.00555506017434798, 0.000402778419603886),
    "BP": (0.888088914696666, 0.11318390480077, 0.0846337732558566, -0.0371265818793239, -0.00296140793334905,
           0.000538660562947277, -1.31018008013512e-05, -0.0164152179931537, 0.00323902299833464, 0.000169011297620409),
    "RP": (0.382719668454633, 0.505895415656219, -0.314981478333036, 0.0665302085130136, -0.00383780468169498,
           6.50490784002505e-05, 1.57894227640801e-06, -0.00348740736346628, 0.00110877159426768,
           -1.8313141658225e-05),
}  # fmt: skip
"""Gaia EDR3 extinction law, main sequence, in X = Teff / 5040 K and A_0: 1, X, X2, X3, A, A2, A3, XA, AX2, XA2."""


def gaia_polynomial(band: str, Teff_K: float, A_0_mag: float) -> float:
    """A_band / A_0 by the published polynomial."""
    x, a = Teff_K / 5040.0, A_0_mag
    return float(np.dot(EDR3[band], (1, x, x**2, x**3, a, a**2, a**3, x * a, a * x**2, x * a**2)))


def test_every_band_has_coefficients_and_no_other():
    """Stars can be counted in exactly the bands the dust knows."""
    for band in BANDS:
        assert dust.band_coefficients(band).shape == (len(dust.TEMPERATURES_K),)
    with pytest.raises(UnknownName, match="SDSS w"):
        dust.band_coefficients("SDSS w")


@pytest.mark.parametrize("band", A_OVER_E)
def test_flat_bands_are_those_of_the_published_table(band):
    """A_b / E(B-V) over that of Landolt V, to the rounding of three decimals."""
    assert_allclose(dust.band_coefficients(band), A_OVER_E[band] / 2.742, atol=6e-4)


@pytest.mark.parametrize("band", F99)
def test_integrals_over_the_transmission_curves_agree(band):
    """5 %: 2 % is Landolt V against Bessell V; the Gaia rows are of another law, behind 1 mag, of 5800 K not 7000 K."""
    assert_allclose(dust.band_coefficients(band)[1], F99[band], rtol=0.05)


@pytest.mark.parametrize("band", EDR3)
def test_Gaia_bands_are_the_published_polynomials_behind_one_magnitude(band):
    """Three temperatures at A_0 = 1 mag; the table has three decimals."""
    expected = [gaia_polynomial(band, T, 1.0) for T in dust.TEMPERATURES_K]
    assert_allclose(dust.band_coefficients(band), expected, atol=6e-4)


@pytest.mark.parametrize("band", BY_TEMPERATURE)
def test_bands_without_temperatures_change_by_less_than_3_per_cent(band):
    """Independent integrals: one number is kept only where it is good to 3 %; the others rise as the integrals do."""
    coefficients, integrals = dust.band_coefficients(band), np.array(BY_TEMPERATURE[band])
    if np.ptp(coefficients) == 0:
        assert np.abs(integrals / integrals[1] - 1).max() < 0.03
    else:
        # 6 %: the Gaia rows are for dust of 1 mag and another law; the rise with temperature is what is compared.
        assert_allclose(coefficients / coefficients[1], integrals / integrals[1], rtol=0.06)
        assert np.all(np.diff(coefficients) > 0)


def test_temperatures_are_told_apart_only_where_needed():
    """One node for griz and the near infrared, three as soon as a Gaia band or u takes part."""
    assert dust.extinction_temperatures(["SDSS g", "SDSS r", "Ks", "V"]).tolist() == [5800.0]
    for band in ("G", "BP", "RP", "SDSS u", "LSST u"):
        assert_allclose(dust.extinction_temperatures(["SDSS r", band]), dust.TEMPERATURES_K)


def test_the_caller_cannot_change_the_table():
    """Each call returns its own array."""
    dust.band_coefficients("G")[:] = 0.0
    assert dust.band_coefficients("G")[1] > 0.8
