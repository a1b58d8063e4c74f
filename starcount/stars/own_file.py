"""A population of the user's own: its settings in TOML, and the table they name, opened and renamed.

format = 1
name = "old halo (invented)"
kind = "function"                  # or "colour table", "isochrones"
table = "old_halo.fits"            # .ecsv, .fits, .vot or .parquet, beside this file

[columns]                          # our names = the table's names, where they differ
M_lo = "Mmin"

[units]                            # of columns that carry none, by our names
M_lo = "mag"
"""

import tomllib
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from astropy import units as u
from astropy.table import Table

from starcount.errors import Problem, Problems
from starcount.stars.ecsv import row_problems

FORMATS = {".ecsv": "ascii.ecsv", ".fits": "fits", ".vot": "votable", ".parquet": "parquet"}
"""Ending of a table's file -> how astropy calls its format."""

_COMMON = {"format", "name", "kind", "table", "columns", "units", "window", "counts", "sources"}


@dataclass(frozen=True, eq=False)
class OwnFile:
    """A population file: its settings, its table with our column names, and what is wrong so far.

    ``problems`` fills while parts are read; ``done`` raises them all together.
    """

    path: Path
    settings: Mapping
    table: Table
    problems: list[Problem] = field(default_factory=list)

    @property
    def file(self) -> str:
        """The name that settings are reported under."""
        return str(self.path)

    @property
    def table_file(self) -> str:
        """The name that rows and columns are reported under."""
        return str(self.path.parent / self.settings["table"])

    @property
    def sources(self) -> tuple[str, ...]:
        """Where the table comes from, by the user's own words."""
        return tuple(self.settings.get("sources", ()))

    @property
    def counts(self) -> str | None:
        """Whether the table counts "stars" or "systems"; None where the file does not say."""
        return self.settings.get("counts")

    @property
    def window(self) -> float | None:
        """The table's stars with 4.5 < M_V < 8.5, where the file gives them."""
        return self.settings.get("window")

    def wrong(self, where: str, found: object, allowed: str) -> None:
        """Note a wrong setting."""
        self.problems.append(Problem(self.file, where, str(found), allowed))

    def wrong_table(self, where: str, found: object, allowed: str) -> None:
        """Note something wrong in the table."""
        self.problems.append(Problem(self.table_file, where, str(found), allowed))

    def wrong_rows(
        self, column: str, rows: Sequence[int], found: Sequence[object], allowed: str | Sequence[str]
    ) -> None:
        """Note bad rows of the table, see ``ecsv.row_problems``."""
        self.problems.extend(row_problems(self.table_file, column, rows, found, allowed))

    def beyond(self, column: str, values: np.ndarray, lo: float, hi: float, unit: str) -> None:
        """Note the rows whose ``values`` (row,) are outside the range; not those without a value, noted already."""
        rows = np.flatnonzero((values < lo) | (values > hi))
        self.wrong_rows(column, rows, values[rows], f"{lo:g} to {hi:g} {unit}".rstrip())

    def known(self, keys: Iterable[str]) -> None:
        """Note the settings that this kind of population does not have."""
        allowed = sorted(_COMMON | set(keys))
        for key in self.settings:
            if key not in allowed:
                self.wrong(key, "not a setting of this kind of population", f"one of {', '.join(allowed)}")

    def number(self, where: str, given: object, allowed: str, holds: Callable[[float], bool]) -> float:
        """Return a setting that must be a number for which ``holds``; NaN, noted, where it is not."""
        if isinstance(given, int | float) and not isinstance(given, bool) and np.isfinite(given) and holds(given):
            return float(given)
        self.wrong(where, "missing" if given is None else repr(given), allowed)
        return np.nan

    def block(self, where: str, keys: set[str]) -> dict:
        """Return a required table of settings, empty where it is missing; unknown keys are noted."""
        given = self.settings.get(where)
        if not isinstance(given, dict):
            self.wrong(where, "missing" if given is None else repr(given), f"a table with {', '.join(sorted(keys))}")
            return {}
        for key in given.keys() - keys:
            self.wrong(f"{where}.{key}", "unknown", f"one of {', '.join(sorted(keys))}")
        return given

    def done(self) -> None:
        """Raise everything that was found wrong."""
        if self.problems:
            raise Problems(*self.problems)


def open_own(path: Path) -> OwnFile:
    """Open a population file and its table; raises ``Problems`` where either cannot be used at all."""
    settings = settings_of(path)
    problems = [
        Problem(str(path), key, "missing" if key not in settings else repr(settings[key]), allowed)
        for key, allowed, holds in (
            ("format", "1", lambda value: value == 1),
            ("name", "a name", lambda value: isinstance(value, str) and value),
            ("table", f"a file ending in {', '.join(FORMATS)}", lambda value: Path(str(value)).suffix in FORMATS),
            ("columns", "a table of our names = the table's", _names),
            ("units", "a table of our column names = unit", _names),
            ("sources", "a list of texts", _texts),
            ("counts", '"stars" or "systems"', lambda value: value in ("stars", "systems")),
        )
        if (key in settings or key in ("format", "name", "table")) and not holds(settings.get(key))
    ]
    if problems:
        raise Problems(*problems)
    table = _table(path, settings)
    if not len(table):
        raise Problems(Problem(str(path.parent / settings["table"]), "", "no rows", "at least one row"))
    return OwnFile(path, settings, table)


def _texts(value: object) -> bool:
    return isinstance(value, list) and all(isinstance(text, str) for text in value)


def _names(value: object) -> bool:
    return isinstance(value, dict) and all(isinstance(name, str) for name in value.values())


def settings_of(path: Path) -> dict:
    """Return what a TOML file says; raises ``Problems`` where it cannot be read."""
    if not path.is_file():
        raise Problems(Problem(str(path), "", "no such file", "a population in TOML"))
    try:
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise Problems(Problem(str(path), "", f"not TOML ({error})", "TOML text in UTF-8")) from None


def _table(path: Path, settings: Mapping) -> Table:
    """Return the table under our column names, with the units that the settings add."""
    theirs = read_table(path.parent / settings["table"])
    columns, problems = settings.get("columns", {}), []
    for ours, name in columns.items():
        if name not in theirs.colnames:
            allowed = f"a column of {settings['table']}: {', '.join(theirs.colnames)}"
            problems.append(Problem(str(path), f"columns.{ours}", repr(name), allowed))
    if problems:
        raise Problems(*problems)
    kept = {name: name for name in theirs.colnames if name not in columns and name not in columns.values()}
    table = Table({ours: theirs[name] for ours, name in {**columns, **kept}.items()}, meta=theirs.meta)
    for ours, unit in settings.get("units", {}).items():
        problems += _add_unit(str(path), table, ours, unit)
    if problems:
        raise Problems(*problems)
    return table


def _add_unit(file: str, table: Table, name: str, unit: str) -> list[Problem]:
    if name not in table.colnames:
        return [Problem(file, f"units.{name}", "no such column", f"one of {', '.join(table.colnames)}")]
    if table[name].unit is not None:
        return [Problem(file, f"units.{name}", unit, f"nothing: the table itself says {table[name].unit}")]
    try:
        table[name].unit = u.Unit(unit)
    except ValueError:
        return [Problem(file, f"units.{name}", repr(unit), "a unit such as mag, Gyr, K, solMass")]
    return []


def read_table(path: Path) -> Table:
    """Return the table in an ECSV, FITS, VOTable or Parquet file, words as text; raises ``Problems``."""
    if path.suffix not in FORMATS:
        raise Problems(Problem(str(path), "", f"ending {path.suffix!r}", f"a file ending in {', '.join(FORMATS)}"))
    if not path.is_file():
        raise Problems(Problem(str(path), "", "no such file", "the table of a population"))
    try:
        table = Table.read(path, format=FORMATS[path.suffix])
    except (ValueError, OSError, KeyError, IndexError, TypeError) as broken:
        reason = str(broken).strip().splitlines()[0] if str(broken).strip() else type(broken).__name__
        raise Problems(Problem(str(path), "", f"cannot be read ({reason})", f"a {path.suffix} table")) from None
    table.convert_bytestring_to_unicode()
    return table
