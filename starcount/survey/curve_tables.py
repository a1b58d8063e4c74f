"""Small tables along an axis: completeness, photometric error, extinction profiles."""

import astropy.units as u
import numpy as np

from starcount.survey.observation import Completeness, PhotometricError
from starcount.survey.sheet import Sheet


def read_completeness(sheet: Sheet) -> Completeness | None:
    """The curve of columns m (mag) and completeness (a pure number from 0 to 1)."""
    sheet.only(("m", "completeness"))
    m_mag, share = _axis(sheet, "m", u.mag), sheet.number("completeness", None)
    wrong = (share < 0.0) | (share > 1.0)
    sheet.refuse(wrong, "completeness", [f"{s:g}" for s in share], "0 <= completeness <= 1")
    return Completeness(m_mag, share) if _whole(m_mag, share) and not wrong.any() else None


def read_photometric_error(sheet: Sheet) -> PhotometricError | None:
    """The curves of columns m, offset, scatter (mag); catalogued minus true magnitude."""
    sheet.only(("m", "offset", "scatter"))
    m_mag = _axis(sheet, "m", u.mag)
    offset_mag, scatter_mag = sheet.number("offset", u.mag), sheet.number("scatter", u.mag)
    wrong = scatter_mag < 0.0
    sheet.refuse(wrong, "scatter", [f"{s:g} mag" for s in scatter_mag], "scatter >= 0")
    whole = _whole(m_mag, offset_mag, scatter_mag) and not wrong.any()
    return PhotometricError(m_mag, offset_mag, scatter_mag) if whole else None


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
