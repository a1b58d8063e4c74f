"""Building a locus: tracks of several metallicities, weighted by a population's distribution of [Fe/H]."""

from functools import cache

import numpy as np
from scipy.special import ndtri

from starcount.constants import EVOLVED_CLASSES
from starcount.errors import UnknownName
from starcount.stars import tracks
from starcount.stars.bands import BANDS
from starcount.stars.cache import kept
from starcount.stars.cells import CELL_MAG, CLASSES, M_MIDDLE_MAG
from starcount.stars.evolved import require_reference
from starcount.stars.locus import Locus, scatter_mag

METALLICITY = {
    "census": (0.0, 0.2, 0.0),
    "thick disc": (-0.6, 0.3, 5.0),
    "halo": (-1.5, 0.5, 5.0),
    "bulge": (0.0, 0.4, 8.0),
}
"""Mean and spread of [Fe/H] in dex and age in Gyr of the youngest giants' tracks: conventions, from memory. The spread
is taken as Gaussian; the tracks carry weights of constant star formation."""

NODES, RED_GIANT_NODES = 7, 21
"""Metallicities of a population; more where a tenth of a dex moves a star at the tip of the branch by tenths of a
magnitude, lest every metallicity draw a line of its own."""

_COLOURS_HOLD_MAG = 0.5
"""Stars this much brighter or fainter than a track, for their age, have its colours."""

VERIFIED_MAG = 0.105
"""The one rule of what counts as inside the verified range: the magnitudes of a system, and the colours between its
bands, are known to 0.1 mag (to the two decimals of the tables' errors), and no relation behind them is used outside the
range its source gives. The errors are stated star by star in the tables, with what they rest on."""

CLIPPED_DEX = 0.35
"""Stars whose [Fe/H] lies this far outside that of the tracks have the colours of the last track and are not inside.
Below [Fe/H] = -2 that is less than 0.1 mag in most colours; it takes in the lowest seventh of the halo, at -2.30."""

_LEAST_SHARE = 1e-4
"""Kinds of stars rarer than this in their cell are left out."""


@cache
def named_locus(name: str, reference: str) -> Locus:
    """Return the locus of one of our populations, or of the census, in a reference band."""
    if name not in METALLICITY:
        raise UnknownName("population with a locus", name, tuple(METALLICITY))
    mean_dex, spread_dex, youngest_Gyr = METALLICITY[name]
    return locus_of(mean_dex, spread_dex, reference, youngest_Gyr)


@cache
def locus_of(mean_dex: float, spread_dex: float, reference: str, youngest_Gyr: float = 5.0) -> Locus:
    """Return the locus of a population whose [Fe/H] is Gaussian and whose giants are not younger than some age.

    Metallicities of equal weight with that mean and spread, clipped to the tracks'; between two tracks stars are
    interpolated linearly. Of evolved stars at one magnitude the metallicities hold what their tracks put there: at the
    brightest magnitudes only those whose branch reaches so far. Cells that no track reaches take the nearest that one
    does, with its colours; further than half a magnitude away they are not inside.
    """
    require_reference(reference)
    inputs = ("locus", mean_dex, spread_dex, reference, youngest_Gyr)
    return Locus.from_arrays(kept(inputs, lambda: _build(*inputs[1:]).arrays()))


def _build(mean_dex: float, spread_dex: float, reference: str, youngest_Gyr: float) -> Locus:
    feh = _metallicities(mean_dex, spread_dex, NODES)
    pieces = [_points("white dwarf", [tracks.sequence("white_dwarfs", None, reference)], reference)]
    dwarfs = [_between("dwarfs", f, lambda at: tracks.sequence("dwarfs", at, reference)) for f in feh]
    pieces.append(_points("dwarf", dwarfs, reference))
    for name in EVOLVED_CLASSES:
        feh = _metallicities(mean_dex, spread_dex, RED_GIANT_NODES if name == "red giant" else NODES)
        found = [
            _between("evolved", f, lambda at, name=name: tracks.branch(name, at, youngest_Gyr, reference)) for f in feh
        ]
        pieces.append(_points(name, found, reference))
    pieces = [piece for piece in pieces if piece is not None]
    return Locus.from_arrays({key: np.concatenate([piece[key] for piece in pieces]) for key in pieces[0]})


def _metallicities(mean_dex: float, spread_dex: float, n: int) -> np.ndarray:
    """Return [Fe/H] of ``n`` equal parts of a Gaussian with that mean and spread."""
    z = ndtri((np.arange(n) + 0.5) / n)
    return mean_dex + spread_dex * z / np.sqrt((z**2).mean())


def _between(name: str, feh: float, track) -> tracks.Cells:
    """Return the cells at a metallicity, linear between the two tracks around it (in the stars each holds); so are
    their errors. Far outside the tracks' range no error is known."""
    grid = tracks.metallicities(name)
    far = not grid[0] - CLIPPED_DEX <= feh <= grid[-1] + CLIPPED_DEX
    feh = float(np.clip(feh, grid[0], grid[-1]))
    hi = max(int(np.searchsorted(grid, feh)), 1)
    t = (feh - grid[hi - 1]) / (grid[hi] - grid[hi - 1])
    pair = [(1 - t, track(float(grid[hi - 1]))), (t, track(float(grid[hi])))]
    stars = sum(weight * cells.stars for weight, cells in pair)
    look, error = np.zeros_like(pair[0][1].look), np.zeros_like(pair[0][1].error_mag)
    for weight, cells in pair:
        part = np.divide(weight * cells.stars, stars, out=np.zeros_like(stars), where=stars > 0)
        look += np.where(part > 0, part * cells.look, 0.0)
        error += np.where(part > 0, part * cells.error_mag, 0.0)
    return tracks.Cells(feh, stars, look, np.full_like(error, np.nan) if far else error)


def _points(star_class: str, nodes: list[tracks.Cells], reference: str) -> dict[str, np.ndarray] | None:
    """Return the points of a class as named arrays; nothing where no track has such stars."""
    stars = np.array([cells.stars for cells in nodes])
    total = stars.sum(axis=0)
    if not total.any():
        return None
    reached = np.flatnonzero(total > 1e-9 * total.max())
    nearest = reached[np.abs(M_MIDDLE_MAG[reached] - M_MIDDLE_MAG[:, None]).argmin(axis=1)]
    share = (stars / np.where(total > 0, total, 1.0))[:, nearest]  # (node, cell)
    share[share < _LEAST_SHARE] = 0.0
    share /= share.sum(axis=0)
    node, cell = np.nonzero(share)
    look = np.array([cells.look for cells in nodes])[node, :, :, nearest[cell]]  # (point, quantity, kind)
    inside = np.array([cells.error_mag for cells in nodes])[node, :, :, nearest[cell]] <= VERIFIED_MAG
    inside &= (np.abs(nearest[cell] - cell) * CELL_MAG <= _COLOURS_HOLD_MAG)[:, None, None]
    return _named(star_class, cell, share[node, cell], look, inside)


def _named(star_class: str, cell, share, look: np.ndarray, inside: np.ndarray) -> dict[str, np.ndarray]:
    n_kind = look.shape[2]
    cell = np.repeat(cell, n_kind)
    Teff, *differences = np.moveaxis(look, 1, 0).reshape(look.shape[1], -1)
    points = {
        "class_index": np.full(cell.size, CLASSES.index(star_class)),
        "cell": cell,
        "share": np.repeat(share, n_kind) / n_kind,
        "Teff_K": np.exp(Teff),
        "scatter_mag": scatter_mag(star_class, M_MIDDLE_MAG[cell], np.exp(Teff)),
    }
    points |= {f"M_mag/{b}": M_MIDDLE_MAG[cell] + d for b, d in zip(BANDS, differences, strict=True)}
    ranges = np.moveaxis(inside, 1, 0).reshape(len(tracks.ranges()), -1)
    return points | {f"inside/{name}": s for name, s in zip(tracks.ranges(), ranges, strict=True)}
