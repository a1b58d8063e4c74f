"""Smooth corrections of the luminosity functions, fitted along with the Galaxy.

Counts constrain only density times luminosity function. Without this freedom a 20 % error of a tabulated function
moves a fitted height by several times the error that the counts alone would claim. One curve corrects the thin disc's
layers, another all old populations: ``lf = lf0 * (hat(M_V) @ exp(c))``.

The factor is linear in M_V between knots every 2 mag and constant outside them, whatever the band of the counts, so
that one curve serves all groups, and the luminosity matrix is linear in the factor. A coefficient is the logarithm of
the factor at its knot. Prior: second differences scatter by ``BEND``, the mean level by ``LEVEL``, each knot by
``WIDTH``. The coefficients average to zero over the reference window, where the amplitude alone sets the number of
stars.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pymc as pm
from scipy import linalg

from starcount.constants import REFERENCE_WINDOW_MV_MAG
from starcount.forward.knots import KNOTS_MAG, hat
from starcount.forward.luminosity import CENSUS_POPULATION

BEND = 0.10
LEVEL = 0.05
WIDTH = 0.30
GROUPS = {
    "disc": lambda component: component.population == CENSUS_POPULATION,
    "old": lambda component: component.population != CENSUS_POPULATION and component.anchor == "sun",
}
"""The curves and the components whose layers they correct; others (scaled by their total) keep their tables."""

DIMENSION = "knot_mag"


@dataclass(frozen=True, eq=False)
class Curve:
    """A curve's name, the components it corrects, and its coefficients from standard normals: ``c = spread @ u``.

    ``spread`` is (knot, knot - 1): one direction is spent on the zero mean over the reference window.
    """

    name: str
    components: tuple[str, ...]
    spread: np.ndarray

    def variable(self):
        """Add ``u.curve.NAME`` ~ N(0, 1) and ``curve.NAME`` (knot) to the open PyMC model; return the latter."""
        u = pm.Normal(f"u.curve.{self.name}", 0.0, 1.0, shape=self.spread.shape[1])
        # Not a matrix product: over those PyTensor looks for a BLAS of its own and warns that it finds none.
        return pm.Deterministic(f"curve.{self.name}", (self.spread * u).sum(axis=1), dims=DIMENSION)


def curves(components: Sequence, M_edges_mag: np.ndarray) -> tuple[Curve, ...]:
    """Return the curves that correct any of a Galaxy's components; ``M_edges_mag`` are the cells' edges (cell + 1,)."""
    spread = _spread(0.5 * (M_edges_mag[1:] + M_edges_mag[:-1]))
    found = ((name, tuple(dict.fromkeys(c.name for c in components if ours(c)))) for name, ours in GROUPS.items())
    return tuple(Curve(name, members, spread) for name, members in found if members)


def _spread(M_mag: np.ndarray) -> np.ndarray:
    n = KNOTS_MAG.size
    bend = np.diff(np.eye(n), 2, axis=0)
    precision = bend.T @ bend / BEND**2 + np.eye(n) / WIDTH**2 + np.ones((n, n)) / (n * LEVEL) ** 2
    inside = (M_mag > REFERENCE_WINDOW_MV_MAG[0]) & (M_mag < REFERENCE_WINDOW_MV_MAG[1])
    free = linalg.null_space(hat(M_mag[inside]).mean(axis=0, keepdims=True))
    return free @ linalg.cholesky(linalg.inv(free.T @ precision @ free), lower=True)


def owners(curves: tuple[Curve, ...], components: Sequence) -> np.ndarray:
    """Return which curve corrects each layer: 0 for none, else 1 + its index; ``components`` are the layers' own."""
    number = {c: i + 1 for i, curve in enumerate(curves) for c in curve.components}
    return np.array([number.get(c.name, 0) for c in components])
