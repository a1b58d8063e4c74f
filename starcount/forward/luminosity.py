"""Luminosity functions of a Galaxy's layers: where the absolute scale of the counts comes from.

Every layer's function is stars per cell of absolute magnitude, divided by its component's stars in the reference window
(4.5 < M_V < 8.5, in V whatever the band of the counts), so that one amplitude serves all bands. The component whose
population is "census" holds what the local census has beyond the other components, brought to the Sun with the vertical
laws of its own layers.
"""

from collections.abc import Mapping
from dataclasses import dataclass, replace
from itertools import pairwise
from pathlib import Path

import numpy as np

from starcount import stars
from starcount.errors import InputError
from starcount.galaxy import Galaxy
from starcount.galaxy.component import Component

CENSUS_POPULATION = "census"
_REFERENCE_BAND = "V"
_EVERY_M_MAG = (-30.0, 30.0)


@dataclass(frozen=True, eq=False)
class SpherePoints:
    """Points whose weighted mean is the mean over a sphere around the Sun: kpc north and away from the centre."""

    X_kpc: np.ndarray
    Z_kpc: np.ndarray
    weight: np.ndarray


def sphere_points(radius_pc: float, z0_kpc: float) -> SpherePoints:
    """Return the points of a sphere of ``radius_pc`` around the Sun.

    The sphere is cut into slabs parallel to the plane, split where the plane runs (the kink of an exponential disc);
    in a slab of radius a two points at +-a/2 towards and away from the centre carry the mean to third order.
    """
    r = radius_pc / 1e3
    limits = np.unique(np.clip([-r, -z0_kpc, r], -r, r))
    at, weight = np.polynomial.legendre.leggauss(12)
    Z = np.concatenate([(a + b) / 2 + (b - a) / 2 * at for a, b in pairwise(limits)])
    w = np.concatenate([(b - a) / 2 * weight for a, b in pairwise(limits)])
    slab = r**2 - Z**2
    return SpherePoints(
        X_kpc=np.concatenate([-np.sqrt(slab) / 2, np.sqrt(slab) / 2]),
        Z_kpc=np.tile(Z, 2),
        weight=np.tile(0.75 * w * slab / r**3, 2) / 2,
    )


def sphere_means(galaxy: Galaxy, radius_pc: np.ndarray, values: Mapping | None = None) -> np.ndarray:
    """Return the mean (layer, radius) of each layer's density over spheres around the Sun, relative to the Sun."""
    values = {**galaxy.values, **(values or {})}
    means = np.empty((len(galaxy.layers), len(radius_pc)))
    for column, radius in enumerate(radius_pc):
        points = sphere_points(radius, values["sun.z0_kpc"])
        b = np.degrees(np.arctan2(points.Z_kpc, np.abs(points.X_kpc)))
        place = galaxy.place(np.where(points.X_kpc > 0, 0.0, 180.0), b, np.hypot(points.X_kpc, points.Z_kpc), values)
        for row in range(len(galaxy.layers)):
            means[row, column] = points.weight @ np.exp(galaxy.ln_relative_density(row, *place, values))
    return means


def layer_functions(galaxy: Galaxy, band: str) -> np.ndarray:
    """Return the luminosity functions (layer, class, cell) of all layers in a band, per star of the window."""
    lf = np.zeros((len(galaxy.layers), len(stars.CLASSES), stars.M_EDGES_MAG.size - 1))
    for component in galaxy.components:
        rows = _rows(galaxy, component)
        if component.population == CENSUS_POPULATION:
            here = _from_census(galaxy, component, band)
            lf[rows] = here / stars.window(_from_census(galaxy, component, _REFERENCE_BAND).sum(axis=0))
        else:
            lf[rows] = _shares(component, band) * _population(component, band)
    return lf


def _from_census(galaxy: Galaxy, component: Component, band: str) -> np.ndarray:
    """What a band's census holds beyond the components that are scaled at the Sun, at the Sun (layer, class, cell)."""
    census = stars.census(band)
    means = sphere_means(galaxy, census.radius_pc)
    amplitudes = galaxy.amplitudes(galaxy.values)
    others = [c for c in galaxy.components if c is not component and c.anchor == "sun"]
    functions = [amplitudes[c.name] * _shares(c, band) * _population(c, band) for c in others]
    other_means = [means[_rows(galaxy, c)] for c in others]
    shape = (0, *means.shape[1:])
    return stars.census_at_the_sun(
        census,
        _shares(component, band),
        means[_rows(galaxy, component)],
        np.concatenate(functions) if functions else np.zeros((0, len(stars.CLASSES), stars.M_EDGES_MAG.size - 1)),
        np.concatenate(other_means) if other_means else np.zeros(shape),
    )


def census_density_pc3(galaxy: Galaxy) -> float:
    """Return the stars of the reference window at the Sun that the census implies, all components together."""
    found = 0.0
    amplitudes = galaxy.amplitudes(galaxy.values)
    for component in galaxy.components:
        if component.population == CENSUS_POPULATION:
            found += stars.window(_from_census(galaxy, component, _REFERENCE_BAND).sum(axis=0))
        elif component.anchor == "sun":
            found += amplitudes[component.name]
    return found


def population_name(component: Component) -> str | Path:
    """Return a component's population: one of our names, or the path of a user's table."""
    name = component.population
    return Path(name) if Path(name).suffix else name


def _population(component: Component, band: str) -> np.ndarray:
    return stars.population(population_name(component), band)


def _shares(component: Component, band: str) -> np.ndarray:
    """The share of each layer (layer, class, cell of the reference band) of the stars; limits of layers are in M_V."""
    layers = [
        replace(layer, classes=layer.classes or stars.CLASSES, M_mag=layer.M_mag or _EVERY_M_MAG)
        for layer in component.layers
    ]
    try:
        shares = stars.layer_shares(layers)
    except InputError as problem:
        raise InputError(f"component {component.name!r}: {problem}") from None
    if band == _REFERENCE_BAND or len(layers) == 1:
        return shares
    return _in_band(shares, stars.locus(population_name(component), band))


def _in_band(shares: np.ndarray, locus: stars.Locus) -> np.ndarray:
    """Shares (layer, class, cell) by absolute visual magnitude, brought to the cells of a locus' reference band.

    A population that does not say where it is in V has its limits in its own band.
    """
    at = np.clip(np.searchsorted(stars.M_EDGES_MAG, locus.M_V_mag, side="right") - 1, 0, shares.shape[2] - 1)
    found, total = np.zeros_like(shares), np.zeros(shares.shape[1:])
    place = locus.class_index, locus.cell
    np.add.at(total, place, locus.share)
    for row, by_V in enumerate(shares):
        np.add.at(found[row], place, locus.share * by_V[locus.class_index, at])
    return np.where(total > 0, found / np.where(total > 0, total, 1.0), shares)


def _rows(galaxy: Galaxy, component: Component) -> slice:
    owners = [c is component for c, _ in galaxy.layers]
    return slice(owners.index(True), owners.index(True) + sum(owners))
