"""The keys of survey.toml one by one: of which kind a value is, and the line on which a mistake stands."""

import re
from dataclasses import dataclass

from starcount.errors import Problem
from starcount.survey.spelling import one_of

TEXT, FLAG, WHOLE, NUMBER = "a text in quotes", "true or false", "a whole number", "a number"
NUMBERS, TEXTS, RANGE, TABLES = "a list of numbers", "a list of texts", "{from = , to = , step = }", "[[group]] tables"


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


def usable(table: dict, key: str, kind: str):
    """The value of a key if it is of its kind, else None."""
    return table[key] if key in table and _is(table[key], kind) else None


def trouble_with_keys(table: dict, known: dict[str, str], required: tuple[str, ...], place: Place) -> list[Problem]:
    """Keys that are unknown, missing, of the wrong kind or empty."""
    problems = [place.problem(key, "unknown key", one_of(key, tuple(known))) for key in table if key not in known]
    problems += [place.problem(key, "no such key", known[key]) for key in required if key not in table]
    for key, kind in known.items():
        if key in table and not _is(table[key], kind):
            problems.append(place.problem(key, repr(table[key]), kind))
        elif key in required and table.get(key) in ("", []):
            problems.append(place.problem(key, "nothing", kind))
    return problems


def _is(value, kind: str) -> bool:
    if kind in (TEXT, FLAG, WHOLE):
        return type(value) is {TEXT: str, FLAG: bool, WHOLE: int}[kind]
    if kind == NUMBER:
        return _numbers([value])
    if kind == RANGE:
        return isinstance(value, dict) and set(value) == {"from", "to", "step"} and _numbers(value.values())
    if not isinstance(value, list):
        return False
    if kind == NUMBERS:
        return _numbers(value)
    return all(isinstance(item, str if kind == TEXTS else dict) for item in value)


def _numbers(values) -> bool:
    return all(type(value) in (int, float) for value in values)
