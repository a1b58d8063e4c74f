"""The sight lines of a group of fields, with as many nodes as each needs."""

import logging
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from starcount import dust
from starcount.errors import InputError
from starcount.forward.nodes import Nodes, place_nodes
from starcount.forward.projection import Lines
from starcount.galaxy import Galaxy
from starcount.galaxy.frame import unit_vectors
from starcount.survey import Group

log = logging.getLogger(__name__)

_MOST_HALVINGS = 7
_NEGLIGIBLE = 1e-6  # part of a bin that the nearest nodes may hold and still be left out


@dataclass(frozen=True, eq=False)
class Coefficients:
    """Extinction in the band of the counts, and colour excess (None without colour), per A_V: (temperature,)."""

    band: np.ndarray
    excess: np.ndarray | None

    def A_mag(self, A_V_mag: np.ndarray) -> np.ndarray:
        """Return the extinction (temperature, extinction node, node) of visual extinctions (node,)."""
        return self.band[:, None, None] * A_V_mag

    def E_mag(self, A_V_mag: np.ndarray) -> np.ndarray | None:
        """Return the colour excess likewise."""
        return None if self.excess is None else self.excess[:, None, None] * A_V_mag


def coefficients(band: str, colour: tuple[str, str] | None, temperatures_K: np.ndarray) -> Coefficients:
    """Return the coefficients of a band and colour at some of ``dust.TEMPERATURES_K``.

    Raises ``InputError`` for a colour that dust does not redden.
    """
    chosen = np.isin(dust.TEMPERATURES_K, temperatures_K)
    in_band = dust.band_coefficients(band)[chosen]
    if colour is None:
        return Coefficients(in_band, None)
    blue, red = (dust.band_coefficients(name)[chosen] for name in colour)
    if (blue <= red).any():
        allowed = "two bands of which it dims the first more, whatever the star's temperature"
        raise InputError(f"colour {list(colour)}: dust does not redden this colour; expected {allowed}")
    return Coefficients(in_band, blue - red)


def group_lines(
    group: Group,
    galaxy: Galaxy,
    coefficients: Coefficients,
    count: Callable[[Lines], np.ndarray],
    y_range_mag,
    accuracy: float,
    dust_range: float,
) -> Lines:
    """Return a group's sight lines with their nodes, extinction included.

    ``count`` returns the counts (line, bin) of lines that each stand for a field of their own; the panels of a line are
    halved until that changes no bin by more than the part ``accuracy``. Nodes that reach no bin are left out: those
    with y outside ``y_range_mag``, and the nearest ones, which hold less than 1e-6 of any bin.
    """
    extinction = _Extinction(group, coefficients)
    n_line = group.sight_lines.l_deg.size
    settled: list[tuple[Nodes, np.ndarray] | None] = [None] * n_line
    pending = np.arange(n_line)
    coarse = _Trial(group, galaxy, extinction, pending, 0)
    coarse_counts = count(coarse.lines)
    first_mu = _first_modulus(coarse, count)
    for halvings in range(1, _MOST_HALVINGS + 1):
        fine = _Trial(group, galaxy, extinction, pending, halvings)
        fine_counts = count(fine.lines)
        allowed = accuracy * fine_counts + 1e-9 * fine_counts.max(axis=1, keepdims=True)
        done = (np.abs(fine_counts - coarse_counts) <= allowed).all(axis=1)
        for row in np.flatnonzero(done):
            settled[pending[row]] = coarse.row(row)
        if halvings == _MOST_HALVINGS and not done.all():
            log.warning("group %s: %d sight lines are not settled to %g", group.name, np.sum(~done), accuracy)
            for row in np.flatnonzero(~done):
                settled[pending[row]] = fine.row(row)
            break
        pending, open_rows = pending[~done], np.flatnonzero(~done)
        if not pending.size:
            break
        coarse, coarse_counts = fine.take(open_rows), fine_counts[open_rows]
    return _join(group, coefficients, settled, y_range_mag, first_mu, dust_range)


class _Extinction:
    """The visual extinction of chosen sight lines of a group."""

    def __init__(self, group: Group, coefficients: Coefficients):
        self.group, self.coefficients = group, coefficients
        self.field = np.repeat(np.arange(group.fields.name.size), np.diff(group.sight_lines.first))

    def __call__(self, chosen: np.ndarray, d_kpc: np.ndarray) -> np.ndarray:
        """Return A_V (line, node) in mag."""
        group = self.group
        field = self.field[chosen]
        lines = _Chosen(
            group.sight_lines.l_deg[chosen],
            group.sight_lines.b_deg[chosen],
            np.searchsorted(field, np.arange(group.fields.name.size + 1)),
        )
        return dust.A_V_mag(group.fields, lines, d_kpc, group.profiles)


class _Chosen:
    """Some of a group's sight lines, still in the order of the fields."""

    def __init__(self, l_deg: np.ndarray, b_deg: np.ndarray, first: np.ndarray):
        self.l_deg, self.b_deg, self.first = l_deg, b_deg, first


class _Trial:
    """Chosen lines at one number of halvings."""

    def __init__(self, group: Group, galaxy: Galaxy, extinction: _Extinction, chosen: np.ndarray, halvings: int):
        sight = group.sight_lines
        l_deg, b_deg = sight.l_deg[chosen], sight.b_deg[chosen]
        self.nodes = place_nodes(l_deg, b_deg, galaxy.R0_kpc, galaxy.values["sun.z0_kpc"], halvings)
        self.A_V_mag = extinction(chosen, self.nodes.d_kpc)
        n_line, n_node = self.nodes.d_kpc.shape
        self.lines = Lines(
            direction=unit_vectors(l_deg, b_deg),
            first_line=np.arange(n_line + 1),
            first_node=np.arange(n_line + 1) * n_node,
            d_kpc=self.nodes.d_kpc.ravel(),
            volume_pc3=(self.nodes.volume_pc3 * sight.omega_sr[chosen, None]).ravel(),
            mu_mag=self.nodes.mu_mag.ravel(),
            A_mag=extinction.coefficients.A_mag(self.A_V_mag.ravel()),
            node_weight=np.ones(1),
        )

    def take(self, rows: np.ndarray) -> "_Trial":
        """Return the trial of some of its lines (their nodes only)."""
        trial = object.__new__(_Trial)
        trial.nodes = Nodes(*(x[rows] for x in (self.nodes.d_kpc, self.nodes.mu_mag, self.nodes.volume_pc3)))
        trial.A_V_mag = self.A_V_mag[rows]
        return trial

    def row(self, row: int) -> tuple[np.ndarray, ...]:
        """Distance, volume per steradian, modulus and visual extinction of one line's nodes."""
        nodes = self.nodes
        return nodes.d_kpc[row], nodes.volume_pc3[row], nodes.mu_mag[row], self.A_V_mag[row]


def _first_modulus(trial: _Trial, count: Callable[[Lines], np.ndarray]) -> float:
    """Return the distance modulus below which the nodes of no line hold a part that matters of any bin.

    A few lines, evenly taken, with every node as a field of its own.
    """
    chosen = np.unique(np.linspace(0, trial.nodes.d_kpc.shape[0] - 1, 12).astype(int))
    n_node = trial.nodes.d_kpc.shape[1]
    whole, nodes = trial.lines, np.ravel(chosen[:, None] * n_node + np.arange(n_node))
    counts = count(
        Lines(
            direction=np.repeat(whole.direction[chosen], n_node, axis=0),
            first_line=np.arange(nodes.size + 1),
            first_node=np.arange(nodes.size + 1),
            d_kpc=whole.d_kpc[nodes],
            volume_pc3=whole.volume_pc3[nodes],
            mu_mag=whole.mu_mag[nodes],
            A_mag=whole.A_mag[:, :, nodes],
            node_weight=whole.node_weight,
        )
    ).reshape(chosen.size, n_node, -1)
    nearer = np.cumsum(counts, axis=1)
    matters = (nearer > _NEGLIGIBLE * nearer[:, -1:]).any(axis=2)
    return float(trial.nodes.mu_mag[chosen, matters.argmax(axis=1)].min())


def _join(group: Group, coefficients: Coefficients, settled: list, y_range_mag, first_mu, dust_range) -> Lines:
    """One line after the other, without the nodes that cannot reach a bin."""
    kept, sizes = [], []
    least, most = coefficients.band[0] / dust_range, coefficients.band[-1] * dust_range
    for (d, volume, mu, A_V), omega in zip(settled, group.sight_lines.omega_sr, strict=True):
        # Room for a fit to change a field's extinction: the nodes that could then reach a bin stay.
        reach = (mu + most * A_V > y_range_mag[0]) & (mu + least * A_V < y_range_mag[1]) & (mu >= first_mu)
        reach[np.argmin(np.abs(mu + A_V - np.mean(y_range_mag)))] = True  # a line keeps at least one node
        kept.append((d[reach], volume[reach] * omega, mu[reach], A_V[reach]))
        sizes.append(int(reach.sum()))
    d, volume, mu, A_V = (np.concatenate(column) for column in zip(*kept, strict=True))
    return Lines(
        direction=unit_vectors(group.sight_lines.l_deg, group.sight_lines.b_deg),
        first_line=group.sight_lines.first,
        first_node=np.concatenate([[0], np.cumsum(sizes)]),
        d_kpc=d,
        volume_pc3=volume,
        mu_mag=mu,
        A_mag=coefficients.A_mag(A_V),
        node_weight=np.ones(1),
        E_mag=coefficients.E_mag(A_V),
    )
