"""One group of fields made ready to be predicted: its projection, luminosity matrix and extra rows."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from starcount import dust, stars
from starcount.errors import InputError
from starcount.forward.extra import extra_rows
from starcount.forward.lines import Coefficients, coefficients, group_lines
from starcount.forward.matrix import LuminosityMatrix
from starcount.forward.nodes import MU_FIRST_MAG
from starcount.forward.projection import Grid, Lines, Projection, make_projection, y_grid
from starcount.forward.response import Y_STEP_MAG, Response, excess_grid, make_response
from starcount.forward.ribbon import shift_ranges
from starcount.forward.tables import StarTables
from starcount.galaxy import Galaxy
from starcount.stars.own import M_V_of_dwarfs
from starcount.survey import Group

ACCURACY = 5e-5
"""Part of a bin by which one more halving of a line's panels may change it."""

_LAST_Y_MAG = 60.0  # beyond any magnitude, however much dust


@dataclass(frozen=True, eq=False)
class GroupModel:
    """A group of fields, or the census, with all that is fixed while a Galaxy's numbers change.

    ``counts`` and ``used`` (field, bin) are the data (counts None where there are none); ``matrix`` the luminosity
    matrix, ``tables`` the stars it is made of (None for the census); ``extra`` (extra,
    field, bin) expected counts of sources that are not stars of the Galaxy, at amplitude 1.
    """

    name: str
    group: Group | None
    galaxy: Galaxy
    counts: np.ndarray | None
    used: np.ndarray
    projection: Projection
    matrix: LuminosityMatrix
    tables: StarTables | None
    extra_names: tuple[str, ...]
    extra: np.ndarray

    def luminosity_matrix(self, factors: np.ndarray | None = None) -> np.ndarray:
        """Return W (row, bin), with ``factors`` (layer, knot) on the luminosity functions at ``knots.KNOTS_MAG``."""
        if factors is None:
            return self.matrix.whole
        return self.matrix.with_factors(factors, np.arange(len(self.galaxy.layers)))

    def expected(
        self, values: Mapping[str, float] | None = None, *, factors: np.ndarray | None = None, parts: bool | str = False
    ):
        """Return expected counts (field, bin), or with ``parts`` a dict of them by component and extra row.

        ``values`` are numbers by parameter name; those left out have the Galaxy's own. ``parts="class"`` splits the
        components by class of stars: its keys are (component, class), and (name, "") of extra rows.

        The luminosity functions stay as the census gave them at the Galaxy's own heights: bins of a thin disc whose
        height is changed from 0.30 to 0.22 kpc are up to 3 % off what a Galaxy read with that height predicts. A fit
        mends this by its curves and by the census as data; to predict without, edit the Galaxy.
        """
        v, W = self.galaxy.vector(values), self.luminosity_matrix(factors)
        if not parts:
            return self._counts(v, W) + self.extra.sum(axis=0)
        if parts != "class":
            return {**self._by_component(v, W), **dict(zip(self.extra_names, self.extra, strict=True))}
        found = {}
        for c, name in enumerate(stars.CLASSES):
            mine = self._by_component(v, self.matrix.of(self.tables.of_class(c, factors)))
            found |= {(component, name): counts for component, counts in mine.items()}
        return {**found, **{(name, ""): counts for name, counts in zip(self.extra_names, self.extra, strict=True)}}

    @property
    def outside(self) -> np.ndarray:
        """The share (field,) of the expected stars whose magnitudes rest on relations outside their verified range."""
        if self.tables.colour is None and self.tables.band == self.tables.reference:
            return np.zeros(len(self.used))  # counted in this band: they rest on no relation
        v = self.galaxy.vector()
        counted, doubtful = (
            self._counts(v, W).sum(axis=1) for W in (self.matrix.whole, self.matrix.of(self.tables.outside()))
        )
        return doubtful / np.where(counted > 0, counted, 1.0)

    def _by_component(self, v: np.ndarray, W: np.ndarray) -> dict[str, np.ndarray]:
        found = {}
        for component in self.galaxy.components:
            mine = np.array([c is component for c, _ in self.galaxy.layers])[self.matrix.layer]
            found[component.name] = self._counts(v, W * mine[:, None])
        return found

    def _counts(self, v: np.ndarray, W: np.ndarray) -> np.ndarray:
        """Counts (field, bin), none below zero: beside many stars the splines leave some -1e-7 of them."""
        return np.maximum(self.projection.counts(v, W), 0.0)


def make_group_model(group: Group, galaxy: Galaxy, accuracy: float = ACCURACY, dust_range: float = 1.0) -> GroupModel:
    """Return a group of fields made ready for a Galaxy; see ``ForwardModel`` for the rest.

    Raises ``UnknownName`` for its bands, dust or extra rows, ``InputError`` for a colour that cannot be predicted.
    """
    temperatures = dust.extinction_temperatures((group.band, *(group.colour or ())))
    tables = StarTables(galaxy, group.band, group.colour, temperatures, group.resolution_arcsec is not None)
    try:
        reddening = coefficients(group.band, group.colour, temperatures)
    except InputError as problem:
        raise InputError(f"group {group.name!r}: {problem}") from None
    reach = _layer_reach(group, tables)
    lines = _settled_lines(group, galaxy, tables, reddening, reach, accuracy, dust_range)
    y = _y_grid(group, tables, (lines.mu_mag.min(), (lines.mu_mag + dust_range * lines.A_mag).max()))
    response = make_response(group, y, _excess_grid(group, tables, lines, dust_range), _gain(group, y))
    grid, names = Grid(y, response.excess_mag), tuple(group.extra)
    ranges = None if group.colour is None else shift_ranges(lines, grid, dust_range)
    if names and group.colour is not None:
        raise InputError(f"group {group.name!r}: extra rows have no colours; expected none in a group with a colour")
    extra = extra_rows(names, group.band, group.edges_mag)[:, None, :] * group.fields.area_deg2[None, :, None]
    return GroupModel(
        name=group.name,
        group=group,
        galaxy=galaxy,
        counts=group.counts,
        used=group.used,
        projection=make_projection(galaxy.layer_table(), galaxy.R0_kpc, lines, grid, reach, ranges, dust_range),
        matrix=_matrix(tables, response, ranges),
        tables=tables,
        extra_names=names,
        extra=extra if names else np.zeros((0, len(group.fields.name), group.n_bin)),
    )


def _matrix(tables: StarTables, response: Response, ranges: np.ndarray | None) -> LuminosityMatrix:
    n_layer, n_x, _, _ = tables.whole.shape
    n_slab = response.excess_mag.size
    n_shift = n_x * response.y_mag.size if ranges is None else int((ranges[..., 1] - ranges[..., 0]).sum())
    return LuminosityMatrix(
        n_slab=n_slab,
        layer=np.tile(np.arange(n_layer), n_shift),
        width=response.by_colour.shape[3],
        table_of=tables.at_knot,
        matrix_of=lambda table, slab: response.slab(table, slab, None if ranges is None else ranges[slab]),
    )


def _settled_lines(
    group: Group, galaxy: Galaxy, tables: StarTables, reddening: Coefficients, reach, accuracy, dust_range
) -> Lines:
    """The sight lines, settled for counts in magnitude only: colours follow from the same nodes."""
    y = _y_grid(group, tables, (MU_FIRST_MAG, _LAST_Y_MAG))
    response = make_response(group, y, None)  # pairs change no node
    W = response.slab(tables.whole.sum(axis=3, keepdims=True), 0)
    v, layers, grid = galaxy.vector(), galaxy.layer_table(), Grid(y, np.zeros(1))

    def count(lines: Lines) -> np.ndarray:
        return make_projection(layers, galaxy.R0_kpc, lines, grid, reach).counts(v, W)

    y_range = reach[:, 0].min(), reach[:, 1].max()
    return group_lines(group, galaxy, reddening, count, y_range, accuracy, dust_range)


def _y_grid(group: Group, tables: StarTables, y_range) -> np.ndarray:
    cells = np.flatnonzero(tables.whole.any(axis=(0, 1, 3)))
    M_range = stars.M_EDGES_MAG[cells[0]], stars.M_EDGES_MAG[cells[-1] + 1]
    bright, faint = group.observation.reach(group.edges_mag)
    return y_grid(group.edges_mag[0], (bright, faint), M_range, y_range)


def _excess_grid(group: Group, tables: StarTables, lines: Lines, dust_range: float) -> np.ndarray | None:
    if group.colour is None:
        return None
    bluest = stars.C_EDGES_MAG[np.flatnonzero(tables.whole.any(axis=(0, 1, 2)))[0]]
    reach = group.observation.colour_reach_mag
    return excess_grid(dust_range * lines.E_mag.max(), group.edges_colour_mag, bluest, reach)


def _gain(group: Group, y_mag: np.ndarray) -> np.ndarray | None:
    """How many objects beyond one a system of each cell counts as (y, cell), where the survey resolves the wider ones.

    The distance is that of a star without extinction, so that it is a function of the shift: behind A = 1 mag it is
    1.6 times too large, which changes the share of resolved pairs by a few per cent.
    """
    if group.resolution_arcsec is None:
        return None
    M_V = M_V_of_dwarfs(group.band, stars.M_MIDDLE_MAG)
    gain = [stars.resolved_gain(M_V, 10 ** (y / 5 + 1), group.resolution_arcsec) for y in y_mag]
    return np.array(gain) - 1.0


def _layer_reach(group: Group, tables: StarTables) -> np.ndarray:
    """The shifts y (layer, 2) between which each layer's stars can fall into the bins, errors included.

    Two steps of the grid to spare, which the spline reaches over. A layer without stars reaches nothing.
    """
    bright, faint = group.observation.reach(group.edges_mag)
    occupied = tables.whole.any(axis=(1, 3))
    reach = np.zeros((len(occupied), 2))
    for k, cells in enumerate(occupied):
        at = np.flatnonzero(cells)
        if at.size:
            brightest, faintest = stars.M_EDGES_MAG[at[0]], stars.M_EDGES_MAG[at[-1] + 1]
            reach[k] = bright - faintest - 2.0 * Y_STEP_MAG, faint - brightest + 2.0 * Y_STEP_MAG
    return reach
