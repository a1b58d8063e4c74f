"""The tracks behind the loci: what stars of one metallicity look like at a reference magnitude.

Everything here has the axes (quantity, ...): the first quantity is ln Teff, the others are the magnitudes of all bands
relative to the reference band. Errors have (range, ...), see ``ranges``.
"""

from dataclasses import dataclass
from functools import cache
from importlib.resources import files

import numpy as np
from astropy.table import Table

from starcount.stars.bands import BANDS
from starcount.stars.cells import M_MIDDLE_MAG
from starcount.stars.ecsv import read_ecsv

KINDS = 3
"""Groups by colour into which the stars of one class, magnitude and metallicity are cut: one locus can cross a
magnitude several times (branch, clump and early second ascent)."""

SMOOTHING_MAG = 0.1
"""Width of the Gaussian over which a track is smoothed in magnitude: about its spacing on the upper giant branch."""

_JUMP_MAG = 0.5
"""Neighbouring points of a track further apart than this are not joined: another phase begins."""

_STEP_MAG = 0.02

_ERROR = "error "
"""What the names of columns of errors begin with."""


@dataclass(frozen=True, eq=False)
class Cells:
    """What the stars of one class and metallicity are in every cell of reference magnitude.

    ``stars`` (cell,) is proportional to their number, ``look`` (quantity, kind, cell); ``error_mag`` (range, kind,
    cell) is what the magnitudes of a range may be off by, nan where a relation would be used outside its own range.
    The kinds of a cell hold equal shares.
    """

    feh: float
    stars: np.ndarray
    look: np.ndarray
    error_mag: np.ndarray


@cache
def table(name: str) -> Table:
    """Return one of the tables of loci."""
    return read_ecsv(files(__package__) / "data" / f"{name}.ecsv")


def ranges() -> tuple[str, ...]:
    """Return what the tables state errors of: every system, and single bands with errors of their own."""
    return tuple(name.removeprefix(_ERROR) for name in table("dwarfs").colnames if name.startswith(_ERROR))


def metallicities(name: str) -> np.ndarray:
    """Return the [Fe/H] of the tracks in a table, rising."""
    return np.unique(np.asarray(table(name)["feh"], float))


@cache
def sequence(name: str, feh: float | None, reference: str) -> Cells:
    """Return a track that passes every magnitude once: dwarfs of a metallicity, or white dwarfs (None).

    Beyond its ends the stars keep the colours of the end, with no known error.
    """
    rows = table(name) if feh is None else table(name)[np.asarray(table(name)["feh"]) == feh]
    rows = rows[np.argsort(rows[reference])]
    at, look, error = np.asarray(rows[reference], float), _look(rows, reference), _error(rows)
    reached = (at[0] <= M_MIDDLE_MAG) & (at[-1] >= M_MIDDLE_MAG)
    return Cells(
        feh=np.nan if feh is None else feh,
        stars=np.ones(M_MIDDLE_MAG.size),
        look=np.array([np.interp(M_MIDDLE_MAG, at, q) for q in look])[:, None],
        error_mag=np.array([np.where(reached, np.interp(M_MIDDLE_MAG, at, e), np.nan) for e in error])[:, None],
    )


@cache
def branch(star_class: str, feh: float, youngest_Gyr: float, reference: str) -> Cells:
    """Return the evolved stars of a class, metallicity and least age: weighted points of tracks, smoothed in M."""
    rows = table("evolved")
    old = np.asarray(rows["age_Gyr"]) >= youngest_Gyr
    rows = rows[old & (np.asarray(rows["class"]) == star_class) & (np.asarray(rows["feh"]) == feh)]
    n_quantity = 1 + len(BANDS)
    stars = np.zeros(M_MIDDLE_MAG.size)
    look = np.full((n_quantity, KINDS, stars.size), np.nan)
    error = np.full((len(ranges()), KINDS, stars.size), np.nan)
    if len(rows):
        weight, at, points, errors = _fine(rows, reference)
        for j, middle in enumerate(M_MIDDLE_MAG):
            near = np.flatnonzero(np.abs(at - middle) < 3 * SMOOTHING_MAG)
            if near.size:
                w = weight[near] * np.exp(-0.5 * ((at[near] - middle) / SMOOTHING_MAG) ** 2)
                stars[j] = w.sum()
                look[:, :, j], error[:, :, j] = _kinds(w, points[:, near], errors[:, near])
    return Cells(feh, stars, look, error)


def _kinds(weight: np.ndarray, look: np.ndarray, error: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Cut points into groups of equal weight by temperature; return means (quantity, kind) and errors (range, kind)."""
    order = np.argsort(look[0])
    ends = np.cumsum(weight[order]) / weight.sum()
    begins = ends - weight[order] / weight.sum()
    limits = np.linspace(0.0, 1.0, KINDS + 1)
    overlap = np.minimum(ends, limits[1:, None]) - np.maximum(begins, limits[:-1, None])
    overlap = np.maximum(overlap, 0.0) + 1e-300
    overlap /= overlap.sum(axis=1, keepdims=True)
    held = overlap > 1e-12
    means = np.array([[q[order][h] @ o[h] for o, h in zip(overlap, held, strict=True)] for q in look])
    return means, np.array([[e[order][h].max() for h in held] for e in error])


def _fine(rows: Table, reference: str):
    """Return weight (point,), reference magnitude, look and errors of a track cut into steps of 0.02 mag.

    The rows of a track follow its evolution.
    """
    M, weight = np.asarray(rows[reference], float), np.asarray(rows["weight"], float)
    joined = (np.abs(np.diff(M)) < _JUMP_MAG) & (np.diff(rows["age_Gyr"]) == 0)
    parts = np.maximum(np.append(joined, False).astype(int) + np.append(False, joined), 1)
    per_part = weight / parts
    first, along, stars = [], [], []
    for i in range(len(M)):
        if i < len(M) - 1 and joined[i]:
            n = int(np.ceil(abs(M[i + 1] - M[i]) / _STEP_MAG)) or 1
            first += [i] * n
            along += [(k + 0.5) / n for k in range(n)]
            stars += [(per_part[i] + per_part[i + 1]) / n] * n
        elif not (i and joined[i - 1]):
            first, along, stars = [*first, i], [*along, 0.0], [*stars, weight[i]]
    first, along = np.array(first), np.array(along)
    then = np.where(along > 0, first + 1, first)
    look, error = _look(rows, reference), _error(rows)
    return (
        np.array(stars),
        M[first] * (1 - along) + M[then] * along,
        look[:, first] * (1 - along) + look[:, then] * along,
        np.maximum(error[:, first], error[:, then]),
    )


def _look(rows: Table, reference: str) -> np.ndarray:
    """Return (quantity, row): ln Teff and the magnitude of every band less that of the reference band."""
    nothing = np.full(len(rows), np.nan)
    columns = [np.ma.filled(np.ma.asarray(rows[name]), np.nan) if name in rows.colnames else nothing for name in BANDS]
    return np.vstack([np.log(rows["Teff"]), *[np.asarray(column, float) - rows[reference] for column in columns]])


def _error(rows: Table) -> np.ndarray:
    """Return (range, row), mag."""
    return np.array([np.asarray(rows[_ERROR + name], float) for name in ranges()])
