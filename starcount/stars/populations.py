"""Luminosity functions of populations: our model tables, or a table of the user's own."""

from importlib.resources import files
from itertools import pairwise
from pathlib import Path

import numpy as np
from astropy.table import Table

from starcount.constants import REFERENCE_WINDOW_MV_MAG
from starcount.errors import Problem, Problems, UnknownName
from starcount.stars.bands import BANDS, require_band
from starcount.stars.cells import CLASSES, M_EDGES_MAG, spread, window
from starcount.stars.ecsv import numbers, read_ecsv, words

POPULATIONS = {"thick disc": "thick_disc.ecsv", "halo": "halo.ecsv", "bulge": "bulge.ecsv"}
"""Names of our populations and their tables."""


def population(name_or_path: str | Path, band: str) -> np.ndarray:
    """Return the luminosity function (class, cell) of a population per star in the reference window 4.5 < M_V < 8.5.

    The window is counted in the V rows of the same table whatever the band, so that fits in V and in G mean the same
    density. ``name_or_path`` is a name in ``POPULATIONS`` or an ECSV table with the columns ``M_lo``, ``M_hi`` (mag),
    ``class`` and either ``phi`` (stars per mag, any common scale) or ``n`` (stars), and ``band`` as a column or a meta
    key. A table without V rows needs the meta key ``window``: the number of its stars with 4.5 < M_V < 8.5, on the
    scale of ``phi`` x mag or ``n``. Rows of a class may not overlap or leave gaps; write empty rows as 0.

    Raises ``UnknownName`` for a population or band, ``Problems`` for the table.
    """
    require_band(band)
    path = _path(name_or_path)
    rows = _read(path)
    if not (rows["band"] == band).any():
        raise Problems(Problem(str(path), "band", ", ".join(sorted(set(rows["band"]))), f"rows of band {band}"))
    return _function(rows, band) / _window(rows, path)


def _path(name_or_path: str | Path):
    if name_or_path in POPULATIONS:
        return files(__package__) / "data" / POPULATIONS[name_or_path]
    if Path(name_or_path).suffix != ".ecsv":
        raise UnknownName("population", str(name_or_path), (*POPULATIONS, "PATH.ecsv"))
    return Path(name_or_path)


def _read(path) -> dict[str, np.ndarray]:
    """Return the checked columns band, class, M_lo, M_hi, stars (row,) and the meta value window, or None."""
    table, file, problems = read_ecsv(path), str(path), []
    rows = {
        "band": _bands(table, file, problems),
        "class": words(table, "class", file, problems),
        "M_lo": numbers(table, "M_lo", "mag", file, problems),
        "M_hi": numbers(table, "M_hi", "mag", file, problems),
    }
    rows["stars"] = _stars(table, rows["M_hi"] - rows["M_lo"], file, problems)
    rows["window"] = table.meta.get("window")
    if not problems:
        _check_rows(rows, file, problems)
    if problems:
        raise Problems(*problems)
    return rows


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
    problems.extend(
        Problem(file, f"row {row + 1}, {given[0]}", f"{values[row]:g}", "no negative number")
        for row in np.flatnonzero(values < 0)
    )
    return values if given == ["n"] else values * width_mag


def _check_rows(rows: dict, file: str, problems: list[Problem]) -> None:
    lo, hi = rows["M_lo"], rows["M_hi"]
    allowed = (
        (lambda i: rows["band"][i] in BANDS, "band", f"one of {', '.join(BANDS)}"),
        (lambda i: rows["class"][i] in CLASSES, "class", f"one of {', '.join(CLASSES)}"),
        (lambda i: M_EDGES_MAG[0] <= lo[i] < hi[i] <= M_EDGES_MAG[-1], "M_lo", "-8 <= M_lo < M_hi <= 22"),
    )
    for i in range(len(lo)):
        for holds, key, what in allowed:
            if not holds(i):
                found = f"{lo[i]:g} to {hi[i]:g}" if key == "M_lo" else f"{rows[key][i]}"
                problems.append(Problem(file, f"row {i + 1}, {key}", found, what))
    for band, star_class in sorted({*zip(rows["band"], rows["class"], strict=True)}):
        k = _ordered(rows, band, star_class)
        for a, b in pairwise(k):
            if abs(hi[a] - lo[b]) > 1e-9:
                where, allowed = f"row {b + 1}, M_lo", f"{hi[a]:g}, the end of the {star_class} row before it in {band}"
                problems.append(Problem(file, where, f"{lo[b]:g}", allowed))


def _ordered(rows: dict, band: str, star_class: str) -> np.ndarray:
    """Return the indices of the rows of a band and class by rising magnitude."""
    k = np.flatnonzero((rows["band"] == band) & (rows["class"] == star_class))
    return k[np.argsort(rows["M_lo"][k])]


def _function(rows: dict, band: str) -> np.ndarray:
    lf = np.zeros((len(CLASSES), M_EDGES_MAG.size - 1))
    for c, star_class in enumerate(CLASSES):
        k = _ordered(rows, band, star_class)
        if k.size:
            lf[c] = spread(np.append(rows["M_lo"][k], rows["M_hi"][k[-1]]), rows["stars"][k])
    return lf


def _window(rows: dict, path) -> float:
    lo, hi = REFERENCE_WINDOW_MV_MAG
    if (rows["band"] == "V").any():
        stars, where = window(_function(rows, "V")), "rows of band V"
    else:
        stars, where = rows["window"], "meta key window"
    if isinstance(stars, bool) or not isinstance(stars, int | float) or not (0 < stars < np.inf):
        found = "missing, and there are no rows of band V" if stars is None else str(stars)
        raise Problems(Problem(str(path), where, found, f"more than 0 of the table's stars with {lo} < M_V < {hi}"))
    return float(stars)
