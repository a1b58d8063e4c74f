"""One table file while it is checked: columns in the units we use, and every problem with its line."""

import re
from pathlib import Path

import astropy.units as u
import numpy as np
from astropy.table import Table

from starcount.errors import Problem
from starcount.survey.spelling import one_of

FORMATS = {".ecsv": "ascii.ecsv", ".fits": "fits", ".vot": "votable"}
SHOWN_ROWS = 10
"""Rows named for one kind of problem; the others are counted."""


class Sheet:
    """A table and the list its problems go to.

    Cells that cannot be used come back as nan, so that the checks that follow pass over them and
    each mistake is reported once.
    """

    def __init__(self, file: str, table: Table, lines: list[int], problems: list[Problem]):
        self.file = file
        self.table = table
        self.lines = lines
        self.problems = problems
        self._absent: dict[str, np.ndarray] = {}

    def __len__(self) -> int:
        return len(self.table)

    def has(self, name: str) -> bool:
        """Whether the table has this column."""
        return name in self.table.colnames

    def report(self, where: str, found: str, allowed: str) -> None:
        """Add one problem that is not about single rows."""
        self.problems.append(Problem(self.file, where, found, allowed))

    def refuse(self, bad: np.ndarray, column: str, found, allowed) -> None:
        """Add a problem for each row where ``bad``; ``found`` and ``allowed`` are texts or rows of texts."""
        rows = np.flatnonzero(bad)
        for row in rows[:SHOWN_ROWS]:
            self.report(f"{self._place(row)}, {column}", _cell(found, row), _cell(allowed, row))
        if rows.size > SHOWN_ROWS:
            self.report(column, f"the same in {rows.size - SHOWN_ROWS} more rows", "as above")

    def only(self, known: tuple[str, ...]) -> None:
        """Refuse columns we do not know: a misspelt optional column must not be passed over."""
        for name in self.table.colnames:
            if name not in known:
                self.report("columns", f"unknown column {name!r}", one_of(name, known))

    def number(
        self, name: str, unit: u.Unit | None, required: bool = True, blanks: bool = False, infinite: bool = False
    ) -> np.ndarray:
        """A column of numbers in ``unit`` (None: a pure number), (row,); nan where absent or unusable.

        ``required``: the column must be there; ``blanks``: cells without a value are allowed (``absent``);
        ``infinite``: so are infinite values.
        """
        if not self._present(name, required):
            self._absent[name] = np.full(len(self), not required)
            return np.full(len(self), np.nan)
        column = self.table[name]
        masked = _masked(column)
        # An ECSV column without any value may come back as text.
        numeric = column.dtype.kind in "iuf" or bool(np.all(masked))
        if not numeric:
            self.report(f"column {name}", f"text such as {str(column[0])!r}", "numbers")
        factor = self._factor(name, column.unit, unit) if numeric else None
        if factor is None:
            self._absent[name] = np.zeros(len(self), dtype=bool)
            return np.full(len(self), np.nan)
        values = np.full(len(self), np.nan)
        values[~masked] = np.asarray(column[~masked], float) * factor
        self._absent[name] = masked & blanks
        self.refuse(masked & (not blanks), name, "no value", "a number")
        usable = np.isfinite(values) | (infinite & np.isinf(values))
        self.refuse(~masked & ~usable, name, _texts(values), "a number" if infinite else "a finite number")
        return np.where(usable, values, np.nan)

    def absent(self, name: str) -> np.ndarray:
        """Rows that were allowed to hold no value in this column of numbers, and do, (row,)."""
        return self._absent[name]

    def text(self, name: str, required: bool = True) -> np.ndarray:
        """A column of text, (row,); '' where absent, which is a problem if ``required``."""
        if not self._present(name, required):
            return np.full(len(self), "")
        column = self.table[name]
        texts = np.array(["" if hidden else str(x) for x, hidden in zip(column, _masked(column), strict=True)], str)
        self.refuse((texts == "") & required, name, "no value", "a text")
        return texts

    def _present(self, name: str, required: bool) -> bool:
        if required and not self.has(name):
            self.report("columns", f"no column {name!r}", f"columns with {name!r}; there are {self._names()}")
        return self.has(name)

    def _names(self) -> str:
        return ", ".join(self.table.colnames)

    def _place(self, row: int) -> str:
        return f"line {self.lines[row]}" if self.lines else f"row {row + 1}"

    def _factor(self, name: str, given, wanted: u.Unit | None) -> float | None:
        """What turns the given unit into the wanted one; None and a problem if nothing does."""
        problem = _trouble_with_unit(given, wanted)
        if problem:
            self.report(f"column {name}", problem, "no unit" if wanted is None else f"unit {wanted} or one like it")
            return None
        return 1.0 if wanted is None else given.to(wanted)


def read_sheet(folder: Path, name: str, problems: list[Problem]) -> Sheet | None:
    """Open a table of ECSV, FITS or VOTable; None and a problem where that fails."""
    path = folder / name
    if path.suffix not in FORMATS:
        problems.append(Problem(str(path), "", f"ending {path.suffix!r}", one_of(path.suffix, tuple(FORMATS))))
        return None
    try:
        table = Table.read(path, format=FORMATS[path.suffix])
        lines = _data_lines(path, len(table)) if path.suffix == ".ecsv" else []
    except FileNotFoundError:
        problems.append(Problem(str(path), "", "no such file", "a table"))
    except (OSError, ValueError, IndexError, TypeError) as error:
        problems.append(_unreadable(path, error))
    else:
        return Sheet(str(path), table, lines, problems)
    return None


def _trouble_with_unit(given, wanted: u.Unit | None) -> str:
    bare = given is None or given == u.dimensionless_unscaled
    if isinstance(given, u.UnrecognizedUnit):
        return f"unknown unit '{given}'"
    if wanted is None:
        return "" if bare else f"unit {given}"
    if bare:
        return "no unit"
    # Logarithmic units other than mag (dex, dB) convert with the opposite sign: they are no magnitudes.
    if not given.is_equivalent(wanted) or given.to(wanted) <= 0.0:
        return f"unit {given}"
    return ""


def _masked(column) -> np.ndarray:
    return np.ma.getmaskarray(column.data)


def _texts(values: np.ndarray) -> np.ndarray:
    return np.array([f"{x:.10g}" for x in values], str)


def _cell(value, row: int) -> str:
    return value if isinstance(value, str) else str(value[row])


def _shown_lines(text: str) -> list[int]:
    """Line numbers, from 1, of the rows of an ECSV file: neither header nor blank."""
    full = [i for i, line in enumerate(text.split("\n"), 1) if line.strip() and not line.startswith("#")]
    return full[1:]


def _data_lines(path: Path, rows: int) -> list[int]:
    lines = _shown_lines(path.read_text(encoding="utf-8"))
    # Quoted line breaks make more lines than rows; then rows are numbered instead.
    return lines if len(lines) == rows else []


def _unreadable(path: Path, error: Exception) -> Problem:
    """The problem with a damaged table, with the line of the value that did not convert, if it shows."""
    message = str(error).split("\n")[0] or type(error).__name__
    where = ""
    value = re.search(r": '([^']+)'$", message)
    row = re.search(r"at data line (\d+)", message)
    if path.suffix == ".ecsv" and (value or row):
        text = path.read_text(encoding="utf-8", errors="replace")
        lines, numbers = text.split("\n"), _shown_lines(text)
        holding = [i for i in numbers if value and value[1] in re.split(r"[\s,]+", lines[i - 1])]
        holding += numbers[int(row[1]) :][:1] if row else []
        where = f"line {holding[0]}" if holding else ""
    return Problem(str(path), where, message, f"a whole {path.suffix[1:].upper()} table")
