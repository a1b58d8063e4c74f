"""Reading the columns of ECSV tables, saying everything that is wrong with them at once."""

from collections.abc import Sequence
from pathlib import Path

import numpy as np
from astropy import units as u
from astropy.table import MaskedColumn, Table

from starcount.errors import Problem, Problems

SHOWN_ROWS = 10
"""Rows named for one kind of mistake; the others are counted."""


def read_ecsv(path: str | Path) -> Table:
    """Return the table in an ECSV file; raises ``Problems`` where there is none."""
    if not Path(path).is_file():
        raise Problems(Problem(str(path), "", "no such file", "an ECSV table"))
    try:
        return Table.read(path, format="ascii.ecsv")
    except (ValueError, OSError) as broken:
        reason = str(broken).strip().splitlines()[0] if str(broken).strip() else type(broken).__name__
        raise Problems(Problem(str(path), "", f"cannot be read ({reason})", "an ECSV table")) from None


def words(table: Table, name: str, file: str, problems: list[Problem]) -> np.ndarray:
    """Return a column of words (row,); a missing column is added to ``problems``."""
    if name not in table.colnames:
        problems.append(Problem(file, f"column {name}", "missing", f"a column {name}"))
        return np.full(len(table), "")
    return np.asarray(table[name]).astype(str)


def numbers(table: Table, name: str, unit: str, file: str, problems: list[Problem]) -> np.ndarray:
    """Return a column (row,) in ``unit`` ('' for plain numbers); what is wrong with it is added to ``problems``."""
    nothing = np.full(len(table), np.nan)
    wanted = f"a column of finite numbers in {unit}" if unit else "a column of finite numbers"
    if name not in table.colnames:
        problems.append(Problem(file, f"column {name}", "missing", wanted))
        return nothing
    column = table[name]
    if np.asarray(column).dtype.kind not in "iuf":
        problems.append(Problem(file, f"column {name}", f"holds {np.asarray(column).dtype} values", wanted))
        return nothing
    try:
        factor = (column.unit or u.one).to(unit or u.one)
    except (u.UnitConversionError, TypeError, ValueError):
        found = f"unit {str(column.unit)!r}" if column.unit else "no unit"
        problems.append(Problem(file, f"column {name}", found, wanted))
        return nothing
    plain = column.filled(0) if isinstance(column, MaskedColumn) else column
    values = np.asarray(plain, float) * factor
    values[np.ma.getmaskarray(np.ma.asarray(column))] = np.nan
    wrong = np.flatnonzero(~np.isfinite(values))
    problems.extend(row_problems(file, name, wrong, [str(column[row]) for row in wrong], wanted))
    return values


def row_problems(
    file: str, column: str, rows: Sequence[int], found: Sequence[object], allowed: str | Sequence[str]
) -> list[Problem]:
    """Return one problem for each of the first bad rows (by index from 0), and one that counts the others.

    ``found`` holds what stands in each of ``rows``; ``allowed`` is one text for all of them, or one for each.
    """
    texts = [allowed] * len(rows) if isinstance(allowed, str) else allowed
    problems = [
        Problem(file, f"row {row + 1}, {column}", value if isinstance(value, str) else f"{value:g}", text)
        for row, value, text in list(zip(rows, found, texts, strict=True))[:SHOWN_ROWS]
    ]
    if len(rows) > SHOWN_ROWS:
        problems.append(Problem(file, column, f"the same in {len(rows) - SHOWN_ROWS} more rows", "as above"))
    return problems
