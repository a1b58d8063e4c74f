"""The sight lines of a group of fields, with as many nodes as each needs."""

import logging
from collections.abc import Callable

import numpy as np

from starcount import dust
from starcount.forward.nodes import Nodes, place_nodes
from starcount.forward.projection import Lines
from starcount.galaxy import Galaxy
from starcount.galaxy.frame import unit_vectors
from starcount.survey import Group

log = logging.getLogger(__name__)

_MOST_HALVINGS = 7
MOST_DUST = 4.0
"""A fit may raise or lower a field's extinction by this factor before stars are missed."""

_NEGLIGIBLE = 1e-6  # part of a bin that the nearest nodes may hold and still be left out


def group_lines(
    group: Group, galaxy: Galaxy, count: Callable[[Lines], np.ndarray], y_range_mag, accuracy: float
) -> Lines:
    """Return a group's sight lines with their nodes, extinction included.

    ``count`` returns the counts (line, bin) of lines that each stand for a field of their own; the panels of a line are
    halved until that changes no bin by more than the part ``accuracy``. Nodes that reach no bin are left out: those
    with y outside ``y_range_mag``, and the nearest ones, which hold less than 1e-6 of any bin.
    """
    extinction = _Extinction(group, dust.band_coefficient(group.band))
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
    return _join(group, settled, y_range_mag, first_mu)


class _Extinction:
    """The extinction of chosen sight lines of a group, in its band."""

    def __init__(self, group: Group, coefficient: float):
        self.group, self.coefficient = group, coefficient
        self.field = np.repeat(np.arange(group.fields.name.size), np.diff(group.sight_lines.first))

    def __call__(self, chosen: np.ndarray, d_kpc: np.ndarray) -> np.ndarray:
        """Return A (line, node) in mag."""
        group = self.group
        field = self.field[chosen]
        lines = _Chosen(
            group.sight_lines.l_deg[chosen],
            group.sight_lines.b_deg[chosen],
            np.searchsorted(field, np.arange(group.fields.name.size + 1)),
        )
        return self.coefficient * dust.A_V_mag(group.fields, lines, d_kpc, group.profiles)


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
        self.A_mag = extinction(chosen, self.nodes.d_kpc)
        n_line, n_node = self.nodes.d_kpc.shape
        self.lines = Lines(
            direction=unit_vectors(l_deg, b_deg),
            first_line=np.arange(n_line + 1),
            first_node=np.arange(n_line + 1) * n_node,
            d_kpc=self.nodes.d_kpc.ravel(),
            volume_pc3=(self.nodes.volume_pc3 * sight.omega_sr[chosen, None]).ravel(),
            mu_mag=self.nodes.mu_mag.ravel(),
            A_mag=self.A_mag.reshape(1, 1, -1),
            node_weight=np.ones(1),
        )

    def take(self, rows: np.ndarray) -> "_Trial":
        """Return the trial of some of its lines (their nodes only)."""
        trial = object.__new__(_Trial)
        trial.nodes = Nodes(*(x[rows] for x in (self.nodes.d_kpc, self.nodes.mu_mag, self.nodes.volume_pc3)))
        trial.A_mag = self.A_mag[rows]
        return trial

    def row(self, row: int) -> tuple[np.ndarray, ...]:
        """Distance, volume per steradian, modulus and extinction of one line's nodes."""
        nodes = self.nodes
        return nodes.d_kpc[row], nodes.volume_pc3[row], nodes.mu_mag[row], self.A_mag[row]


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


def _join(group: Group, settled: list, y_range_mag, first_mu: float) -> Lines:
    """One line after the other, without the nodes that cannot reach a bin."""
    kept, sizes = [], []
    for (d, volume, mu, A), omega in zip(settled, group.sight_lines.omega_sr, strict=True):
        # Room for a fit to change a field's extinction: the nodes that could then reach a bin stay.
        reach = (mu + MOST_DUST * A > y_range_mag[0]) & (mu + A / MOST_DUST < y_range_mag[1]) & (mu >= first_mu)
        reach[np.argmin(np.abs(mu + A - np.mean(y_range_mag)))] = True  # a line keeps at least one node
        kept.append((d[reach], volume[reach] * omega, mu[reach], A[reach]))
        sizes.append(int(reach.sum()))
    d, volume, mu, A = (np.concatenate(column) for column in zip(*kept, strict=True))
    return Lines(
        direction=unit_vectors(group.sight_lines.l_deg, group.sight_lines.b_deg),
        first_line=group.sight_lines.first,
        first_node=np.concatenate([[0], np.cumsum(sizes)]),
        d_kpc=d,
        volume_pc3=volume,
        mu_mag=mu,
        A_mag=A.reshape(1, 1, -1),
        node_weight=np.ones(1),
    )
