"""Bringing a census to the Sun: what one component must hold so that spheres count what was counted."""

import logging
from dataclasses import dataclass

import numpy as np

from starcount.errors import InputError
from starcount.stars.cells import cell_range, to_cells
from starcount.stars.census import CENSUS_CLASSES, CENSUS_SETS, Census
from starcount.stars.evolved import evolved_split

log = logging.getLogger(__name__)

ITERATIONS = 100
"""Twenty are enough for layers of 0.05 to 0.3 kpc; the loop ends when the rows return."""


@dataclass(frozen=True, eq=False)
class Remainder:
    """What the other components leave of a census; arrays (row,).

    ``density_pc3`` is the mean over the row's sphere, never negative; ``clipped`` marks the rows in which the others
    hold more stars than were counted, ``excess_pc3`` how many.
    """

    density_pc3: np.ndarray
    clipped: np.ndarray
    excess_pc3: np.ndarray


def remainder(census: Census, others: np.ndarray, other_means: np.ndarray) -> Remainder:
    """Return what the census holds beyond ``others`` (other, class, cell), stars pc^-3 at the Sun.

    ``other_means`` (other, row) are the means of their densities over each row's sphere relative to the Sun. The
    census is the sum of the components row by row, each a class and a magnitude interval.
    """
    density = census.density_pc3.copy()
    counted_with = np.einsum("kc,ocm->okm", CENSUS_SETS, others)
    for row, (k, cells) in enumerate(_places(census)):
        density[row] -= counted_with[:, k, cells].sum(axis=1) @ other_means[:, row]
    return Remainder(np.maximum(density, 0.0), density < 0, np.maximum(-density, 0.0))


def census_at_the_sun(
    census: Census, shares: np.ndarray, layer_means: np.ndarray, others: np.ndarray, other_means: np.ndarray
) -> np.ndarray:
    """Return the luminosity function (layer, class, cell), stars pc^-3 at the Sun, of what fills a census.

    Each census row minus the other components (see ``remainder``) is shared among the layers by ``shares``
    (layer, class, cell) and divided by ``layer_means`` (layer, row), the mean of a layer's density over the row's
    sphere relative to the Sun. The function is smooth at the Sun, not in the counts, because rows have different
    spheres; the layers counted over each row's sphere return the row to rounding. What the census counts together is
    split among its classes by ``evolved_split``. Rows in which the others hold more than was counted become 0 and are
    logged. Raises ``InputError`` where stars were counted in a class without layer.
    """
    left = remainder(census, others, other_means)
    _report(census, left)
    split = shares * (evolved_split(census.band) + CENSUS_SETS[[0, 2]].sum(axis=0)[:, None])
    lf = np.zeros_like(shares)
    for k, of_set in enumerate(CENSUS_SETS):
        rows, ours = np.flatnonzero(census.class_index == k), split * of_set[:, None]
        if rows.size:
            lf += ours * _fill(census, rows, left.density_pc3[rows], ours.sum(axis=1), layer_means)
    return lf


def _places(census: Census) -> list[tuple[int, slice]]:
    limits = zip(census.class_index, census.M_lo, census.M_hi, strict=True)
    return [(c, cell_range(lo, hi)) for c, lo, hi in limits]


def _fill(census: Census, rows: np.ndarray, counted: np.ndarray, shares: np.ndarray, means: np.ndarray) -> np.ndarray:
    """Return the cells of one census class at the Sun whose sphere means are ``counted`` (row,).

    The mean of a row depends on where in it the stars are, as layers meet inside rows; hence the iteration.
    """
    edges = np.append(census.M_lo[rows], census.M_hi[rows[-1]])
    cells = [cell_range(census.M_lo[row], census.M_hi[row]) for row in rows]
    weights = [means[:, row] @ shares[:, k] for row, k in zip(rows, cells, strict=True)]
    if any(n > 0 and not w.all() for n, w in zip(counted, weights, strict=True)):
        word = CENSUS_CLASSES[census.class_index[rows[0]]]
        raise InputError(f"the census holds stars of class {word!r}, but no layer does")
    at_the_sun = counted / np.array([w.mean() or 1.0 for w in weights])
    for _ in range(ITERATIONS):
        lf = to_cells(edges, at_the_sun)
        returned = np.array([lf[k] @ w for k, w in zip(cells, weights, strict=True)])
        ratio = np.divide(counted, returned, out=np.ones_like(counted), where=returned > 0)
        if np.abs(ratio - 1).max() < 1e-13:
            break
        at_the_sun = at_the_sun * ratio
    return lf


def _report(census: Census, left: Remainder) -> None:
    for row in np.flatnonzero(left.clipped):
        log.warning(
            "census in %s, %s, M %g to %g: the other components hold %.2g pc^-3 more than was counted; set to 0",
            census.band,
            CENSUS_CLASSES[census.class_index[row]],
            census.M_lo[row],
            census.M_hi[row],
            left.excess_pc3[row],
        )
