"""A population of the user's own, counted by magnitude and colour in its own band."""

from collections.abc import Iterator
from functools import cache
from itertools import pairwise

import numpy as np

from starcount.constants import STAR_CLASSES
from starcount.errors import InputError
from starcount.stars.bands import bluer_first, require_band
from starcount.stars.cells import C_EDGES_MAG, CELL_MAG, M_EDGES_MAG, M_MIDDLE_MAG, to_cells
from starcount.stars.ecsv import numbers, words
from starcount.stars.locus import Locus
from starcount.stars.own import (
    LEAST_SCATTER_MAG,
    TEFF_RANGE_K,
    Kinds,
    M_V_of_dwarfs,
    Own,
    Teff_of_dwarfs,
    own_window,
    require_stars,
    systems_per_star,
)
from starcount.stars.own_file import OwnFile

_SAME_MAG = 1e-6


def own_colour_table(own: OwnFile) -> Own:
    """Return a population from the columns M_lo, M_hi, c_lo, c_hi (mag), class and n (stars), in any common scale.

    Settings: ``band`` and ``colour`` (bluer band first), the only ones that can then be predicted, and ``window``
    unless the band is V. The rows of a class tile a range of magnitude without gaps, and at each magnitude a range of
    colour; write empty rows as 0. A column ``Teff`` (K) is optional: without it stars get the temperature of dwarfs of
    their colour, for the extinction in bands that need it.
    """
    own.known({"band", "colour"})
    band, colour = _bands(own)
    own.done()
    rows = _rows(own)
    own.done()
    _check(own, rows)
    own.done()
    kinds = _kinds(rows, band, colour, own.counts == "stars")
    require_stars(own, kinds.function())
    own.done()
    systems = own_window(own, kinds.function() if band == "V" else None)

    @cache
    def build(reference: str) -> tuple[np.ndarray, Locus]:
        return kinds.function() / systems, kinds.locus()

    return Own(own.settings["name"], own.file, own.sources, False, build)


def _bands(own: OwnFile) -> tuple[str, tuple[str, str]]:
    given, band = own.settings.get("colour"), own.settings.get("band")
    two = isinstance(given, list) and len(given) == 2 and all(isinstance(name, str) for name in given)
    colour = given if two else []
    if isinstance(band, str):
        _note_band(own, "band", band)
    else:
        own.wrong("band", "missing" if band is None else repr(band), "a band")
    known = [_note_band(own, "colour", name) for name in colour]
    if not two or (all(known) and not bluer_first(*colour)):
        allowed = 'two different bands, bluer first: ["BP", "RP"]'
        own.wrong("colour", "missing" if given is None else repr(given), allowed)
    return str(band), tuple(colour)


def _note_band(own: OwnFile, key: str, name: str) -> bool:
    """Whether stars can be counted in a band; it is noted where they cannot."""
    try:
        require_band(name)
    except InputError as refused:
        own.wrong(key, str(refused), "a band")
        return False
    return True


def _rows(own: OwnFile) -> dict[str, np.ndarray]:
    """Return the columns of the table by name, (row,) each."""
    table, file, problems = own.table, own.table_file, own.problems
    rows = {name: numbers(table, name, "mag", file, problems) for name in ("M_lo", "M_hi", "c_lo", "c_hi")}
    rows["class"] = words(table, "class", file, problems)
    rows["n"] = numbers(table, "n", "", file, problems)
    if "Teff" in table.colnames:
        rows["Teff"] = numbers(table, "Teff", "K", file, problems)
    return rows


def _check(own: OwnFile, rows: dict[str, np.ndarray]) -> None:
    """Note rows that cannot stand, and rows of a class that do not tile the magnitudes and colours."""
    for name, key, edges in (("M", "M_lo", M_EDGES_MAG), ("c", "c_lo", C_EDGES_MAG)):
        low, high = rows[f"{name}_lo"], rows[f"{name}_hi"]
        allowed = f"{edges[0]:g} <= {name}_lo < {name}_hi <= {edges[-1]:g}"
        beyond = np.flatnonzero(~((edges[0] <= low) & (low < high) & (high <= edges[-1])))
        own.wrong_rows(key, beyond, [f"{low[i]:g} to {high[i]:g}" for i in beyond], allowed)
    negative = np.flatnonzero(rows["n"] < 0)
    own.wrong_rows("n", negative, rows["n"][negative], "no negative number")
    unknown = np.flatnonzero(~np.isin(rows["class"], STAR_CLASSES))
    own.wrong_rows("class", unknown, rows["class"][unknown], f"one of {', '.join(STAR_CLASSES)}")
    if "Teff" in rows:
        own.beyond("Teff", rows["Teff"], *TEFF_RANGE_K, "K")
    if not own.problems:
        for name in dict.fromkeys(rows["class"]):
            _check_tiles(own, rows, np.flatnonzero(rows["class"] == name), str(name))


def _check_tiles(own: OwnFile, rows: dict[str, np.ndarray], chosen: np.ndarray, name: str) -> None:
    """Each row must begin in colour where the one before it ends or, at the next magnitude, in magnitude."""
    M_lo, M_hi, c_lo, c_hi = (rows[key] for key in ("M_lo", "M_hi", "c_lo", "c_hi"))
    order = chosen[np.lexsort((c_lo[chosen], M_hi[chosen], M_lo[chosen]))]
    wrong: dict[str, list] = {"c_lo": [], "M_lo": []}
    for a, b in pairwise(order):
        if M_lo[a] == M_lo[b] and M_hi[a] == M_hi[b]:
            key, end, begin, at = "c_lo", c_hi[a], c_lo[b], f" at M {M_lo[b]:g} to {M_hi[b]:g}"
        else:
            key, end, begin, at = "M_lo", M_hi[a], M_lo[b], ""
        if abs(end - begin) > _SAME_MAG:
            wrong[key].append((b, begin, f"{end:g}, where the {name} row before it ends{at}"))
    for key, noted in wrong.items():
        if noted:
            own.wrong_rows(key, *zip(*noted, strict=True))


def _kinds(rows: dict[str, np.ndarray], band: str, colour: tuple[str, str], single_stars: bool) -> Kinds:
    parts = []
    for c, name in enumerate(STAR_CLASSES):
        of_class = {key: column[rows["class"] == name] for key, column in rows.items()}
        parts += [(np.full(cell.size, c), cell, *rest) for cell, *rest in _points(of_class)]
    class_index, cell, number, colour_mag, *given = (np.concatenate(column) for column in zip(*parts, strict=True))
    Teff_K = given[0] if given else Teff_of_dwarfs(*colour, colour_mag)
    if single_stars:
        number = number * systems_per_star(class_index, M_V_of_dwarfs(band, M_MIDDLE_MAG[cell]))
    M_mag, pairs = {band: M_MIDDLE_MAG[cell]}, {colour: colour_mag}
    scatter = np.full(cell.size, LEAST_SCATTER_MAG)
    return Kinds(band, class_index, cell, number, Teff_K, scatter, M_mag, pairs)


def _points(rows: dict[str, np.ndarray]) -> Iterator[tuple[np.ndarray, ...]]:
    """Yield cell, number, colour and, where it is given, temperature (point,) of one class, interval by interval.

    Inside a row stars are uniform in colour; over the rows their number is smooth in magnitude.
    """
    starts = np.unique(rows["M_lo"])
    if not starts.size:
        return
    edges = np.append(starts, rows["M_hi"].max())
    row = np.searchsorted(starts, rows["M_lo"])
    stars = to_cells(edges, np.bincount(row, rows["n"]))
    interval = np.clip(np.searchsorted(edges, M_MIDDLE_MAG) - 1, 0, starts.size - 1)
    interval[(M_EDGES_MAG[1:] <= edges[0]) | (M_EDGES_MAG[:-1] >= edges[-1])] = -1
    low, high = rows["c_lo"][:, None], rows["c_hi"][:, None]
    overlap = np.clip(np.minimum(high, C_EDGES_MAG[1:]) - np.maximum(low, C_EDGES_MAG[:-1]), 0, None) / (high - low)
    for k in range(starts.size):
        cells, here = np.flatnonzero(interval == k), row == k
        n = rows["n"][here]
        by_row = overlap[here] * (n if n.any() else np.ones_like(n))[:, None]
        by_colour = by_row.sum(axis=0)
        filled = np.flatnonzero(by_colour)
        number = np.outer(stars[cells], by_colour[filled] / by_colour.sum()).ravel()
        colour = np.tile(C_EDGES_MAG[filled] + CELL_MAG / 2, cells.size)
        Teff_K = [(rows["Teff"][here] @ by_row)[filled] / by_colour[filled]] if "Teff" in rows else []
        yield np.repeat(cells, filled.size), number, colour, *(np.tile(T, cells.size) for T in Teff_K)
