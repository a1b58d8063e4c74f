"""Luminosity functions in tables: rows of a class between two magnitudes, in the reference bands V and G."""

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from astropy.table import Table

from starcount.constants import CLASS_WORDS, EVOLVED_CLASSES, REFERENCE_WINDOW_MV_MAG
from starcount.errors import Problem, Problems
from starcount.stars.bands import BANDS
from starcount.stars.binaries import system_factor
from starcount.stars.cells import CLASSES, EVOLVED, M_EDGES_MAG, M_MIDDLE_MAG, members, to_cells, window
from starcount.stars.ecsv import numbers, row_problems, words
from starcount.stars.evolved import REFERENCES, evolved_split
from starcount.stars.tracks import sequence

COUNTS = ("stars", "systems")
"""What one entry of a table is: every star by itself, or what is seen as one star."""


@dataclass(frozen=True, eq=False)
class FunctionTable:
    """A checked table of luminosity functions: arrays (row,) of band, class, M_lo, M_hi (mag) and stars."""

    file: str
    band: np.ndarray
    star_class: np.ndarray
    M_lo: np.ndarray
    M_hi: np.ndarray
    stars: np.ndarray
    counts: str
    window_stars: float | None

    def per_star(self, reference: str) -> np.ndarray:
        """Return the function (class, cell) in a reference band, of systems, per system with 4.5 < M_V < 8.5."""
        if not (self.band == reference).any():
            raise Problems(Problem(self.file, "band", ", ".join(sorted(set(self.band))), f"rows of band {reference}"))
        return self._function(reference) / self._window()

    def _function(self, reference: str) -> np.ndarray:
        lf = np.zeros((len(CLASSES), M_MIDDLE_MAG.size))
        split = evolved_split(reference)[list(EVOLVED)]
        for word in CLASS_WORDS:
            k = _ordered(self.band, self.star_class, self.M_lo, (reference, word))
            if k.size:
                cells = to_cells(np.append(self.M_lo[k], self.M_hi[k[-1]]), self.stars[k])
                lf[list(members(word))] += cells * (split if word == "evolved" else 1.0)
        return lf * _systems(reference) if self.counts == "stars" else lf

    def _window(self) -> float:
        lo, hi = REFERENCE_WINDOW_MV_MAG
        if (self.band == "V").any():
            stars, where = window(self._function("V")), "rows of band V"
        else:
            stars, where = self.window_stars, "meta key window"
        if isinstance(stars, bool) or not isinstance(stars, int | float) or not (0 < stars < np.inf):
            found = "missing, and there are no rows of band V" if stars is None else str(stars)
            raise Problems(Problem(self.file, where, found, f"more than 0 of the table's stars with {lo} < M_V < {hi}"))
        return float(stars)


def function_table(table: Table, file: str) -> FunctionTable:
    """Return the checked function in a table; raises ``Problems`` with everything that is wrong with it.

    Columns: ``M_lo``, ``M_hi`` (mag), ``class`` (one of ``CLASS_WORDS``) and either ``phi`` (stars per mag, any common
    scale) or ``n`` (stars), and ``band`` as a column or a meta key. Meta keys: ``counts``, "systems" unless it says
    "stars"; ``window``, needed without V rows: the table's systems with 4.5 < M_V < 8.5, on the scale of ``phi`` x mag
    or ``n``. Rows of a class may not overlap or leave gaps; write empty rows as 0. Every band must hold stars.
    """
    if not len(table):
        raise Problems(Problem(file, "", "no rows", "at least one row"))
    problems: list[Problem] = []
    band, star_class = _bands(table, file, problems), words(table, "class", file, problems)
    M_lo, M_hi = (numbers(table, name, "mag", file, problems) for name in ("M_lo", "M_hi"))
    stars = _stars(table, M_hi - M_lo, file, problems)
    counts = str(table.meta.get("counts", "systems"))
    if counts not in COUNTS:
        problems.append(Problem(file, "meta key counts", counts, f"one of {', '.join(COUNTS)}"))
    if not problems:
        _check_rows(band, star_class, M_lo, M_hi, file, problems)
        _check_tiles(band, star_class, M_lo, M_hi, file, problems)
        empty = [name for name in dict.fromkeys(band) if not stars[band == name].any()]
        problems.extend(Problem(file, f"rows of band {name}", "all 0", "some stars") for name in empty)
    if problems:
        raise Problems(*problems)
    return FunctionTable(file, band, star_class, M_lo, M_hi, stars, counts, table.meta.get("window"))


def _systems(reference: str) -> np.ndarray:
    """Return the factor (class, cell) from stars to systems.

    M_V of a dwarf is that of the Sun's composition. The factor is 1 for giants, which outshine their companions and
    stay in the count, and for white dwarfs, which tables of stars here do not hold.
    """
    look = sequence("dwarfs", 0.0, reference).look[:, 0]
    M_V_mag = M_MIDDLE_MAG + look[1 + list(BANDS).index("V")]
    factor = np.ones((len(CLASSES), M_MIDDLE_MAG.size))
    factor[CLASSES.index("dwarf")] = system_factor(M_V_mag)
    return factor


def _bands(table: Table, file: str, problems: list[Problem]) -> np.ndarray:
    if "band" in table.colnames or "band" not in table.meta:
        return words(table, "band", file, problems)
    return np.full(len(table), str(table.meta["band"]))


def _stars(table: Table, width_mag: np.ndarray, file: str, problems: list[Problem]) -> np.ndarray:
    given = [name for name in ("phi", "n") if name in table.colnames]
    if len(given) != 1:
        problems.append(Problem(file, "columns", f"{' and '.join(given) or 'neither phi nor n'}", "one of phi and n"))
        return np.full(len(table), np.nan)
    per_volume = given == ["phi"] and "pc" in str(table["phi"].unit)
    unit = {"n": "", "phi": "1 / (mag pc3)" if per_volume else "1 / mag"}[given[0]]
    values = numbers(table, given[0], unit, file, problems)
    negative = np.flatnonzero(values < 0)
    problems.extend(row_problems(file, given[0], negative, values[negative], "no negative number"))
    return values if given == ["n"] else values * width_mag


def _check_rows(band, star_class, lo, hi, file: str, problems: list[Problem]) -> None:
    wrong_band = np.flatnonzero(~np.isin(band, REFERENCES))
    wrong_class = np.flatnonzero(~np.isin(star_class, CLASS_WORDS))
    beyond = np.flatnonzero(~((M_EDGES_MAG[0] <= lo) & (lo < hi) & (hi <= M_EDGES_MAG[-1])))
    found = [f"{lo[i]:g} to {hi[i]:g}" for i in beyond]
    problems += row_problems(file, "band", wrong_band, band[wrong_band], f"one of {', '.join(sorted(REFERENCES))}")
    problems += row_problems(file, "class", wrong_class, star_class[wrong_class], f"one of {', '.join(CLASS_WORDS)}")
    problems += row_problems(file, "M_lo", beyond, found, "-8 <= M_lo < M_hi <= 22")
    both = sorted({*EVOLVED_CLASSES} & {*star_class}) if "evolved" in star_class else []
    if both:
        found = f"evolved beside {', '.join(both)}"
        problems.append(Problem(file, "column class", found, "the word evolved or its four classes, not both"))


def _check_tiles(band, star_class, lo, hi, file: str, problems: list[Problem]) -> None:
    """Note the rows of each band and class that do not begin where the one before them ends."""
    rows, allowed = [], []
    for key in sorted({*zip(band, star_class, strict=True)}):
        for a, b in pairwise(_ordered(band, star_class, lo, key)):
            if abs(hi[a] - lo[b]) > 1e-9:
                rows.append(b)
                allowed.append(f"{hi[a]:g}, the end of the {key[1]} row before it in {key[0]}")
    problems += row_problems(file, "M_lo", rows, lo[rows], allowed)


def _ordered(band: np.ndarray, star_class: np.ndarray, M_lo: np.ndarray, key: tuple[str, str]) -> np.ndarray:
    """Return the indices of the rows of a (band, class) by rising magnitude."""
    k = np.flatnonzero((band == key[0]) & (star_class == key[1]))
    return k[np.argsort(M_lo[k])]
