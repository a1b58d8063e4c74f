"""Which columns of a star list hold position, magnitude and colour: as the user names them, else by common names."""

import difflib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import astropy.units as u
import numpy as np

from starcount.catalogue.cuts import Cut
from starcount.catalogue.names import MAGNITUDE_NAMES, POSITION_NAMES, colour_names, spelling
from starcount.catalogue.source import Source
from starcount.errors import InputError, Problem, Problems, UnknownName

KEYS = {
    "l": "galactic", "b": "galactic", "ra": "icrs", "dec": "icrs", "unit": "",
    "mag": "", "colour": "", "blue": "", "red": "",
}  # fmt: skip
"""What a user may name: two angles of one frame, the angles' unit where the file has none, the magnitude, and the
colour or the magnitudes in its two bands."""

Colour = tuple[str, str] | None


@dataclass(frozen=True)
class Position:
    """Two columns that hold a direction; ``to_rad`` turns each one's numbers into radians."""

    frame: str
    names: tuple[str, str]
    to_rad: tuple[float, float]


@dataclass(frozen=True)
class Layout:
    """What is read from a star list: position, per group one magnitude and the colour, and the columns of the cuts.

    A colour is one column, or two whose difference it is, or none where the group has no colour.
    """

    position: Position
    magnitudes: tuple[str, ...]
    colours: tuple[tuple[str, ...], ...]
    wanted: Mapping[str, str]

    @property
    def found(self) -> dict[str, str]:
        """Return {key: column} as a user would name them; several columns for one key joined by commas."""
        keys = ("l", "b") if self.position.frame == "galactic" else ("ra", "dec")
        used = {"mag": self.magnitudes, "colour": [names[0] for names in self.colours if len(names) == 1]}
        for i, key in enumerate(("blue", "red")):
            used[key] = [names[i] for names in self.colours if len(names) == 2]
        joined = {key: ", ".join(dict.fromkeys(names)) for key, names in used.items() if names}
        return dict(zip(keys, self.position.names, strict=True)) | joined


def check_keys(columns: Mapping[str, str], bands: Sequence[str], colours: Sequence[Colour]) -> None:
    """Refuse keys that mean nothing, half a position or colour, two of them, one column for several bands."""
    for key in columns:
        if key not in KEYS:
            raise UnknownName("key for a column", key, tuple(KEYS))
    angles = [key for key in columns if KEYS[key]]
    if sorted(angles) not in ([], ["b", "l"], ["dec", "ra"]):
        raise InputError(f"columns named for {', '.join(angles)}; expected both l and b, or both ra and dec")
    if "mag" in columns and len(set(bands)) > 1:
        raise InputError(f"one magnitude column named for bands {', '.join(sorted(set(bands)))}; count group by group")
    named = [key for key in ("colour", "blue", "red") if key in columns]
    if named not in ([], ["colour"], ["blue", "red"]):
        raise InputError(f"columns named for {', '.join(named)}; expected colour alone, or both blue and red")
    different = sorted({"-".join(colour) for colour in colours if colour is not None})
    if named and len(different) != 1:
        held = f"colours {', '.join(different)}; count group by group" if different else "groups without a colour"
        raise InputError(f"columns named for {', '.join(named)}, but the survey has {held}")


def find_layout(
    source: Source,
    columns: Mapping[str, str],
    bands: Sequence[str],
    colours: Sequence[Colour],
    cuts: Sequence[Cut],
) -> Layout:
    """Return the layout of a star list, or raise everything that is wrong with its columns at once.

    ``bands`` and ``colours`` (two bands or None) of the groups. A column that the user names wins. Without a unit an
    angle is taken in degrees (radians where its name ends in ``_rad``) in CSV, and in Parquet that has no units at all;
    elsewhere a missing unit is refused.
    """
    problems: list[Problem] = []
    position = find_position(source, columns, problems)
    magnitudes = tuple(find_magnitude(source, columns.get("mag"), band, problems) for band in bands)
    found = tuple(find_colour(source, columns, colour, problems) for colour in colours)
    wanted: dict[str, str] = {}
    want(source, wanted, position.names, "number", problems)
    want(source, wanted, [*magnitudes, *(name for names in found for name in names)], "number", problems)
    for cut in cuts:
        if present(source, cut.column, f"cut {cut.text!r}", problems):
            want(source, wanted, [cut.column], cut.kind, problems)
    if problems:
        raise Problems(*dict.fromkeys(problems))
    return Layout(position, magnitudes, found, wanted)


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
    found = ((frame, spelling(source.columns, lon), spelling(source.columns, lat)) for frame, lon, lat in pairs)
    return [pair for pair in found if all(pair)]


def find_magnitude(source: Source, named: str | None, band: str, problems: list[Problem]) -> str:
    """Return the magnitude column; a unit, where there is one, must be magnitudes."""
    if named is not None:
        found = named if present(source, named, "magnitude", problems) else None
    else:
        known = MAGNITUDE_NAMES.get(band, ())
        found = first_of(source, known)
        if found is None:
            problems.append(
                missing(source, f"magnitude in {band}", f"{', '.join(known) or 'a name given'} or mag=COLUMN")
            )
    refuse_other_units(source, [found], problems)
    return found or ""


def find_colour(source: Source, columns: Mapping[str, str], colour: Colour, problems: list[Problem]) -> tuple[str, ...]:
    """Return the column of a colour, or the two whose difference it is: these if both are there, being exact."""
    if colour is None:
        return ()
    named = [columns[key] for key in ("colour", "blue", "red") if key in columns]
    pair = [first_of(source, MAGNITUDE_NAMES.get(band, ())) for band in colour]
    if named:
        found = [name for name in named if present(source, name, "colour", problems)]
    elif all(pair):
        found = pair
    else:
        found = [name for name in [first_of(source, colour_names(*colour))] if name is not None]
        if not found:
            known = [*(name for band in colour for name in MAGNITUDE_NAMES.get(band, ())), *colour_names(*colour)]
            allowed = f"two of {', '.join(known)}, or colour=COLUMN, or blue=COLUMN and red=COLUMN"
            problems.append(missing(source, f"colour {'-'.join(colour)}", allowed))
    refuse_other_units(source, found, problems)
    return tuple(found)


def first_of(source: Source, known: Sequence[str]) -> str | None:
    """Return the first of some names that the star list has, in its own spelling."""
    return next(filter(None, (spelling(source.columns, name) for name in known)), None)


def missing(source: Source, what: str, allowed: str) -> Problem:
    return Problem(str(source.path), what, f"none of its columns {listed(source)}", allowed)


def refuse_other_units(source: Source, names: Sequence[str | None], problems: list[Problem]) -> None:
    """Refuse columns whose unit is something else than magnitudes; none at all is right."""
    for name in names:
        text = source.columns[name].unit if name is not None else None
        unit = None if text is None else parsed_unit(text)
        if text is not None and not (unit == u.mag or isinstance(unit, u.MagUnit)):
            problems.append(Problem(str(source.path), f"column {name!r}", unit_words(text), "mag"))


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
