"""CSV files with a line of column names, after any lines that start with #; they carry no units."""

import csv
import gzip
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TextIO

import pyarrow as pa
import pyarrow.csv

from starcount.catalogue.source import Batch, Column, Source
from starcount.errors import InputError, Problem, Problems

BLOCK_BYTES = 1 << 22
"""Bytes parsed at a time."""

ARROW_TYPES = {"number": pa.float64(), "boolean": pa.bool_(), "text": pa.string()}
"""Types forced on the wanted columns: guessing them from the first block would change with the file."""


def read_csv(path: Path) -> Source:
    """Open a CSV file: names from its first line that is no comment."""
    comments, line = head(path)
    columns = {name: Column(name) for name in split_names(path, line, ",")}
    return TextSource(path, columns, False, len(comments), ",")


def head(path: Path) -> tuple[list[str], str]:
    """Return the leading comment lines and the line of column names."""
    try:
        with text(path) as lines:
            comments, first = split_head(lines)
    except (UnicodeDecodeError, EOFError, gzip.BadGzipFile) as fault:
        raise InputError(f"{path}: not readable as text ({fault})") from None
    if not first.strip():
        raise InputError(f"{path}: empty; expected a line of column names and at least one row")
    return comments, first


def split_names(path: Path, line: str, delimiter: str) -> list[str]:
    names = next(csv.reader([line], delimiter=delimiter))
    twice = next((name for name in names if names.count(name) > 1), None)
    if twice is not None:
        raise Problems(Problem(str(path), "column names", f"{twice!r} stands twice", "each name once"))
    return names


def split_head(lines: TextIO) -> tuple[list[str], str]:
    comments = []
    for line in lines:
        if not line.startswith("#"):
            return comments, line
        comments.append(line)
    return comments, ""


def text(path: Path) -> TextIO:
    opener = gzip.open if path.suffix.lower() == ".gz" else open
    return opener(path, "rt", encoding="utf-8", newline="")


@dataclass(frozen=True)
class TextSource(Source):
    """Delimited text; ``skip`` lines stand before the line of column names."""

    skip: int
    delimiter: str

    def batches(self, wanted: Mapping[str, str]) -> Iterator[Batch]:
        size = max(self.path.stat().st_size, 1)
        with pa.OSFile(str(self.path)) as file:
            try:
                for rows in self.reader(file, wanted):
                    yield Batch(rows, file.tell() / size)
            except (pa.ArrowInvalid, OSError) as fault:
                raise self.refused(str(fault), list(wanted)) from None

    def reader(self, file: pa.NativeFile, wanted: Mapping[str, str]) -> pyarrow.csv.CSVStreamingReader:
        gzipped = self.path.suffix.lower() == ".gz"
        return pyarrow.csv.open_csv(
            pa.CompressedInputStream(file, "gzip") if gzipped else file,
            # Only the serial reader knows the line of a fault.
            read_options=pyarrow.csv.ReadOptions(skip_rows=self.skip, block_size=BLOCK_BYTES, use_threads=False),
            parse_options=pyarrow.csv.ParseOptions(delimiter=self.delimiter),
            convert_options=pyarrow.csv.ConvertOptions(
                include_columns=list(wanted),
                column_types={name: ARROW_TYPES[kind] for name, kind in wanted.items()},
                strings_can_be_null=True,
            ),
        )

    def refused(self, fault: str, wanted: list[str]) -> InputError:
        """Return pyarrow's complaint as one line with the file's line, the column and the value."""
        line = re.search(r"Row #(\d+)", fault)
        where = f"line {line[1]}" if line else "contents"
        value = re.search(r"CSV column #(\d+).*conversion error to (\w+): invalid value '(.*)'", fault, re.DOTALL)
        if value:
            where = f"{where}, column {list(self.columns)[int(value[1])]!r}"
            kind = {"double": "a number", "bool": "true or false"}.get(value[2], value[2])
            return Problems(Problem(str(self.path), where, repr(value[3]), f"{kind} or nothing"))
        length = re.search(r"Expected (\d+) columns, got (\d+)", fault)
        if length:
            return Problems(Problem(str(self.path), where, f"{length[2]} values", f"{length[1]}, as in the first line"))
        return InputError(f"{self.path}: {where}: {fault.splitlines()[0]}")
