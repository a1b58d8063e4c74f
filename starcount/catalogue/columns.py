"""Which columns of a star list hold position and magnitude: by the user's names, else by common names and units."""

import difflib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import astropy.units as u
import numpy as np

from starcount.catalogue.cuts import Cut
from starcount.catalogue.source import Source
from starcount.errors import InputError, Problem, Problems, UnknownName

POSITION_NAMES = (
    ("galactic", "l", "b"),
    ("galactic", "l_deg", "b_deg"),
    ("galactic", "l_rad", "b_rad"),
    ("galactic", "glon", "glat"),
    ("icrs", "ra", "dec"),
    ("icrs", "ra_deg", "dec_deg"),
    ("icrs", "ra_rad", "dec_rad"),
    ("icrs", "ra_icrs", "de_icrs"),
    ("icrs", "raj2000", "dej2000"),
)
"""Pairs of names looked for, in this order, so Galactic before ICRS; capitals matter only in ``l``, ``b``."""

MAGNITUDE_NAMES = {
    "G": ("phot_g_mean_mag", "Gmag", "G"),
    "V": ("Vmag", "V"),
}
"""Names looked for per band of the survey; capitals matter only in names of one letter: g and G are two bands."""

KEYS = {"l": "galactic", "b": "galactic", "ra": "icrs", "dec": "icrs", "mag": "", "unit": ""}
"""What a user may name: two angles of one frame, the magnitude, and the angles' unit where the file has none."""


@dataclass(frozen=True)
class Position:
    """Two columns that hold a direction; ``to_rad`` turns each one's numbers into radians."""

    frame: str
    names: tuple[str, str]
    to_rad: tuple[float, float]


@dataclass(frozen=True)
class Layout:
    """What is read from a star list: position, one magnitude column per group, and the columns of the cuts."""

    position: Position
    magnitudes: tuple[str, ...]
    wanted: Mapping[str, str]

    @property
    def found(self) -> dict[str, str]:
        """Return {key: column} as a user would name them; several magnitude columns joined by commas."""
        keys = ("l", "b") if self.position.frame == "galactic" else ("ra", "dec")
        return dict(zip(keys, self.position.names, strict=True)) | {"mag": ", ".join(dict.fromkeys(self.magnitudes))}


def check_keys(columns: Mapping[str, str], bands: Sequence[str]) -> None:
    """Refuse keys that mean nothing, half a position, two positions, one magnitude for several bands."""
    for key in columns:
        if key not in KEYS:
            raise UnknownName("key for a column", key, tuple(KEYS))
    angles = [key for key in columns if KEYS[key]]
    if sorted(angles) not in ([], ["b", "l"], ["dec", "ra"]):
        raise InputError(f"columns named for {', '.join(angles)}; expected both l and b, or both ra and dec")
    if "mag" in columns and len(set(bands)) > 1:
        raise InputError(f"one magnitude column named for bands {', '.join(sorted(set(bands)))}; count group by group")


def find_layout(source: Source, columns: Mapping[str, str], bands: Sequence[str], cuts: Sequence[Cut]) -> Layout:
    """Return the layout of a star list, or raise everything that is wrong with its columns at once.

    A column that the user names wins. Without a unit an angle is taken in degrees (radians where its name ends in
    ``_rad``) in CSV, and in Parquet that has no units at all; elsewhere a missing unit is refused.
    """
    problems: list[Problem] = []
    position = find_position(source, columns, problems)
    magnitudes = tuple(find_magnitude(source, columns.get("mag"), band, problems) for band in bands)
    wanted: dict[str, str] = {}
    want(source, wanted, position.names, "number", problems)
    want(source, wanted, magnitudes, "number", problems)
    for cut in cuts:
        if present(source, cut.column, f"cut {cut.text!r}", problems):
            want(source, wanted, [cut.column], cut.kind, problems)
    if problems:
        raise Problems(*dict.fromkeys(problems))
    return Layout(position, magnitudes, wanted)


def find_position(source: Source, columns: Mapping[str, str], problems: list[Problem]) -> Position:
    chosen = [
        (KEYS[first], columns[first], columns[second])
        for first, second in (("l", "b"), ("ra", "dec"))
        if first in columns
    ]
    for frame, *names in chosen or spelled(source, POSITION_NAMES):
        there = [present(source, name, "position", problems) for name in names]
        to_rad = [unit_to_rad(source, name, columns.get("unit"), problems) for name in names] if all(there) else [1, 1]
        return Position(frame, tuple(names), tuple(to_rad))
    pairs = "; ".join(f"{lon}, {lat}" for _, lon, lat in POSITION_NAMES)
    problems.append(Problem(str(source.path), "position", f"none of its columns {listed(source)}", pairs))
    return Position("", (), ())


def spelled(source: Source, pairs: Sequence[tuple[str, str, str]]) -> list[tuple[str, str, str]]:
    """Return the pairs that the star list has, in its own spelling."""
    found = ((frame, spelling(source, lon), spelling(source, lat)) for frame, lon, lat in pairs)
    return [pair for pair in found if all(pair)]


def spelling(source: Source, name: str) -> str | None:
    """Return how the star list spells a name; single letters only exactly, since B is a band and b a latitude."""
    if name in source.columns or len(name) == 1:
        return name if name in source.columns else None
    return next((own for own in source.columns if own.lower() == name.lower()), None)


def find_magnitude(source: Source, named: str | None, band: str, problems: list[Problem]) -> str:
    """Return the magnitude column; a unit, where there is one, must be magnitudes."""
    if named is not None:
        found = named if present(source, named, "magnitude", problems) else None
    else:
        known = MAGNITUDE_NAMES.get(band, ())
        found = next(filter(None, (spelling(source, name) for name in known)), None)
        if found is None:
            allowed = f"{', '.join(known) or 'a name given'} or mag=COLUMN"
            problems.append(
                Problem(str(source.path), f"magnitude in {band}", f"none of its columns {listed(source)}", allowed)
            )
    if found is not None and source.columns[found].unit is not None:
        unit = parsed_unit(source.columns[found].unit)
        if not (unit == u.mag or isinstance(unit, u.MagUnit)):
            words = unit_words(source.columns[found].unit)
            problems.append(Problem(str(source.path), f"column {found!r}", words, "mag"))
    return found or ""


def present(source: Source, name: str, purpose: str, problems: list[Problem]) -> bool:
    if name in source.columns:
        return True
    near = difflib.get_close_matches(name, source.columns, n=1)
    allowed = f"one of {listed(source)}" + (f"; did you mean {near[0]!r}?" if near else "")
    problems.append(Problem(str(source.path), purpose, f"no column {name!r}", allowed))
    return False


def listed(source: Source, most: int = 20) -> str:
    names = list(source.columns)
    return ", ".join(names[:most]) + (f" and {len(names) - most} more" if len(names) > most else "")


def want(source: Source, wanted: dict[str, str], names: Sequence[str], kind: str, problems: list[Problem]) -> None:
    """Add columns to those read, each with the one kind that it must hold."""
    for name in filter(source.columns.__contains__, names):
        own = source.columns[name].kind
        read_as = own if (own, kind) == ("boolean", "number") else kind  # true and false compare as 1 and 0
        if own not in ("unknown", read_as):
            problems.append(Problem(str(source.path), f"column {name!r}", f"holds {own}", f"a {kind} column"))
        elif wanted.setdefault(name, read_as) != read_as:
            problems.append(Problem(str(source.path), f"column {name!r}", f"used as {wanted[name]} and {kind}", "one"))


def unit_to_rad(source: Source, name: str, given: str | None, problems: list[Problem]) -> float:
    """Return the factor from a column's numbers to radians."""
    own = source.columns[name].unit
    where = (str(source.path), f"column {name!r}")
    if own is not None and given is not None and own != given:
        problems.append(Problem(*where, f"unit {own!r}", f"no other unit given ({given!r})"))
        return np.nan
    text = own or given
    if text is None and source.carries_units:
        problems.append(Problem(*where, "no unit", "deg or rad in the file, or unit=deg with the column names"))
        return np.nan
    if text is None:
        return 1.0 if name.lower().endswith("_rad") else np.pi / 180
    unit = parsed_unit(text)
    if unit is None or not unit.is_equivalent(u.rad):
        problems.append(Problem(*where, unit_words(text), "an angle such as deg or rad"))
        return np.nan
    return unit.to(u.rad)


def parsed_unit(text: str) -> u.UnitBase | None:
    try:
        return u.Unit(text)
    except ValueError:
        return None


def unit_words(text: str) -> str:
    return f"unknown unit {text!r}" if parsed_unit(text) is None else f"unit {text!r}"
