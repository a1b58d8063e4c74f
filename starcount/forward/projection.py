"""The linear map from density along the sight lines of many fields to expected counts."""

from dataclasses import dataclass

import numpy as np

from starcount.errors import InputError
from starcount.forward import kernels
from starcount.forward.response import Y_STEP_MAG
from starcount.galaxy.galaxy import LayerTable


@dataclass(frozen=True, eq=False)
class Lines:
    """Sight lines with their nodes, one after the other.

    ``direction`` (line, 3) unit vectors towards l = 0, l = 90 deg, b = 90 deg; ``first_line`` (field + 1,) and
    ``first_node`` (line + 1,) offsets; per node the distance (kpc), the volume (pc^3, the solid angle included), the
    distance modulus and ``A_mag`` (temperature, extinction node, node): the extinction in the band of the counts, which
    grows with the temperature and with the extinction node. ``E_mag`` likewise is the colour excess, or None without
    colour. ``node_weight`` (extinction node,) sums to 1.
    """

    direction: np.ndarray
    first_line: np.ndarray
    first_node: np.ndarray
    d_kpc: np.ndarray
    volume_pc3: np.ndarray
    mu_mag: np.ndarray
    A_mag: np.ndarray
    node_weight: np.ndarray
    E_mag: np.ndarray | None = None


@dataclass(frozen=True, eq=False)
class Projection:
    """Sight lines, the layers of a Galaxy and the grid in y, as the flat arrays that the kernels take.

    ``arrays``: index, scale, n_parameter, amplitude, anchor and the three addresses of ``LayerTable``; R0; then
    direction, first_line, first_node, d_kpc, volume, mu, A and node_weight of ``Lines``; the shape of the grid (slab,
    temperature, y, layer); its first y, steps per mag and length, then those of the colour excess; the shifts
    (layer, 2) between which a layer can put stars into the bins; E of ``Lines``; and the rows that the matrix has
    (``kernels.products``). ``dust_range`` is the factor by which the extinction of a field may be raised or lowered
    before stars are missed.
    """

    lines: Lines
    y_mag: np.ndarray
    arrays: tuple[np.ndarray, ...]
    dust_range: float

    @property
    def n_field(self) -> int:
        return self.lines.first_line.size - 1

    def counts(self, v, W, ln_dust=None) -> np.ndarray:
        """Return expected counts (field, bin)."""
        return kernels.project(v, W, self._dust(ln_dust), *self.arrays)

    def pull_back(self, v, W, cotangent, ln_dust=None, want_W=True):
        """Return the gradients by v, W and ln_dust of sum(cotangent * counts)."""
        cotangent = np.ascontiguousarray(cotangent, float)
        return kernels.project_back(v, W, self._dust(ln_dust), cotangent, want_W, *self.arrays)

    def _dust(self, ln_dust):
        if ln_dust is None:
            return np.zeros(self.n_field)
        ln_dust = np.ascontiguousarray(ln_dust, float)
        if (np.abs(ln_dust) > np.log(self.dust_range) + 1e-9).any():
            found = np.exp(ln_dust[np.argmax(np.abs(ln_dust))])
            raise InputError(f"factor {found:.3g} on a field's extinction; expected within {self.dust_range:g}-fold")
        return ln_dust


@dataclass(frozen=True, eq=False)
class Grid:
    """The shifts y (mag) and colour excesses (mag; one zero without colour) of the grid onto which stars are put."""

    y_mag: np.ndarray
    excess_mag: np.ndarray


def y_grid(first_edge_mag: float, m_range_mag, M_range_mag, y_range_mag) -> np.ndarray:
    """Return the shifts y (mag) at which the luminosity matrix is tabulated.

    They cover every shift that puts a star of ``M_range_mag`` to where the bins take stars from (``m_range_mag``) and
    that the nodes reach, with steps to spare for the spline, and start so that edges at multiples of half a step from
    the first edge of the bins fall on limits of luminosity cells.
    """
    first = max(y_range_mag[0], m_range_mag[0] - M_range_mag[1]) - 3.0 * Y_STEP_MAG
    last = min(y_range_mag[1], m_range_mag[1] - M_range_mag[0]) + 3.0 * Y_STEP_MAG
    start = first_edge_mag - Y_STEP_MAG * np.ceil((first_edge_mag - first) / Y_STEP_MAG)
    return start + Y_STEP_MAG * np.arange(max(int(np.ceil((last - start) / Y_STEP_MAG)) + 1, 5))


def make_projection(
    table: LayerTable,
    R0_kpc: float,
    lines: Lines,
    grid: Grid,
    y_reach_mag: np.ndarray,
    ranges: np.ndarray | None = None,
    dust_range: float = 1.0,
) -> Projection:
    """Return the projection of a Galaxy's layers along sight lines onto a grid.

    Stars of a layer outside ``y_reach_mag`` (layer, 2) are left out of the sums. In colour, ``ranges`` (slab,
    temperature, 2) are the shifts for which the luminosity matrix has rows. ``dust_range``: as in ``Projection``.
    """
    if (np.diff(lines.A_mag, axis=0) < 0).any():
        raise ValueError("extinction must grow with temperature")
    arrays = (
        table.index.astype(np.int64),
        table.scale.astype(float),
        table.n_parameter.astype(np.int64),
        table.amplitude.astype(np.int64),
        table.anchor.astype(np.int64),
        table.density_address.astype(np.int64),
        table.slopes_address.astype(np.int64),
        table.total_address.astype(np.int64),
        np.array([R0_kpc]),
        lines.direction,
        lines.first_line.astype(np.int64),
        lines.first_node.astype(np.int64),
        lines.d_kpc,
        lines.volume_pc3,
        lines.mu_mag,
        lines.A_mag,
        lines.node_weight,
        np.array([grid.excess_mag.size, len(lines.A_mag), grid.y_mag.size, len(table.component)]),
        np.array([*_axis(grid.y_mag), *_axis(grid.excess_mag)]),
        y_reach_mag.astype(float),
        np.zeros((1, 1, 1)) if lines.E_mag is None else lines.E_mag,
        np.zeros((1, 1, 3), np.int64) if ranges is None else _kept(ranges, len(table.component)),
    )
    flat = tuple(np.ascontiguousarray(a) for a in arrays)
    return Projection(lines=lines, y_mag=grid.y_mag, arrays=flat, dust_range=dust_range)


def _kept(ranges: np.ndarray, n_layer: int) -> np.ndarray:
    """The first row of the matrix for each slab and temperature, and the range of shifts, (slab, temperature, 3)."""
    sizes = (ranges[..., 1] - ranges[..., 0]) * n_layer
    first = np.concatenate([[0], np.cumsum(sizes.ravel())[:-1]]).reshape(sizes.shape)
    return np.concatenate([first[..., None], ranges], axis=-1).astype(np.int64)


def _axis(values: np.ndarray) -> tuple[float, float, float]:
    """First value, steps per mag and length of a regular axis; one value alone is no axis."""
    return values[0], 0.0 if values.size == 1 else 1.0 / (values[1] - values[0]), float(values.size)
