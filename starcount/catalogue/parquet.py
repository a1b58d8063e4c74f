"""Parquet files: units from astropy's table header or from the fields' own metadata, where there are any."""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path

import pyarrow as pa
import pyarrow.compute
import pyarrow.parquet as pq
from astropy.table.meta import YamlParseError, get_header_from_yaml

from starcount.catalogue.source import BATCH_ROWS, Batch, Column, Source, kind_of
from starcount.errors import InputError


def read_parquet(path: Path) -> Source:
    """Open one Parquet file; it carries units if any of its columns has one."""
    with opened(path) as file:
        schema = file.schema_arrow
    units = header_units(path, schema) | field_units(schema)
    columns = {field.name: Column(field.name, units.get(field.name), kind_of(field.type)) for field in schema}
    masks = {name: f"{name}.mask" for name in columns if f"{name}.mask" in columns}
    return ParquetSource(path, columns, carries_units=bool(units), masks=masks)


@dataclass(frozen=True)
class ParquetSource(Source):
    """``masks``: astropy writes a column with missing values as numbers and, apart, whether each is missing."""

    masks: Mapping[str, str]

    def batches(self, wanted: Mapping[str, str]) -> Iterator[Batch]:
        done = 0
        masks = {name: self.masks[name] for name in wanted if name in self.masks}
        # Without pre-buffering one row group of any size is decoded page by page; a data set scanner holds it whole.
        with opened(self.path) as file:
            total = file.metadata.num_rows
            try:
                for rows in file.iter_batches(BATCH_ROWS, columns=[*wanted, *masks.values()]):
                    done += rows.num_rows
                    for name, mask in masks.items():
                        rows = rows.set_column(rows.column_names.index(name), name, unmasked(rows, name, mask))
                    yield Batch(rows, done / total)
            except (pa.ArrowInvalid, OSError) as fault:
                raise damaged(self.path, fault) from None


def unmasked(rows: pa.RecordBatch, name: str, mask: str) -> pa.Array:
    """Return a column with null where its mask is true."""
    column = rows.column(name)
    return pa.compute.if_else(rows.column(mask), pa.scalar(None, column.type), column)


def opened(path: Path) -> pq.ParquetFile:
    try:
        return pq.ParquetFile(path, pre_buffer=False, buffer_size=1 << 20)
    except (pa.ArrowInvalid, OSError) as fault:
        raise damaged(path, fault) from None


def damaged(path: Path, fault: Exception) -> InputError:
    first_line = str(fault).splitlines()[0]
    return InputError(f"{path}: not a whole Parquet file, perhaps truncated ({first_line})")


def header_units(path: Path, schema: pa.Schema) -> dict[str, str]:
    """Return {column: unit} from the header that astropy writes into Parquet files; empty without one."""
    text = (schema.metadata or {}).get(b"table_meta_yaml")
    if text is None:
        return {}
    try:
        header = get_header_from_yaml(text.decode().splitlines())
    except YamlParseError as fault:
        raise InputError(f"{path}: its table_meta_yaml header cannot be read ({fault})") from None
    return {column["name"]: str(column["unit"]) for column in header["datatype"] if "unit" in column}


def field_units(schema: pa.Schema) -> dict[str, str]:
    """Return {column: unit} of the fields that have 'unit' in their metadata."""
    noted = {field.name: (field.metadata or {}).get(b"unit", b"").decode() for field in schema}
    return {name: unit for name, unit in noted.items() if unit}
