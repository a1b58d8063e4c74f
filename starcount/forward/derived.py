"""Numbers that papers quote and a Galaxy's parameters imply: effective height, surface densities and their ratios."""

from collections.abc import Callable, Mapping

import numpy as np

from starcount import stars
from starcount.forward.luminosity import layer_functions
from starcount.galaxy import Galaxy

HEIGHTS_KPC = np.linspace(0.3, 1.2, 19)
"""Heights between which one exponential is fitted: where K and M dwarfs of surveys have been counted."""

DWARFS_MV_MAG = (5.5, 8.5)
_COLUMN_KPC = 20.0  # half the column through the disc; what lies beyond is less than 1e-6


def derived_quantities(galaxy: Galaxy) -> Callable[[Mapping[str, float]], dict[str, float]]:
    """Return a function from a Galaxy's numbers (by name) to its derived quantities (by name).

    ``effective_height_kpc``: the scale height of one exponential fitted (least squares in ln n, equal weights) to the
    density of dwarfs of 5.5 < M_V < 8.5, all components together, at 0.3 < z < 1.2 kpc above the Sun's foot point;
    with the tabulated luminosity functions (a fitted curve averages to nothing over the window that holds them).
    ``NAME.surface_pc2``: stars of the reference window per square parsec through the plane at the Sun, for components
    scaled there. ``NAME.surface_ratio``: the same over that of the remainder, for components that are a share of it.
    """
    lf = layer_functions(galaxy, "V")
    dwarfs, window = _fraction(lf, DWARFS_MV_MAG), np.array([stars.window(layer) for layer in lf])
    at, weight = np.polynomial.legendre.leggauss(60)
    u = (at + 1.0) / 2.0
    column_kpc, step_kpc = _COLUMN_KPC * u**3, _COLUMN_KPC * 1.5 * u**2 * weight  # crowded near the plane

    def derived(values: Mapping[str, float]) -> dict[str, float]:
        amplitudes = galaxy.amplitudes({**galaxy.values, **values})
        z = np.concatenate([HEIGHTS_KPC, column_kpc, -column_kpc])
        density, surface = np.zeros(HEIGHTS_KPC.size), {}
        for row, (component, _) in enumerate(galaxy.layers):
            if component.anchor != "sun":
                continue
            shape = amplitudes[component.name] * np.exp(galaxy.ln_relative_density(row, galaxy.R0_kpc, 0.0, z, values))
            density += dwarfs[row] * shape[: HEIGHTS_KPC.size]
            north_and_south = shape[HEIGHTS_KPC.size :].reshape(2, -1).sum(axis=0)
            surface[component.name] = surface.get(component.name, 0.0) + 1e3 * window[row] * north_and_south @ step_kpc
        found = {"effective_height_kpc": -1.0 / np.polyfit(HEIGHTS_KPC, np.log(density), 1)[0]}
        remainder = [c.name for c in galaxy.components if c.amplitude == "remainder"]
        for component in galaxy.components:
            if component.name in surface:
                found[f"{component.name}.surface_pc2"] = surface[component.name]
            if component.amplitude == "share" and remainder:
                found[f"{component.name}.surface_ratio"] = surface[component.name] / surface[remainder[0]]
        return {name: float(value) for name, value in found.items()}

    return derived


def _fraction(lf: np.ndarray, M_mag: tuple[float, float]) -> np.ndarray:
    """Dwarfs (layer,) between two absolute magnitudes, per star of the window."""
    middle = (stars.M_EDGES_MAG[1:] + stars.M_EDGES_MAG[:-1]) / 2
    return lf[:, stars.CLASSES.index("dwarf")][:, (middle > M_mag[0]) & (middle < M_mag[1])].sum(axis=1)
