"""The linear map from density along the sight lines of many fields to expected counts."""

from dataclasses import dataclass

import numpy as np

from starcount.forward import kernels
from starcount.galaxy.galaxy import LayerTable

Y_STEP_MAG = 0.1


@dataclass(frozen=True, eq=False)
class Lines:
    """Sight lines with their nodes, one after the other.

    ``direction`` (line, 3) unit vectors towards l = 0, l = 90 deg, b = 90 deg; ``first_line`` (field + 1,) and
    ``first_node`` (line + 1,) offsets; per node the distance (kpc), the volume (pc^3, the solid angle included), the
    distance modulus and ``A_mag`` (star class, extinction node, node): the extinction in the band of the counts.
    ``node_weight`` (extinction node,) sums to 1.
    """

    direction: np.ndarray
    first_line: np.ndarray
    first_node: np.ndarray
    d_kpc: np.ndarray
    volume_pc3: np.ndarray
    mu_mag: np.ndarray
    A_mag: np.ndarray
    node_weight: np.ndarray


@dataclass(frozen=True, eq=False)
class Projection:
    """Sight lines, the layers of a Galaxy and the grid in y, as the flat arrays that the kernels take.

    ``arrays``: index, scale, n_parameter, amplitude, anchor and the three addresses of ``LayerTable``; R0; then
    direction, first_line, first_node, d_kpc, volume, mu, A and node_weight of ``Lines``; class_first (the first layer
    of each star class, and the end); the grid's first y, steps per mag and length; and the shifts (layer, 2) between
    which a layer can put stars into the bins.
    """

    lines: Lines
    y_mag: np.ndarray
    arrays: tuple[np.ndarray, ...]

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
        return np.zeros(self.n_field) if ln_dust is None else np.ascontiguousarray(ln_dust, float)


def y_grid(m_edges_mag, M_range_mag, y_range_mag) -> np.ndarray:
    """Return the shifts y (mag) at which the luminosity matrix is tabulated.

    They cover every shift that puts a star of ``M_range_mag`` into the bins and that the nodes reach, with two steps to
    spare for the spline, and start so that edges at multiples of half a step fall on limits of luminosity cells.
    """
    first = max(y_range_mag[0], m_edges_mag[0] - M_range_mag[1]) - 3.0 * Y_STEP_MAG
    last = min(y_range_mag[1], m_edges_mag[-1] - M_range_mag[0]) + 3.0 * Y_STEP_MAG
    start = m_edges_mag[0] - Y_STEP_MAG * np.ceil((m_edges_mag[0] - first) / Y_STEP_MAG)
    return start + Y_STEP_MAG * np.arange(max(int(np.ceil((last - start) / Y_STEP_MAG)) + 1, 5))


def make_projection(
    table: LayerTable, R0_kpc: float, lines: Lines, y_mag: np.ndarray, y_reach_mag: np.ndarray
) -> Projection:
    """Return the projection of a Galaxy's layers along sight lines. All layers share one star class.

    Stars of a layer outside ``y_reach_mag`` (layer, 2) are left out of the sums.
    """
    n_layer = len(table.component)
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
        np.array([0, n_layer]),
        np.array([y_mag[0], 1.0 / (y_mag[1] - y_mag[0]), float(y_mag.size)]),
        y_reach_mag.astype(float),
    )
    return Projection(lines=lines, y_mag=y_mag, arrays=tuple(np.ascontiguousarray(a) for a in arrays))
