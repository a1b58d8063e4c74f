"""One group of fields made ready to be predicted: its projection, luminosity functions and extra rows."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from starcount import stars
from starcount.forward import kernels
from starcount.forward.extra import extra_rows
from starcount.forward.lines import MOST_DUST, group_lines
from starcount.forward.luminosity import layer_functions, sphere_points
from starcount.forward.nodes import MU_FIRST_MAG
from starcount.forward.projection import Y_STEP_MAG, Lines, Projection, make_projection, y_grid
from starcount.galaxy import Galaxy
from starcount.survey import Group

_CELLS = np.array([stars.M_EDGES_MAG[0], 1.0 / (stars.M_EDGES_MAG[1] - stars.M_EDGES_MAG[0])])
ACCURACY = 5e-5
"""Part of a bin by which one more halving of a line's panels may change it."""

_LAST_Y_MAG = 60.0  # beyond any magnitude, however much dust


@dataclass(frozen=True, eq=False)
class GroupModel:
    """A group of fields, or the census, with all that is fixed while a Galaxy's numbers change.

    ``counts`` and ``used`` (field, bin) are the data (counts None where there are none); ``lf`` (layer, class, cell)
    the luminosity functions; ``lf_arrays`` what ``kernels.luminosity`` takes after them; ``extra`` (extra, field, bin)
    expected counts of sources that are not stars of the Galaxy, at amplitude 1.
    """

    name: str
    group: Group | None
    galaxy: Galaxy
    counts: np.ndarray | None
    used: np.ndarray
    projection: Projection
    lf: np.ndarray
    lf_arrays: tuple[np.ndarray, ...]
    extra_names: tuple[str, ...]
    extra: np.ndarray

    def luminosity_matrix(self, lf: np.ndarray | None = None) -> np.ndarray:
        """Return W (y x layer, bin) for luminosity functions ``lf`` (by default the group's own)."""
        return kernels.luminosity(self.lf if lf is None else lf, *self.lf_arrays)

    def expected(self, values: Mapping[str, float] | None = None, parts: bool = False):
        """Return expected counts (field, bin), or with ``parts`` a dict of them by component and extra row.

        ``values`` are numbers by parameter name; those left out have the Galaxy's own. The luminosity functions stay
        as the census gave them at the Galaxy's own heights: bins of a thin disc whose height is changed from 0.30 to
        0.22 kpc are up to 3 % off what a Galaxy read with that height predicts. A fit mends this by its curves and by
        the census as data; to predict without, edit the Galaxy.
        """
        v = self.galaxy.vector(values)
        if not parts:
            return self.projection.counts(v, self.luminosity_matrix()) + self.extra.sum(axis=0)
        found = {}
        for component in self.galaxy.components:
            mine = np.array([c is component for c, _ in self.galaxy.layers])
            found[component.name] = self.projection.counts(v, self.luminosity_matrix(self.lf * mine[:, None, None]))
        return {**found, **dict(zip(self.extra_names, self.extra, strict=True))}


def make_group_model(group: Group, galaxy: Galaxy, accuracy: float = ACCURACY) -> GroupModel:
    """Return a group of fields made ready for a Galaxy. Raises ``UnknownName`` for its band, dust or extra rows."""
    lf = layer_functions(galaxy, group.band)
    edges, response = group.observation.matrix(group.edges_mag)
    reach, M_range = layer_reach(lf, edges[0], edges[-1]), _occupied(lf)
    v, table = galaxy.vector(), galaxy.layer_table()

    def ready(y_range) -> tuple[np.ndarray, tuple[np.ndarray, ...]]:
        y = y_grid(edges, M_range, y_range)
        return y, _lf_arrays(y, edges[:-1], edges[1:], np.full(edges.size - 1, -1), response)

    y, lf_arrays = ready((MU_FIRST_MAG, _LAST_Y_MAG))
    W = kernels.luminosity(lf, *lf_arrays)

    def count(lines: Lines) -> np.ndarray:
        return make_projection(table, galaxy.R0_kpc, lines, y, reach).counts(v, W)

    lines = group_lines(group, galaxy, count, (reach[:, 0].min(), reach[:, 1].max()), accuracy)
    y_needed, lf_arrays = ready((lines.mu_mag.min(), (lines.mu_mag + MOST_DUST * lines.A_mag).max()))
    names = tuple(group.extra)
    rows = extra_rows(names, group.band, group.edges_mag)
    return GroupModel(
        name=group.name,
        group=group,
        galaxy=galaxy,
        counts=group.counts,
        used=group.used,
        projection=make_projection(table, galaxy.R0_kpc, lines, y_needed, reach),
        lf=lf,
        lf_arrays=lf_arrays,
        extra_names=names,
        extra=rows[:, None, :] * group.fields.area_deg2[None, :, None],
    )


def layer_reach(lf: np.ndarray, m_first: float, m_last: float) -> np.ndarray:
    """Return the shifts y (layer, 2) between which each layer's stars can fall between two magnitudes.

    Two steps of the grid to spare, which the spline reaches over. A layer without stars reaches nothing.
    """
    reach = np.zeros((len(lf), 2))
    for k, layer in enumerate(lf.sum(axis=1)):
        cells = np.flatnonzero(layer)
        if cells.size:
            brightest, faintest = stars.M_EDGES_MAG[cells[0]], stars.M_EDGES_MAG[cells[-1] + 1]
            reach[k] = m_first - faintest - 2.0 * Y_STEP_MAG, m_last - brightest + 2.0 * Y_STEP_MAG
    return reach


def _occupied(lf: np.ndarray) -> tuple[float, float]:
    """The absolute magnitudes between which there are stars."""
    cells = np.flatnonzero(lf.sum(axis=(0, 1)))
    return stars.M_EDGES_MAG[cells[0]], stars.M_EDGES_MAG[cells[-1] + 1]


def _lf_arrays(y, m_low, m_high, bin_class, response) -> tuple[np.ndarray, ...]:
    arrays = (y, _CELLS, m_low, m_high, bin_class, np.asarray(response, float))
    return tuple(np.ascontiguousarray(array) for array in arrays)


def make_census_model(galaxy: Galaxy, band: str) -> GroupModel:
    """Return the local census as one more group: its fields are spheres around the Sun, its bins the census rows.

    A sphere is a set of short sight lines of one node each, whose volumes sum to 1 and whose shift y is zero: the same
    projection that predicts the sky then predicts the mean number density in the sphere, by absolute magnitude.
    """
    census = stars.census(band)
    radii, field = np.unique(census.radius_pc, return_inverse=True)
    points = [sphere_points(r, galaxy.values["sun.z0_kpc"]) for r in radii]
    X, Z, weight = (
        np.concatenate(column) for column in zip(*((p.X_kpc, p.Z_kpc, p.weight) for p in points), strict=True)
    )
    d = np.hypot(X, Z)
    first = np.concatenate([[0], np.cumsum([p.weight.size for p in points])])
    lines = Lines(
        direction=np.stack([X / d, np.zeros_like(X), Z / d], axis=-1),
        first_line=first,
        first_node=np.arange(d.size + 1),
        d_kpc=d,
        volume_pc3=weight,
        mu_mag=np.zeros_like(d),
        A_mag=np.zeros((1, 1, d.size)),
        node_weight=np.ones(1),
    )
    y = Y_STEP_MAG * np.arange(-2, 3)
    used = np.zeros((radii.size, census.n.size), bool)
    used[field, np.arange(census.n.size)] = True
    response = np.diag(census.volume_pc3 / census.systems)
    return GroupModel(
        name="census",
        group=None,
        galaxy=galaxy,
        counts=np.where(used, census.n, 0),
        used=used,
        projection=make_projection(
            galaxy.layer_table(), galaxy.R0_kpc, lines, y, np.tile([-1.0, 1.0], (len(galaxy.layers), 1))
        ),
        lf=layer_functions(galaxy, band),
        lf_arrays=_lf_arrays(y, census.M_lo, census.M_hi, census.class_index.astype(np.int64), response),
        extra_names=(),
        extra=np.zeros((0, radii.size, census.n.size)),
    )
