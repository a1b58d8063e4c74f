"""survey.toml: what may stand in it, checked key by key with the line of each mistake."""

import re
import tomllib
from collections.abc import Collection
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from starcount.errors import Problem
from starcount.survey.bins import edges_from_range, trouble_with_edges, trouble_with_range
from starcount.survey.groups import EXTRA_TABLES
from starcount.survey.spelling import one_of

FORMAT = 1

TEXT, FLAG, WHOLE = "a text in quotes", "true or false", "a whole number"
NUMBERS, TEXTS, RANGE, TABLES = "a list of numbers", "a list of texts", "{from = , to = , step = }", "[[group]] tables"
TOP = {"format": WHOLE, "name": TEXT, "description": TEXT, "invented": FLAG, "group": TABLES}
GROUP = {
    "name": TEXT, "band": TEXT, "bins": RANGE, "edges_mag": NUMBERS, "fields": TEXT, "counts": TEXT,
    "completeness": TEXT, "photometric_error": TEXT, "extra": TEXTS, "profiles": TEXT,
}  # fmt: skip
REQUIRED_TOP = ("format", "name", "invented", "group")
REQUIRED_GROUP = ("name", "band", "fields")
_GROUP_NAME = re.compile(r"\w[\w .+-]*")


@dataclass(frozen=True)
class Place:
    """A table of the file: its text, and which [[group]] it is (None: the top)."""

    file: str
    text: str
    group: int | None = None

    def problem(self, key: str, found: str, allowed: str) -> Problem:
        """A problem at a key, with the line it stands on if it stands there."""
        line = self._line(key)
        where = key if self.group is None else f"group {self.group + 1}, {key}"
        return Problem(self.file, f"line {line}, {where}" if line else where, found, allowed)

    def _line(self, key: str) -> int | None:
        wanted, group = -1 if self.group is None else self.group, -1
        key_here = re.compile(rf"""\s*["']?{re.escape(key)}["']?\s*=""")
        for number, line in enumerate(self.text.split("\n"), 1):
            group += bool(re.match(r"\s*\[\[\s*group\s*\]\]", line))
            if group == wanted and key_here.match(line):
                return number
        return None


def read_settings(path: Path, bands: Collection[str] | None) -> tuple[dict, list[Problem]]:
    """The settings as far as they are usable, and what is wrong with them."""
    try:
        text = path.read_text(encoding="utf-8")
        settings = tomllib.loads(text)
    except OSError as error:
        return {}, [Problem(str(path), "", error.strerror or str(error), "a survey.toml or the folder that holds it")]
    except UnicodeDecodeError as error:
        return {}, [Problem(str(path), "", f"byte {error.start} is not UTF-8", "a text file in UTF-8")]
    except tomllib.TOMLDecodeError as error:
        return {}, [_not_toml(path, text, str(error))]
    place = Place(str(path), text)
    problems = _of_keys(settings, TOP, REQUIRED_TOP, place)
    if settings.get("format", FORMAT) != FORMAT:
        problems.append(place.problem("format", repr(settings["format"]), f"{FORMAT}, the one format of this version"))
    groups = settings.get("group")
    groups = groups if isinstance(groups, list) else []
    for i, group in enumerate(groups):
        problems += _of_group(group, Place(str(path), text, i), bands)
    problems += _repeated(groups, path, text)
    return settings, problems


def usable(table: dict, key: str, kind: str):
    """The value of a key if it is of its kind, else None."""
    return table[key] if key in table and _is(table[key], kind) else None


def edges_of(group: dict) -> np.ndarray | None:
    """The edges (bin + 1,) of a group's settings, None where they are not right."""
    edges = usable(group, "edges_mag", NUMBERS)
    if edges is not None:
        edges_mag = np.array(edges, float)
        return None if trouble_with_edges(edges_mag) else edges_mag
    limits = usable(group, "bins", RANGE)
    if limits is None or trouble_with_range(limits["from"], limits["to"], limits["step"]):
        return None
    return edges_from_range(limits["from"], limits["to"], limits["step"])


def _not_toml(path: Path, text: str, message: str) -> Problem:
    line = re.search(r"line (\d+)", message)
    number = line[1] if line else len(text.rstrip("\n").split("\n"))
    message = re.sub(r" \(at .*\)$", "", message)
    return Problem(str(path), f"line {number}", message, "TOML, whole")


def _is(value, kind: str) -> bool:
    if kind in (TEXT, FLAG, WHOLE):
        return type(value) is {TEXT: str, FLAG: bool, WHOLE: int}[kind]
    if kind == RANGE:
        return isinstance(value, dict) and set(value) == {"from", "to", "step"} and _numbers(value.values())
    if not isinstance(value, list):
        return False
    if kind == NUMBERS:
        return _numbers(value)
    return all(isinstance(item, str if kind == TEXTS else dict) for item in value)


def _numbers(values) -> bool:
    return all(type(value) in (int, float) for value in values)


def _of_keys(table: dict, known: dict[str, str], required: tuple[str, ...], place: Place) -> list[Problem]:
    problems = [place.problem(key, "unknown key", one_of(key, tuple(known))) for key in table if key not in known]
    problems += [place.problem(key, "no such key", known[key]) for key in required if key not in table]
    for key, kind in known.items():
        if key in table and not _is(table[key], kind):
            problems.append(place.problem(key, repr(table[key]), kind))
        elif key in required and table.get(key) in ("", []):
            problems.append(place.problem(key, "nothing", kind))
    return problems


def _of_group(group: dict, place: Place, bands: Collection[str] | None) -> list[Problem]:
    if not isinstance(group, dict):
        return []
    problems = _of_keys(group, GROUP, REQUIRED_GROUP, place) + _of_bins(group, place)
    name, band = usable(group, "name", TEXT), usable(group, "band", TEXT)
    if name and not _GROUP_NAME.fullmatch(name):
        problems.append(place.problem("name", repr(name), "letters, digits, blanks and . _ + - (it names files)"))
    if band and bands is not None and band not in bands:
        problems.append(place.problem("band", repr(band), one_of(band, tuple(bands))))
    for extra in usable(group, "extra", TEXTS) or ():
        if extra not in EXTRA_TABLES and not is_path(extra):
            allowed = one_of(extra, EXTRA_TABLES) + " or the path of a table"
            problems.append(place.problem("extra", repr(extra), allowed))
        elif is_path(extra) and not (Path(place.file).parent / extra).is_file():
            allowed = "the path of a table, from the survey's folder"
            problems.append(place.problem("extra", f"no file {extra!r}", allowed))
    return problems


def is_path(extra: str) -> bool:
    """Whether an extra row is meant as a file: it has an ending or a folder."""
    return bool(Path(extra).suffix) or "/" in extra


def _of_bins(group: dict, place: Place) -> list[Problem]:
    if ("bins" in group) == ("edges_mag" in group):
        found = "both bins and edges_mag" if "bins" in group else "no bins"
        return [place.problem("bins", found, "bins = {from = , to = , step = } or edges_mag = [ ]")]
    edges, limits = usable(group, "edges_mag", NUMBERS), usable(group, "bins", RANGE)
    if edges is not None:
        trouble = trouble_with_edges(np.array(edges, float))
        return [place.problem("edges_mag", trouble, "two or more edges, ascending, finite")] if trouble else []
    if limits is not None:
        trouble = trouble_with_range(limits["from"], limits["to"], limits["step"])
        return [place.problem("bins", trouble, "from < to, and a whole number of steps > 0")] if trouble else []
    return []


def _repeated(groups: list, path: Path, text: str) -> list[Problem]:
    names = [group.get("name") if isinstance(group, dict) else None for group in groups]
    return [
        Place(str(path), text, i).problem("name", f"{name!r} again", "a name of its own for every group")
        for i, name in enumerate(names)
        if name is not None and name in names[:i]
    ]
