"""FITS binary tables: the first table of the file, read in slices and turned from big-endian once, here."""

import gzip
import os
import warnings
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pyarrow as pa
from astropy.io import fits
from astropy.utils.exceptions import AstropyWarning

from starcount.catalogue.source import BATCH_ROWS, Batch, Column, Source
from starcount.errors import InputError


@dataclass(frozen=True)
class Stored:
    """How a column is stored: value = scale * number + zero, ``null`` the integer that means missing."""

    scale: float | None
    zero: float | None
    null: int | None
    logical: bool

    def to_arrow(self, stored: np.ndarray) -> pa.Array:
        if stored.dtype.kind == "S":
            return pa.array(np.char.decode(stored, "ascii", "replace").tolist(), pa.string())
        if self.logical:  # one of the bytes T, F and 0, the last for missing
            return pa.array(stored == ord("T"), mask=stored == 0)
        values = stored.astype(stored.dtype.newbyteorder("="))
        missing = None if self.null is None else values == self.null
        if self.scale is not None or self.zero is not None:
            values = values * (1.0 if self.scale is None else self.scale) + (self.zero or 0.0)
        return pa.array(values, mask=missing)


def read_fits(path: Path) -> Source:
    """Open the first binary table of a FITS file (.gz too) and check that all its rows are there."""
    with warnings.catch_warnings():
        # A short file is refused below with its numbers; header oddities of other units do not matter here.
        warnings.simplefilter("ignore", AstropyWarning)
        try:
            with fits.open(path, lazy_load_hdus=True) as units:
                return described(path, first_table(path, units))
        except (OSError, EOFError, fits.VerifyError) as fault:
            raise InputError(f"{path}: not a readable FITS file ({str(fault).splitlines()[0]})") from None


def first_table(path: Path, units: fits.HDUList) -> fits.BinTableHDU:
    for unit in units:
        if isinstance(unit, fits.BinTableHDU):
            return unit
    raise InputError(f"{path}: has no binary table; expected one BINTABLE extension")


def described(path: Path, table: fits.BinTableHDU) -> Source:
    header, first_byte = table.header, table.fileinfo()["datLoc"]
    if path.suffix.lower() != ".gz":  # a compressed file shows its length only when read
        needed = first_byte + header["NAXIS1"] * header["NAXIS2"] + header.get("PCOUNT", 0)
        refuse_short(path, path.stat().st_size, needed)
    row = table.columns.dtype.newbyteorder(">")
    if row.itemsize != header["NAXIS1"]:
        raise InputError(f"{path}: columns add up to {row.itemsize} bytes a row; expected NAXIS1 = {header['NAXIS1']}")
    columns = {c.name: Column(c.name, c.unit or None, kind_stored(row[c.name], c.format)) for c in table.columns}
    stored = {
        c.name: Stored(c.bscale or None, c.bzero or None, integer(c.null), "L" in c.format) for c in table.columns
    }
    return FitsSource(path, columns, True, row, stored, first_byte, header["NAXIS2"])


def refuse_short(path: Path, size: int, needed: int) -> None:
    if size < needed:
        raise InputError(f"{path}: truncated; {size} bytes; expected at least {needed} from its header")


def kind_stored(stored: np.dtype, form: str) -> str:
    if stored.shape or "P" in form or "Q" in form or "X" in form:
        return "other"
    if "L" in form:
        return "boolean"
    return {"i": "number", "u": "number", "f": "number", "S": "text"}.get(stored.kind, "other")


def integer(null: object) -> int | None:
    return null if isinstance(null, int) else None


@dataclass(frozen=True)
class FitsSource(Source):
    row: np.dtype
    stored: Mapping[str, Stored]
    first_byte: int
    n_row: int

    def batches(self, wanted: Mapping[str, str]) -> Iterator[Batch]:
        # Plain reads, no memory map: mapped pages would count as memory until the system takes them back.
        with opened(self.path) as file:
            file.seek(self.first_byte)
            for first in range(0, self.n_row, BATCH_ROWS):
                rows = self.read(file, min(BATCH_ROWS, self.n_row - first))
                arrays = [self.stored[name].to_arrow(rows[name]) for name in wanted]
                yield Batch(pa.record_batch(arrays, list(wanted)), (first + len(rows)) / self.n_row)

    def read(self, file, n_row: int) -> np.ndarray:
        needed = n_row * self.row.itemsize
        try:
            content = file.read(needed)
        except EOFError:
            raise InputError(f"{self.path}: truncated; its compressed data end early") from None
        if len(content) < needed:
            raise InputError(f"{self.path}: truncated; its table ends before the {self.n_row} rows of its header")
        return np.frombuffer(content, self.row)


def opened(path: Path):
    return gzip.open(path) if path.suffix.lower() == ".gz" else open(os.fspath(path), "rb")
