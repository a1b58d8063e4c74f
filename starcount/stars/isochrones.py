"""A population from isochrones: stars born by a mass function, a star-formation history and a metallicity spread.

Rows of one age and [Fe/H], in the order of their initial mass, are a line in the colour-magnitude diagram. Between two
rows everything runs linearly with mass, and stars are as many as the mass function holds between their masses. Between
two rows of different class nothing is interpolated: half the masses belong to each. Rows that are left out (class -1)
keep their place in the line, so that their stars go to no other row.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from starcount.errors import Problem
from starcount.stars.cells import CELL_MAG, M_EDGES_MAG
from starcount.stars.histories import History, Metallicity
from starcount.stars.imf import MassFunction
from starcount.stars.phases import LEFT_OUT

TEFF_STEP = 0.01
"""Stars of one class, cell and [Fe/H] whose temperatures differ by less than 1 % become one point of the locus."""

JUMP_MAG = 1.5
JUMP_SHARE = 0.01
"""Two rows may lie further apart than JUMP_MAG only where less than JUMP_SHARE of an isochrone's stars lie between."""


@dataclass(frozen=True, eq=False)
class Rows:
    """The rows of an isochrone table, every array (row,)."""

    mass_sun: np.ndarray
    age_Gyr: np.ndarray
    feh: np.ndarray
    class_index: np.ndarray
    Teff_K: np.ndarray
    M_mag: Mapping[str, np.ndarray]

    def take(self, rows: np.ndarray) -> "Rows":
        """Return the rows of an index or mask."""
        M_mag = {band: M[rows] for band, M in self.M_mag.items()}
        arrays = (self.mass_sun, self.age_Gyr, self.feh, self.class_index, self.Teff_K)
        return Rows(*(array[rows] for array in arrays), M_mag)


@dataclass(frozen=True, eq=False)
class Points:
    """Stars by kind, every array (point,): ``number`` for each solar mass formed; ``cell`` of ``M_mag[reference]``."""

    class_index: np.ndarray
    cell: np.ndarray
    number: np.ndarray
    Teff_K: np.ndarray
    M_mag: Mapping[str, np.ndarray]


Isochrones = Mapping[tuple[float, float], Rows]
"""(age in Gyr, [Fe/H]) -> rows by rising mass."""


def isochrones(rows: Rows) -> Isochrones:
    """Return the rows of a table by age and [Fe/H], a class ending and the next beginning half way between.

    An isochrone of which every row is left out is missing.
    """
    rows = rows.take(np.lexsort((rows.mass_sun, rows.age_Gyr, rows.feh)))
    new = np.flatnonzero((np.diff(rows.age_Gyr) != 0) | (np.diff(rows.feh) != 0)) + 1
    limits = [0, *new.tolist(), rows.mass_sun.size]
    return {
        (float(rows.age_Gyr[first]), float(rows.feh[first])): _split(rows.take(np.arange(first, last)))
        for first, last in pairwise(limits)
        if (rows.class_index[first:last] != LEFT_OUT).any()
    }


def _split(line: Rows) -> Rows:
    last = np.flatnonzero(np.diff(line.class_index))
    full = line.take(np.sort(np.concatenate([np.arange(line.mass_sun.size), last, last + 1])))
    twice = last + 2 * np.arange(last.size) + 1  # where a class's last row stands for the second time
    middle = (line.mass_sun[last] + line.mass_sun[last + 1]) / 2
    full.mass_sun[twice] = middle
    full.mass_sun[twice + 1] = middle
    return full


def isochrone_points(
    lines: Isochrones, imf: MassFunction, history: History, metallicity: Metallicity, reference: str
) -> Points:
    """Return the stars alive for each solar mass formed, by kind; ``reference`` is a band of the rows.

    Their sum is the sum over isochrones of weight x the mass function over the masses that are not left out, to
    rounding.
    """
    ages, fehs = ages_and_metallicities(lines)
    parts = [
        _grouped([_pieces(lines[age, feh], imf, reference, share * weight) for age, weight in history.nodes(ages)])
        for feh, share in metallicity.nodes(fehs)
    ]
    return _joined(parts)


def ages_and_metallicities(lines: Isochrones) -> tuple[np.ndarray, np.ndarray]:
    """Return the ages in Gyr and the [Fe/H] of a table, (node,) each."""
    return np.unique([age for age, _ in lines]), np.unique([feh for _, feh in lines])


def jumps(lines: Isochrones, imf: MassFunction, band: str, file: str) -> list[Problem]:
    """Return the widest of the places where an isochrone has too few rows, or nothing.

    Many stars must not lie between two rows that differ by more than a magnitude or so in ``band``.
    """
    found = []
    for (age, feh), line in lines.items():
        stars = imf.number(line.mass_sun[:-1], line.mass_sun[1:])
        stars[line.class_index[:-1] == LEFT_OUT] = 0.0
        step, share = np.abs(np.diff(line.M_mag[band])), stars / max(stars.sum(), np.finfo(float).tiny)
        found += [(step[k], share[k], age, feh, k) for k in np.flatnonzero((step > JUMP_MAG) & (share > JUMP_SHARE))]
    if not found:
        return []
    step, share, age, feh, k = max(found)
    masses = lines[age, feh].mass_sun[k : k + 2]
    where = f"age {age:.4g} Gyr, [Fe/H] {feh:g}, masses {masses[0]:.4g} to {masses[1]:.4g}"
    others = f", and {len(found) - 1} more like it" if len(found) > 1 else ""
    gap = f"a step of {step:.2g} mag in {band} with {share:.0%} of the stars{others}"
    return [Problem(file, where, gap, f"rows at most {JUMP_MAG:g} mag apart")]


def _pieces(line: Rows, imf: MassFunction, reference: str, weight: float) -> Points:
    """Cut an isochrone at the edges of the cells of the reference magnitude."""
    x = (line.M_mag[reference] - M_EDGES_MAG[0]) / CELL_MAG
    held = np.flatnonzero((line.class_index[:-1] != LEFT_OUT) & (np.diff(line.mass_sun) > 0))
    low, high = np.minimum(x[held], x[held + 1]), np.maximum(x[held], x[held + 1])
    first, last = np.floor(low).astype(int), np.floor(high).astype(int)
    of = np.repeat(np.arange(held.size), last - first + 1)
    begins = np.cumsum(last - first + 1) - (last - first + 1)
    cell = first[of] + np.arange(of.size) - begins[of]
    width = np.where(high > low, high - low, 1.0)[of]
    near = (np.maximum(cell, low[of]) - low[of]) / width
    far = np.where(cell == last[of], 1.0, (cell + 1 - low[of]) / width)
    segment = held[of]
    rising = x[segment + 1] >= x[segment]
    t0, t1 = np.where(rising, near, 1 - far), np.where(rising, far, 1 - near)

    def at(values: np.ndarray, t: np.ndarray) -> np.ndarray:
        return values[segment] + t * (values[segment + 1] - values[segment])

    number = weight * imf.number(at(line.mass_sun, t0), at(line.mass_sun, t1))
    middle = (t0 + t1) / 2
    M_mag = {band: at(M, middle) for band, M in line.M_mag.items()}
    cell = np.clip(cell, 0, M_EDGES_MAG.size - 2)
    return Points(line.class_index[segment], cell, number, at(line.Teff_K, middle), M_mag)


def _grouped(parts: list[Points]) -> Points:
    """Return points of one class, cell and temperature as one, at their mean."""
    whole = _joined(parts)
    kept = whole.number > 0
    temperature = np.floor(np.log(whole.Teff_K[kept]) / TEFF_STEP).astype(int)
    key = np.stack([whole.class_index[kept], whole.cell[kept], temperature])
    kinds, group = np.unique(key, axis=1, return_inverse=True)
    number = np.bincount(group.ravel(), whole.number[kept])

    def mean(values: np.ndarray) -> np.ndarray:
        return np.bincount(group.ravel(), whole.number[kept] * values[kept]) / number

    M_mag = {band: mean(M) for band, M in whole.M_mag.items()}
    return Points(kinds[0], kinds[1], number, mean(whole.Teff_K), M_mag)


def _joined(parts: list[Points]) -> Points:
    def join(name: str) -> np.ndarray:
        return np.concatenate([getattr(part, name) for part in parts])

    M_mag = {band: np.concatenate([part.M_mag[band] for part in parts]) for band in parts[0].M_mag}
    return Points(join("class_index"), join("cell"), join("number"), join("Teff_K"), M_mag)
