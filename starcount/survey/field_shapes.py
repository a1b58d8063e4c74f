"""The shapes of fields in a field table: circles by radius, pixels by number, and areas that fit them."""

import astropy.units as u
import numpy as np

from starcount.survey.fields import PIXEL_FRAMES, PIXEL_ORDERS, cap_area_deg2, pixel_area_deg2
from starcount.survey.sheet import Sheet
from starcount.survey.spelling import one_of, quoted

AREA_TOLERANCE = 0.05
"""The area of a field may differ from its geometry by this share: published areas and radii are rounded."""
LARGEST_RADIUS_DEG = 40.0
"""Larger circles could hold both the plane and a pole; they are better given as pixels."""
LARGEST_NSIDE = 2**20

_CIRCLE_OR_PIXEL = "a radius (circle) or nside and pixel (HEALPix), one of the two"


def read_shapes(sheet: Sheet) -> dict[str, np.ndarray]:
    """Radius of circles; nside, pixel, frame and order of pixels, (row,): columns of Fields."""
    radius_deg = sheet.number("radius", u.deg, required=False, blanks=True)
    pixels = _pixels(sheet)
    found = [f"{r:g} deg" for r in radius_deg]
    sheet.refuse(pixels["given"] & np.isfinite(radius_deg), "radius", found, _CIRCLE_OR_PIXEL)
    sheet.refuse(~pixels["given"] & sheet.absent("radius"), "radius", "no value", _CIRCLE_OR_PIXEL)
    wrong = (radius_deg <= 0.0) | (radius_deg > LARGEST_RADIUS_DEG)
    allowed = f"0 < radius <= {LARGEST_RADIUS_DEG:g} deg (give larger fields as pixels)"
    sheet.refuse(wrong, "radius", found, allowed)
    return {
        "radius_deg": np.where(pixels["given"] | wrong, np.nan, radius_deg),
        "nside": np.where(pixels["usable"], pixels["nside"], 0),
        "pixel": np.where(pixels["usable"], pixels["pixel"], -1),
        "pixel_frame": _choice(sheet, "frame", pixels["given"], PIXEL_FRAMES),
        "pixel_order": _choice(sheet, "order", pixels["given"], PIXEL_ORDERS),
    }


def trouble_with_area(area_deg2: np.ndarray, shape: dict) -> tuple[np.ndarray, str, list[str], list[str]]:
    """Where an area does not fit its field, with the words for ``Sheet.refuse``.

    A circle has the area of its cap. In a pixel the area counted may be smaller than the pixel (masks,
    the border of a survey) but not larger. Both within ``AREA_TOLERANCE``.
    """
    circle, pixel = np.isfinite(shape["radius_deg"]), shape["nside"] > 0
    full = np.where(pixel, pixel_area_deg2(np.maximum(shape["nside"], 1)), cap_area_deg2(shape["radius_deg"]))
    ratio = area_deg2 / full
    bad = (area_deg2 > 0.0) & (circle | pixel) & (ratio > 1.0 + AREA_TOLERANCE)
    bad |= (area_deg2 > 0.0) & circle & (ratio < 1.0 - AREA_TOLERANCE)
    found = [f"{a:.6g} deg2" for a in area_deg2]
    words = np.where(pixel, "at most the area of the pixel", "the area of the circle within 5 %")
    return bad, "area", found, [f"{w}, {a:.6g} deg2" for w, a in zip(words, full, strict=True)]


def _pixels(sheet: Sheet) -> dict[str, np.ndarray]:
    """nside and pixel with where they are given and where they can be used, (row,)."""
    nside, pixel = _whole(sheet, "nside"), _whole(sheet, "pixel")
    given = ~sheet.absent("nside") | ~sheet.absent("pixel")
    for name, other in (("nside", "pixel"), ("pixel", "nside")):
        sheet.refuse(given & sheet.absent(name), name, "no value", f"a number to go with {other}")
    power = (nside >= 1) & (nside <= LARGEST_NSIDE) & (nside & (nside - 1) == 0)
    wrong = ~sheet.absent("nside") & (nside != _UNREAD) & ~power
    sheet.refuse(wrong, "nside", nside, f"a power of two up to {LARGEST_NSIDE}")
    last = 12 * nside**2 - 1
    inside = (pixel >= 0) & (pixel <= last)
    wrong = power & ~sheet.absent("pixel") & (pixel != _UNREAD) & ~inside
    sheet.refuse(wrong, "pixel", pixel, [f"0 to {n} (nside {s})" for n, s in zip(last, nside, strict=True)])
    return {"nside": nside, "pixel": pixel, "given": given, "usable": power & inside}


_UNREAD = -(2**31)


def _whole(sheet: Sheet, name: str) -> np.ndarray:
    """A column of whole numbers, ``_UNREAD`` where there is none to use."""
    values = sheet.number(name, None, required=False, blanks=True)
    usable = (values == np.round(values)) & (np.abs(values) < 2.0**50)
    sheet.refuse(np.isfinite(values) & ~usable, name, [f"{v:.10g}" for v in values], "a whole number")
    return np.where(usable, values, _UNREAD).astype(np.int64)


def _choice(sheet: Sheet, name: str, is_pixel: np.ndarray, allowed: tuple[str, ...]) -> np.ndarray:
    """Frame or order of pixels, from a column or for all from the meta data; never guessed."""
    whole = str(sheet.table.meta.get(name, ""))
    text = sheet.text(name, required=False) if sheet.has(name) else np.full(len(sheet), whole)
    wrong = is_pixel & ~np.isin(text, allowed)
    sheet.refuse(wrong, name, quoted(text), [one_of(str(t), allowed) for t in text])
    return np.where(is_pixel & ~wrong, text, "")
