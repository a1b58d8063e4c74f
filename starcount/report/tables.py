"""Writing tables: ECSV with units and provenance for machines, CSV with the units in the names for the rest."""

from collections.abc import Mapping
from io import StringIO
from pathlib import Path

from astropy.table import QTable, Table

from starcount.files import write_text
from starcount.predict import Prediction


def write_tables(prediction: Prediction, folder: Path, meta: Mapping | None = None) -> tuple[Path, ...]:
    """Write ``predicted-GROUP`` for each group and ``fields``, as ECSV and CSV; return the paths."""
    tables = {f"predicted-{name}": table for name, table in prediction.bins.items()}
    tables["fields"] = prediction.fields
    return tuple(path for name, table in tables.items() for path in write_table(table, Path(folder) / name, meta))


def write_table(table: Table, path: Path, meta: Mapping | None = None) -> tuple[Path, Path]:
    """Write a table as ``path``.ecsv, with ``meta`` beside its own, and as ``path``.csv."""
    full = QTable(table, copy=True)
    full.meta.update(meta or {})
    plain = Table(table, copy=True)
    for name in table.colnames:
        if unit := getattr(table[name], "unit", None):
            plain.rename_column(name, f"{name}_{unit.to_string().replace(' ', '')}")
    ecsv, csv = path.with_name(path.name + ".ecsv"), path.with_name(path.name + ".csv")
    write_text(ecsv, _text(full, "ascii.ecsv"))
    write_text(csv, _text(plain, "ascii.csv"))
    return ecsv, csv


def _text(table: Table, format_name: str) -> str:
    text = StringIO()
    table.write(text, format=format_name)
    return text.getvalue()
