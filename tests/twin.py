"""A plain, slow, independent twin of the forward model: textbook formulas and scipy's adaptive quadrature.

It shares with the package the input tables (luminosity functions, loci, parameter values) and nothing else: positions
come from astropy's Galactocentric frame, laws and the dust disc are written out again.
"""

from itertools import pairwise

import astropy.units as u
import numpy as np
from astropy.coordinates import Galactic, Galactocentric
from scipy.integrate import cumulative_simpson, quad_vec
from scipy.interpolate import PchipInterpolator
from scipy.special import ndtr

D_MAX_KPC = 100.0
_DUST_R0, _DUST_ZS = 8.2, 0.015


def galactocentric(l_deg, b_deg, d_kpc, R0_kpc, z0_kpc):
    """R, phi (0 at the Sun, growing with rotation) and z from astropy."""
    frame = Galactocentric(galcen_distance=R0_kpc * u.kpc, z_sun=z0_kpc * u.kpc)
    here = Galactic(l=l_deg * u.deg, b=b_deg * u.deg, distance=np.atleast_1d(d_kpc) * u.kpc).transform_to(frame)
    x, y, z = (c.to_value(u.kpc) for c in (here.x, here.y, here.z))
    return np.hypot(x, y), np.arctan2(y, -x), z


def disc(R, phi, z, theta, sun):
    """Relative to the Sun: exp(-R/h_R) and exp, sech or sech^2 in z."""

    def shape(R, z):
        h_R, h_z, kind = theta["h_R_kpc"], theta["h_z_kpc"], theta["vertical"]
        vertical = {0: lambda x: np.exp(-x), 1: lambda x: np.cosh(x / 2) ** -2.0, 2: lambda x: 1 / np.cosh(x)}[kind]
        return np.exp(-R / h_R) * vertical(np.minimum(np.abs(z) / h_z, 1400.0))

    return shape(R, z) / shape(*sun)


def halo(R, phi, z, theta, sun):
    """Relative to the Sun: (R^2 + z^2/q^2 + a^2)^(-gamma/2)."""

    def shape(R, z):
        return (R**2 + (z / theta["q"]) ** 2 + theta["r_core_kpc"] ** 2) ** (-theta["gamma"] / 2)

    return shape(R, z) / shape(*sun)


def bar(R, phi, z, theta, sun):
    """Per pc^3 for one star in all: the boxy Gaussian over its integral, 6.5725 pi x0 y0 z0."""
    a = np.radians(theta["alpha_deg"])
    x, y = -R * np.cos(phi), R * np.sin(phi)
    X, Y = (-x * np.cos(a) + y * np.sin(a)) / theta["a_kpc"], (-x * np.sin(a) - y * np.cos(a)) / theta["b_kpc"]
    r2 = np.sqrt((X**2 + Y**2) ** 2 + (z / theta["c_kpc"]) ** 4)
    return np.exp(-r2 / 2) / (20.6482 * theta["a_kpc"] * theta["b_kpc"] * theta["c_kpc"] * 1e9)


LAWS = {"disc": disc, "halo": halo, "bar": bar, "uniform": lambda R, phi, z, theta, sun: np.ones_like(R)}


def dust_disc_A_V(l_deg, b_deg):
    """The exponential dust disc with an empty Local Bubble: a function of distance, integrated on a dense grid."""
    l, b = np.radians(l_deg), np.radians(b_deg)
    s = np.concatenate([np.linspace(0, 1, 8001), np.geomspace(1, D_MAX_KPC, 8001)[1:]])
    R = np.sqrt((_DUST_R0 - s * np.cos(b) * np.cos(l)) ** 2 + (s * np.cos(b) * np.sin(l)) ** 2)
    kappa = 1.10 * np.exp(-(R - _DUST_R0) / 4.0 - np.abs(s * np.sin(b) + _DUST_ZS) / 0.125)
    kappa = np.where(R < 20.0, kappa, 0.0) / (1 + np.exp(-(s - 0.125) / 0.020))
    total = cumulative_simpson(kappa, x=s, initial=0.0)
    return lambda d_kpc: np.interp(d_kpc, s, total)


def tilted(l_deg, b_deg, d_kpc, R0_kpc, z0_kpc):
    """R, phi and z by a rotation matrix: fast enough for a quadrature, and compared with astropy in the tests."""
    l, b = np.radians(l_deg), np.radians(b_deg)
    away = np.array([d_kpc * np.cos(b) * np.cos(l) - R0_kpc, d_kpc * np.cos(b) * np.sin(l), d_kpc * np.sin(b)])
    t = np.arcsin(z0_kpc / R0_kpc)
    x, y, z = np.array([[np.cos(t), 0, np.sin(t)], [0, 1, 0], [-np.sin(t), 0, np.cos(t)]]) @ away
    return np.hypot(x, y), np.arctan2(y, -x), z


def layer_density(galaxy, row, R, phi, z):
    """Stars of the window per pc^3 of a layer, laws written again."""
    values, amplitudes = galaxy.values, galaxy.amplitudes(galaxy.values)
    z0 = values["sun.z0_kpc"]
    component, layer = galaxy.layers[row]
    theta = {p.name: values[f"{component.name}.{p.name}"] for p in component.law.parameters}
    theta |= {name: theta[name] * ratio for name, ratio in layer.ratios.items()} | dict(layer.settings)
    sun = (np.sqrt(galaxy.R0_kpc**2 - z0**2), z0)
    return amplitudes[component.name] * LAWS[component.law.name](R, phi, z, theta, sun)


def expected(galaxy, table, M_edges_mag, l_deg, b_deg, area_deg2, edges_mag, A_per_A_V):
    """Expected counts (bin,) along one sight line, by adaptive quadrature over the distance modulus.

    ``table`` (layer, temperature, cell) holds the stars, ``A_per_A_V`` (temperature,) their extinction.
    """
    z0 = galaxy.values["sun.z0_kpc"]
    # Between the edges of the cells the cumulative function is smooth; a chord would lie above it, by 2e-4 of a bin.
    total = np.concatenate([np.zeros((*table.shape[:2], 1)), np.cumsum(table, axis=2)], axis=2)
    below = PchipInterpolator(M_edges_mag, total, axis=2)
    A_V = dust_disc_A_V(l_deg, b_deg)

    def per_mu(mu):
        d = 10 ** (mu / 5 - 2)
        R, phi, z = tilted(l_deg, b_deg, d, galaxy.R0_kpc, z0)
        density = np.array([layer_density(galaxy, row, R, phi, z) for row in range(len(galaxy.layers))])
        stars = 0.0
        for x, coefficient in enumerate(A_per_A_V):
            y = mu + coefficient * A_V(d)
            in_bins = np.diff(below(np.clip(edges_mag - y, M_edges_mag[0], M_edges_mag[-1]))[:, x], axis=1)
            stars += np.ravel(density) @ in_bins
        return stars * (1e3 * d) ** 3 * np.log(10) / 5

    edges = np.linspace(-3, 5 * np.log10(D_MAX_KPC) + 10, 24)
    kink = galaxy.R0_kpc * np.cos(np.radians(l_deg)) / np.cos(np.radians(b_deg))
    if 0 < kink < D_MAX_KPC:
        edges = np.sort(np.append(edges, 5 * np.log10(kink) + 10))
    total = sum(quad_vec(per_mu, a, b, epsrel=1e-6, norm="max", limit=200)[0] for a, b in pairwise(edges))
    return area_deg2 * (np.pi / 180) ** 2 * total


def shares_of_temperature(Teff_K, temperatures_K):
    """Share (point, temperature) of each star: linear in ln Teff between neighbours."""
    ln = np.log(temperatures_K)
    return np.stack([np.interp(np.log(Teff_K), ln, row) for row in np.eye(len(ln))], axis=1)


def expected_in_colour(galaxy, row, lf, locus, band, colour, l_deg, b_deg, area_deg2, edges, coefficients):
    """Expected counts (m bin, colour bin) of one layer by brute force: every kind of star at every distance.

    ``lf`` (class, cell) in the band of the magnitudes, ``edges`` those of magnitude and colour, ``coefficients``
    (temperature, 3) the extinction in the band and the two bands of the colour, per A_V, at 3500, 5800 and 10 000 K.
    """
    z0 = galaxy.values["sun.z0_kpc"]
    n = lf[locus.class_index, locus.cell] * locus.share
    real = n > 0
    M, C = locus.M_mag[band][real], (locus.M_mag[colour[0]] - locus.M_mag[colour[1]])[real]
    share = n[real, None] * shares_of_temperature(locus.Teff_K[real], [3500.0, 5800.0, 10000.0])
    scatter, A_V = locus.scatter_mag[real, None], dust_disc_A_V(l_deg, b_deg)
    at, weight = np.polynomial.legendre.leggauss(3)
    step = 0.1
    mu = (np.arange(-3.0, 20.0, step)[:, None] + step * (at + 1) / 2).ravel()
    found = 0.0
    for mu_mag, w in zip(mu, np.tile(weight * step / 2, mu.size // 3), strict=True):
        d = 10 ** (mu_mag / 5 - 2)
        volume = (1e3 * d) ** 3 * np.log(10) / 5 * w
        density = layer_density(galaxy, row, *tilted(l_deg, b_deg, np.array([d]), galaxy.R0_kpc, z0))[0]
        for x, (A, blue, red) in enumerate(coefficients):
            bright = M + mu_mag + A * A_V(d) - 0.025  # cells of 0.05 mag
            in_m = np.diff(np.clip((edges[0] - bright[:, None]) / 0.05, 0.0, 1.0), axis=1)
            some = in_m.any(axis=1)
            z = (edges[1] - C[some, None] - (blue - red) * A_V(d)) / scatter[some]
            found += density * volume * (in_m[some] * share[some, x, None]).T @ np.diff(ndtr(z), axis=1)
    return area_deg2 * (np.pi / 180) ** 2 * found
