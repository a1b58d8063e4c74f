"""Small tables along an axis or over a grid: completeness, photometric error, error of the colour, dust profiles."""

import astropy.units as u
import numpy as np

from starcount.survey.curves import ColourError, Completeness, PhotometricError
from starcount.survey.sheet import Sheet


def read_completeness(sheet: Sheet) -> Completeness | None:
    """The curve of columns m (mag), completeness (a pure number, 0 to 1) and, where it depends on colour, c (mag)."""
    sheet.only(("m", "c", "completeness"))
    share = sheet.number("completeness", None)
    wrong = (share < 0.0) | (share > 1.0)
    sheet.refuse(wrong, "completeness", [f"{s:g}" for s in share], "0 <= completeness <= 1")
    m_mag, c_mag, (share,) = _axes(sheet, share)
    return Completeness(m_mag, share, c_mag) if _whole(m_mag, share) and not wrong.any() else None


def read_photometric_error(sheet: Sheet) -> PhotometricError | None:
    """The curves of columns m, offset, scatter (mag); catalogued minus true magnitude."""
    sheet.only(("m", "offset", "scatter"))
    m_mag = _axis(sheet, "m", u.mag)
    offset_mag, scatter_mag, wrong = _offset_and_scatter(sheet)
    whole = _whole(m_mag, offset_mag, scatter_mag) and not wrong
    return PhotometricError(m_mag, offset_mag, scatter_mag) if whole else None


def read_colour_error(sheet: Sheet) -> ColourError | None:
    """The curves of columns m, offset, scatter and, if they depend on colour, c (mag); catalogued minus true colour."""
    sheet.only(("m", "c", "offset", "scatter"))
    *columns, wrong = _offset_and_scatter(sheet)
    m_mag, c_mag, (offset_mag, scatter_mag) = _axes(sheet, *columns)
    whole = _whole(m_mag, offset_mag, scatter_mag) and not wrong
    return ColourError(m_mag, offset_mag, scatter_mag, c_mag) if whole else None


def read_profiles(sheet: Sheet) -> dict[str, tuple[np.ndarray, np.ndarray]]:
    """Extinction profiles by name, as (d_kpc, A_V_mag), from columns profile, d and A_V."""
    sheet.only(("profile", "d", "A_V"))
    name = sheet.text("profile")
    d_kpc, A_V_mag = sheet.number("d", u.kpc), sheet.number("A_V", u.mag)
    sheet.refuse(d_kpc < 0.0, "d", [f"{d:g} kpc" for d in d_kpc], "d >= 0")
    sheet.refuse(A_V_mag < 0.0, "A_V", [f"{a:g} mag" for a in A_V_mag], "A_V >= 0")
    rows = {str(key): np.flatnonzero(name == key) for key in dict.fromkeys(name[name != ""])}
    for key, chosen in rows.items():
        _growing(sheet, "d", d_kpc, chosen, f"distances that grow in profile {key!r}", strictly=True)
        _growing(sheet, "A_V", A_V_mag, chosen, f"A_V that never falls in profile {key!r}", strictly=False)
    return {key: (d_kpc[chosen], A_V_mag[chosen]) for key, chosen in rows.items()}


def _offset_and_scatter(sheet: Sheet) -> tuple[np.ndarray, np.ndarray, bool]:
    """Both columns (row,), and whether a scatter is negative."""
    offset_mag, scatter_mag = sheet.number("offset", u.mag), sheet.number("scatter", u.mag)
    wrong = scatter_mag < 0.0
    sheet.refuse(wrong, "scatter", [f"{s:g} mag" for s in scatter_mag], "scatter >= 0")
    return offset_mag, scatter_mag, bool(wrong.any())


def _axes(sheet: Sheet, *columns: np.ndarray) -> tuple[np.ndarray, np.ndarray | None, list[np.ndarray]]:
    """The axis m, the axis c (None where there is no such column), and columns as (m,) or (m, c).

    With c the rows, in any order, must fill the grid: every pair of an m and a c once. Problems go to the sheet; then
    the columns are empty.
    """
    if not sheet.has("c"):
        return _axis(sheet, "m", u.mag), None, list(columns)
    m_mag, c_mag = sheet.number("m", u.mag), sheet.number("c", u.mag)
    m_axis, c_axis = (np.unique(x[np.isfinite(x)]) for x in (m_mag, c_mag))
    empty = (m_axis, c_axis, [np.zeros(0) for _ in columns])
    if not (np.all(np.isfinite(m_mag)) and np.all(np.isfinite(c_mag))):
        return empty
    for name, axis in (("m", m_axis), ("c", c_axis)):
        if axis.size < 2:
            sheet.report(
                f"column {name}", f"{axis.size} values", "two at least (leave c out where nothing depends on it)"
            )
            return empty
    place = np.searchsorted(m_axis, m_mag) * c_axis.size + np.searchsorted(c_axis, c_mag)
    times = np.bincount(place, minlength=m_axis.size * c_axis.size)
    wrong = np.flatnonzero(times != 1)
    if wrong.size:
        i, j = divmod(int(wrong[0]), c_axis.size)
        others = f" (one of {wrong.size} such pairs)" if wrong.size > 1 else ""
        found = f"{times[wrong[0]]} rows for m = {m_axis[i]:g}, c = {c_axis[j]:g}{others}"
        sheet.report("m, c", found, "one row for every pair of an m and a c")
        return empty
    order = np.argsort(place)
    return m_axis, c_axis, [column[order].reshape(m_axis.size, c_axis.size) for column in columns]


def _axis(sheet: Sheet, name: str, unit: u.Unit) -> np.ndarray:
    values = sheet.number(name, unit)
    if len(sheet) < 2:
        sheet.report("", f"a table of {len(sheet)} rows", "two rows at least")
    _growing(sheet, name, values, np.arange(values.size), f"{name} that grows from row to row", strictly=True)
    return values


def _growing(sheet: Sheet, name: str, values, chosen, allowed: str, strictly: bool) -> None:
    step = np.diff(values[chosen])
    bad = np.zeros(values.size, dtype=bool)
    bad[chosen[1:]] = step <= 0.0 if strictly else step < 0.0
    before = np.zeros(values.size)
    before[chosen[1:]] = values[chosen[:-1]]
    sheet.refuse(bad, name, [f"{v:g} after {b:g}" for v, b in zip(values, before, strict=True)], allowed)


def _whole(*columns: np.ndarray) -> bool:
    return all(column.size > 1 and np.all(np.isfinite(column)) for column in columns)
