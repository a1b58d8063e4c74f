"""The count table: one row per field and bin, to counts and a mask (field, bin)."""

import astropy.units as u
import numpy as np

from starcount.survey.bins import bin_of
from starcount.survey.sheet import Sheet
from starcount.survey.spelling import one_of, quoted

MAGNITUDE, COLOUR = ("m_lo", "m_hi"), ("c_lo", "c_hi")
"""The limits of a bin in magnitude and in colour."""
_MOST = 2.0**53
"""Above this a float no longer holds every whole number."""


def read_counts(
    sheet: Sheet, names: np.ndarray, edges_mag: np.ndarray, edges_colour_mag: np.ndarray | None = None
) -> tuple[np.ndarray, np.ndarray]:
    """Counts and where they are used, both (field, bin); a bin without a row is not used.

    ``names`` of the fields (field,), ``edges_mag`` (m bin + 1,) and, if the group has a colour, ``edges_colour_mag``
    (colour bin + 1,) of the group; bin = m bin * colour bins + colour bin. Problems go to the sheet.
    """
    axes = [(MAGNITUDE, edges_mag)] + ([] if edges_colour_mag is None else [(COLOUR, edges_colour_mag)])
    sheet.only(("field", *(name for limits, _ in axes for name in limits), "n"))
    field, known_field = _field_rows(sheet, names)
    column, n_bin = np.zeros(len(sheet), dtype=np.int64), 1
    for limits, edges in axes:
        along = _bin_rows(sheet, limits, edges)
        column = np.where((column < 0) | (along < 0), -1, column * (edges.size - 1) + along)
        n_bin *= edges.size - 1
    n = _whole_counts(sheet)
    good = known_field & (column >= 0)
    where = "field, " + ", ".join(name for limits, _ in axes for name in limits)
    counts, used = _placed(sheet, (names.size, n_bin), good, field, column, n, where)
    if known_field.any() or len(sheet) == 0:
        for name in names[~used.any(axis=1) & ~np.isin(np.arange(names.size), field[known_field & ~good])]:
            allowed = "at least one row for every field of the field table"
            sheet.report(f"field {str(name)!r}", "no counted bin", allowed)
    return counts, used


def _bin_rows(sheet: Sheet, limits: tuple[str, str], edges: np.ndarray) -> np.ndarray:
    """The bin of every count (row,) along one axis, -1 where there is none."""
    lo, hi = (sheet.number(name, u.mag, infinite=limits is COLOUR) for name in limits)
    along = bin_of(edges, lo, hi)
    found = [f"{a:.10g} to {b:.10g} mag" for a, b in zip(lo, hi, strict=True)]
    given = ~np.isnan(lo) & ~np.isnan(hi)
    sheet.refuse(given & (along < 0), ", ".join(limits), found, f"a bin of the group: {_listed(edges)}")
    return along


def _placed(sheet: Sheet, shape, good, field, column, n, where: str) -> tuple[np.ndarray, np.ndarray]:
    """Counts and mask from rows; a bin of a field that comes twice is refused."""
    place = np.where(good, field * shape[1] + column, -1 - np.arange(field.size))
    _, first, inverse = np.unique(place, return_index=True, return_inverse=True)
    repeated = first[inverse] != np.arange(place.size)
    sheet.refuse(repeated, where, "the same field and bin again", "one row for each")
    counts, used = np.zeros(shape, dtype=np.int64), np.zeros(shape, dtype=bool)
    counts[field[good], column[good]] = n[good]
    used[field[good], column[good]] = True
    return counts, used


def _field_rows(sheet: Sheet, names: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Row of the field table for every count (row,), and where there is one."""
    text = sheet.text("field")
    order = np.argsort(names, kind="stable")
    guess = order[np.minimum(np.searchsorted(names, text, sorter=order), names.size - 1)]
    known = names[guess] == text
    allowed = [one_of(str(t), tuple(names)) if names.size <= 12 else "a name in the field table" for t in text[~known]]
    words = np.full(text.size, "", dtype=object)
    words[~known] = allowed
    sheet.refuse(~known & (text != ""), "field", quoted(text), words)
    return guess, known


def _whole_counts(sheet: Sheet) -> np.ndarray:
    n = sheet.number("n", None)
    wrong = np.isfinite(n) & ((n < 0.0) | (n != np.round(n)) | (n > _MOST))
    sheet.refuse(wrong, "n", [f"{x:.10g}" for x in n], "a whole number >= 0; leave out the row of a bin not counted")
    return np.where(np.isfinite(n) & ~wrong, n, 0.0).astype(np.int64)


def _listed(edges_mag: np.ndarray) -> str:
    shown = [f"{x:g}" for x in edges_mag]
    return "edges " + ", ".join(shown if len(shown) <= 8 else [*shown[:3], "...", *shown[-2:]])
