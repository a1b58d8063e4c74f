"""The local census as one more group: its fields are spheres around the Sun, its bins the census rows.

A sphere is a set of short sight lines of one node each, whose volumes sum to 1 and whose shift y is zero: the same
projection that predicts the sky then predicts the mean number density in the sphere, by absolute magnitude.
"""

import numpy as np

from starcount import stars
from starcount.dust.bands import FLAT_TEMPERATURE_K
from starcount.forward.group import GroupModel
from starcount.forward.luminosity import sphere_points
from starcount.forward.matrix import LuminosityMatrix
from starcount.forward.projection import Grid, Lines, make_projection
from starcount.forward.response import Y_STEP_MAG
from starcount.forward.tables import StarTables
from starcount.galaxy import Galaxy

_Y_MAG = Y_STEP_MAG * np.arange(-2, 3)


def make_census_model(galaxy: Galaxy, reference: str) -> GroupModel:
    """Return the census of a reference band as a group model."""
    census = stars.census(reference)
    radii, field = np.unique(census.radius_pc, return_inverse=True)
    used = np.zeros((radii.size, census.n.size), bool)
    used[field, np.arange(census.n.size)] = True
    n_layer = len(galaxy.layers)
    tables = StarTables(galaxy, reference, None, np.array([FLAT_TEMPERATURE_K]))
    lines, grid = _spheres(galaxy, radii), Grid(_Y_MAG, np.zeros(1))
    reach = np.tile([-1.0, 1.0], (n_layer, 1))
    return GroupModel(
        name="census",
        group=None,
        galaxy=galaxy,
        counts=np.where(used, census.n, 0),
        used=used,
        projection=make_projection(galaxy.layer_table(), galaxy.R0_kpc, lines, grid, reach),
        matrix=LuminosityMatrix(
            n_slab=1,
            layer=np.tile(np.arange(n_layer), _Y_MAG.size),
            width=1,
            table_of=tables.by_class_at_knot,
            matrix_of=lambda table, slab: _rows_of(census, table),
        ),
        tables=None,
        extra_names=(),
        extra=np.zeros((0, *used.shape)),
    )


def _spheres(galaxy: Galaxy, radii_pc: np.ndarray) -> Lines:
    points = [sphere_points(r, galaxy.values["sun.z0_kpc"]) for r in radii_pc]
    X, Z, weight = (
        np.concatenate(column) for column in zip(*((p.X_kpc, p.Z_kpc, p.weight) for p in points), strict=True)
    )
    d = np.hypot(X, Z)
    return Lines(
        direction=np.stack([X / d, np.zeros_like(X), Z / d], axis=-1),
        first_line=np.concatenate([[0], np.cumsum([p.weight.size for p in points])]),
        first_node=np.arange(d.size + 1),
        d_kpc=d,
        volume_pc3=weight,
        mu_mag=np.zeros_like(d),
        A_mag=np.zeros((1, 1, d.size)),
        node_weight=np.ones(1),
    )


def _rows_of(census: stars.Census, lf: np.ndarray) -> np.ndarray:
    """The matrix (y x layer, census row) of functions (layer, class, cell): stars counted in each row's volume."""
    found = np.empty((_Y_MAG.size, len(lf), census.n.size))
    for row, c in enumerate(census.class_index):
        total = np.einsum("lck,c->lk", lf, stars.CENSUS_SETS[c].astype(float))
        below = np.concatenate([np.zeros((len(lf), 1)), np.cumsum(total, axis=1)], axis=1)
        for k, layer in enumerate(below):
            ends = [np.interp(m - _Y_MAG, stars.M_EDGES_MAG, layer) for m in (census.M_lo[row], census.M_hi[row])]
            found[:, k, row] = ends[1] - ends[0]
    return (found * census.volume_pc3 / census.systems).reshape(-1, census.n.size)
