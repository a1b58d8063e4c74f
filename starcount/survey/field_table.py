"""The field table: from columns with units to checked Fields."""

import astropy.units as u
import numpy as np

from starcount.survey.field_shapes import read_shapes, trouble_with_area
from starcount.survey.fields import DUST_NEEDS, FARTHEST_CORNER, Fields, cap_radius_deg, pixel_area_deg2
from starcount.survey.frames import galactic_from_icrs, pixel_places, separation_deg, turned
from starcount.survey.sheet import Sheet
from starcount.survey.spelling import one_of, quoted

COLUMNS = (
    "name", "l", "b", "ra", "dec", "area", "radius", "nside", "pixel", "frame", "order",
    "dust", "A_V", "profile", "note",
)  # fmt: skip


def read_fields(sheet: Sheet, profiles) -> Fields | None:
    """The fields of a table; None where the table is empty. Problems go to the sheet.

    ``profiles``: the extinction profiles that a field may name.
    """
    sheet.only(COLUMNS)
    if len(sheet) == 0:
        sheet.report("", "a table without rows", "one row a field")
        return None
    shape = read_shapes(sheet)
    l_deg, b_deg = _centres(sheet, shape)
    return Fields(
        name=_names(sheet),
        l_deg=l_deg,
        b_deg=b_deg,
        area_deg2=_areas(sheet, shape),
        **shape,
        **_dust(sheet, profiles),
        note=sheet.text("note", required=False),
    )


def _names(sheet: Sheet) -> np.ndarray:
    name = sheet.text("name")
    _, first, inverse = np.unique(name, return_index=True, return_inverse=True)
    repeated = (first[inverse] != np.arange(name.size)) & (name != "")
    sheet.refuse(repeated, "name", [f"{n} again" for n in quoted(name)], "a name of its own for every field")
    odd = np.array([not n.isprintable() or n != n.strip() or n.startswith("#") for n in name])
    sheet.refuse(odd, "name", quoted(name), "one line, no blanks around it, not beginning with #")
    return name


def _areas(sheet: Sheet, shape: dict) -> np.ndarray:
    area_deg2 = sheet.number("area", u.deg**2)
    sheet.refuse(area_deg2 <= 0.0, "area", [f"{a:.10g} deg2" for a in area_deg2], "area > 0")
    sheet.refuse(*trouble_with_area(area_deg2, shape))
    return area_deg2


def _centres(sheet: Sheet, shape: dict) -> tuple[np.ndarray, np.ndarray]:
    """Galactic centres (deg); of pixels from their number, which a given position must not contradict."""
    l_deg, b_deg, absent = _given_positions(sheet)
    is_circle = np.isfinite(shape["radius_deg"])
    sheet.refuse(is_circle & absent, "position", "no value", "l, b or ra, dec of the centre of the circle")
    l_deg, b_deg = l_deg.copy(), b_deg.copy()
    known = (shape["nside"] > 0) & (shape["pixel_frame"] != "") & (shape["pixel_order"] != "")
    for frame, order in sorted(set(zip(shape["pixel_frame"][known], shape["pixel_order"][known], strict=True))):
        rows = np.flatnonzero(known & (shape["pixel_frame"] == frame) & (shape["pixel_order"] == order))
        nside = shape["nside"][rows]
        centre = pixel_places(nside, shape["pixel"][rows], frame, order)
        far = np.zeros(len(sheet), dtype=bool)
        bound_deg = FARTHEST_CORNER * cap_radius_deg(pixel_area_deg2(nside))
        far[rows] = separation_deg(l_deg[rows], b_deg[rows], *centre) > bound_deg
        found = [f"the given position (Galactic {l:.4f} {b:.4f})" for l, b in zip(l_deg, b_deg, strict=True)]
        sheet.refuse(far, "pixel", found, f"a place inside the pixel: check frame ({frame}) and order ({order})")
        l_deg[rows], b_deg[rows] = centre
    return l_deg, b_deg


def _given_positions(sheet: Sheet) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Galactic l, b (deg) as far as given, nan elsewhere, and where they are not given."""
    galactic, equatorial = (any(map(sheet.has, pair)) for pair in (("l", "b"), ("ra", "dec")))
    nowhere = np.full(len(sheet), np.nan)
    if galactic and equatorial:
        sheet.report("columns", "both l, b and ra, dec", "one pair, so that they cannot disagree")
        return nowhere, nowhere, np.zeros(len(sheet), dtype=bool)
    if not galactic and not equatorial:
        return nowhere, nowhere, np.ones(len(sheet), dtype=bool)
    names = ("l", "b") if galactic else ("ra", "dec")
    longitude, latitude = (
        _within(sheet, name, limit) for name, limit in zip(names, (360.0, 90.0), strict=True)
    )  # fmt: skip
    absent = sheet.absent(names[0]) | sheet.absent(names[1])
    both = np.isfinite(longitude) & np.isfinite(latitude)
    l_deg, b_deg = nowhere.copy(), nowhere.copy()
    place = longitude[both], latitude[both]
    l_deg[both], b_deg[both] = (turned(place[0]), place[1]) if galactic else galactic_from_icrs(*place)
    return l_deg, b_deg, absent


def _within(sheet: Sheet, name: str, limit: float) -> np.ndarray:
    """A column of angles (deg) between -limit and limit."""
    angle = sheet.number(name, u.deg, blanks=True)
    # Rounded, so that pi / 2 rad is 90 deg.
    beyond = np.abs(np.round(angle, 10)) > limit
    sheet.refuse(beyond, name, [f"{a:.10g} deg" for a in angle], f"-{limit:g} <= {name} <= {limit:g}")
    return np.where(beyond, np.nan, np.clip(angle, -limit, limit))


def _dust(sheet: Sheet, profiles) -> dict[str, np.ndarray]:
    dust = sheet.text("dust", required=False)
    dust = np.where(dust == "", "D0", dust)
    known = np.isin(dust, list(DUST_NEEDS))
    sheet.refuse(~known, "dust", quoted(dust), [one_of(d, tuple(DUST_NEEDS)) for d in dust])
    A_V_mag = sheet.number("A_V", u.mag, required=False, blanks=True)
    profile = sheet.text("profile", required=False)
    sheet.refuse(A_V_mag < 0.0, "A_V", [f"{a:g} mag" for a in A_V_mag], "A_V >= 0")
    for column, empty in (("A_V", sheet.absent("A_V")), ("profile", profile == "")):
        needs = np.isin(dust, [model for model, needed in DUST_NEEDS.items() if column in needed])
        sheet.refuse(needs & empty, column, "no value", [f"a value, which dust {d} needs" for d in quoted(dust)])
        unread = known & ~needs & ~empty & ~np.isnan(np.where(profile == "", A_V_mag, 0.0))
        sheet.refuse(unread, column, "a value", [f"none, as dust {d} does not use it" for d in quoted(dust)])
    unlisted = (profile != "") & ~np.isin(profile, list(profiles))
    allowed = [one_of(p, tuple(profiles)) if profiles else "a group with a table of profiles" for p in profile]
    sheet.refuse(unlisted, "profile", quoted(profile), allowed)
    return {"dust": dust, "A_V_mag": A_V_mag, "profile": profile}
